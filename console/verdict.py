"""The verdict: from the facts that a module measured to the outcome of its motion.

Owns the thresholds and their order. Must not know records, tables or who ordered what: facts
stay as they were measured, and a verdict can be drawn from them again at any time.
"""

from collections.abc import Callable
from typing import Final

from console.view import Outcome
from protocol.codes import Reason
from protocol.message import Facts

STEP_DDEG: Final = 900
"""One face of a cube is a quarter turn, in tenths of a degree."""

LIFT_DDEG: Final = 20
"""Peak tilt, or flat on a face the angle turned, below which the body never left its place.
Play of the hinge, the give of a soft floor and the noise of the accelerometer at the jolt of the
brake stay under one degree (common practice of the trade: twice the noise); a body that lifts at
all goes well past two."""

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


def _adrift(facts: Facts) -> bool:
    tipped = (facts.face_before in END_FACES) != (facts.face_after in END_FACES)
    return not facts.settled or facts.face_after == 0 or tipped


def _never_moved(facts: Facts) -> bool:
    # With the axis upright the body turns flat on its face: tilt stays nothing all the while.
    flat = facts.face_before in END_FACES
    return abs(facts.turned_ddeg if flat else facts.peak_tilt_ddeg) < LIFT_DDEG


_VERDICTS: Final[tuple[tuple[Outcome, Callable[[Facts], bool]], ...]] = (
    (Outcome.CUT, _cut_before_brake),
    (Outcome.ADRIFT, _adrift),
    (Outcome.STUCK, _never_moved),
    (Outcome.OVER, lambda facts: faces_turned(facts) >= 2),
    (Outcome.LANDED, lambda facts: faces_turned(facts) == 1),
)
"""The first that holds is the verdict; where none does, the body lifted and fell back."""


def verdict(facts: Facts) -> Outcome:
    """Draw the outcome of a motion from its facts. Pure; never UNSEEN or REFUSED."""
    return next((outcome for outcome, holds in _VERDICTS if holds(facts)), Outcome.SHORT)
