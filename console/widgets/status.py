"""Status: the lines at the top of every screen, in the order in which a person asks.

1. What am I looking at, and is the path whole: banner, session, link, log.
2. Can I stop it: the all-stop's key; in force: its number, who confirmed, who is missing, and
   how it is lifted.
3. Who moves, and is anything wrong.

Three lines and not one: at 80 columns one line has no room for the names of who is missing,
and the lines keep their places, so that nothing jumps when an all-stop comes.
Counts of frames and bytes are left out: they would change at every look.
"""

from collections.abc import Iterable, Sequence
from typing import Final

from rich.cells import cell_len

from console.view import FleetView
from console.widgets.lines import Lines
from console.widgets.picture import GAP, NEVER_TRANSMITS, Part, Picture, fit, names_within
from console.widgets.words import Tone

STOP_KEY: Final = "ctrl+g"
URL_CELLS: Final = 24


class Status(Lines):
    """Three lines: path, all-stop, motion and trouble."""

    DEFAULT_CSS = """
    Status { height: 3; dock: top; background: $panel; }
    """

    def show_picture(self, picture: Picture) -> None:
        """Take a new picture; refresh the lines that differ."""
        width = self.size.width - 2
        parts = (path_parts(picture), stop_parts(picture, width), fleet_parts(picture, width))
        self.show(tuple(((" ", Tone.PLAIN), *fit(each, width)) for each in parts))


def path_parts(picture: Picture) -> Iterable[Part]:
    """Banner, session, link, log."""
    view = picture.view
    if picture.banner:
        also = " of a simulated fleet" if picture.replay and view.simulated else ""
        yield Part(f" {picture.banner} ", Tone.BANNER)
        yield Part(also.strip(), Tone.STRONG)
    if picture.stale_s:
        yield Part(f"! CONSOLE NOT ANSWERING for {picture.stale_s} s", Tone.ALERT)
    yield from _link_parts(view, picture.replay)
    yield _log_part(picture)
    yield Part("sealed" if view.sealed else "", Tone.DIM, 2)
    yield Part("session closed" if view.closed else "", Tone.STRONG, 1)
    yield Part(f"session {view.opened_utc[:16].replace('T', ' ')} UTC", Tone.DIM, 2)
    yield Part(f"operator {picture.operator}" if picture.operator else "", Tone.DIM, 3)
    dropped = sum(link.dropped for link in view.links)
    yield Part(f"frames dropped {dropped}" if dropped else "", Tone.DIM, 4)


def _link_parts(view: FleetView, replay: bool) -> Iterable[Part]:
    if not view.links:
        yield Part("link none", Tone.ALERT)
        return
    bad = [link for link in view.links if link.state != "open"]
    tone = Tone.STRONG if replay or view.closed else Tone.ALERT
    for link in bad:
        yield Part(f"! link {link.state.upper()} {_shortened(link.url)}", tone)
    good = len(view.links) - len(bad)
    if good and len(view.links) > 1:
        yield Part(f"links open {good} of {len(view.links)}", Tone.PLAIN)
    elif good:
        yield Part("link open", Tone.PLAIN)


def _shortened(url: str) -> str:
    """So much of a long address that the log's trouble beside it stays in sight."""
    return url if len(url) <= URL_CELLS else url[: URL_CELLS - 1] + "~"


def _log_part(picture: Picture) -> Part:
    if picture.log_trouble:
        return Part(f"! LOG NOT WRITING: {picture.log_trouble}", Tone.ALERT)
    return Part("from the log" if picture.replay else "log writing", Tone.PLAIN)


def stop_parts(picture: Picture, width: int) -> Iterable[Part]:
    """The all-stop: its key, its state, how it is lifted."""
    stop = picture.view.stop
    if not stop.in_force:
        key = NEVER_TRANSMITS if picture.replay else f"{STOP_KEY} brings every wheel to rest"
        return [
            Part("all-stop not in force", Tone.PLAIN),
            Part(key, Tone.STRONG),
            Part(f"newest was {stop.stop_number}" if stop.stop_number else "", Tone.DIM, 1),
        ]
    count = len(stop.confirmed) + len(stop.missing)
    head = Part(f"# ALL-STOP {stop.stop_number} IN FORCE", Tone.BANNER)
    confirmed = Part(f"confirmed {len(stop.confirmed)}/{count}", Tone.STRONG)
    lift = Part("" if picture.replay else f"lift: clear {stop.stop_number}", Tone.PLAIN, 1)
    missing = _named("! missing", picture.missing, Tone.ALERT, width, head, confirmed, lift)
    return [head, confirmed, missing, lift]


def fleet_parts(picture: Picture, width: int) -> Iterable[Part]:
    """Who moves, who is in trouble."""
    count = len(picture.view.modules)
    if not count:
        return [Part("modules 0: none heard yet", Tone.STRONG)]
    head = Part(f"modules {count}", Tone.PLAIN)
    moving = Part("nothing moves", Tone.PLAIN)
    if picture.moving:
        moving = _named("moving", picture.moving, Tone.MOVING, width // 2, head)
    if not picture.wrong:
        return [head, moving, _nothing_wrong(picture)]
    named = [f"{name} {word}" for name, word in picture.wrong]
    return [head, moving, _named("! wrong", named, Tone.ALERT, width, head, moving)]


def _nothing_wrong(picture: Picture) -> Part:
    """Nothing is wrong with what was heard; without a link that is old news, and is said so."""
    links = picture.view.links
    whole = picture.replay or picture.view.closed or all(each.state == "open" for each in links)
    return Part("nothing wrong", Tone.PLAIN) if whole else Part("! as last heard", Tone.ALERT)


def _named(title: str, names: Sequence[str], tone: Tone, width: int, *beside: Part) -> Part:
    """A title, how many, and as many names as fit beside the other parts; empty for none."""
    if not names:
        return Part("", tone)
    taken = sum(cell_len(part.text) + len(GAP) for part in beside if part.text)
    counted = f"{title} {len(names)}"
    room = width - taken - len(counted) - len(": ")
    listed = names_within(names, room)
    return Part(f"{counted}: {listed}" if cell_len(listed) <= room else counted, tone)
