"""Replay bar: play, speed, step, next fault, and the position in time, under any screen.

Owns its line and what it needs of a player (ReplayControls). Knows no log.
"""

from typing import Final, Protocol

from console.widgets.lines import Lines
from console.widgets.picture import Part, fit
from console.widgets.words import Tone, session_time

SPEEDS: Final = (0.25, 0.5, 1.0, 2.0, 4.0, 8.0, 16.0, 32.0, 64.0)
BAR_CELLS: Final = 20
KEYS: Final = (
    ("f5", "play or pause"),
    ("f6", "slower"),
    ("f7", "faster"),
    ("f8", "one step"),
    ("f9", "next fault"),
)


class ReplayControls(Protocol):
    """What the bar needs of a player. Positions are the session's nanoseconds from its start;
    ``speed`` is session seconds per second."""

    @property
    def playing(self) -> bool:
        """Whether time runs."""
        ...

    @property
    def speed(self) -> float:
        """Session seconds per second."""
        ...

    @property
    def position_ns(self) -> int:
        """Where it stands."""
        ...

    @property
    def length_ns(self) -> int:
        """How long the session is."""
        ...

    @property
    def ended(self) -> bool:
        """Whether the last record has been shown."""
        ...

    def toggle(self) -> object:
        """Play, or pause."""
        ...

    def set_speed(self, speed: float, /) -> object:
        """Set session seconds per second."""
        ...

    def step(self) -> object:
        """Show one more record, paused."""
        ...

    def next_fault(self) -> object:
        """Go to the next thing that went wrong, paused."""
        ...

    def advance(self, now_ns: int, /) -> object:
        """Take the real time, monotonic nanoseconds; show what is due."""
        ...


def next_speed(speed: float, step: int) -> float:
    """The next faster (1) or slower (-1) speed of the ladder, or its end."""
    if step > 0:
        return next((each for each in SPEEDS if each > speed), SPEEDS[-1])
    return next((each for each in reversed(SPEEDS) if each < speed), SPEEDS[0])


class ReplayBar(Lines):
    """One line of state and one of keys."""

    DEFAULT_CSS = "ReplayBar { height: 2; background: $panel; }"

    def show_controls(self, controls: ReplayControls) -> None:
        """Show where the player stands."""
        width = self.size.width - 2
        lines = (fit(_state_parts(controls), width), fit(_key_parts(), width))
        self.show(tuple(((" ", Tone.PLAIN), *line) for line in lines))


def _state_parts(controls: ReplayControls) -> list[Part]:
    going = "> playing" if controls.playing else "| paused"
    state = "| ended" if controls.ended else going
    length = max(controls.length_ns, 1)
    filled = min(max(controls.position_ns * BAR_CELLS // length, 0), BAR_CELLS)
    times = f"{session_time(controls.position_ns)} of {session_time(controls.length_ns)}"
    return [
        Part("replay", Tone.DIM),
        Part(f"{state:9}", Tone.STRONG),
        Part(f"speed {controls.speed:g}", Tone.PLAIN),
        Part(times, Tone.PLAIN),
        Part("[" + "#" * filled + "." * (BAR_CELLS - filled) + "]", Tone.DIM, 1),
    ]


def _key_parts() -> list[Part]:
    return [Part(f"{key} {what}", Tone.PLAIN) for key, what in KEYS]
