"""The flywheel: its speed as a piecewise-linear function of time.

Owns one ramp at a time, evaluated where somebody looks. Knows nothing of what drives it: motor
and brake are both a constant torque here, so that between events no step is computed. Positive
speeds turn the body forward when braked.
"""

import math
from typing import Final

RPM_A_RAD_S: Final = 30.0 / math.pi
"""Revolutions a minute in one radian a second."""


class Wheel:
    """A wheel at rest, at a speed, or between two speeds."""

    __slots__ = ("_end_ns", "_end_rad_s", "_start_ns", "_start_rad_s")

    def __init__(self) -> None:
        self._start_ns = self._end_ns = 0
        self._start_rad_s = self._end_rad_s = 0.0

    def speed_rad_s(self, t_ns: int) -> float:
        """Return the signed speed at ``t_ns``, which is not before the present ramp."""
        if t_ns >= self._end_ns:
            return self._end_rad_s
        part = (t_ns - self._start_ns) / (self._end_ns - self._start_ns)
        return self._start_rad_s + part * (self._end_rad_s - self._start_rad_s)

    def rpm(self, t_ns: int) -> float:
        """Return the signed speed at ``t_ns`` in revolutions a minute."""
        return self.speed_rad_s(t_ns) * RPM_A_RAD_S

    def ramp(self, target_rad_s: float, rate_rad_s2: float, t_ns: int) -> int:
        """Change speed from ``t_ns`` on at a constant rate; return when the target is reached.

        ``rate_rad_s2`` is positive: torque over the wheel's inertia.
        """
        self._start_rad_s = self.speed_rad_s(t_ns)
        self._start_ns = t_ns
        self._end_rad_s = target_rad_s
        duration_s = abs(target_rad_s - self._start_rad_s) / rate_rad_s2
        self._end_ns = t_ns + math.ceil(duration_s * 1e9)
        return self._end_ns
