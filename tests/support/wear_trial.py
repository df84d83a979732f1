"""Fleets driven through hundreds of motions without radio, and whether their facts show a trend.

The statistic, chosen before any fleet was looked at: one trend test a fleet and measure, the
regional Kendall test (Helsel and Frans 2006, from memory: Mann and Kendall's S, summed over blocks,
over the root of the summed variances), one-sided in the direction of wear. A block is one module at
one place in its charging cycle, so that a cell that empties between two charges is no trend. All
four measures rise with wear. A fleet is alarmed where the smallest of its four p times four
(Bonferroni) is below 0.002: for at most one false alarm in a hundred fleets, a level of 0.01 has
one to be expected and, found with the seeds 2001 to 2100, two.

Not the sag itself is tested but the resistance behind it, as far as the power is the same each
time: sag times the voltage under load, at 25 degrees by what the cold makes of a resistance. Boxes
settle from the temperatures at which they start, and a sag follows them: of 100 healthy fleets
(seeds 1 to 100) the sag alone alarmed 46, the sag over the cold's factor (seeds 1001 to 1100) 8,
for at one power it grows by more than the resistance. What is said of this measure was found with
other seeds.
"""

import math
from collections import Counter, defaultdict
from collections.abc import Iterable, Iterator, Sequence
from contextlib import contextmanager
from dataclasses import replace
from itertools import combinations
from typing import Final, NamedTuple

from protocol.codes import SIMULATED_BIT, Activity, Reason
from protocol.message import Pivot
from sim_link import mechanics
from sim_link.cell import cold_factor
from sim_link.deed import Deed
from sim_link.fault_kinds import FaultKind
from sim_link.kinds import Kind
from sim_link.measure import Reporter, facts
from sim_link.mechanics import MotionResult
from sim_link.module import VirtualModule
from sim_link.posture import Braking
from sim_link.randomness import Draws
from sim_link.wheel import RPM_A_RAD_S
from tests.support.virtual_console import PAVER, S, spec_of

MODULES: Final = 4
MOTIONS: Final = 300
SPEED_RPM: Final = 5_200
CYCLE: Final = 10
"""Motions between two charges."""
_BETWEEN_NS: Final = 8 * S
_CHARGE_NS: Final = 420 * S
LEVEL: Final = 0.002

MEASURES: Final = ("brake_us", "peak_rate_dps", "spin_up_ms", "resistance_V2")
SHOWN_BY: Final = {
    FaultKind.FADING_BRAKE: "brake_us",
    FaultKind.WEAK_MAGNETS: "peak_rate_dps",
    FaultKind.DRAGGING_BEARING: "spin_up_ms",
    FaultKind.AGEING_CELL: "resistance_V2",
}
"""Which measure shows which wear."""


class Measured(NamedTuple):
    """What a review takes from one motion: three facts, and a resistance times a power."""

    brake_us: float
    peak_rate_dps: float
    spin_up_ms: float
    resistance_V2: float


Trial = list[list[Measured]]


def kendall(values: Sequence[float]) -> tuple[int, float]:
    """Kendall's S of values in the order of time, and its variance with ties (Kendall 1975)."""
    s = sum((later > sooner) - (later < sooner) for sooner, later in combinations(values, 2))
    n, ties = len(values), Counter(values).values()
    whole = n * (n - 1) * (2 * n + 5) - sum(t * (t - 1) * (2 * t + 5) for t in ties)
    return s, whole / 18.0


def normal_score(s: int, variance: float) -> float:
    """Z of S by the normal approximation, corrected for continuity; 0 where all values tie."""
    if s == 0 or variance == 0.0:
        return 0.0
    return (s - math.copysign(1, s)) / math.sqrt(variance)


def rising_p(blocks: Iterable[Sequence[float]]) -> float:
    """One-sided p of the regional Kendall test: that nothing rises in any block."""
    found = [kendall(block) for block in blocks]
    z = normal_score(sum(s for s, _ in found), sum(variance for _, variance in found))
    return 0.5 * math.erfc(z / math.sqrt(2.0))


class Sketch:
    """A motion to the first order about one module's ordinary one, in place of the mechanics.

    Brake time goes as speed over torque; the peak rate is straight in speed and in the magnets'
    torque, with slopes from the mechanics itself. A test holds it to the mechanics.
    """

    def __init__(self, kind: Kind, speed_rad_s: float) -> None:
        self._kind, self._speed = kind, speed_rad_s
        self._whole = mechanics.pivot(kind, speed_rad_s, 1, 1)
        rate = self._whole.peak_rate_rad_s
        faster = mechanics.pivot(kind, 1.02 * speed_rad_s, 1, 1).peak_rate_rad_s
        weaker = replace(kind, magnet_torque_N_m=0.95 * kind.magnet_torque_N_m)
        freer = mechanics.pivot(weaker, speed_rad_s, 1, 1).peak_rate_rad_s
        self._a_speed, self._a_magnet = (faster - rate) / 0.02, (freer - rate) / 0.05

    @contextmanager
    def in_place(self) -> Iterator[None]:
        """Let brakes be computed by this, for a while."""
        whole = Braking.again
        Braking.again = lambda braking, watch=None: self.motion(braking.kind, braking.wheel_rad_s)
        try:
            yield
        finally:
            Braking.again = whole

    def motion(self, kind: Kind, speed_rad_s: float) -> MotionResult:
        """What comes of a brake at this speed, with this brake and these magnets."""
        speed = speed_rad_s / self._speed
        brake = kind.brake_torque_N_m / self._kind.brake_torque_N_m
        magnets = kind.magnet_torque_N_m / self._kind.magnet_torque_N_m
        rate = self._a_speed * (speed - 1.0) + self._a_magnet * (1.0 - magnets)
        return replace(
            self._whole,
            brake_s=self._whole.brake_s * speed / brake,
            peak_rate_rad_s=self._whole.peak_rate_rad_s + rate,
        )


class TrialModule:
    """One module of a trial: its motions, charged every CYCLE of them, and what it measured."""

    def __init__(self, seed: int, number: int, faults: Iterable[FaultKind]) -> None:
        spec = replace(spec_of(PAVER, 1, 1.0, frozenset(faults)), identity=SIMULATED_BIT | number)
        self._draws = Draws(seed, spec.identity)
        self._module = VirtualModule(spec, seed, drift_ppm=0.0)
        self._reporter = Reporter(spec.identity, self._draws)
        self.drive = self._module.drive
        self._sketch = Sketch(self.drive.body.kind, SPEED_RPM / RPM_A_RAD_S)
        self._t_ns = 0
        self._count = 0

    def motion(self) -> Measured:
        """Make one pivot, to and fro in turn; return what it measured."""
        if self._count and self._count % CYCLE == 0:
            self.drive.start_charging(self._t_ns)
            self._t_ns += _CHARGE_NS
            self.drive.stop_charging(self._t_ns)
        box = self._module.box
        before = self._reporter.telemetry(box, Activity.STILL, self._t_ns)
        direction = 1 if self._count % 2 == 0 else -1
        self._count += 1
        self.drive.start_motion(direction, SPEED_RPM, self._t_ns, Deed.FLOOR)
        with self._sketch.in_place():
            while self.drive.due_ns is not None:
                self._t_ns = self.drive.due_ns
                self.drive.step()
        command = Pivot(1, 1, self._count, 0, 0, 0, 1, direction, SPEED_RPM)
        found = facts(command, Reason.NONE, box, self._draws, self._t_ns)
        self._t_ns += _BETWEEN_NS
        sag_V = found.sag_mV / 1e3
        power_V2 = sag_V * (before.battery_mV / 1e3 - sag_V)
        resistance_V2 = power_V2 / cold_factor(before.temperature_cC / 100.0)
        return Measured(found.brake_us, found.peak_rate_dps, found.spin_up_ms, resistance_V2)


def fleet_trial(seed: int, faults: Iterable[FaultKind] = (), motions: int = MOTIONS) -> Trial:
    """Let a fleet move so often; return what each module measured, in order."""
    modules = [TrialModule(seed, number, faults) for number in range(1, MODULES + 1)]
    return [[module.motion() for _ in range(motions)] for module in modules]


def p_of(trial: Trial, measure: str) -> float:
    """The one-sided p of a fleet's trend in one measure, before any correction."""
    blocks: dict[tuple[int, int], list[float]] = defaultdict(list)
    for number, found in enumerate(trial):
        for count, each in enumerate(found):
            blocks[number, count % CYCLE].append(getattr(each, measure))
    return rising_p(blocks.values())


def corrected(trial: Trial) -> dict[str, float]:
    """The p of each measure times the number of measures, at most 1."""
    return {each: min(1.0, len(MEASURES) * p_of(trial, each)) for each in MEASURES}


def alarmed(trial: Trial) -> bool:
    """Whether a review would call this fleet worn."""
    return min(corrected(trial).values()) < LEVEL
