"""Words and glyphs: how each state, activity and outcome reads on screen.

Owns the tables from a code to a glyph, a word and a tone, and the short texts for times and
speeds. Pure: knows no screen library. Every glyph is one ASCII character, because wider ones
are drawn one or two cells wide as the terminal pleases, and tables then lose their columns.
"""

from dataclasses import dataclass
from enum import StrEnum
from typing import Final

from console.view import ModuleView, Outcome
from protocol.codes import Activity, Flags

SILENT_NS: Final = 3_000_000_000
"""No word for so long is trouble: six telemetry messages in a row at 2 Hz."""
FRESH_NS: Final = 2_000_000_000
"""Ages below this read alike, so that a row of a module that keeps talking stays still."""
END_FACES: Final = frozenset({5, 6})
"""Faces at the ends of the wheel axis (protocol.message.Telemetry): up means axis upright."""
_SECOND_NS: Final = 1_000_000_000


class Tone(StrEnum):
    """How a piece of text is drawn; each is also told by its words, never by colour alone."""

    PLAIN = "plain"
    DIM = "dim"
    STRONG = "strong"
    GOOD = "good"
    MOVING = "moving"
    ALERT = "alert"
    BANNER = "banner"


Span = tuple[str, Tone]
Line = tuple[Span, ...]


@dataclass(frozen=True, slots=True)
class Word:
    """A glyph, the word beside it, and its tone."""

    glyph: str
    word: str
    tone: Tone

    @property
    def text(self) -> str:
        """Glyph and word as one text."""
        return f"{self.glyph} {self.word}"


OUTCOMES: Final[dict[Outcome, Word]] = {
    Outcome.LANDED: Word("+", "landed", Tone.GOOD),
    Outcome.SHORT: Word("<", "short", Tone.ALERT),
    Outcome.OVER: Word(">", "over", Tone.ALERT),
    Outcome.STUCK: Word("_", "stuck", Tone.ALERT),
    Outcome.ADRIFT: Word("%", "adrift", Tone.ALERT),
    Outcome.REFUSED: Word("x", "refused", Tone.DIM),
    Outcome.CUT: Word("/", "cut", Tone.DIM),
    Outcome.UNSEEN: Word("?", "unseen", Tone.DIM),
}

ACTIVITIES: Final[dict[int, Word]] = {
    Activity.STILL: Word(".", "still", Tone.DIM),
    Activity.SPINNING_UP: Word("^", "spin up", Tone.MOVING),
    Activity.HOLDING: Word("=", "holding", Tone.MOVING),
    Activity.RESTING: Word("v", "resting", Tone.MOVING),
    Activity.BRAKING: Word("X", "braking", Tone.MOVING),
    Activity.SETTLING: Word("~", "settling", Tone.MOVING),
    Activity.FLASHING: Word("*", "flashing", Tone.STRONG),
    Activity.STAGED: Word("|", "staged", Tone.STRONG),
}

FINE: Final = Word(" ", "ok", Tone.DIM)
UNHEARD: Final = Word("!", "unheard", Tone.ALERT)
SILENT: Final = Word("!", "silent", Tone.ALERT)
OVERSPEED: Final = Word("!", "overspeed", Tone.ALERT)
STOPPED: Final = Word("#", "stopped", Tone.STRONG)
BATTERY_LOW: Final = Word("!", "battery", Tone.ALERT)
TILTED: Final = Word("!", "tilted", Tone.ALERT)
UNSETTLED: Final = Word("!", "unsettled", Tone.ALERT)
FAULTY: Final = Word("!", "fault", Tone.ALERT)
LOCKED: Final = Word("L", "locked", Tone.STRONG)
STATES: Final = (
    FINE,
    STOPPED,
    LOCKED,
    UNHEARD,
    SILENT,
    OVERSPEED,
    FAULTY,
    BATTERY_LOW,
    TILTED,
    UNSETTLED,
)
_TROUBLE_BITS: Final = int(Flags.BATTERY_LOW | Flags.UNSETTLED | Flags.FAULTY)
_AT_REST: Final = frozenset({int(Activity.STILL), int(Activity.FLASHING), int(Activity.STAGED)})
_OUTRANKED_BY_STOP: Final = frozenset({BATTERY_LOW, TILTED, UNSETTLED})


def module_trouble(module: ModuleView, t_ns: int) -> Word | None:
    """The most pressing thing that is wrong with a module. At rest on no face it is tilted; one
    that still moves may be, so that is no trouble yet."""
    if module.heard_t_ns is None:
        return UNHEARD
    silent = t_ns - module.heard_t_ns >= SILENT_NS
    overspeed = 0 < module.wheel_max_rpm < abs(module.wheel_rpm)
    # A thousand modules are asked eight times a second, and nearly all of them are well.
    if not (silent or overspeed or module.flags & _TROUBLE_BITS or module.face_up == 0):
        return None
    still = module.activity == Activity.STILL
    tests = (
        (silent, SILENT),
        (overspeed, OVERSPEED),
        (bool(module.flags & Flags.FAULTY), FAULTY),
        (bool(module.flags & Flags.BATTERY_LOW), BATTERY_LOW),
        (still and module.face_up == 0, TILTED),
        (still and bool(module.flags & Flags.UNSETTLED), UNSETTLED),
    )
    return next((word for holds, word in tests if holds), None)


def module_state(module: ModuleView, t_ns: int) -> Word:
    """The one word for a module's line: trouble, a person's lock, the latch of an all-stop, or
    ok. What a lock or the latch hides here (battery, posture) is marked in its own column."""
    trouble = module_trouble(module, t_ns)
    if trouble is None or trouble in _OUTRANKED_BY_STOP:
        if module.flags & Flags.LOCKED_OUT:
            return LOCKED
        if module.latched:
            return STOPPED
    return trouble or FINE


def activity(module: ModuleView) -> Word:
    """What a module does; a code of a later wire version shows as its number."""
    known = ACTIVITIES.get(module.activity)
    return known or Word("?", f"code {module.activity}", Tone.STRONG)


def is_moving(module: ModuleView) -> bool:
    """Whether its wheel or its body moves, as last heard; unheard of, it counts as still."""
    return module.wheel_rpm != 0 or module.activity not in _AT_REST


def posture(module: ModuleView) -> str:
    """Which face is up, and where the wheel axis points."""
    if module.face_up == 0:
        return "- tilted"
    return f"{module.face_up} {'upright' if module.face_up in END_FACES else 'level'}"


def age_text(heard_t_ns: int | None, t_ns: int) -> str:
    """Age of the last word in at most six characters."""
    if heard_t_ns is None:
        return "never"
    age_ns = t_ns - heard_t_ns
    if age_ns < FRESH_NS:
        return "<2 s"
    seconds = age_ns // _SECOND_NS
    if seconds < 100:
        return f"{seconds} s"
    minutes = seconds // 60
    return f"{minutes} min" if minutes < 100 else f"{min(minutes // 60, 9999)} h"


def session_time(t_ns: int) -> str:
    """Time since the session's opening, h:mm:ss."""
    seconds = max(t_ns, 0) // _SECOND_NS
    return f"{seconds // 3600}:{seconds // 60 % 60:02d}:{seconds % 60:02d}"


def speed_bar(speed_rpm: int, limit_rpm: int, width: int) -> str:
    """Wheel speed against its limit in plain characters; a full bar ends in ``!`` past it."""
    if limit_rpm <= 0:
        return "?" * width if speed_rpm else "." * width
    part = abs(speed_rpm) / limit_rpm
    if part > 1:
        return "#" * (width - 1) + "!"
    filled = max(int(part * width), 1 if speed_rpm else 0)
    return "#" * filled + "." * (width - filled)


def printable(text: str) -> str:
    """Replace what a terminal might act upon: names and texts from a link are not to be
    trusted with control characters."""
    if text.isprintable():
        return text
    return "".join(character if character.isprintable() else "?" for character in text)
