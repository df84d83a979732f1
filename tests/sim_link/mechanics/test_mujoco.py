"""Motions against the general physics library MuJoCo, its models built here; parameters invented.

Its wheel brake is dry friction in the joint (`frictionloss`), a torque of limited size that
holds the wheel once it has caught it, and its contacts are slightly soft: an independent
statement of the same machine. Magnets are a torque put on the body's joint at each step. The
twist's floor is dry friction in an upright joint, of our own size: that checks the mathematics of
the turn, not how a face rubs.
"""

import math
from collections.abc import Callable
from typing import Any, NamedTuple

import pytest

from protocol.codes import Setting
from sim_link.kinds import Kind
from sim_link.mechanics import hop_threshold, pivot, pivot_threshold, twist_threshold
from sim_link.mechanics.twist import yaw_friction_N_m
from tests.support.kinds import kind_with
from tests.support.motions import FACE

mujoco = pytest.importorskip("mujoco", reason="needs the extra 'reference'")
pytestmark = pytest.mark.reference

BODY = """
<mujoco>
  <compiler angle="radian"/>
  <option timestep="{step}" gravity="{gravity}" integrator="implicitfast" cone="elliptic"
          iterations="200" tolerance="1e-12" impratio="10"/>
  <worldbody>
    {floor}
    <body name="module" pos="0 0 {half}">
      {joints}
      <inertial pos="{com}" mass="{mass}" diaginertia="{inertia} {inertia} {inertia}"/>
      {shape}
      <body name="wheel" pos="{com}">
        <joint name="wheel" type="hinge" axis="0 1 0" frictionloss="{brake}" armature="0"
               solreffriction="{soft} 1" solimpfriction="0.9999 0.9999 0.001 0.5 2"/>
        <inertial pos="0 0 0" mass="1e-9" diaginertia="{wheel} {wheel} {wheel}"/>
      </body>
    </body>
  </worldbody>
</mujoco>
"""
DOWN, ALONG = "0 0 -9.81", "0 -9.81 0"
RUBS = (
    'frictionloss="{torque}" solreffriction="{soft} 1" solimpfriction="0.9999 0.9999 0.001 0.5 2"'
)


class Machine(NamedTuple):
    """A model and where its body and wheel are in it."""

    model: Any
    body: int
    wheel: int


def _machine(kind: Kind, step_s: float, joints: str, gravity: str, contact: str = "") -> Machine:
    half = kind.side_m / 2
    away, up = kind.com_offset_m
    model = mujoco.MjModel.from_xml_string(
        BODY.format(
            step=step_s,
            gravity=gravity,
            soft=2 * step_s,
            half=half,
            com=f"{-away} 0 {up}",
            floor=f'<geom type="plane" size="5 5 1" {contact}/>' if contact else "",
            joints=joints,
            shape=f'<geom type="box" size="{half} {half} {half}" mass="0" {contact}/>'
            if contact
            else "",
            mass=kind.mass_kg,
            inertia=kind.mass_kg * kind.side_m**2 / 6 - kind.wheel_inertia_kg_m2,
            wheel=kind.wheel_inertia_kg_m2,
            brake=kind.brake_torque_N_m,
        )
    )
    body, wheel = (int(model.joint(name).dofadr[0]) for name in ("body", "wheel"))
    return Machine(model, body, wheel)


def hinged(kind: Kind, setting: Setting, step_s: float) -> Machine:
    """A body on a hinge: its lower front edge, or its upper one."""
    half = kind.side_m / 2
    edge = half if setting in (Setting.WALL, Setting.CREST) else -half
    joint = f'<joint name="body" type="hinge" axis="0 1 0" pos="{half} 0 {edge}"/>'
    return _machine(kind, step_s, joint, ALONG if setting is Setting.FLAT else DOWN)


def free(kind: Kind, step_s: float) -> Machine:
    """A body on a floor of contacts that stick, slide and let go."""
    joints = (
        '<joint name="x" type="slide" axis="1 0 0"/><joint name="z" type="slide" axis="0 0 1"/>'
        '<joint name="body" type="hinge" axis="0 1 0"/>'
    )
    contact = f'friction="{kind.floor_friction} 0 0" condim="3" solref="{4 * step_s} 1"'
    return _machine(kind, step_s, joints, DOWN, contact)


def furthest_rad(
    machine: Machine, kind: Kind, speed: float, until: float, longest_s: float = 1.5
) -> float:
    """How far the body turns before it passes ``until``, turns back or stops, or time is up."""
    data = mujoco.MjData(machine.model)
    data.qvel[machine.wheel] = speed
    angle, furthest = 0.0, 0.0
    while data.time < longest_s and angle < until:
        pull = kind.magnet_torque_N_m * math.exp(-abs(angle) / kind.magnet_angle_rad)
        data.qfrc_applied[machine.body] = -pull
        mujoco.mj_step(machine.model, data)
        angle = float(data.qpos[machine.body])
        furthest = max(furthest, angle)
        if furthest > 0.02 and data.qvel[machine.body] <= 0.0:
            break
    return furthest


CASES = {
    "floor, weak brake": (Setting.FLOOR, kind_with(brake_torque_N_m=0.16)),
    "floor, strong brake": (Setting.FLOOR, kind_with(brake_torque_N_m=2.0)),
    "floor, off centre": (Setting.FLOOR, kind_with(com_offset_m=(0.006, -0.004))),
    "floor, magnets": (Setting.FLOOR, kind_with(magnet_torque_N_m=0.2, brake_torque_N_m=1.1)),
    "wall": (Setting.WALL, kind_with(side_m=0.07, mass_kg=0.4, wheel_inertia_kg_m2=2.5e-5)),
    "crest, magnets": (Setting.CREST, kind_with(magnet_torque_N_m=0.06, brake_torque_N_m=0.9)),
    "flat, magnets": (
        Setting.FLAT,
        kind_with(magnet_torque_N_m=0.08, magnet_angle_rad=0.3, brake_torque_N_m=0.4),
    ),
}
PAST = {
    Setting.FLOOR: math.pi / 4 + 0.25,
    Setting.WALL: math.pi / 2,
    Setting.CREST: 3 * math.pi / 4 + 0.1,
    Setting.FLAT: math.pi / 2,
}
"""Where the body needs the wheel no longer: past top dead centre, of the floor's case that is off
centre too (0.16 rad beyond 45 degrees), or at the end of the turn."""


@pytest.mark.parametrize("name", sorted(CASES))
def test_held_threshold(name: str) -> None:
    """One part in a thousand below the threshold MuJoCo's body turns back before the top, above it
    goes on."""
    setting, kind = CASES[name]
    w_min = pivot_threshold(kind, FACE[setting], 1, setting).w_min_rad_s
    machine = hinged(kind, setting, 2e-5)
    until = PAST[setting]
    below, above = (furthest_rad(machine, kind, w_min * part, until) for part in (0.999, 1.001))
    assert below < until <= above


def test_fallen_short_by_as_much() -> None:
    """At 0.9 of the threshold the body turns back at the same angle, to 0.1 %."""
    for setting in (Setting.FLOOR, Setting.WALL, Setting.CREST):
        kind = kind_with(magnet_torque_N_m=0.05)
        speed = 0.9 * pivot_threshold(kind, FACE[setting], 1, setting).w_min_rad_s
        ours = pivot(kind, speed, FACE[setting], setting=setting).peak_tilt_rad
        theirs = furthest_rad(hinged(kind, setting, 1e-5), kind, speed, 3.0)
        assert ours == pytest.approx(theirs, rel=1e-3)


def _free(friction: float) -> Kind:
    return kind_with(
        mass_kg=0.28,
        wheel_inertia_kg_m2=1.68e-5,
        brake_torque_N_m=0.4,
        held=False,
        floor_friction=friction,
    )


def _angle_after(kind: Kind, speed: float, step_s: float, until: float) -> float:
    """Where a free body is when it first passes ``until``, falls back, or after 0.7 s."""
    machine = free(kind, step_s)
    data = mujoco.MjData(machine.model)
    data.qvel[machine.wheel] = speed
    angle, highest = 0.0, 0.0
    while data.time < 0.7 and angle < until:
        mujoco.mj_step(machine.model, data)
        angle = float(data.qpos[machine.body])
        highest = max(highest, angle)
        if highest > 0.05 and angle < highest / 4:
            break
    return angle


@pytest.mark.parametrize("part", [0.6, 0.98, 1.02, 1.3])
def test_free_outcome(part: float) -> None:
    """On contacts that can stick, slide and lift, the same face comes up: to 2 % of the speed."""
    kind = _free(0.9)
    speed = part * pivot_threshold(kind).w_min_rad_s
    turned = _angle_after(kind, speed, 5e-5, 9.0)
    assert round(turned / (math.pi / 2)) == pivot(kind, speed).faces


@pytest.mark.parametrize("friction", [0.5, 0.9])
def test_second_face_of_a_free_module(friction: float) -> None:
    """It slides, leaves the floor, lands on a corner and goes on: to 1 % of MuJoCo's speed."""
    kind = _free(friction)
    over = pivot_threshold(kind).w_over_rad_s
    assert over is not None
    second = 3 * math.pi / 4
    below, above = (_angle_after(kind, over * part, 2e-5, second + 0.3) for part in (0.99, 1.01))
    assert below < second < above


@pytest.mark.parametrize("brake", [2.5, 0.6])
def test_rise_of_a_hop(brake: float) -> None:
    """How high the centre of mass rises at twice the speed that lifts it: to 5 %."""
    kind = kind_with(held=False, brake_torque_N_m=brake, floor_friction=0.9)
    speed = 1.5 * hop_threshold(kind).w_min_rad_s
    machine = free(kind, 2e-6)
    data = mujoco.MjData(machine.model)
    data.qvel[machine.wheel] = speed
    highest, z = 0.0, machine.model.joint("z").qposadr[0]
    while data.time < 0.15 and not (highest > 0.005 and data.qvel[z] < 0.0):
        mujoco.mj_step(machine.model, data)
        highest = max(highest, float(data.qpos[z]))
    assert pivot(kind, speed).rise_m == pytest.approx(highest, rel=0.05)


@pytest.mark.parametrize("times", [1.5, 8.0])
def test_twist(times: float) -> None:
    """An upright joint with the floor's friction in it turns through the angle from the threshold
    on, to 0.1 %."""
    tf = yaw_friction_N_m(kind_with())
    kind = kind_with(brake_torque_N_m=times * tf)
    w_min = twist_threshold(kind, 1.0).w_min_rad_s
    rubs: Callable[..., str] = RUBS.format
    step = 2e-5
    joint = f'<joint name="body" type="hinge" axis="0 1 0" {rubs(torque=tf, soft=2 * step)}/>'
    machine = _machine(kind, step, joint, ALONG)
    below, above = (furthest_rad(machine, kind, w_min * part, 1.0, 0.6) for part in (0.999, 1.001))
    assert below < 1.0 <= above
