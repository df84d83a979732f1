"""A fleet's source that a test drives by hand, and a player for replays. No clocks, no threads."""

import asyncio
from collections.abc import Awaitable, Callable
from dataclasses import replace
from unittest.mock import patch

from textual import events
from textual.app import App
from textual.pilot import Pilot

from console.app import FleetApp
from console.errors import InputError
from console.orders import complete
from console.view import FleetView, LinkView, ModuleView, Outcome, StopView
from console.widgets.replay_bar import ReplayControls
from protocol.codes import SIMULATED_BIT

SECOND_NS = 1_000_000_000
NAMES = ("alder", "birch", "cedar", "elm", "hazel", "larch", "maple", "rowan")
NEVER_S = 3600.0
Steps = Callable[[FleetApp, "Pilot[None]"], Awaitable[None]]
NO_STOP = StopView(stop_number=0, in_force=False, confirmed=(), missing=())


def module(number: int, name: str, **changes: object) -> ModuleView:
    """A module at rest, heard a second before the fleet's time of one hour."""
    base = ModuleView(
        module=number,
        identity=SIMULATED_BIT | (0x1000 + number),
        simulated=True,
        address=0x0F + number,
        link=0,
        name=name,
        kind="paver" if number % 2 else "pebble",
        boot=7,
        epoch=1_760_000_000,
        wheel_max_rpm=9000,
        wheel_rpm=0,
        battery_V=4.02,
        temperature_C=23.5,
        face_up=1,
        activity=0,
        flags=0,
        latched=False,
        stop_number=0,
        heard_t_ns=3599 * SECOND_NS,
        signal=1.0,
        outcomes=(),
        doing="",
    )
    return replace(base, **changes)  # type: ignore[arg-type]


def fleet_view(*modules: ModuleView, **changes: object) -> FleetView:
    """A whole fleet one hour into its session, one link open."""
    base = FleetView(
        t_ns=3600 * SECOND_NS,
        opened_utc="2026-03-05T09:30:00Z",
        operator="Ida",
        epoch=1_760_000_000,
        simulated=False,
        modules=modules,
        links=(LinkView(0, "sim://?modules=8", "open", 100, 20, 0, 4000, 800),),
        stop=NO_STOP,
        notices=(),
        closed=False,
    )
    return replace(base, **changes)  # type: ignore[arg-type]


def eight() -> tuple[ModuleView, ...]:
    """The practice fleet's eight names, all at rest."""
    return tuple(module(number, name) for number, name in enumerate(NAMES, 1))


def busy_view() -> FleetView:
    """Eight modules of which each shows something else, with the outcomes of a morning."""
    landed, short = Outcome.LANDED, Outcome.SHORT
    alder, birch, cedar, elm, hazel, larch, maple, rowan = eight()
    mixed = (landed, landed, short, landed, Outcome.OVER, Outcome.STUCK, landed, Outcome.ADRIFT)
    return fleet_view(
        replace(alder, outcomes=(landed,) * 30),
        replace(
            birch,
            activity=1,
            wheel_rpm=4310,
            outcomes=mixed,
            doing="pivot forward at 5200 on floor, running",
        ),
        replace(cedar, heard_t_ns=3583 * SECOND_NS, signal=0.62, outcomes=(short, short)),
        replace(elm, activity=2, wheel_rpm=-7000, face_up=5, doing="spin back at 7000 for 5 s"),
        replace(hazel, flags=2, battery_V=3.31, outcomes=(landed, Outcome.REFUSED, Outcome.CUT)),
        replace(larch, face_up=0, flags=4, outcomes=(Outcome.ADRIFT,)),
        replace(maple, activity=6, doing="flash for 2 s", outcomes=(Outcome.UNSEEN,)),
        replace(rowan, face_up=3, kind="pebble", outcomes=mixed[::-1]),
        simulated=True,
        notices=(
            (3540 * SECOND_NS, "larch: restarted since last seen, boot 8"),
            (3583 * SECOND_NS, "cedar: no word for 2 s"),
            (3590 * SECOND_NS, "hazel: battery low, 3.31 V"),
            (3598 * SECOND_NS, "birch pivot forward at 5200: over, 2 faces"),
        ),
    )


class FakeFleet:
    """A FleetSource. ``refuse`` makes the next order fail with that text."""

    def __init__(self, view: FleetView) -> None:
        self.now = view
        self.trouble = ""
        self.orders: list[str] = []
        self.stops: list[str] = []
        self.cleared: list[tuple[int, str]] = []
        self.refuse = ""
        self.beats = 0

    def beat(self) -> None:
        """Count the signs of life."""
        self.beats += 1

    def view(self) -> FleetView:
        """The picture that the test has set."""
        return self.now

    def log_trouble(self) -> str:
        """What the test has set."""
        return self.trouble

    def order(self, text: str) -> str:
        """Note the order, or refuse it."""
        if self.refuse:
            raise InputError(self.refuse)
        self.orders.append(text)
        return f"order {len(self.orders)}: {text} (1 command)"

    def stop(self, source: str) -> None:
        """Note the stop and put it in force, confirmed by nobody yet."""
        self.stops.append(source)
        everybody = tuple(each.module for each in self.now.modules)
        newest = StopView(self.now.stop.stop_number + 1, True, (), everybody)
        self.now = replace(self.now, stop=newest)

    def clear(self, stop_number: int, source: str) -> None:
        """Note who cleared what and lift it."""
        self.cleared.append((stop_number, source))
        self.now = replace(self.now, stop=replace(self.now.stop, in_force=False))

    def change(self, number: int, **changes: object) -> None:
        """Change one module; the others stay the same objects."""
        modules = tuple(
            replace(each, **changes) if each.module == number else each  # type: ignore[arg-type]
            for each in self.now.modules
        )
        self.now = replace(self.now, modules=modules)

    def pass_time(self, seconds: float) -> None:
        """Let time pass with every module heard again, and nothing else new."""
        passed_ns = int(seconds * SECOND_NS)
        modules = tuple(
            replace(each, heard_t_ns=each.heard_t_ns + passed_ns)
            for each in self.now.modules
            if each.heard_t_ns is not None
        )
        self.now = replace(self.now, t_ns=self.now.t_ns + passed_ns, modules=modules)


class FakePlayer:
    """A player of one hour that only remembers what was asked of it."""

    def __init__(self) -> None:
        self.playing = False
        self.speed = 1.0
        self.position_ns = 754 * SECOND_NS
        self.length_ns = 3600 * SECOND_NS
        self.ended = False
        self.asked: list[str] = []
        self.advanced = 0

    def toggle(self) -> None:
        """Play or pause."""
        self.playing = not self.playing

    def set_speed(self, speed: float) -> None:
        """Take the speed."""
        self.speed = speed

    def step(self) -> None:
        """Note it."""
        self.asked.append("step")

    def next_fault(self) -> None:
        """Note it."""
        self.asked.append("next fault")

    def advance(self, now_ns: int) -> None:
        """Count the calls."""
        self.advanced += 1


def screen_lines(app: App[None]) -> list[str]:
    """The screen as a person sees it: every cell's character, line by line.

    Taken from what the compositor would send to a terminal, the dialogs above included; Textual
    has no public way to it but a picture.
    """
    height = app.size.height
    update = app.screen._compositor.render_update(full=True, screen_stack=app._background_screens)
    text = "".join(segment.text for segment in app.console.render(update) if not segment.control)
    lines = text.split("\n")
    assert len(lines) >= height, f"{len(lines)} lines drawn of {height}"
    return lines[:height]


def screen_text(app: App[None]) -> str:
    """The screen as one text, lines apart by a line break."""
    return "\n".join(screen_lines(app))


def line_with(app: App[None], piece: str) -> str:
    """The only line of the screen that holds ``piece``."""
    found = [line for line in screen_lines(app) if piece in line]
    assert len(found) == 1, f"{piece!r} stands in {len(found)} lines:\n{screen_text(app)}"
    return found[0]


def play(
    source: FakeFleet,
    steps: Steps,
    *,
    size: tuple[int, int] = (80, 24),
    banner: str = "",
    controls: ReplayControls | None = None,
    clock_ns: Callable[[], int] = lambda: 0,
    poll_s: float = NEVER_S,
) -> FleetApp:
    """Run the app without a terminal and do the steps once it has drawn itself.

    Its timer is put off, so that it looks at the source when the test says so and only then.
    """
    app = FleetApp(
        source,
        operator="Ida",
        banner=banner,
        controls=controls,
        completions=lambda text: complete(text, NAMES),
        clock_ns=clock_ns,
    )

    async def run() -> None:
        async with app.run_test(size=size) as pilot:
            await look(app, pilot)
            await steps(app, pilot)

    with patch("console.app.POLL_S", poll_s):
        asyncio.run(run())
    return app


async def look(app: FleetApp, pilot: "Pilot[None]") -> None:
    """Let what was asked of the screens be done, then have the app look at its source."""
    await pilot.pause()
    app.poll()
    await pilot.pause()


async def typed(pilot: "Pilot[None]", text: str) -> None:
    """Enter a text where the focus is, as a terminal pastes: one event, not one a key."""
    pilot.app.post_message(events.Paste(text))
    await pilot.pause()
