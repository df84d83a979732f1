"""Inputs that drive the wheel of the C module under its fuzzer, which it would seldom find."""

from pathlib import Path

_ROLL_CALL = bytes((0x01, 5, 0, 0, 0, 1, 0, 0, 0))
_PROBE = bytes((0x03, 2)) + bytes(17)
_PERMIT = bytes((0x04, 250)) + bytes(7)
_PIVOT = bytes((0x10, 100)) + bytes(15) + bytes((0, 1, 1, 0x88, 0x13))
DRIVEN = _ROLL_CALL + _PROBE + _PERMIT + _PIVOT + b"\xff\xff" + _PERMIT + b"\x90" * 9
"""What the fuzzer reads as: called over, told its clock, permitted, a pivot, and time for it."""


def write_seeds(folder: Path) -> None:
    """One seed for each combination of seal, failing storage, and no trace."""
    for options in range(8):
        (folder / f"seed-{options}").write_bytes(bytes((options,)) + DRIVEN)
