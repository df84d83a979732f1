"""What is in the box: the parts of a virtual module that its rooms share.

Owns two lifetimes. A Box outlasts restarts: drive, settings, the all-stop latch, a person's
lock, faults that stand. A Boot does not: its number, its clock, its memory of commands, whom it
follows. Decides nothing.
"""

from dataclasses import dataclass, field
from typing import Final

from protocol.allegiance import Allegiance
from protocol.codes import Activity, Fault, Flags, SettingId, identity_bits
from protocol.command_memory import CommandMemory
from protocol.message import FaultNotice, LockState, Nameplate, text_field
from sim_link.drive import Drive
from sim_link.faults import Faults
from sim_link.fleet_file import ModuleSpec
from sim_link.module_time import ModuleTime
from sim_link.settings import Settings

FIRMWARE: Final = 0x0100
"""Version of this virtual firmware: 1.0."""

DRIVEN: Final = frozenset({Activity.SPINNING_UP, Activity.HOLDING})
"""Activities in which the motor drives the wheel, which needs a permit."""

_LATCHED: Final = Flags.LATCHED.value
_BATTERY_LOW: Final = Flags.BATTERY_LOW.value
_UNSETTLED: Final = Flags.UNSETTLED.value
_LOCKED_OUT: Final = Flags.LOCKED_OUT.value
_FAULTY: Final = Flags.FAULTY.value
_PERMITTED: Final = Flags.PERMITTED.value
_CLOCK_TOLD: Final = Flags.CLOCK_TOLD.value
_FLAGS: Final = tuple(Flags(value) for value in range(sum(Flags) + 1))


class Boot:
    """One life of the controller, from start to restart."""

    __slots__ = ("allegiance", "memory", "number", "time")

    def __init__(self, number: int, identity: int, time: ModuleTime) -> None:
        self.number = number
        self.time = time
        self.memory = CommandMemory(number, identity)
        self.allegiance = Allegiance()

    def owned(self, t_ns: int) -> bool:
        """Whether the console that it follows still owns it."""
        return self.allegiance.owner_left_ms(self.time.ms(t_ns)) > 0

    def permitted(self, t_ns: int) -> bool:
        """Whether the wheel may be driven."""
        return self.allegiance.permit_left_ms(self.time.ms(t_ns)) > 0


@dataclass(slots=True)
class Box:
    """One module, whatever boot it is in. ``person``: who has locked it out, empty for nobody."""

    spec: ModuleSpec
    drive: Drive
    settings: Settings
    boot: Boot
    latched: bool = False
    stop_number: int = 0
    person: bytes = b""
    faults: Faults = field(default_factory=Faults)

    def battery_low(self, t_ns: int) -> bool:
        """Whether the voltage without load is below what the settings ask for."""
        self.drive.supply.look(t_ns)
        low_V = self.settings.value(SettingId.BATTERY_LOW_MV) / 1_000
        return self.drive.supply.battery.open_circuit_V < low_V

    def flags(self, t_ns: int, settled: bool | None = None, now_ms: int | None = None) -> Flags:
        """The standing conditions, as telemetry and presence report them. ``settled``, whether
        the body lies still, and ``now_ms``, in module time: from whoever has looked already."""
        if settled is None:
            settled = self.drive.body.posture(t_ns).settled
        if now_ms is None:
            now_ms = self.boot.time.ms(t_ns)
        allegiance = self.boot.allegiance
        # Plain sums: this is asked for with every report, and an enum's | costs half a microsecond.
        return _FLAGS[
            _LATCHED * self.latched
            + _BATTERY_LOW * self.battery_low(t_ns)
            + _UNSETTLED * (not settled)
            + _LOCKED_OUT * bool(self.person)
            + _FAULTY * bool(self.faults)
            + _PERMITTED * (allegiance.permit_left_ms(now_ms) > 0)
            + _CLOCK_TOLD * allegiance.clock_told
        ]

    def nameplate(self) -> Nameplate:
        """What is written on the box, its speed limit as the settings have it."""
        limit_rpm = self.settings.value(SettingId.WHEEL_LIMIT_RPM)
        name, kind = text_field(self.spec.name), text_field(self.spec.kind.name)
        return Nameplate(self.spec.identity, limit_rpm, FIRMWARE, name, kind)

    def notice(self, fault: Fault, t_ns: int, detail: int = 0) -> FaultNotice:
        """Let a fault stand from now on; return what is said of it."""
        self.faults.stand(fault, self.boot.time.ms(t_ns), detail)
        return self.faults.told(fault, self.boot.number, identity_bits(self.spec.identity))

    def fault_notices(self) -> list[FaultNotice]:
        """What is said of each fault that stands."""
        bits = identity_bits(self.spec.identity)
        return [self.faults.told(fault, self.boot.number, bits) for fault in self.faults]

    def lock_state(self) -> LockState:
        """Who has locked it out."""
        bits = identity_bits(self.spec.identity)
        return LockState(self.boot.number, bits, int(bool(self.person)), self.person)
