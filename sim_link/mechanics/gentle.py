"""Gentle torques: what must move nothing, so that a wheel brought to rest makes no module jump.

Owns the smallest torque that tips or turns a resting module, and the motor's share of it. Slowing a
wheel pushes the body in the wheel's sense, spinning it up pushes the other way. SI units.
"""

from functools import lru_cache
from typing import Final

from protocol.codes import Setting
from sim_link.kinds import Kind
from sim_link.mechanics.hold import hold_of
from sim_link.mechanics.search import check_posture
from sim_link.mechanics.twist import yaw_friction_N_m

GENTLE_PART: Final = 0.5
"""Of the tipping torque: the most that the motor uses."""
_LEVEL: Final = 4


@lru_cache(maxsize=4096)
def tipping_torque_N_m(kind: Kind, face_up: int, sense: int) -> float:
    """Smallest torque on the body about the wheel axis that moves the resting body.

    Faces 1 to 4: m g times the lever of the edge it would tip about, the offset turned with
    the body, plus the magnets' T0 if held; a held module may also hang beside a neighbour, where
    it would turn about the upper edge. Faces 5 and 6, axis upright: friction against yaw, or the
    hold of magnets about an upright edge where that is less.
    """
    check_posture(face_up, sense, 6)
    if face_up <= _LEVEL:
        settings = (Setting.FLOOR, Setting.WALL) if kind.held else (Setting.FLOOR,)
        holds = (hold_of(kind, face_up, sense, setting) for setting in settings)
        return min(float(hold.torque_N_m(0.0)) for hold in holds)
    yaw_N_m = yaw_friction_N_m(kind)
    about_edge_N_m = float(hold_of(kind, 1, sense, Setting.FLAT).torque_N_m(0.0))
    return min(yaw_N_m, about_edge_N_m) if about_edge_N_m > 0.0 else yaw_N_m


def rest_torque_N_m(kind: Kind, face_up: int, sense: int) -> float:
    """Torque with which the motor may slow the wheel: half the tipping torque, at most the
    motor's own. ``sense`` is the wheel's: slowing it pushes the body that way."""
    gentle_N_m = GENTLE_PART * tipping_torque_N_m(kind, face_up, sense)
    return min(gentle_N_m, kind.spin_up_torque_N_m)


def rest_s(kind: Kind, wheel_rad_s: float, face_up: int = 1, sense: int = 1) -> float:
    """Time in which the motor brings the wheel gently to a stop."""
    torque_N_m = rest_torque_N_m(kind, face_up, sense)
    return kind.wheel_inertia_kg_m2 * wheel_rad_s / torque_N_m
