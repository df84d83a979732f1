"""A module's own clock: counts from its boot, and runs a little fast or slow.

Owns the step between fleet time (the simulator's, nanoseconds) and module time (what the module
says and compares, milliseconds modulo 2**32, microseconds without a wrap). Knows no messages.
"""

from typing import Final

DRIFT_LIMIT_PPM: Final = 40.0
"""Within what a crystal of the trade promises over temperature, about 50 ppm."""

_U32: Final = 0xFFFF_FFFF
_HALF: Final = 1 << 31


class ModuleTime:
    """The clock of one boot. ``drift_ppm``: how much faster than fleet time it runs."""

    __slots__ = ("_rate", "boot_ns")

    def __init__(self, boot_ns: int, drift_ppm: float = 0.0) -> None:
        self.boot_ns = boot_ns
        self._rate = 1.0 + drift_ppm * 1e-6

    def us(self, t_ns: int) -> int:
        """Microseconds since boot."""
        return int((t_ns - self.boot_ns) * self._rate) // 1_000

    def ms(self, t_ns: int) -> int:
        """Milliseconds since boot, modulo 2**32."""
        return self.us(t_ns) // 1_000 & _U32

    def after_ns(self, t_ns: int, wait_ms: int) -> int:
        """The fleet time at which so many milliseconds of module time have passed since
        ``t_ns``, rounded up to where the count of milliseconds shows it."""
        return self._shows_ns(self.us(t_ns) + wait_ms * 1_000)

    def at_ns(self, then_ms: int, t_ns: int) -> int:
        """The fleet time at which the count of milliseconds comes to ``then_ms``, which is less
        than half of its round away from what it is at ``t_ns``, before or after it."""
        now_us = self.us(t_ns)
        ahead_ms = (then_ms - now_us // 1_000 + _HALF & _U32) - _HALF
        return self._shows_ns((now_us // 1_000 + ahead_ms) * 1_000)

    def _shows_ns(self, goal_us: int) -> int:
        return self.boot_ns + -int(-(goal_us * 1_000 + 999) // self._rate)
