"""The floor pivot against the general physics library MuJoCo, models built here.

Its wheel brake is dry friction in the joint (`frictionloss`), a torque of limited size that
holds the wheel once it has caught it, and its contacts are slightly soft: an independent
statement of the same machine.
"""

import math
from typing import Any

import pytest

from sim_link.kinds import Kind
from sim_link.mechanics import pivot, pivot_threshold
from tests.support.kinds import kind_with

mujoco = pytest.importorskip("mujoco", reason="needs the extra 'reference'")
pytestmark = pytest.mark.reference

BODY = """
<mujoco>
  <compiler angle="radian"/>
  <option timestep="{step}" gravity="0 0 -9.81" integrator="implicitfast" cone="elliptic"
          iterations="200" tolerance="1e-12" impratio="10"/>
  <worldbody>
    {floor}
    <body name="module" pos="0 0 {half}">
      {joints}
      <inertial pos="0 0 0" mass="{mass}" diaginertia="{inertia} {inertia} {inertia}"/>
      {shape}
      <body name="wheel">
        <joint name="wheel" type="hinge" axis="0 1 0" frictionloss="{brake}" armature="0"
               solreffriction="{soft} 1" solimpfriction="0.9999 0.9999 0.001 0.5 2"/>
        <inertial pos="0 0 0" mass="1e-9" diaginertia="{wheel} {wheel} {wheel}"/>
      </body>
    </body>
  </worldbody>
</mujoco>
"""


def _model(kind: Kind, step_s: float) -> Any:
    half = kind.side_m / 2
    inertia = kind.mass_kg * kind.side_m**2 / 6 - kind.wheel_inertia_kg_m2
    hinge = f'<joint name="body" type="hinge" axis="0 1 0" pos="{half} 0 {-half}"/>'
    slides = (
        '<joint name="x" type="slide" axis="1 0 0"/><joint name="z" type="slide" axis="0 0 1"/>'
        '<joint name="body" type="hinge" axis="0 1 0"/>'
    )
    contact = f'friction="{kind.floor_friction} 0 0" condim="3" solref="{4 * step_s} 1"'
    box = f'<geom type="box" size="{half} {half} {half}" mass="0" {contact}/>'
    return mujoco.MjModel.from_xml_string(
        BODY.format(
            step=step_s,
            soft=2 * step_s,
            half=half,
            floor="" if kind.held else f'<geom type="plane" size="5 5 1" {contact}/>',
            joints=hinge if kind.held else slides,
            shape="" if kind.held else box,
            mass=kind.mass_kg,
            inertia=inertia,
            wheel=kind.wheel_inertia_kg_m2,
            brake=kind.brake_torque_N_m,
        )
    )


def _angle_after(kind: Kind, speed: float, step_s: float, until: float, longest_s: float) -> float:
    """Body angle when it first passes ``until``, falls back to the start, or time is up."""
    model = _model(kind, step_s)
    data = mujoco.MjData(model)
    body, wheel = (model.joint(name) for name in ("body", "wheel"))
    data.qvel[wheel.dofadr[0]] = speed
    angle, highest = 0.0, 0.0
    while data.time < longest_s and angle < until:
        mujoco.mj_step(model, data)
        angle = float(data.qpos[body.qposadr[0]])
        highest = max(highest, angle)
        if highest > 0.05 and angle < highest / 4:
            break
    return angle


HINGED = {
    "weak brake": kind_with(brake_torque_N_m=0.16),
    "strong brake": kind_with(brake_torque_N_m=2.0),
    "large": kind_with(side_m=0.1, mass_kg=1.1, wheel_inertia_kg_m2=1.6e-4, brake_torque_N_m=2.5),
}


@pytest.mark.parametrize("name", sorted(HINGED))
def test_held_threshold(name: str) -> None:
    """Three parts in a thousand below the threshold MuJoCo's body falls back, above it passes
    top dead centre."""
    kind = HINGED[name]
    w_min = pivot_threshold(kind).w_min_rad_s
    below, above = (
        _angle_after(kind, w_min * part, 2e-5, math.pi / 4 + 0.2, 1.5) for part in (0.997, 1.003)
    )
    assert below < math.pi / 4 < above


def _free(friction: float) -> Kind:
    return kind_with(
        mass_kg=0.28,
        wheel_inertia_kg_m2=1.68e-5,
        brake_torque_N_m=0.4,
        held=False,
        floor_friction=friction,
    )


@pytest.mark.parametrize("part", [0.6, 0.97, 0.995, 1.005, 1.03, 1.3])
def test_free_outcome(part: float) -> None:
    """On contacts that can stick, slide and lift, the same face comes up."""
    kind = _free(0.9)
    speed = part * pivot_threshold(kind).w_min_rad_s
    turned = _angle_after(kind, speed, 5e-5, 9.0, 0.7)
    assert round(turned / (math.pi / 2)) == pivot(kind, speed).faces


@pytest.mark.parametrize("friction", [0.5, 0.9])
def test_second_face_of_a_free_module(friction: float) -> None:
    """It slides, leaves the floor, lands on a corner and goes on: to 1 % of MuJoCo's speed."""
    kind = _free(friction)
    over = pivot_threshold(kind).w_over_rad_s
    assert over is not None
    second = 3 * math.pi / 4
    below, above = (
        _angle_after(kind, over * part, 2e-5, second + 0.3, 0.7) for part in (0.99, 1.01)
    )
    assert below < second < above
