"""The help: complete, narrow enough, opened by key and by word."""

from textual.pilot import Pilot

from console.app import FleetApp
from console.orders import parse_order
from console.screens.help import ORDERS, help_text
from console.widgets.status import STOP_KEY
from console.widgets.words import ACTIVITIES, OUTCOMES, STATES
from tests.support.fake_fleet import (
    NAMES,
    FakeFleet,
    eight,
    fleet_view,
    line_with,
    look,
    play,
    screen_text,
)

DESK_WORDS = ("stop", "clear")


def test_every_glyph_and_word_is_explained() -> None:
    text = help_text()
    for word in (*OUTCOMES.values(), *ACTIVITIES.values(), *STATES):
        assert word.text.strip() in text


def test_it_fits_80_columns() -> None:
    assert max(map(len, help_text().splitlines())) <= 77


def test_it_says_what_to_do_when_the_screen_is_frozen() -> None:
    text = help_text()
    frozen = text[text.index("FROZEN") : text.index("ORDERS")]
    assert STOP_KEY in frozen
    assert "pkill -TERM tumblewire" in frozen


def test_its_example_orders_are_orders() -> None:
    examples = [line[2:34].strip() for line in ORDERS.splitlines()]
    orders = [each for each in examples if not each.startswith(DESK_WORDS)]
    assert len(orders) == 9
    for text in orders:
        parse_order(text, NAMES)


def test_a_typed_help_opens_it_and_both_keys_close_it() -> None:
    async def steps(app: FleetApp, pilot: "Pilot[None]") -> None:
        for close in ("escape", "f1"):
            await pilot.press(*"help", "enter")
            await look(app, pilot)
            assert "KEYS" in screen_text(app)
            line_with(app, "escape or f1 back")
            line_with(app, "link open")
            await pilot.press(close)
            await look(app, pilot)
            line_with(app, "order>")

    play(FakeFleet(fleet_view(*eight())), steps)


def test_it_scrolls_to_its_end_in_24_lines() -> None:
    async def steps(app: FleetApp, pilot: "Pilot[None]") -> None:
        await pilot.press("f1")
        await look(app, pilot)
        assert "licensed practice" not in screen_text(app)
        await pilot.press(*["pagedown"] * 6)
        await look(app, pilot)
        line_with(app, "licensed practice")

    play(FakeFleet(fleet_view(*eight())), steps)
