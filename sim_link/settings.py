"""A module's settings: what it lets a console read and change, and what they may be.

Owns the table and the present values, which outlast a restart. Knows no commands:
module and works ask it by number.
"""

from collections.abc import Callable
from dataclasses import dataclass
from typing import Final

from protocol.codes import Reason, SettingId, identity_bits
from protocol.message import SettingValue
from sim_link.cell import LOW_V
from sim_link.fleet_file import ModuleSpec

CALIBRATION: Final = 3
"""Version of the calibration that every virtual module was given."""

_I32: Final = 2**31


@dataclass(frozen=True, slots=True)
class _Row:
    """One setting: its value as delivered, and the bounds between which it may be written."""

    usual: Callable[[ModuleSpec], int]
    lowest: Callable[[ModuleSpec], int]
    highest: Callable[[ModuleSpec], int]


def _of(value: int) -> Callable[[ModuleSpec], int]:
    return lambda spec: value


def _wheel_max_rpm(spec: ModuleSpec) -> int:
    return int(spec.kind.wheel_max_rpm)


def _period_ms(spec: ModuleSpec) -> int:
    return max(1, round(1_000 / spec.telemetry_hz))


def _groups(spec: ModuleSpec) -> int:
    """Group 31 is the sign of a signed setting."""
    return spec.groups - 2 * _I32 if spec.groups >= _I32 else spec.groups


_TABLE: Final = {
    SettingId.WHEEL_LIMIT_RPM: _Row(_wheel_max_rpm, _of(100), _wheel_max_rpm),
    SettingId.TELEMETRY_PERIOD_MS: _Row(_period_ms, _of(20), _of(60_000)),
    SettingId.BATTERY_LOW_MV: _Row(_of(round(LOW_V * 1_000)), _of(3_000), _of(4_200)),
    SettingId.GROUPS: _Row(_groups, _of(-_I32), _of(_I32 - 1)),
    SettingId.CALIBRATION: _Row(_of(CALIBRATION), _of(CALIBRATION), _of(CALIBRATION)),
}


class Settings:
    """The settings of one module."""

    def __init__(self, spec: ModuleSpec) -> None:
        self._spec = spec
        self._values: dict[int, int] = {each: row.usual(spec) for each, row in _TABLE.items()}

    def value(self, setting: SettingId) -> int:
        """The present value, in the setting's unit."""
        return self._values[setting]

    @property
    def groups(self) -> int:
        """The groups that it is in, one bit each."""
        return self.value(SettingId.GROUPS) & 0xFFFF_FFFF

    def refusal(self, setting: int, value: int) -> Reason:
        """Why this cannot be written; NONE where it can."""
        if setting not in _TABLE:
            return Reason.BAD_FIELD
        row = _TABLE[SettingId(setting)]
        lowest, highest = row.lowest(self._spec), row.highest(self._spec)
        if lowest == highest:
            return Reason.READ_ONLY
        return Reason.NONE if lowest <= value <= highest else Reason.BAD_FIELD

    def write(self, setting: int, value: int) -> None:
        """Take a value that ``refusal`` lets through."""
        self._values[setting] = value

    def told(self, setting: int, boot: int) -> SettingValue:
        """What is said of a setting, or of one that there is not."""
        value, lowest, highest = 0, 1, 0
        if setting in _TABLE:
            row = _TABLE[SettingId(setting)]
            value = self.value(SettingId(setting))
            lowest, highest = row.lowest(self._spec), row.highest(self._spec)
        bits = identity_bits(self._spec.identity)
        return SettingValue(boot, bits, setting, len(_TABLE), value, lowest, highest)
