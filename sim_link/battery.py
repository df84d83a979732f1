"""A module's cell and its warmth: charge, voltage under load, temperature.

Owns the electrical and thermal model of one module. Knows nothing of wheels or messages: it is
told a power in watts and for how long. SI units, except the capacity, which the trade gives
in milliampere hours.

The open-circuit curve is the usual shape of a lithium-ion cell, rounded from memory; it stands
for no make and is no data sheet.
"""

from bisect import bisect_right
from math import exp, inf, sqrt
from typing import Final

AMBIENT_C: Final = 21.0
"""Temperature of the invented hall."""

IDLE_W: Final = 0.18
"""What controller, sensors and radio take all the time."""

LOW_V: Final = 3.55
"""Open-circuit voltage below which a module calls its battery low and refuses to drive."""

DRIVE_V: Final = 3.15
"""The motor driver lowers its torque rather than pull the terminals below this."""

_CHARGES: Final = (0.00, 0.03, 0.10, 0.20, 0.40, 0.60, 0.80, 0.90, 1.00)
_VOLTAGES: Final = (3.00, 3.40, 3.64, 3.72, 3.80, 3.88, 4.00, 4.09, 4.20)

_HEAT_CAPACITY_J_K: Final = 420.0
"""About 0.6 kg of mostly metal and plastic."""
_COOLING_S: Final = 900.0
"""Time constant with which a sealed box of this size loses its warmth to still air."""


def open_circuit_V(charge: float) -> float:
    """Return the voltage without load at a charge of 0 to 1; clamped outside."""
    if charge <= 0.0:
        return _VOLTAGES[0]
    if charge >= 1.0:
        return _VOLTAGES[-1]
    upper = bisect_right(_CHARGES, charge)
    low, high = _CHARGES[upper - 1], _CHARGES[upper]
    part = (charge - low) / (high - low)
    return _VOLTAGES[upper - 1] + part * (_VOLTAGES[upper] - _VOLTAGES[upper - 1])


class Battery:
    """One cell: a voltage source that falls with its charge, behind a resistance."""

    __slots__ = ("_capacity_C", "charge", "resistance_ohm")

    def __init__(self, capacity_mAh: float, resistance_ohm: float, charge: float) -> None:
        self._capacity_C = capacity_mAh * 3.6
        self.resistance_ohm = resistance_ohm
        self.charge = charge

    @property
    def open_circuit_V(self) -> float:
        """Voltage without load."""
        return open_circuit_V(self.charge)

    @property
    def low(self) -> bool:
        """Whether the charge has fallen to where the module calls itself low."""
        return self.open_circuit_V < LOW_V

    @property
    def drive_W(self) -> float:
        """The most that a motor may draw at this charge, so that the terminals keep DRIVE_V."""
        spare_V = max(0.0, self.open_circuit_V - DRIVE_V)
        return DRIVE_V * spare_V / self.resistance_ohm if self.resistance_ohm else inf

    def current_A(self, power_W: float) -> float:
        """Return the current at which the terminals give ``power_W``.

        From P = I (E - R I), the smaller root. A demand beyond the peak, E^2 / 4R, gets the
        current of the peak: the cell gives what it can.
        """
        source_V = self.open_circuit_V
        if not self.resistance_ohm:
            return power_W / source_V
        under_root = source_V**2 - 4.0 * self.resistance_ohm * power_W
        if under_root <= 0.0:
            return source_V / (2.0 * self.resistance_ohm)
        return (source_V - sqrt(under_root)) / (2.0 * self.resistance_ohm)

    def terminal_V(self, power_W: float) -> float:
        """Return the voltage at the terminals under a load of ``power_W``."""
        return self.open_circuit_V - self.resistance_ohm * self.current_A(power_W)

    def sag_V(self, power_W: float) -> float:
        """Return by how much a load of ``power_W`` pulls the voltage down."""
        return self.resistance_ohm * self.current_A(power_W)

    def drain(self, start_W: float, end_W: float, duration_s: float) -> float:
        """Take the charge of a load that changes steadily from ``start_W`` to ``end_W``.

        Returns the heat in joules that the resistance made. The mean power stands for the
        ramp: over a spin-up the current is nearly proportional to it.
        """
        current_A = self.current_A(0.5 * (start_W + end_W))
        charge = self.charge - current_A * duration_s / self._capacity_C
        self.charge = min(max(0.0, charge), 1.0)
        return current_A**2 * self.resistance_ohm * duration_s


class Warmth:
    """The temperature of the box: one lump that loses its heat to the hall."""

    __slots__ = ("_above_K", "_t_ns")

    def __init__(self, above_ambient_K: float, t_ns: int) -> None:
        self._above_K = above_ambient_K
        self._t_ns = t_ns

    def heat(self, energy_J: float, t_ns: int) -> None:
        """Add heat at ``t_ns``, after the cooling since the last call."""
        self._above_K = self._cooled(t_ns) + energy_J / _HEAT_CAPACITY_J_K
        self._t_ns = t_ns

    def temperature_C(self, t_ns: int) -> float:
        """Return the temperature at ``t_ns`` (not before the last heat)."""
        return AMBIENT_C + self._cooled(t_ns)

    def _cooled(self, t_ns: int) -> float:
        return self._above_K * exp(-(t_ns - self._t_ns) * 1e-9 / _COOLING_S)


class Supply:
    """The cell with the load that it carries at present: constant, or changing steadily."""

    __slots__ = (
        "_charger_W",
        "_end_W",
        "_since_ns",
        "_start_W",
        "_start_ns",
        "_until_ns",
        "battery",
        "warmth",
    )

    def __init__(self, battery: Battery, warmth: Warmth) -> None:
        self.battery = battery
        self.warmth = warmth
        self._start_ns = self._until_ns = self._since_ns = 0
        self._start_W = self._end_W = IDLE_W
        self._charger_W = 0.0

    def draw(self, start_W: float, end_W: float, t_ns: int, until_ns: int) -> None:
        """From ``t_ns`` on draw so much besides the idle load, constant after ``until_ns``."""
        self.account(t_ns)
        self._start_W, self._end_W = IDLE_W + start_W, IDLE_W + end_W
        self._start_ns, self._until_ns = t_ns, until_ns

    def charge(self, power_W: float, t_ns: int) -> None:
        """From ``t_ns`` on take so much from a charger, until the cell is full; 0: none."""
        self.account(t_ns)
        self._charger_W = power_W

    def load_W(self, t_ns: int) -> float:
        """Return what is drawn from the cell at ``t_ns``, negative where it is charged."""
        given_W = self._charger_W if self.battery.charge < 1.0 else 0.0
        if t_ns >= self._until_ns:
            return self._end_W - given_W
        part = (t_ns - self._start_ns) / (self._until_ns - self._start_ns)
        return self._start_W + part * (self._end_W - self._start_W) - given_W

    def account(self, t_ns: int) -> None:
        """Take from the cell what was drawn since the last account."""
        if t_ns <= self._since_ns:
            return
        steady = self._since_ns >= self._until_ns
        for end_ns in (t_ns,) if steady else (min(self._until_ns, t_ns), t_ns):
            duration_s = (end_ns - self._since_ns) * 1e-9
            if duration_s > 0.0:
                loads = self.load_W(self._since_ns), self.load_W(end_ns)
                self.warmth.heat(self.battery.drain(*loads, duration_s), end_ns)
                self._since_ns = end_ns

    def terminal_V(self, t_ns: int) -> float:
        """Return the voltage at the terminals at ``t_ns``, as charged at the last account."""
        return self.battery.terminal_V(self.load_W(t_ns))
