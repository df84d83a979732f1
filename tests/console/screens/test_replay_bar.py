"""Replay: the bar, its keys, and that no order can be given."""

from typing import Any

import pytest
from textual.pilot import Pilot

from console.app import FleetApp
from console.widgets.replay_bar import SPEEDS, ReplayControls, next_speed
from tests.support.fake_fleet import (
    SECOND_NS,
    FakeFleet,
    FakePlayer,
    Steps,
    busy_view,
    eight,
    fleet_view,
    line_with,
    look,
    play,
    screen_lines,
    screen_text,
)


def replay(source: FakeFleet, player: FakePlayer, steps: Steps, **options: Any) -> None:
    """Run the app as a replay; the player must have all that the bar asks of one."""
    controls: ReplayControls = player
    play(source, steps, banner="REPLAY", controls=controls, **options)


def test_the_bar_shows_position_speed_and_keys_in_80_columns() -> None:
    player = FakePlayer()

    async def steps(app: FleetApp, _pilot: "Pilot[None]") -> None:
        line = line_with(app, "0:12:34 of 1:00:00")
        assert "| paused" in line
        assert "speed 1" in line
        # 754 s of 3600 s are 20.9 %: four of twenty cells.
        assert "[####................]" in line
        keys = line_with(app, "f5 play or pause")
        for piece in ("f6 slower", "f7 faster", "f8 one step", "f9 next fault"):
            assert piece in keys
        assert "REPLAY" in screen_lines(app)[0]
        assert player.advanced > 0

    replay(FakeFleet(busy_view()), player, steps)


def test_keys_drive_the_player_and_the_bar_follows() -> None:
    player = FakePlayer()

    async def steps(app: FleetApp, pilot: "Pilot[None]") -> None:
        await pilot.press("f5", "f7", "f7")
        await pilot.pause()
        assert player.playing
        assert "> playing" in line_with(app, "speed 4")
        await pilot.press("f6", "f8", "f9", "f5")
        await pilot.pause()
        assert "| paused" in line_with(app, "speed 2")
        assert player.asked == ["step", "next fault"]
        player.ended = True
        player.position_ns = 3600 * SECOND_NS
        await look(app, pilot)
        assert "[####################]" in line_with(app, "| ended")

    replay(FakeFleet(busy_view()), player, steps)


def test_the_order_line_is_closed_and_says_why() -> None:
    source = FakeFleet(fleet_view(*eight()))

    async def steps(app: FleetApp, pilot: "Pilot[None]") -> None:
        assert "a replay never transmits" in line_with(app, "order>")
        await pilot.press("a", "l", "l", "enter", "tab", "x", "enter")
        await pilot.pause()
        assert source.orders == []
        assert "a replay never transmits" in line_with(app, "order>")

    replay(source, FakePlayer(), steps)


def test_quitting_a_replay_asks_nothing_though_a_wheel_turned_then() -> None:
    async def steps(app: FleetApp, pilot: "Pilot[None]") -> None:
        await pilot.press("ctrl+q")
        await pilot.pause()
        assert app._exit is True

    replay(FakeFleet(busy_view()), FakePlayer(), steps)


def test_a_replay_that_stands_is_no_stuck_engine() -> None:
    source, player, now_ns = FakeFleet(fleet_view(*eight())), FakePlayer(), [0]

    async def steps(app: FleetApp, pilot: "Pilot[None]") -> None:
        now_ns[0] = 60 * SECOND_NS
        await look(app, pilot)
        assert "NOT ANSWERING" not in screen_text(app)

    replay(source, player, steps, clock_ns=lambda: now_ns[0])


def test_live_there_is_no_bar_and_its_keys_do_nothing() -> None:
    async def steps(app: FleetApp, pilot: "Pilot[None]") -> None:
        await pilot.press("f5", "f6", "f7", "f8", "f9")
        await look(app, pilot)
        assert "next fault" not in screen_text(app)
        line_with(app, "order>")

    play(FakeFleet(fleet_view(*eight())), steps)


@pytest.mark.parametrize(
    ("speed", "step", "result"),
    [
        (1.0, 1, 2.0),
        (1.0, -1, 0.5),
        (3.0, 1, 4.0),
        (3.0, -1, 2.0),
        (SPEEDS[-1], 1, SPEEDS[-1]),
        (SPEEDS[0], -1, SPEEDS[0]),
        (500.0, 1, SPEEDS[-1]),
    ],
)
def test_the_ladder_of_speeds(speed: float, step: int, result: float) -> None:
    assert next_speed(speed, step) == result
