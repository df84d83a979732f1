"""What a kind needs: the choice of method, and why there is no speed at all.

Each reason that a motion cannot be done is reached by a case, with its margin by hand.
"""

import math
import re

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from protocol.codes import Setting
from sim_link.errors import SimStateError
from sim_link.kinds import Kind
from sim_link.mechanics import GRAVITY_M_S2, Threshold, hop_threshold, pivot, pivot_threshold
from sim_link.mechanics.search import (
    FADES,
    HELD_DOWN,
    NOTHING_HOLDS,
    SLIDES_AWAY,
    STAYS_DOWN,
)
from sim_link.mechanics.threshold import NO_LIFT, STALLS
from tests.support.kinds import PLAIN, kind_with
from tests.support.motions import FACE, SETTINGS, changed, cube, least_speed

WEIGHT_SIDE = PLAIN.mass_kg * GRAVITY_M_S2 * PLAIN.side_m
"""m g a of the plain cube."""
HANGING = (Setting.WALL, Setting.CREST)


def needed(kind: Kind, setting: Setting = Setting.FLOOR) -> Threshold:
    return pivot_threshold(kind, FACE[setting], 1, setting)


def assert_impossible(found: Threshold, reason: str) -> None:
    """No speed, and the reason told, with its figures."""
    assert not found.feasible
    pattern = re.sub(r"\\{\w+:\\.3f\\}", r"\\d+\\.\\d{3}", re.escape(reason))
    assert re.fullmatch(pattern, found.reason), found.reason
    assert math.isnan(found.w_min_rad_s)
    assert math.isnan(found.lock_angle_rad)
    assert math.isnan(found.brake_s)
    assert found.w_over_rad_s is None
    assert found.lift_off_rad_s is None
    assert found.w_ideal_rad_s > 0.0


# --- infeasible ---------------------------------------------------------------------------


@pytest.mark.parametrize("setting", SETTINGS)
def test_too_weak_to_lift(setting: Setting) -> None:
    """Hold at rest, by hand: m g a/2 and magnets; in flat 0.7652 mu m g a and magnets."""
    magnets = 0.05
    gravity = 0.7652 * 0.3 if setting is Setting.FLAT else 0.5
    hold = gravity * WEIGHT_SIDE + magnets
    kind = kind_with(face_friction=0.3, magnet_torque_N_m=magnets, brake_torque_N_m=0.9 * hold)
    found = needed(kind, setting)
    assert_impossible(found, NO_LIFT)
    assert "0.900" in found.reason
    assert found.torque_ratio == pytest.approx(0.9, rel=1e-4)
    assert found.torque_margin <= found.torque_ratio * (1 + 1e-12)
    assert pivot(kind, 5000.0, FACE[setting], setting=setting).peak_tilt_rad == 0.0


@pytest.mark.parametrize("setting", HANGING)
def test_a_wall_can_stall_a_brake_that_lifts(setting: Setting) -> None:
    """A wall needs tau > max V/theta = 0.6541 m g a, though the hold at rest is m g a / 2. (The
    maximum of ((1 + sin x - cos x)/2)/x, found by hand to four digits.)"""
    kind = kind_with(brake_torque_N_m=0.6 * WEIGHT_SIDE)
    found = needed(kind, setting)
    assert_impossible(found, STALLS)
    assert found.torque_ratio == pytest.approx(1.2)
    assert found.torque_margin == pytest.approx(0.6 / 0.6541, rel=1e-4)
    assert "0.917" in found.reason
    stalled = pivot(kind, 20000.0, 4, setting=setting)
    assert stalled.faces == 0
    assert 0.2 < stalled.peak_tilt_rad < math.pi / 2


@pytest.mark.parametrize("setting", [Setting.WALL, Setting.CREST, Setting.FLAT])
def test_what_is_not_held_pivots_on_the_floor_only(setting: Setting) -> None:
    assert_impossible(needed(kind_with(held=False, face_friction=0.1), setting), NOTHING_HOLDS)


def test_a_sliding_corner_can_leave_no_speed() -> None:
    """k = 1.000001 on a floor of mu = 0.002: the hinge would do it at over ten times the ideal
    speed; on a corner that slides nothing up to there is enough."""
    kind = kind_with(held=False, floor_friction=0.002, brake_torque_N_m=0.5000005 * WEIGHT_SIDE)
    found = pivot_threshold(kind)
    assert_impossible(found, SLIDES_AWAY)
    assert found.torque_margin == pytest.approx(1.000001)
    assert pivot(kind, 9.9 * found.w_ideal_rad_s).faces == 0
    assert pivot_threshold(changed(kind, held=True)).feasible


def test_a_search_goes_on_to_ten_times_the_ideal_speed() -> None:
    """Weak brakes need several times the ideal speed, though the search begins at a fifth of it:
    k = 1.02 on ice, and one that fades from k = 1.2 to 1.03."""
    slides = pivot_threshold(
        kind_with(held=False, floor_friction=0.02, brake_torque_N_m=0.51 * WEIGHT_SIDE)
    )
    fades = pivot_threshold(
        kind_with(brake_torque_N_m=0.6 * WEIGHT_SIDE, brake_kept=0.86, brake_decay_s=0.03)
    )
    for found in (slides, fades):
        assert found.feasible
        assert found.w_min_rad_s > 2.5 * found.w_ideal_rad_s


def test_a_brake_that_fades_can_leave_no_speed() -> None:
    """1 ms of 0.5 N m and then 5 mN m: 5e-4 N m s at most, a twentieth of what the lift needs, then
    less than the hold; a longer one is not enough either."""
    kind = kind_with(brake_kept=0.01, brake_decay_s=0.001)
    found = pivot_threshold(kind)
    assert_impossible(found, FADES)
    assert found.torque_ratio == pytest.approx(0.5 / (WEIGHT_SIDE / 2))
    assert pivot(kind, 20 * found.w_ideal_rad_s).faces == 0


def test_a_held_module_does_not_hop() -> None:
    assert_impossible(hop_threshold(PLAIN), HELD_DOWN)


def test_a_weak_brake_does_not_hop() -> None:
    found = hop_threshold(kind_with(held=False, brake_torque_N_m=0.4 * WEIGHT_SIDE))
    assert_impossible(found, NO_LIFT)


def test_a_module_can_stay_down_at_any_speed() -> None:
    """A brake that lifts but soon fades: the body falls back each time."""
    kind = kind_with(held=False, brake_torque_N_m=0.12, brake_kept=0.3, brake_decay_s=0.01)
    found = hop_threshold(kind)
    assert_impossible(found, STAYS_DOWN)


# --- feasible -----------------------------------------------------------------------------


def test_nothing_to_overcome_needs_no_speed() -> None:
    """Flat, without magnets and drag, any push turns the body: no ten times of it to look for."""
    found = needed(PLAIN, Setting.FLAT)
    assert found.feasible
    assert (found.w_min_rad_s, found.w_ideal_rad_s, found.brake_s) == (0.0, 0.0, 0.0)
    assert found.torque_ratio == found.torque_margin == math.inf
    assert pivot(PLAIN, 20.0, setting=Setting.FLAT).faces == 1


def test_brake_onset_delays_and_costs_no_speed() -> None:
    late = pivot_threshold(kind_with(brake_onset_s=0.004))
    prompt = pivot_threshold(PLAIN)
    assert late.w_min_rad_s == prompt.w_min_rad_s
    assert late.brake_s == pytest.approx(prompt.brake_s + 0.004)
    ran, sooner = (pivot(kind_with(brake_onset_s=s), 600.0) for s in (0.004, 0.0))
    assert ran.settle_s - sooner.settle_s == pytest.approx(0.004)
    assert ran.brake_s - sooner.brake_s == pytest.approx(0.004)


def test_instant_brake_is_the_limit_of_a_strong_one() -> None:
    found = pivot_threshold(kind_with(brake_torque_N_m=1e4))
    assert found.w_min_rad_s == pytest.approx(found.w_ideal_rad_s, rel=1e-4)
    assert found.w_min_rad_s > found.w_ideal_rad_s


OFFSET = (0.006, -0.004)


@pytest.mark.parametrize("setting", SETTINGS)
@pytest.mark.parametrize(("face_up", "sense"), [(1, 1), (2, 1), (3, -1), (4, -1)])
def test_thresholds_off_centre_are_where_the_motion_lands(
    setting: Setting, face_up: int, sense: int
) -> None:
    """Every posture of a cube whose centre of mass is not its centre: the edge that the hold curve
    takes is the one that the motion turns about."""
    kind = kind_with(com_offset_m=OFFSET, face_friction=0.1)
    found = pivot_threshold(kind, face_up, sense, setting)
    faces = 2 if setting is Setting.CREST else 1
    for part, expected in ((1 - 1e-5, False), (1 + 1e-5, True)):
        motion = pivot(kind, found.w_min_rad_s * part, face_up, sense, setting=setting)
        assert (motion.faces == faces) is expected


def test_a_fading_brake_is_searched_for() -> None:
    """Half of the torque goes with 5 ms: more speed than a steady brake, less than the half."""
    fading = pivot_threshold(kind_with(brake_kept=0.5, brake_decay_s=0.005))
    half = pivot_threshold(kind_with(brake_torque_N_m=0.25))
    assert pivot_threshold(PLAIN).w_min_rad_s < fading.w_min_rad_s < half.w_min_rad_s
    between = (0.9 * fading.w_min_rad_s, 1.1 * fading.w_min_rad_s)
    kind = kind_with(brake_kept=0.5, brake_decay_s=0.005)
    moved = least_speed(kind, 1, between, Setting.FLOOR)
    assert fading.w_min_rad_s == pytest.approx(moved, rel=2e-6)


@given(
    kept=st.floats(0.2, 0.99),
    decay=st.floats(1e-3, 0.2),
    torque=st.floats(0.3, 3.0),
    setting=st.sampled_from(SETTINGS),
)
@settings(max_examples=12)
def test_fading_never_needs_less_than_steady(
    kept: float, decay: float, torque: float, setting: Setting
) -> None:
    """Held; k of 3 to 30, a fifth to all of the torque kept, decay of 1 to 200 ms."""
    steady = kind_with(brake_torque_N_m=torque, face_friction=0.2)
    fading = changed(steady, brake_kept=kept, brake_decay_s=decay)
    least = needed(steady, setting).w_min_rad_s * (1 - 2e-6)
    assert pivot(fading, least, FACE[setting], setting=setting).faces == 0


def test_a_face_that_drag_stops_on_the_way_has_not_turned() -> None:
    """In flat a body may lie still anywhere: at 0.8 of the turn's energy it is past 45 degrees, and
    still no quarter turn; nor is that where a search along the motion finds the threshold."""
    kind = kind_with(face_friction=0.2, brake_torque_N_m=1.0)
    least = needed(kind, Setting.FLAT).w_min_rad_s
    stopped = pivot(kind, least * math.sqrt(0.8), setting=Setting.FLAT)
    assert stopped.settled
    assert stopped.faces == 0
    assert stopped.turned_rad == pytest.approx(0.8 * math.pi / 2, rel=1e-3)
    fading = needed(changed(kind, brake_kept=0.5, brake_decay_s=0.125), Setting.FLAT)
    assert fading.w_min_rad_s == pytest.approx(least, rel=1e-3)
    assert fading.w_min_rad_s > least


def test_sliding_threshold_is_where_the_motion_lands() -> None:
    """A corner that slides needs less than a hinge, since less of the body's mass turns."""
    kind = cube(0.05, 0.16, 8e-6, 0.6, held=False, floor_friction=0.3)
    found = pivot_threshold(kind)
    assert found.feasible
    assert pivot(kind, found.w_min_rad_s * (1 - 1e-5)).faces == 0
    assert pivot(kind, found.w_min_rad_s * (1 + 1e-5)).faces == 1
    assert found.w_min_rad_s < pivot_threshold(changed(kind, held=True)).w_min_rad_s


@pytest.mark.parametrize("friction", [0.5, 0.9])
def test_over_of_a_free_module_comes_early(friction: float) -> None:
    """With a near-instant brake `over` begins at 1.5 to 1.75 times the ideal speed, where a
    held one needs 4 times. It takes off at 1.42 times where the corner sticks."""
    found = pivot_threshold(cube(0.05, 0.16, 8e-6, 5.886, held=False, floor_friction=friction))
    assert found.w_over_rad_s is not None
    assert 1.5 < found.w_over_rad_s / found.w_ideal_rad_s < 1.75
    assert found.lift_off_rad_s is not None
    assert 1.2 < found.lift_off_rad_s / found.w_ideal_rad_s < 1.65


# --- refused ------------------------------------------------------------------------------


@pytest.mark.parametrize(("face_up", "sense"), [(0, 1), (5, 1), (-1, 1), (1, 0), (1, 2)])
def test_refuses_a_posture_that_is_none(face_up: int, sense: int) -> None:
    for ask in (pivot_threshold, hop_threshold):
        with pytest.raises(SimStateError):
            ask(PLAIN, face_up, sense)
    with pytest.raises(SimStateError):
        pivot(PLAIN, 100.0, face_up, sense)


@pytest.mark.parametrize("speed", [-1.0, math.nan, math.inf])
def test_refuses_a_wheel_speed_that_is_none(speed: float) -> None:
    with pytest.raises(SimStateError, match="wheel speed"):
        pivot(PLAIN, speed)
