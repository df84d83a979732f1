"""A module's cell as an equivalent circuit: a source, a resistance, and one RC pair (Thevenin).

Owns charge and voltages. Knows nothing of wheels, of heat or of who draws what (battery.py): it is
told a power in watts, for how long, and how warm it is. SI units, except the capacity, which the
trade gives in milliampere hours.

The source is the open-circuit voltage at a state of charge; the resistance drops at once; the RC
pair is what builds up over some half a minute and goes as slowly: v' = (I R1 - v) / tau. The curve
is the usual shape of a lithium-ion cell, rounded from memory; it stands for no make and is no data
sheet.
"""

from bisect import bisect_right
from math import exp, inf, sqrt
from typing import Final

CHARGES: Final = (0.00, 0.03, 0.10, 0.20, 0.40, 0.60, 0.80, 0.90, 1.00)
VOLTAGES: Final = (3.00, 3.40, 3.64, 3.72, 3.80, 3.88, 4.00, 4.09, 4.20)
"""Points of the open-circuit curve; straight between them."""

LOW_V: Final = 3.55
"""Open-circuit voltage below which a module calls its battery low and refuses to drive."""
DRIVE_V: Final = 3.15
"""The motor driver lowers its torque rather than pull the terminals below this."""
SETTLED_V: Final = 5e-4
RC_PART: Final = 0.6
"""Resistance of the RC pair, over the series resistance, where a kind does not state it."""
RC_S: Final = 25.0
"""Its time constant likewise: tens of seconds (common practice of the trade)."""

_WARM_C: Final = 25.0
_COLD_K: Final = 1800.0
"""Resistance rises in the cold as e^(K (1/T - 1/T_warm)); 1.7 times at 0 degrees (common practice
of the trade: an Arrhenius law with 10 to 20 kJ/mol)."""
_ZERO_K: Final = 273.15


def open_circuit_V(charge: float) -> float:
    """Return the voltage without load at a charge of 0 to 1; clamped outside."""
    if charge <= 0.0:
        return VOLTAGES[0]
    if charge >= 1.0:
        return VOLTAGES[-1]
    upper = bisect_right(CHARGES, charge)
    low, high = CHARGES[upper - 1], CHARGES[upper]
    part = (charge - low) / (high - low)
    return VOLTAGES[upper - 1] + part * (VOLTAGES[upper] - VOLTAGES[upper - 1])


def charge_at(voltage_V: float) -> float:
    """Return the charge at which the voltage without load is that; clamped."""
    if voltage_V <= VOLTAGES[0]:
        return 0.0
    if voltage_V >= VOLTAGES[-1]:
        return 1.0
    upper = bisect_right(VOLTAGES, voltage_V)
    part = (voltage_V - VOLTAGES[upper - 1]) / (VOLTAGES[upper] - VOLTAGES[upper - 1])
    return CHARGES[upper - 1] + part * (CHARGES[upper] - CHARGES[upper - 1])


def cold_factor(temperature_C: float) -> float:
    """By how much the resistances are more at this temperature than at 25 degrees."""
    return exp(_COLD_K * (1.0 / (temperature_C + _ZERO_K) - 1.0 / (_WARM_C + _ZERO_K)))


class Cell:
    """One cell. ``rc_ohm`` and ``rc_s`` None: the usual part of ``resistance_ohm``, and time.

    ``aged_ohm`` and ``aged_capacity`` are factors that wear sets, ``cold`` one that whoever knows
    the temperature sets.
    """

    __slots__ = (
        "_base_V",
        "_capacity_C",
        "_final_V",
        "_high",
        "_low",
        "_rc_ohm",
        "_rc_s",
        "_slope_V",
        "aged_capacity",
        "aged_ohm",
        "charge",
        "cold",
        "rc_V",
        "series_ohm",
    )

    def __init__(
        self,
        capacity_mAh: float,
        resistance_ohm: float,
        charge: float,
        *,
        rc_ohm: float | None = None,
        rc_s: float | None = None,
    ) -> None:
        self._capacity_C = capacity_mAh * 3.6
        self._rc_ohm = RC_PART * resistance_ohm if rc_ohm is None else rc_ohm
        self._rc_s = RC_S if rc_s is None else rc_s
        self.series_ohm = resistance_ohm
        self.charge = charge
        self.rc_V = 0.0
        """What has built up over the RC pair."""
        self._final_V = 0.0
        self.cold = self.aged_ohm = self.aged_capacity = 1.0
        self._low = self._high = self._base_V = self._slope_V = 0.0

    @property
    def resistance_ohm(self) -> float:
        """The series resistance as it is now: aged, and at its temperature."""
        return self.series_ohm * self.aged_ohm * self.cold

    @property
    def open_circuit_V(self) -> float:
        """Voltage without load, once everything has settled."""
        charge = self.charge
        if not self._low < charge < self._high:
            self._find_stretch(charge)
        return self._base_V + charge * self._slope_V

    @property
    def settled(self) -> bool:
        """Whether the slow part is where the last current takes it, to half a millivolt."""
        return abs(self.rc_V - self._final_V) < SETTLED_V

    @property
    def low(self) -> bool:
        """Whether the charge has fallen to where the module calls itself low."""
        return self.open_circuit_V < LOW_V

    @property
    def drive_W(self) -> float:
        """The most that a motor may draw at this charge, so that the terminals keep DRIVE_V."""
        spare_V = max(0.0, self.open_circuit_V - self.rc_V - DRIVE_V)
        return DRIVE_V * spare_V / self.resistance_ohm if self.resistance_ohm else inf

    def current_A(self, power_W: float) -> float:
        """Return the current at which the terminals give ``power_W`` (negative: take it).

        From P = I (E - R I), the smaller root. A demand beyond the peak, E^2 / 4R, gets the
        current of the peak: the cell gives what it can.
        """
        source_V = self.open_circuit_V - self.rc_V
        resistance_ohm = self.series_ohm * self.aged_ohm * self.cold
        if not resistance_ohm:
            return power_W / source_V
        under_root = source_V * source_V - 4.0 * resistance_ohm * power_W
        if under_root <= 0.0:
            return source_V / (2.0 * resistance_ohm)
        return (source_V - sqrt(under_root)) / (2.0 * resistance_ohm)

    def terminal_V(self, power_W: float) -> float:
        """Return the voltage at the terminals under a load of ``power_W``."""
        drop_V = self.resistance_ohm * self.current_A(power_W)
        return self.open_circuit_V - self.rc_V - drop_V

    def sag_V(self, power_W: float) -> float:
        """Return by how much a load of ``power_W`` pulls the voltage down at once."""
        return self.resistance_ohm * self.current_A(power_W)

    def drain(self, start_W: float, end_W: float, duration_s: float) -> float:
        """Take the charge of a load that changes steadily from ``start_W`` to ``end_W``.

        Returns the heat in joules that both resistances made. The current at the mean power stands
        for all of the time: over a spin-up it is nearly proportional to the power, and over a
        longer one the load is light.
        """
        current_A = self.current_A(0.5 * (start_W + end_W))
        charge = self.charge - current_A * duration_s / (self._capacity_C * self.aged_capacity)
        self.charge = min(max(0.0, charge), 1.0)
        return current_A**2 * self.resistance_ohm * duration_s + self._relax(current_A, duration_s)

    def replace(self, charge: float) -> None:
        """Another cell of its kind, fresh and at rest, in its place."""
        self.charge, self.rc_V = charge, 0.0
        self.aged_ohm = self.aged_capacity = 1.0

    def _relax(self, current_A: float, duration_s: float) -> float:
        """Let the RC pair follow a constant current; return the heat in its resistance.

        v = a + b e^(-t/tau) with a = I R1, so that the integral of v^2 / R1 is in closed form.
        """
        rc_ohm = self._rc_ohm * self.aged_ohm * self.cold
        if not rc_ohm:
            return 0.0
        final_V = current_A * rc_ohm
        self._final_V = final_V
        gap_V, left = self.rc_V - final_V, exp(-duration_s / self._rc_s)
        self.rc_V = final_V + gap_V * left
        squared = final_V * final_V * duration_s + self._rc_s * (
            2.0 * final_V * gap_V * (1.0 - left) + 0.5 * gap_V * gap_V * (1.0 - left * left)
        )
        return squared / rc_ohm

    def _find_stretch(self, charge: float) -> None:
        """Keep the straight stretch of the curve on which this charge lies."""
        upper = min(max(bisect_right(CHARGES, charge), 1), len(CHARGES) - 1)
        self._low, self._high = CHARGES[upper - 1], CHARGES[upper]
        rise_V = VOLTAGES[upper] - VOLTAGES[upper - 1]
        self._slope_V = rise_V / (self._high - self._low)
        self._base_V = VOLTAGES[upper - 1] - self._low * self._slope_V
