"""What must be conserved, in every phase and setting: energy and angular momentum, to 1e-6.

The equations are the textbook's, written out here anew: complex numbers for the plane (forward +
i up), the body turning by e^(-i theta).
"""

import math
from itertools import pairwise

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from protocol.codes import Setting
from sim_link.kinds import Kind, centre_inertia_kg_m2, edge_inertia_kg_m2, offset_m
from sim_link.mechanics import GRAVITY_M_S2, Moment, Phase, pivot_threshold, twist
from sim_link.mechanics.hold import Hold, hold_of
from sim_link.mechanics.twist import yaw_friction_N_m
from tests.support.kinds import kind_with
from tests.support.motions import FACE, SETTINGS, body_energy_J, followed

END = {Setting.FLOOR: 1, Setting.WALL: 1, Setting.CREST: 2, Setting.FLAT: 1}
"""Quarter turns to the first landing."""
CORNERS = ((1 - 1j), (1 + 1j), (-1 + 1j), (-1 - 1j))
"""Of a cube of half side 1, clockwise from the lower front one."""
EDGES = {Setting.FLOOR: (0, 1), Setting.WALL: (1, 2), Setting.CREST: (1, 2), Setting.FLAT: (0, 1)}
"""Which of them it turns about, and which one strikes at the first landing."""

held_kinds = st.builds(
    kind_with,
    brake_torque_N_m=st.floats(0.35, 50.0),
    magnet_torque_N_m=st.sampled_from([0.0, 0.02, 0.15]),
    face_friction=st.floats(0.05, 0.3),
    com_offset_m=st.tuples(st.floats(-0.006, 0.006), st.floats(-0.006, 0.006)),
)
free_kinds = st.builds(
    kind_with,
    held=st.just(False),
    brake_torque_N_m=st.floats(0.15, 20.0),
    floor_friction=st.floats(0.1, 1.1),
    com_offset_m=st.tuples(st.floats(-0.006, 0.006), st.floats(-0.006, 0.006)),
    restitution=st.sampled_from([0.0, 0.0, 0.3]),
)
free_speeds = st.floats(200.0, 2500.0)


def first_arc(kind: Kind, speed: float, setting: Setting) -> list[Moment]:
    """Moments up to the first landing, or the first turning point."""
    moments = followed(kind, speed, setting)
    count = next((i for i, m in enumerate(moments[1:], 1) if m.rate_rad_s <= 0.0), len(moments))
    end = END[setting] * math.pi / 2
    return [moment for moment in moments[:count] if moment.angle_rad < end]


def edge_of(kind: Kind, setting: Setting) -> float:
    """Ie about the edge that faces 1 and 2 share with the floor."""
    return edge_inertia_kg_m2(kind, 1, 1)


def hold_impulse(hold: Hold, one: Moment, two: Moment) -> float:
    """Integral of T dt between two moments: Boole's rule on the cubic through their angles and
    rates."""
    span = two.t_s - one.t_s

    def angle(part: float) -> float:
        rise = part * part * (3.0 - 2.0 * part)
        leave, arrive = part * (1.0 - part) ** 2, -part * part * (1.0 - part)
        return (
            one.angle_rad * (1.0 - rise)
            + two.angle_rad * rise
            + span * (leave * one.rate_rad_s + arrive * two.rate_rad_s)
        )

    torques = [float(hold.torque_N_m(angle(part / 4))) for part in range(5)]
    return span * sum(w * t for w, t in zip((7, 32, 12, 32, 7), torques, strict=True)) / 90


@pytest.mark.parametrize("setting", SETTINGS)
@given(kind=held_kinds, part=st.floats(0.5, 3.0))
@settings(max_examples=15)
def test_held_slipping_and_locked(setting: Setting, kind: Kind, part: float) -> None:
    """Slipping: the brake's work is all there is, Ib rate^2/2 + V = tau theta, and Ib rate + Iw w
    changes by the hold torque's impulse alone. Locked: Ie rate^2/2 + V stays. To 1e-6 of the
    lift or of what the wheel gave."""
    hold = hold_of(kind, FACE[setting], 1, setting)
    edge, wheel = edge_of(kind, setting), kind.wheel_inertia_kg_m2
    scale = max(float(hold.energy_J(hold.end_rad)), 1e-3)
    ideal = math.sqrt(2 * edge * scale) / wheel
    moments = first_arc(kind, part * ideal, setting)
    close = 1e-6 * max(1.0, part**2)
    locked: list[float] = []
    start, lost = wheel * moments[0].wheel_rad_s, 0.0
    for one, two in pairwise(moments):
        lift = float(hold.energy_J(two.angle_rad))
        if one.slipping:
            slipping = 0.5 * (edge - wheel) * two.rate_rad_s**2 + lift
            work = kind.brake_torque_N_m * two.angle_rad
            assert slipping == pytest.approx(work, abs=close * scale)
            lost += hold_impulse(hold, one, two)
            carried = (edge - wheel) * two.rate_rad_s + wheel * two.wheel_rad_s
            assert carried == pytest.approx(start - lost, rel=close)
        if not two.slipping:
            locked.append(0.5 * edge * two.rate_rad_s**2 + lift)
    if locked:
        assert max(locked) - min(locked) < close * scale


@pytest.mark.parametrize("setting", SETTINGS)
@pytest.mark.parametrize("offset", [(0.0, 0.0), (0.005, -0.007), (-0.008, 0.003)])
def test_landing_keeps_angular_momentum_about_the_struck_corner(
    setting: Setting, offset: tuple[float, float]
) -> None:
    """Ic rate + m r x v about the corner that strikes is the same before and after; the rate before
    by the energy of the moment before. For a uniform cube a quarter of the rate is left."""
    kind = kind_with(com_offset_m=offset, brake_torque_N_m=20.0, face_friction=0.05)
    hold = hold_of(kind, FACE[setting], 1, setting)
    speed = 1.7 * pivot_threshold(kind, FACE[setting], 1, setting).w_min_rad_s
    moments = followed(kind, speed, setting)
    end = END[setting] * math.pi / 2
    place = next(i for i, m in enumerate(moments) if m.angle_rad == end)
    before, after = moments[place - 1], moments[place]
    assert not before.slipping
    gained = float(hold.energy_J(before.angle_rad) - hold.energy_J(end))
    struck = math.sqrt(before.rate_rad_s**2 + 2 * gained / edge_of(kind, setting))
    away, up = offset_m(kind, FACE[setting], 1)
    old, new = (
        (-away + 1j * up - kind.side_m / 2 * CORNERS[corner]) * (-1j) ** END[setting]
        for corner in EDGES[setting]
    )
    velocity = -1j * struck * old
    inertia = centre_inertia_kg_m2(kind)
    momentum = inertia * struck - kind.mass_kg * (new.conjugate() * velocity).imag
    assert after.rate_rad_s == pytest.approx(
        momentum / (inertia + kind.mass_kg * abs(new) ** 2), rel=1e-6
    )
    if offset == (0.0, 0.0):
        assert after.rate_rad_s == pytest.approx(struck / 4, rel=1e-6)


@given(kind=free_kinds, speed=free_speeds)
@settings(max_examples=30)
def test_free_flight(kind: Kind, speed: float) -> None:
    """Angular momentum of body and wheel together; the fall; and, once the wheel is locked, energy
    and rate. Between moments of one flight: a bounce changes the forward speed."""
    wheel = kind.wheel_inertia_kg_m2
    turning = centre_inertia_kg_m2(kind) - wheel
    for one, two in pairwise(followed(kind, speed)):
        if not (one.phase is two.phase is Phase.FLIGHT and one.vx_m_s == two.vx_m_s):
            continue
        fallen = one.vz_m_s - GRAVITY_M_S2 * (two.t_s - one.t_s)
        assert two.vz_m_s == pytest.approx(fallen, rel=1e-9, abs=1e-12)
        carried = (turning * m.rate_rad_s + wheel * m.wheel_rad_s for m in (one, two))
        assert next(carried) == pytest.approx(next(carried), rel=1e-9)
        if not one.slipping:
            assert two.rate_rad_s == one.rate_rad_s
            assert body_energy_J(kind, two) == pytest.approx(body_energy_J(kind, one), rel=1e-9)


def test_a_wheel_that_slips_in_flight_turns_the_body() -> None:
    """A weak brake and a fast wheel: the body takes off while the brake still acts."""
    kind = kind_with(held=False, brake_torque_N_m=0.6, floor_friction=0.9)
    moments = followed(kind, 2400.0)
    pairs = [
        (one, two)
        for one, two in pairwise(moments)
        if one.phase is two.phase is Phase.FLIGHT and one.slipping and two.slipping
    ]
    assert pairs
    turning = centre_inertia_kg_m2(kind) - kind.wheel_inertia_kg_m2
    one, two = pairs[0]
    gained = turning * (two.rate_rad_s - one.rate_rad_s)
    assert gained == pytest.approx(0.6 * (two.t_s - one.t_s), rel=1e-6)
    spent = kind.wheel_inertia_kg_m2 * (one.wheel_rad_s - two.wheel_rad_s)
    assert gained == pytest.approx(spent, rel=1e-6)
    mean = (one.rate_rad_s + two.rate_rad_s) / 2  # uniform acceleration
    assert two.angle_rad - one.angle_rad == pytest.approx(mean * (two.t_s - one.t_s), rel=1e-6)


@given(kind=free_kinds, speed=free_speeds)
@settings(max_examples=20)
def test_locked_body_never_gains_energy_and_always_comes_to_rest(kind: Kind, speed: float) -> None:
    """Sliding and landing take energy, nothing gives any; nothing sinks into the floor."""
    moments = followed(kind, speed)
    assert moments[-1].phase is Phase.FLAT
    start = kind.mass_kg * GRAVITY_M_S2 * kind.side_m
    away, up = offset_m(kind, 1, 1)
    for one, two in pairwise(moments):
        if not one.slipping:
            assert body_energy_J(kind, two) <= body_energy_J(kind, one) + 1e-6 * start
        turned = complex(math.cos(two.angle_rad), -math.sin(two.angle_rad))
        arms = [(-away + 1j * up - kind.side_m / 2 * corner) * turned for corner in CORNERS]
        assert two.height_m >= max(arm.imag for arm in arms) - 1e-8 * kind.side_m


@given(
    speed=st.floats(50.0, 2000.0),
    times=st.floats(1.05, 100.0),
    friction=st.floats(0.05, 1.0),
)
def test_twist_gives_the_floor_what_the_wheel_loses(
    speed: float, times: float, friction: float
) -> None:
    """Until the lock, body and wheel together lose tf t; after it Ic rate = tf t, and the energy
    Ic rate^2/2 is rubbed away over the rest of the angle."""
    kind = kind_with(floor_friction=friction)
    tf = yaw_friction_N_m(kind)
    kind = kind_with(floor_friction=friction, brake_torque_N_m=times * tf)
    found, inertia = twist(kind, speed), centre_inertia_kg_m2(kind)
    momentum = kind.wheel_inertia_kg_m2 * speed
    left = momentum - tf * found.brake_s
    assert inertia * found.peak_rate_rad_s == pytest.approx(left, rel=1e-6)
    assert tf * (found.settle_s - found.brake_s) == pytest.approx(left, rel=1e-6)
    rest = 0.5 * inertia * found.peak_rate_rad_s**2
    assert tf * (found.turned_rad - found.lock_rad) == pytest.approx(rest, rel=1e-6)
    slipping = 0.5 * (inertia - kind.wheel_inertia_kg_m2) * found.peak_rate_rad_s**2
    assert (times - 1.0) * tf * found.lock_rad == pytest.approx(slipping, rel=1e-6)
