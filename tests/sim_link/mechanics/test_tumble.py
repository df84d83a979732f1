"""The motion after braking: outcomes, events and what must be conserved.

Figures marked "computed" come from scipy.integrate.solve_ivp with events on the equations of
motion, or from the general physics library MuJoCo 4.0.0, for invented parameters; g = 9.81.
"""

import math
from typing import Any

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from sim_link.kinds import Kind, centre_inertia_kg_m2, edge_inertia_kg_m2, offset_m
from sim_link.mechanics import Attempt, Moment, pivot, pivot_threshold
from sim_link.mechanics.arrays import PLAIN as OPS
from sim_link.mechanics.bodies import Bodies, bodies_of, standing_arm_m, turned
from sim_link.mechanics.forces import Footing, footing, stick
from sim_link.mechanics.hold import GRAVITY_M_S2, hold_of
from tests.support.kinds import PLAIN, kind_with


def followed(kind: Kind, speed: float, sense: int = 1) -> list[Moment]:
    moments: list[Moment] = []
    pivot(kind, speed, 1, sense, watch=moments.append)
    return moments


def body(kind: Kind, face_up: int = 1, sense: int = 1) -> Bodies:
    return bodies_of([Attempt(kind, 0.0, face_up, sense)])


def standing(kind: Kind, *, slipping: bool) -> Footing:
    """A free body flat on the floor, about its first corner."""
    wheel = kind.wheel_inertia_kg_m2 if slipping else 0.0
    alone = body(kind)
    inertia = alone.inertia_kg_m2 - wheel
    return footing(alone, standing_arm_m(alone, 0), (0, True), inertia, (0, 0))


def arm_m(kind: Kind, corner: int, angle: float, face_up: int = 1, sense: int = 1) -> Any:
    return turned(OPS, standing_arm_m(body(kind, face_up, sense), corner % 4), angle)


def body_energy(kind: Kind, moment: Moment) -> float:
    """Kinetic and potential energy of the module, wheel locked (its rate the body's)."""
    turning = 0.5 * centre_inertia_kg_m2(kind) * moment.rate_rad_s**2
    moving = 0.5 * kind.mass_kg * (moment.vx_m_s**2 + moment.vz_m_s**2)
    return turning + moving + kind.mass_kg * GRAVITY_M_S2 * moment.height_m


def least_speed(kind: Kind, faces: int, low: float, high: float) -> float:
    """Halving between a speed that turns fewer faces and one that turns enough."""
    assert pivot(kind, low).faces < faces <= pivot(kind, high).faces
    while high - low > 1e-7 * high:
        middle = (low + high) / 2
        low, high = (low, middle) if pivot(kind, middle).faces >= faces else (middle, high)
    return high


def _hinged(side: float, mass: float, wheel: float, brake: float, **more: Any) -> Kind:
    return kind_with(
        side_m=side, mass_kg=mass, wheel_inertia_kg_m2=wheel, brake_torque_N_m=brake, **more
    )


# --- held: outcomes ----------------------------------------------------------------------

HELD = [
    (_hinged(0.04, 0.1, 4.5e-6, 3.924), 293.3059),
    (_hinged(0.055, 0.22, 1.1e-5, 0.593505), 446.8424),
    (_hinged(0.07, 0.4, 3.2e-5, 0.27468), 526.6131),
    (_hinged(0.05, 0.16, 8e-6, 0.041202), 1193.098),
    (_hinged(0.08, 0.6, 6e-5, 2.9272, magnet_torque_N_m=0.35, magnet_angle_rad=0.06), 454.5999),
]


@pytest.mark.parametrize(("kind", "computed"), HELD)
def test_held_module_lands_from_the_computed_threshold_on(kind: Kind, computed: float) -> None:
    short, landed = (
        pivot(kind, computed * (1 - 1e-5)),
        pivot(kind, computed * (1 + 1e-5)),
    )
    assert (short.faces, short.turned_rad) == (0, 0.0)
    assert (landed.faces, landed.turned_rad) == (1, pytest.approx(math.pi / 2))
    assert short.peak_tilt_rad == pytest.approx(math.pi / 4, abs=0.02)
    assert landed.peak_tilt_rad >= math.pi / 2
    assert short.settled
    assert landed.settled


def test_plastic_landing_keeps_a_quarter_of_the_rate() -> None:
    """Ic/Ie = 1/4 for a uniform cube with a locked wheel: angular momentum about the edge."""
    kind = HELD[0][0]
    moments = followed(kind, 900.0)
    landed = next(i for i, m in enumerate(moments) if m.angle_rad == math.pi / 2)
    before, after = moments[landed - 1], moments[landed]
    assert not before.slipping
    fall = kind.mass_kg * GRAVITY_M_S2 * (before.height_m - after.height_m)
    struck = math.sqrt(before.rate_rad_s**2 + 2 * fall / edge_inertia_kg_m2(kind))
    assert after.rate_rad_s == pytest.approx(struck / 4, rel=1e-6)


def test_restitution_throws_back_and_settles_later() -> None:
    w_min = pivot_threshold(PLAIN).w_min_rad_s
    plastic = pivot(PLAIN, 1.3 * w_min)
    springy = pivot(kind_with(restitution=0.4), 1.3 * w_min)
    assert plastic.faces == springy.faces == 1
    assert springy.settle_s > plastic.settle_s
    assert springy.settled


def test_bounce_can_carry_a_held_module_back() -> None:
    """Thrown back at e times the landing rate it passes top dead centre again where
    e^2 E > lift: with E = 1.5^2 lift that is e > 2/3."""
    for restitution, faces in ((0.60, 1), (0.72, 0)):
        kind = kind_with(restitution=restitution, brake_torque_N_m=500.0)
        result = pivot(kind, 1.5 * pivot_threshold(kind).w_ideal_rad_s)
        assert result.faces == faces, restitution
        assert result.peak_tilt_rad == pytest.approx(math.pi / 2, abs=1e-6)


@pytest.mark.parametrize("part", [0.3, 0.9, 0.999])
def test_magnets_far_stronger_than_the_weight_give_no_energy(part: float) -> None:
    """Fallen back onto its face at a high rate, the module must open that face again to go on
    backwards: magnets that let go freely would roll it for ever."""
    kind = _hinged(0.031, 0.06, 5e-6, 1.0, magnet_torque_N_m=0.5, magnet_angle_rad=0.12)
    result = pivot(kind, part * pivot_threshold(kind).w_min_rad_s)
    assert (result.faces, result.settled) == (0, True)
    assert result.settle_s < 0.5


def test_a_wheel_at_rest_moves_nothing() -> None:
    result = pivot(kind_with(brake_onset_s=0.002), 0.0)
    assert result.faces == 0
    assert result.peak_tilt_rad == result.peak_rate_rad_s == 0.0
    assert result.settled
    assert result.settle_s == 0.002


def test_peak_rate_of_an_instant_brake() -> None:
    """Iw w / Ie, angular momentum about the edge, where the body then slows uphill."""
    kind = kind_with(brake_torque_N_m=5000.0)
    speed = 0.5 * pivot_threshold(kind).w_ideal_rad_s
    expected = kind.wheel_inertia_kg_m2 * speed / edge_inertia_kg_m2(kind)
    assert pivot(kind, speed).peak_rate_rad_s == pytest.approx(expected, rel=1e-3)


def test_peak_tilt_of_a_short_motion_by_energy() -> None:
    """An instant brake leaves Ie (Iw w/Ie)^2 / 2, all of it height at the turning point."""
    kind = kind_with(brake_torque_N_m=5000.0)
    speed = 0.8 * pivot_threshold(kind).w_ideal_rad_s
    hold, edge = hold_of(kind), edge_inertia_kg_m2(kind)
    energy = (kind.wheel_inertia_kg_m2 * speed) ** 2 / (2 * edge)
    assert hold.energy_J(pivot(kind, speed).peak_tilt_rad) == pytest.approx(energy, rel=1e-3)


def test_short_swing_lasts_as_long_as_the_linear_pendulum_says() -> None:
    """A nudge of 0.01 rad against a nearly constant torque: 2 rate Ie / T up and down again."""
    kind = kind_with(brake_torque_N_m=5000.0)
    edge, torque = edge_inertia_kg_m2(kind), hold_of(kind).torque_N_m(0.0)
    rate = math.sqrt(2 * 0.01 * torque / edge)
    moments = followed(kind, rate * edge / kind.wheel_inertia_kg_m2)
    back = next(m for m in moments[5:] if m.angle_rad == 0.0)
    assert back.t_s == pytest.approx(2 * rate * edge / torque, rel=0.01)


# --- not held ----------------------------------------------------------------------------


@pytest.mark.parametrize("friction", [0.05, 0.3, 0.6])
def test_instant_brake_on_a_sliding_corner(friction: float) -> None:
    """Rate after = Iw w / (Ic + m a^2 (1 + mu)/4): the ground's impulse N acts at half a side
    before the centre of mass, mu N at half a side below it."""
    kind = kind_with(brake_torque_N_m=2e5, held=False, floor_friction=friction)
    locked = next(m for m in followed(kind, 300.0) if not m.slipping)
    moment = kind.mass_kg * kind.side_m**2
    expected = kind.wheel_inertia_kg_m2 * 300.0 / (moment / 6 + moment * (1 + friction) / 4)
    assert locked.rate_rad_s == pytest.approx(expected, rel=1e-3)


@pytest.mark.parametrize(("ratio", "slides"), [(1.5, False), (3.0, False), (5.0, True)])
def test_friction_needed_to_stick_at_the_start(ratio: float, slides: bool) -> None:
    """x/(1 + x) with x = a theta''/(2 g) is 0.23, 0.44 and 0.62 for these, just above and
    below a friction of 0.55."""
    weight = PLAIN.mass_kg * GRAVITY_M_S2 * PLAIN.side_m / 2
    kind = kind_with(brake_torque_N_m=ratio * weight, held=False, floor_friction=0.55)
    inertia = edge_inertia_kg_m2(kind) - kind.wheel_inertia_kg_m2
    x = kind.side_m * (ratio - 1) * weight / inertia / (2 * GRAVITY_M_S2)
    torque = kind.brake_torque_N_m
    pull = stick(body(kind), standing(kind, slipping=True), torque, 0.0, 0.0)
    assert pull.friction_N / pull.normal_N == pytest.approx(x / (1 + x))
    early = followed(kind, 400.0)[1]
    corner_speed = early.vx_m_s - early.rate_rad_s * early.height_m
    assert (corner_speed < -1e-6) is slides


def test_normal_force_vanishes_at_the_textbook_rate() -> None:
    """Locked and flat on the floor: theta'^2 = 1.25 g/a for a uniform cube."""
    kind = kind_with(held=False)
    foot = standing(kind, slipping=False)
    rate = math.sqrt(1.25 * GRAVITY_M_S2 / kind.side_m)
    assert stick(body(kind), foot, 0.0, 0.0, rate * 0.9999).normal_N > 0
    assert stick(body(kind), foot, 0.0, 0.0, rate * 1.0001).normal_N < 0


def test_bouncing_free_module_comes_to_rest() -> None:
    for restitution in (0.1, 0.3, 0.6):
        kind = kind_with(held=False, restitution=restitution)
        result = pivot(kind, 900.0)
        assert result.settled, restitution
        assert result.turned_rad == pytest.approx(result.faces * math.pi / 2)


def _fields(kind: Kind) -> dict[str, object]:
    return {name: getattr(kind, name) for name in type(kind).__slots__}


@pytest.mark.parametrize(("sense", "next_face"), [(1, 2), (-1, 4)])
def test_next_corner_stands_as_that_face_would(sense: int, next_face: int) -> None:
    """Rolling one face on and being set down on that face are one posture."""
    kind = kind_with(com_offset_m=(0.011, -0.007))
    rolled = arm_m(kind, 1, math.pi / 2, 1, sense)
    away, up = offset_m(kind, next_face, sense)
    half = kind.side_m / 2
    assert rolled == pytest.approx((-(half + away), half + up))


# --- conservation ------------------------------------------------------------------------

speeds = st.floats(200.0, 2500.0)
free_kinds = st.builds(
    kind_with,
    held=st.just(False),
    brake_torque_N_m=st.floats(0.15, 20.0),
    floor_friction=st.floats(0.1, 1.1),
    com_offset_m=st.tuples(st.floats(-0.006, 0.006), st.floats(-0.006, 0.006)),
    restitution=st.sampled_from([0.0, 0.0, 0.3]),
)


@given(kind=free_kinds, speed=speeds, held=st.booleans())
@settings(max_examples=30, deadline=None)
def test_result_is_whole_and_the_same_each_time(kind: Kind, speed: float, held: bool) -> None:
    kind = kind_with(**{**_fields(kind), "held": held})
    result = pivot(kind, speed)
    assert result == pivot(kind, speed)
    assert result.settled
    assert result.turned_rad == pytest.approx(result.faces * math.pi / 2)
    assert result.peak_tilt_rad >= abs(result.turned_rad) - 1e-9
    assert 0.0 < result.brake_s <= result.settle_s


@given(
    offset=st.tuples(st.floats(-0.01, 0.01), st.floats(-0.01, 0.01)),
    speed=speeds,
    face_up=st.integers(1, 4),
)
@settings(max_examples=30, deadline=None)
def test_back_is_forward_in_a_mirror(
    offset: tuple[float, float], speed: float, face_up: int
) -> None:
    """A module seen from its other side: the offset mirrored, faces 2 and 4 exchanged."""
    kind = kind_with(com_offset_m=offset, held=False)
    mirrored = kind_with(com_offset_m=(-offset[0], offset[1]), held=False)
    other = {1: 1, 2: 4, 3: 3, 4: 2}[face_up]
    assert pivot(kind, speed, face_up, 1).faces == pivot(mirrored, speed, other, -1).faces
