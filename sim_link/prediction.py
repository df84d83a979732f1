"""What a person may know before a motion: the speed it needs, what it will do, what it costs.

Owns the question (a kind, a motion, perhaps a speed) and the answer in the trade's units. The
equations are those that the simulated fleet moves by (mechanics); the cell's share is battery.py's.
Knows no files and no screens.
"""

import math
from dataclasses import asdict, dataclass
from typing import Any, Final

from protocol.codes import Setting
from sim_link import mechanics
from sim_link.battery import motions_left
from sim_link.deed import FREE, HELD, Deed, setting_of
from sim_link.errors import SimStateError
from sim_link.kinds import Kind
from sim_link.mechanics import MotionResult, Threshold
from sim_link.mechanics.search import FACES_NEEDED
from sim_link.wheel import RPM_A_RAD_S

_OF_AN_EDGE: Final = {Setting.WALL: 4, Setting.CREST: 4}
"""Face up at which a wall's edge is the one that the floor's pivot turns about with face 1 up: so
``com_offset_m`` speaks of the same edge in every setting, turned with the body."""
_UPRIGHT: Final = 5
OVER_THE_LIMIT: Final = "it needs {needed:,.0f} rpm, and the wheel may turn at {limit:,.0f}"


@dataclass(frozen=True, slots=True)
class Question:
    """What is asked. ``speed_rpm`` None: at the least speed that does it; ``angle_deg``: how far a
    twist should turn."""

    kind: Kind
    deed: Deed
    speed_rpm: float | None = None
    angle_deg: float = 90.0


@dataclass(frozen=True, slots=True)
class Prediction:
    """The answer. None where there is no such figure.

    Speeds are of the wheel before braking: the least that does it, that of an ideal, instant brake,
    that from which a further face follows and that from which the body leaves the floor. The rest
    is at ``at_speed_rpm``: the time from the brake's command to the lock, the wheel's gentle rest,
    the body's angle at the lock, the wheel's energy, a hop's rise, what comes of it, and how many
    such motions a full cell has in it. ``torque_margin``: the brake's torque over the least that
    could do it. At the least speed, which lies between two outcomes, none is named.
    """

    feasible: bool
    reason: str
    w_min_rpm: float | None
    w_ideal_rpm: float | None
    w_over_rpm: float | None
    lift_off_rpm: float | None
    at_speed_rpm: float | None
    brake_ms: float | None
    rest_ms: float | None
    lock_angle_deg: float | None
    torque_margin: float | None
    wheel_energy_J: float | None
    hop_rise_mm: float | None
    turned_deg: float | None
    outcome: str | None
    motions_left: int | None
    inputs: dict[str, Any]


def predict(question: Question) -> Prediction:
    """Answer a question. Raises SimStateError for a speed that cannot be."""
    kind, needed = question.kind, threshold_of(question)
    reason, feasible = needed.reason, needed.feasible
    if feasible and needed.w_min_rad_s * RPM_A_RAD_S > kind.wheel_max_rpm:
        needed_rpm = needed.w_min_rad_s * RPM_A_RAD_S
        reason, feasible = OVER_THE_LIMIT.format(needed=needed_rpm, limit=kind.wheel_max_rpm), False
    speed_rad_s = _speed_rad_s(question, needed)
    motion = None if speed_rad_s is None else _motion(question, speed_rad_s)
    return Prediction(
        feasible=feasible,
        reason=reason,
        w_min_rpm=_rpm(needed.w_min_rad_s),
        w_ideal_rpm=_rpm(needed.w_ideal_rad_s),
        w_over_rpm=_rpm(needed.w_over_rad_s),
        lift_off_rpm=_rpm(needed.lift_off_rad_s),
        at_speed_rpm=_rpm(speed_rad_s),
        torque_margin=_number(needed.torque_margin),
        inputs=_inputs(question),
        **_of_motion(question, speed_rad_s, motion),
    )


def threshold_of(question: Question) -> Threshold:
    """What the mechanics says that the motion needs."""
    kind, deed = question.kind, question.deed
    if deed is Deed.HOP:
        return mechanics.hop_threshold(kind)
    if deed is Deed.TWIST:
        return mechanics.twist_threshold(kind, math.radians(question.angle_deg))
    setting = setting_of(deed)
    return mechanics.pivot_threshold(kind, _OF_AN_EDGE.get(setting, 1), 1, setting)


def _speed_rad_s(question: Question, needed: Threshold) -> float | None:
    if question.speed_rpm is not None:
        if not 0.0 < question.speed_rpm < math.inf:
            raise SimStateError(f"a speed of {question.speed_rpm} rpm: above zero is needed")
        return question.speed_rpm / RPM_A_RAD_S
    return needed.w_min_rad_s if needed.feasible else None


def _motion(question: Question, speed_rad_s: float) -> MotionResult | None:
    """What comes of the speed; None where the kind is not made for the motion at all."""
    kind, deed = question.kind, question.deed
    if deed is Deed.TWIST:
        return mechanics.twist(kind, speed_rad_s)
    if deed not in (HELD if kind.held else FREE):
        return None
    setting = setting_of(deed)
    return mechanics.pivot(kind, speed_rad_s, _OF_AN_EDGE.get(setting, 1), 1, setting=setting)


def _of_motion(
    question: Question, speed_rad_s: float | None, motion: MotionResult | None
) -> dict[str, Any]:
    """The figures that belong to one speed."""
    if speed_rad_s is None or motion is None:
        names = ("brake_ms", "rest_ms", "lock_angle_deg", "wheel_energy_J", "hop_rise_mm")
        return dict.fromkeys((*names, "turned_deg", "outcome", "motions_left"))
    kind, deed = question.kind, question.deed
    face_up = _UPRIGHT if deed.upright else 1
    hops, given = deed is Deed.HOP, question.speed_rpm is not None
    return {
        "brake_ms": motion.brake_s * 1e3,
        "rest_ms": mechanics.rest_s(kind, speed_rad_s, face_up) * 1e3,
        "lock_angle_deg": math.degrees(motion.lock_rad),
        "wheel_energy_J": 0.5 * kind.wheel_inertia_kg_m2 * speed_rad_s**2,
        "hop_rise_mm": motion.rise_m * 1e3 if hops else None,
        "turned_deg": math.degrees(motion.turned_rad) if given else None,
        "outcome": outcome(question, motion) if given else None,
        "motions_left": motions_left(kind, speed_rad_s),
    }


def outcome(question: Question, motion: MotionResult) -> str:
    """The verdict that such a motion would get: landed, short, over or stuck."""
    deed = question.deed
    if deed is Deed.TWIST:
        turned = math.degrees(motion.turned_rad)
        return "landed" if turned >= question.angle_deg else "short" if turned > 0.0 else "stuck"
    if motion.peak_tilt_rad == 0.0:
        return "stuck"
    if deed is Deed.HOP:
        return "landed" if motion.lift_rad_s > 0.0 else "short"
    needed = FACES_NEEDED[setting_of(deed)]
    return "landed" if motion.faces == needed else "over" if motion.faces > needed else "short"


def _inputs(question: Question) -> dict[str, Any]:
    asked: dict[str, Any] = {
        "motion": "pivot",
        "setting": setting_of(question.deed).name.lower(),
    }
    if question.deed in (Deed.HOP, Deed.TWIST):
        asked = {"motion": question.deed.name.lower()}
    if question.deed is Deed.TWIST:
        asked["angle_deg"] = question.angle_deg
    return {**asked, "speed_rpm": question.speed_rpm, "kind": asdict(question.kind)}


def _rpm(speed_rad_s: float | None) -> float | None:
    return None if speed_rad_s is None else _number(speed_rad_s * RPM_A_RAD_S)


def _number(value: float) -> float | None:
    return value if math.isfinite(value) else None
