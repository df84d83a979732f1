"""The verdict: from the facts that a module measured to the outcome of its motion.

Owns the thresholds and their order, a table for each motion. Must not know records, tables or who
ordered what: facts stay as they were measured, and a verdict can be drawn from them again at any
time.

A pivot lands one face on, over a crest two. A hop lands if the body left its place and settled on a
face, whichever: facts do not say where on the floor it came down, so it has neither short nor over.
A twist lands if it turned by an eighth of a turn or more, either way: no order says yet how far it
should.
"""

from collections.abc import Callable
from typing import Final

from console.view import Outcome
from protocol.codes import Reason, Setting
from protocol.message import Facts

STEP_DDEG: Final = 900
"""One face of a cube is a quarter turn, in tenths of a degree."""

LIFT_DDEG: Final = 20
"""Peak tilt, or flat on a face the angle turned, below which the body never left its place.
Play of the hinge, the give of a soft floor and the noise of the accelerometer at the jolt of the
brake stay under one degree (common practice of the trade: twice the noise); a body that lifts at
all goes well past two."""

TWIST_DDEG: Final = 450
"""Angle turned from which a twist has landed: half a quarter turn, in tenths of a degree."""

END_FACES: Final = frozenset({5, 6})
"""Faces on the ends of the wheel axis. No motion about that axis leads onto or off them."""

COUNTED: Final = frozenset(
    {Outcome.LANDED, Outcome.SHORT, Outcome.OVER, Outcome.STUCK, Outcome.ADRIFT}
)
"""Outcomes that say something about the module, and so count in rates."""


def faces_turned(facts: Facts) -> int:
    """Whole faces turned, positive in the ordered direction.

    Rounded to the nearest quarter turn: a rate gyro's drift over one motion is some degrees and
    the floor's slope a few more, far less than the 45 degrees that would mislead. The angle is
    used and not the face that is up, since that one cannot tell one face from five.
    """
    return (facts.turned_ddeg + STEP_DDEG // 2) // STEP_DDEG


def _cut_before_brake(facts: Facts) -> bool:
    # A brake once engaged stays engaged, so a stop that comes after it changes nothing.
    braked = facts.brake_us or facts.wheel_at_brake_rpm
    return facts.reason != Reason.NONE and not braked


def _on_no_face(facts: Facts) -> bool:
    return not facts.settled or facts.face_after == 0


def _adrift(facts: Facts) -> bool:
    tipped = (facts.face_before in END_FACES) != (facts.face_after in END_FACES)
    return _on_no_face(facts) or tipped


def _never_moved(facts: Facts) -> bool:
    # With the axis upright the body turns flat on its face: tilt stays nothing all the while.
    flat = facts.face_before in END_FACES
    return abs(facts.turned_ddeg if flat else facts.peak_tilt_ddeg) < LIFT_DDEG


_Table = tuple[tuple[Outcome, Callable[[Facts], bool]], ...]


def _pivot(faces: int) -> _Table:
    """The table of a pivot that is to turn so many faces."""
    return (
        (Outcome.CUT, _cut_before_brake),
        (Outcome.ADRIFT, _adrift),
        (Outcome.STUCK, _never_moved),
        (Outcome.OVER, lambda facts: faces_turned(facts) > faces),
        (Outcome.LANDED, lambda facts: faces_turned(facts) == faces),
    )


_PIVOT: Final = _pivot(1)
_OVER_A_CREST: Final = _pivot(2)
_HOP: Final[_Table] = (
    (Outcome.CUT, _cut_before_brake),
    (Outcome.ADRIFT, _on_no_face),
    (Outcome.STUCK, _never_moved),
    (Outcome.LANDED, lambda facts: True),
)
_TWIST: Final[_Table] = (
    (Outcome.CUT, _cut_before_brake),
    (Outcome.ADRIFT, _adrift),
    (Outcome.STUCK, lambda facts: abs(facts.turned_ddeg) < LIFT_DDEG),
    (Outcome.LANDED, lambda facts: abs(facts.turned_ddeg) >= TWIST_DDEG),
)
_VERDICTS: Final[dict[str, _Table]] = {"pivot": _PIVOT, "hop": _HOP, "twist": _TWIST}
"""The first that holds is the verdict; where none does, the body moved and did not get there."""


def verdict(facts: Facts, motion: str = "pivot", setting: int = Setting.FLOOR) -> Outcome:
    """Draw the outcome of a motion from its facts. Pure; never UNSEEN or REFUSED.

    ``setting`` says for a pivot how far it should turn.
    """
    table = _VERDICTS.get(motion, _PIVOT)
    if table is _PIVOT and setting == Setting.CREST:
        table = _OVER_A_CREST
    return next((outcome for outcome, holds in table if holds(facts)), Outcome.SHORT)
