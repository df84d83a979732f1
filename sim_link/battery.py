"""A module's supply: the cell under its load, and the warmth that comes of it.

Owns the load that is drawn, constant or changing steadily, and its account; and how many motions a
cell has in it. The circuit is cell.py's, the temperatures heat.py's. Knows no messages.
Event-driven: between two looks nothing is computed.
"""

from typing import Final

from sim_link.cell import LOW_V, Cell, charge_at, cold_factor
from sim_link.heat import Part, Warmth
from sim_link.kinds import Kind

IDLE_W: Final = 0.18
"""What controller, sensors and radio take all the time."""
MOTOR_EFFICIENCY: Final = 0.6
COPPER_W: Final = 0.3
"""Loss in the windings while the motor pulls."""
MARGIN: Final = 0.1
"""Part of a cell's charge that is not counted on: cells differ, age, and are colder than here."""

_BETWEEN_S: Final = 3.0
"""Idle time that belongs to a motion: steadying, settling, and waiting for the next order."""
_MEAN_V: Final = 3.85
_FRESH_NS: Final = 9_500_000_000
"""For so long what was seen of a settled cell is still good."""
_COLD_AGAIN_K: Final = 0.05
"""The cold's factor is looked at again once the box has changed by so much: a thousandth of the
resistance, or the steps would look like a trend."""


class Supply:
    """The cell with the load that it carries at present: constant, or changing steadily."""

    __slots__ = (
        "_charger_W",
        "_cold_at_C",
        "_end_W",
        "_good_until_ns",
        "_seen",
        "_since_ns",
        "_start_W",
        "_start_ns",
        "_until_ns",
        "battery",
        "warmth",
    )

    def __init__(self, battery: Cell, warmth: Warmth) -> None:
        self.battery = battery
        self.warmth = warmth
        self._start_ns = self._until_ns = self._since_ns = 0
        self._start_W = self._end_W = IDLE_W
        self._charger_W = 0.0
        self._seen, self._good_until_ns = (0.0, 0.0), -1
        self._cold_at_C = warmth.temperature_C(0)
        battery.cold = cold_factor(self._cold_at_C)

    def draw(self, start_W: float, end_W: float, t_ns: int, until_ns: int) -> None:
        """From ``t_ns`` on draw so much besides the idle load, constant after ``until_ns``."""
        self.account(t_ns)
        self._good_until_ns = -1
        self._start_W, self._end_W = IDLE_W + start_W, IDLE_W + end_W
        self._start_ns, self._until_ns = t_ns, until_ns

    def charge(self, power_W: float, t_ns: int) -> None:
        """From ``t_ns`` on take so much from a charger, until the cell is full; 0: none."""
        self.account(t_ns)
        self._good_until_ns = -1
        self._charger_W = power_W

    def swap(self, charge: float, t_ns: int) -> None:
        """Another cell, fresh and so charged, is in it from ``t_ns`` on."""
        self.account(t_ns)
        self._good_until_ns = -1
        self.battery.replace(charge)

    def set_charge(self, charge: float, t_ns: int) -> None:
        """The cell is so charged from ``t_ns`` on, and at rest; it is the same one."""
        self.account(t_ns)
        self._good_until_ns = -1
        self.battery.charge, self.battery.rc_V = charge, 0.0

    def age(self, ohm: float, capacity: float, t_ns: int) -> None:
        """From ``t_ns`` on the cell's resistances and its capacity are these parts of a fresh
        one's; how full it is stays."""
        self.account(t_ns)
        self._good_until_ns = -1
        self.battery.aged_ohm, self.battery.aged_capacity = ohm, capacity

    def load_W(self, t_ns: int) -> float:
        """Return what is drawn from the cell at ``t_ns``, negative where it is charged."""
        given_W = self._charger_W if self.battery.charge < 1.0 else 0.0
        if t_ns >= self._until_ns or self._start_ns == self._until_ns:
            return self._end_W - given_W
        part = (t_ns - self._start_ns) / (self._until_ns - self._start_ns)
        return self._start_W + part * (self._end_W - self._start_W) - given_W

    def account(self, t_ns: int) -> None:
        """Take from the cell what was drawn since the last account."""
        if t_ns <= self._since_ns:
            return
        if self._since_ns < self._until_ns < t_ns:
            self._take(self._until_ns)
        self._take(t_ns)

    def _take(self, end_ns: int) -> None:
        duration_s = (end_ns - self._since_ns) * 1e-9
        loads = self.load_W(self._since_ns), self.load_W(end_ns)
        self.warmth.heat(self.battery.drain(*loads, duration_s), end_ns)
        self._since_ns = end_ns
        temperature_C = self.warmth.temperature_C(end_ns)
        if abs(temperature_C - self._cold_at_C) > _COLD_AGAIN_K:
            self._cold_at_C = temperature_C
            self.battery.cold = cold_factor(temperature_C)

    def look(self, t_ns: int) -> tuple[float, float]:
        """Return the voltage at the terminals and the box's temperature, as a report needs them.

        While nothing changes and the cell has settled, what was seen is good for some seconds: by
        then the voltage has moved by less than half a millivolt, and sensors are coarser.
        """
        if t_ns < self._good_until_ns:
            return self._seen
        self.account(t_ns)
        self._seen = self.terminal_V(t_ns), self.warmth.temperature_C(t_ns)
        settled = self._until_ns <= t_ns and self.battery.settled and not self._charger_W
        self._good_until_ns = t_ns + (_FRESH_NS if settled else 1)
        return self._seen

    def terminal_V(self, t_ns: int) -> float:
        """Return the voltage at the terminals at ``t_ns``, as charged at the last account."""
        return self.battery.terminal_V(self.load_W(t_ns))

    def warm_motor(self, mechanical_J: float, duration_s: float, t_ns: int) -> None:
        """Add the motor's losses of so much work at the wheel in so long a time."""
        lost_J = abs(mechanical_J) * (1.0 / MOTOR_EFFICIENCY - 1.0) + COPPER_W * duration_s
        self.warmth.heat(lost_J, t_ns, Part.MOTOR)

    def warm_brake(self, energy_J: float, t_ns: int) -> None:
        """Add what of a wheel's energy a brake has turned into heat."""
        self.warmth.heat(energy_J, t_ns, Part.BRAKE)


def cell_of(kind: Kind, charge: float) -> Cell:
    """Return a fresh cell as a kind has it, so charged."""
    return Cell(
        kind.cell_capacity_mAh,
        kind.cell_resistance_ohm,
        charge,
        rc_ohm=kind.cell_rc_resistance_ohm,
        rc_s=kind.cell_rc_s,
    )


def spin_up_J(kind: Kind, speed_rad_s: float, torque_N_m: float) -> float:
    """Energy that a spin-up takes from the cell: wheel, losses of the motor, copper, idle load."""
    wheel_J = 0.5 * kind.wheel_inertia_kg_m2 * speed_rad_s**2
    duration_s = kind.wheel_inertia_kg_m2 * speed_rad_s / torque_N_m
    return wheel_J / MOTOR_EFFICIENCY + COPPER_W * duration_s + IDLE_W * (duration_s + _BETWEEN_S)


def motions_left(kind: Kind, speed_rad_s: float, charge: float = 1.0) -> int:
    """How many motions at this wheel speed a charge of 0 to 1 has in it, until the battery is low.

    At the gentle torque with face 1 up, and with a tenth of the charge left out of account.
    """
    from sim_link.mechanics import rest_torque_N_m  # it imports NumPy

    energy_J = spin_up_J(kind, speed_rad_s, rest_torque_N_m(kind, 1, -1))
    usable = max(0.0, charge - charge_at(LOW_V)) * (1.0 - MARGIN)
    return int(usable * kind.cell_capacity_mAh * 3.6 * _MEAN_V / energy_J)
