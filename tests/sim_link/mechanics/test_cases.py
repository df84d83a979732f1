"""Motions whose figures were computed outside this project, by general-purpose libraries.

Origin of every figure here: thresholds "computed" with scipy's solve_ivp on the equations of
motion and, marked so, with the general physics library MuJoCo 4.0.0 (a hinge, a wheel, a brake of
limited torque; for the free case contacts); lock angle, brake time and ideal speed by quadrature.
The parameters are invented, g = 9.81 m/s^2. Asked of us: hinges to 0.1 %, free contacts to 2 %, a
hop to 5 %; what we reach, and what is held here, is 1e-5, 1e-4 and 1e-3.
"""

import math
from typing import NamedTuple

import numpy as np
import pytest

from protocol.codes import Setting
from sim_link.kinds import Kind
from sim_link.mechanics import GRAVITY_M_S2, Phase, pivot, pivot_threshold
from sim_link.mechanics.hold import Hold, hold_of
from sim_link.mechanics.threshold import (
    closed_form_rad_s,
    hinge_thresholds,
    ideal_rad_s,
    needed_torque_N_m,
)
from tests.support.kinds import PLAIN
from tests.support.motions import FACE, changed, cube, followed, least_speed

RPM = 60 / (2 * math.pi)


class Case(NamedTuple):
    """A kind, and what was computed for it: rad/s, radians and seconds. ``over`` is where a
    held module turns a further face."""

    setting: Setting
    kind: Kind
    ratio: float
    ideal: float
    closed: float
    least: float
    mujoco: float
    lock: float
    brake_s: float
    over: float | None = None


def _magnets(torque: float, angle: float, kind: Kind) -> Kind:
    return changed(kind, magnet_torque_N_m=torque, magnet_angle_rad=angle)


HINGES = {
    "floor, strong brake": Case(
        Setting.FLOOR, cube(0.04, 0.1, 4.5e-6, 3.924),
        200.0, 292.6028, 293.3061, 293.3059, 293.306, 0.001984113, 0.0003222377, 1173.21,
    ),
    "floor, k = 10": Case(
        Setting.FLOOR, cube(0.055, 0.22, 1.1e-5, 0.593505),
        10.0, 424.5952, 447.0074, 446.8424, 446.8425, 0.04049272, 0.008096228, 1776.577,
    ),
    "floor, k = 2": Case(
        Setting.FLOOR, cube(0.07, 0.4, 3.2e-5, 0.27468),
        2.0, 381.0291, 535.5472, 526.6131, 526.6132, 0.204264, 0.06053616, 1455.222,
    ),
    "floor, k = 1.05": Case(
        Setting.FLOOR, cube(0.05, 0.16, 8e-6, 0.041202),
        1.05, 368.0324, 1662.268, 1193.098, 1193.101, 0.3913932, 0.2305618,
    ),
    "floor, magnets": Case(
        Setting.FLOOR, _magnets(0.35, 0.06, cube(0.08, 0.6, 6e-5, 2.9272)),
        5.0, 410.5669, 457.9507, 454.5999, 454.6, 0.03969574, 0.00913767,
    ),
    "wall, magnets": Case(
        Setting.WALL, _magnets(0.1, 0.05, cube(0.05, 0.15, 9e-6, 2.73575)),
        20.0, 696.4416, 713.8906, 712.815, 712.8151, 0.0277292, 0.002264196,
    ),
    "crest": Case(
        Setting.CREST, cube(0.06, 0.25, 2.5e-5, 0.5886),
        8.0, 583.9876, 622.681, 624.6483, 624.6484, 0.2909154, 0.02557056,
    ),
    "flat, magnets": Case(
        Setting.FLAT, _magnets(0.06, 0.08, cube(0.05, 0.15, 9e-6, 0.36)),
        6.0, 172.1326, 187.9953, 187.5233, 187.5242, 0.01292494, 0.004545178,
    ),
}  # fmt: skip
NEEDED = {Setting.FLOOR: 1, Setting.WALL: 1, Setting.CREST: 2, Setting.FLAT: 1}

named = pytest.mark.parametrize("name", sorted(HINGES))


def _edge(kind: Kind) -> float:
    """Ie of a uniform cube: 2/3 m a^2."""
    return 2 / 3 * kind.mass_kg * kind.side_m**2


@named
def test_threshold_of_a_hinge(name: str) -> None:
    case = HINGES[name]
    found = pivot_threshold(case.kind, FACE[case.setting], 1, case.setting)
    assert found.feasible
    assert found.reason == ""
    assert found.torque_ratio == pytest.approx(case.ratio, rel=1e-6)
    assert found.w_ideal_rad_s == pytest.approx(case.ideal, rel=1e-6)
    assert found.w_min_rad_s == pytest.approx(case.least, rel=1e-5)
    assert found.w_min_rad_s == pytest.approx(case.mujoco, rel=1e-5)
    assert found.lock_angle_rad == pytest.approx(case.lock, rel=1e-5)
    assert found.brake_s == pytest.approx(case.brake_s, rel=1e-5)


@named
def test_motion_lands_from_the_computed_threshold_on(name: str) -> None:
    """In flat, with only magnets to overcome, a body 1e-5 above the threshold creeps on for more
    than the 20 s that a motion is followed; hence 1e-4 there."""
    case = HINGES[name]
    close = 1e-4 if case.setting is Setting.FLAT else 1e-5
    short, landed = (
        pivot(case.kind, case.least * part, FACE[case.setting], setting=case.setting)
        for part in (1 - close, 1 + close)
    )
    assert short.faces == 0
    assert landed.faces == NEEDED[case.setting]
    assert short.settled
    assert landed.settled
    assert landed.brake_s == pytest.approx(case.brake_s, rel=2 * close)
    assert landed.lock_rad == pytest.approx(case.lock, rel=4 * close)


@named
def test_closed_form_of_a_constant_hold_torque(name: str) -> None:
    """Computed by hand from w_ideal sqrt(1 + (1 - j)/(k - 1)): too high where the hold torque falls
    with the angle, too low where it grows first."""
    case = HINGES[name]
    hold = hold_of(case.kind, FACE[case.setting], 1, case.setting)
    parts = _edge(case.kind), case.kind.wheel_inertia_kg_m2, case.kind.brake_torque_N_m
    found = float(closed_form_rad_s(hold, *map(np.asarray, parts)))
    assert found == pytest.approx(case.closed, rel=1e-6)
    assert (found > case.least) is (case.setting is not Setting.CREST)


@pytest.mark.parametrize("name", [name for name, case in HINGES.items() if case.over])
def test_second_face_of_a_held_module(name: str) -> None:
    """Locked before landing 4.00 and 3.98 times the least speed (by quadrature; solve_ivp found
    1173.255 and 1777.068, MuJoCo 1172.573 and 1776.094); still slipping at landing, 2.76 times (by
    solve_ivp; MuJoCo 1455.065)."""
    case = HINGES[name]
    assert case.over is not None
    assert pivot_threshold(case.kind).w_over_rad_s == pytest.approx(case.over, rel=2e-6)
    assert pivot(case.kind, case.over * (1 - 1e-5)).faces == 1
    assert pivot(case.kind, case.over * (1 + 1e-5)).faces == 2


@pytest.mark.parametrize("times_ideal", [1.0, 3.0, 8.0])
def test_too_weak_a_brake_never_lifts(times_ideal: float) -> None:
    """k = 0.95; MuJoCo found the body stuck at the same three speeds."""
    kind = _magnets(0.05, 0.05, cube(0.06, 0.28, 2.4e-5, 0.1257838))
    found = pivot_threshold(kind)
    assert not found.feasible
    assert found.torque_ratio == pytest.approx(0.95, rel=1e-6)
    assert "0.950" in found.reason
    assert math.isnan(found.w_min_rad_s)
    assert found.w_over_rad_s is None
    assert found.w_ideal_rad_s == pytest.approx(292.3639, rel=1e-6)
    result = pivot(kind, times_ideal * found.w_ideal_rad_s)
    assert (result.faces, result.turned_rad, result.peak_tilt_rad) == (0, 0.0, 0.0)
    assert result.settled
    run_down_s = times_ideal * found.w_ideal_rad_s * 2.4e-5 / 0.1257838
    assert result.brake_s == pytest.approx(run_down_s)


def test_free_module_that_sticks_needs_what_a_hinge_needs() -> None:
    """k = 3, mu = 0.9, of which it needs 0.436 at the start: MuJoCo with contacts found 445.95 and,
    with stiffer ones, 445.98 rad/s, solve_ivp 445.95, the hinge 445.98. Asked of us: 2 %."""
    kind = cube(0.05, 0.16, 8e-6, 0.11772, held=False, floor_friction=0.9)
    moved = least_speed(kind, 1, (440.0, 450.0), Setting.FLOOR)
    assert moved == pytest.approx(445.9807, rel=1e-4)
    assert moved == pytest.approx(445.9544, rel=1e-4)
    assert pivot_threshold(kind).w_min_rad_s == pytest.approx(445.9847, rel=1e-6)


def test_hop_of_a_free_module() -> None:
    """k = 150, mu = 1.2, three times the ideal speed: computed, it leaves the floor as the wheel
    locks, at 0.02397 rad and 1.456 ms, rate 32.912 rad/s, upward 0.80285 m/s, rise 33.445 mm
    (MuJoCo with ever stiffer contacts: 33.66, 33.56, 33.47 mm; an instant brake would make it
    34.949). Asked of us: 5 %."""
    kind = cube(0.05, 0.16, 8e-6, 5.886, held=False, floor_friction=1.2)
    moments = followed(kind, 1104.097)
    off = next(m for m in moments if m.phase is Phase.FLIGHT)
    assert off.angle_rad == pytest.approx(0.02396781, rel=1e-3)
    assert off.t_s == pytest.approx(1.456e-3, rel=1e-3)
    assert off.rate_rad_s == pytest.approx(32.91241, rel=1e-4)
    assert off.vz_m_s == pytest.approx(0.8028547, rel=1e-4)
    result = pivot(kind, 1104.097)
    assert result.rise_m == pytest.approx(0.03344495, rel=1e-3)
    assert result.rise_m == pytest.approx(max(m.height_m for m in moments) - 0.025, rel=1e-3)


# Least brake torque over m g a, by setting, the same for j = 0.03, 0.1 and 0.3: by trial.
LEAST_TORQUE = {Setting.FLOOR: 0.5000005, Setting.WALL: 0.6541057, Setting.CREST: 0.6541057}


@pytest.mark.parametrize("setting", list(LEAST_TORQUE))
@pytest.mark.parametrize("part", [0.03, 0.1, 0.3])
def test_least_brake_torque(setting: Setting, part: float) -> None:
    """The floor asks for the torque at rest, a wall for the greatest V/theta."""
    weight_side = PLAIN.mass_kg * GRAVITY_M_S2 * PLAIN.side_m
    expected = LEAST_TORQUE[setting] * weight_side
    hold = hold_of(PLAIN, FACE[setting], 1, setting)
    assert float(needed_torque_N_m(hold)) == pytest.approx(expected, rel=1e-5)
    for times, feasible in ((1 - 1e-4, False), (1 + 1e-4, True)):
        kind = changed(
            PLAIN,
            brake_torque_N_m=times * expected,
            wheel_inertia_kg_m2=part * _edge(PLAIN),
        )
        found = hinge_thresholds(
            hold, *map(np.asarray, (_edge(PLAIN), part * _edge(PLAIN), times * expected))
        )
        assert found.margin == pytest.approx(times, rel=1e-5)
        assert np.isfinite(found.w_min_rad_s) == feasible
        if part == 0.03:
            whole = pivot_threshold(kind, FACE[setting], 1, setting)
            assert whole.feasible is feasible
            assert whole.torque_margin == pytest.approx(times, rel=1e-5)


# Floor: j = Iw/Ie, k, exact over ideal speed, constant hold torque's over ideal speed, lock angle
# in degrees. By quadrature.
SCALING = [
    (0.03, 1.01, 4.796607, 9.899495, 23.32758),
    (0.03, 1.05, 3.241829, 4.516636, 22.42518),
    (0.03, 1.1, 2.657377, 3.271085, 21.39019),
    (0.03, 1.3, 1.904419, 2.057507, 18.05289),
    (0.03, 1.6, 1.563486, 1.617611, 14.62438),
    (0.03, 2.0, 1.380291, 1.403567, 11.66639),
    (0.03, 3.0, 1.211808, 1.218606, 7.745562),
    (0.03, 5.0, 1.112823, 1.114675, 4.630774),
    (0.03, 10.0, 1.052125, 1.05251, 2.308856),
    (0.03, 30.0, 1.016548, 1.016587, 0.7681199),
    (0.03, 100.0, 1.004884, 1.004887, 0.230276),
    (0.1, 1.01, 4.638525, 9.539392, 22.90874),
    (0.1, 1.05, 3.141647, 4.358899, 21.98849),
    (0.1, 1.1, 2.579535, 3.162278, 20.93492),
    (0.1, 1.3, 1.857001, 2.0, 17.55439),
    (0.1, 1.6, 1.531387, 1.581139, 14.1148),
    (0.1, 2.0, 1.357299, 1.378405, 11.18084),
    (0.1, 3.0, 1.198105, 1.204159, 7.348396),
    (0.1, 5.0, 1.10517, 1.106797, 4.355603),
    (0.1, 10.0, 1.048474, 1.048809, 2.157102),
    (0.1, 30.0, 1.015366, 1.015399, 0.7143469),
    (0.1, 100.0, 1.004532, 1.004535, 0.2138076),
    (0.3, 1.01, 4.151809, 8.42615, 21.50183),
    (0.3, 1.05, 2.834194, 3.872983, 20.52171),
    (0.3, 1.1, 2.341315, 2.828427, 19.40696),
    (0.3, 1.3, 1.713139, 1.825742, 15.89477),
    (0.3, 1.6, 1.434942, 1.47196, 12.44589),
    (0.3, 2.0, 1.288847, 1.30384, 9.622069),
    (0.3, 3.0, 1.157835, 1.161895, 6.115402),
    (0.3, 5.0, 1.082929, 1.083974, 3.527584),
    (0.3, 10.0, 1.037952, 1.038161, 1.71187),
    (0.3, 30.0, 1.011977, 1.011997, 0.5593286),
    (0.3, 100.0, 1.003527, 1.003529, 0.166628),
]


@pytest.mark.parametrize(("part", "ratio", "exact", "constant", "lock_deg"), SCALING)
def test_scaling_of_a_floor_pivot(
    part: float, ratio: float, exact: float, constant: float, lock_deg: float
) -> None:
    edge = _edge(PLAIN)
    weight = PLAIN.mass_kg * GRAVITY_M_S2 * PLAIN.side_m / 2
    parts = [np.asarray(each) for each in (edge, part * edge, ratio * weight)]
    hold = hold_of(PLAIN)
    found, ideal = hinge_thresholds(hold, *parts), ideal_rad_s(hold, *parts[:2])
    assert found.ratio == pytest.approx(ratio)
    assert found.w_min_rad_s / ideal == pytest.approx(exact, rel=2e-6)
    assert closed_form_rad_s(hold, *parts) / ideal == pytest.approx(constant, rel=1e-6)
    assert np.degrees(found.lock_rad) == pytest.approx(lock_deg, rel=1e-6)


def test_many_hinges_at_once_are_as_each_alone() -> None:
    """Elementwise: the scaling table's first j as one array."""
    edge = _edge(PLAIN)
    weight = PLAIN.mass_kg * GRAVITY_M_S2 * PLAIN.side_m / 2
    ratios = np.array([ratio for part, ratio, *_ in SCALING if part == 0.03])
    one = hold_of(PLAIN)
    hold = Hold(*(np.full(ratios.size, getattr(one, name)) for name in Hold.__slots__))
    edges = np.full(ratios.size, edge)
    found = hinge_thresholds(hold, edges, 0.03 * edges, ratios * weight)
    for place, ratio in enumerate(ratios):
        alone = hinge_thresholds(one, *map(np.asarray, (edge, 0.03 * edge, ratio * weight)))
        for name in found.__slots__:
            assert getattr(found, name)[place] == pytest.approx(
                float(getattr(alone, name)), rel=1e-12
            )
