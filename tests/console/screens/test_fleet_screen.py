"""The Fleet screen as a person sees it: rows, orders, narrow and wide, many modules."""

from dataclasses import replace
from pathlib import Path

import pytest
from textual.pilot import Pilot

from console.app import POLL_S, FleetApp
from console.widgets.fleet_table import FleetTable
from console.widgets.lines import Lines
from tests.support.fake_fleet import (
    FakeFleet,
    busy_view,
    eight,
    fleet_view,
    line_with,
    look,
    module,
    play,
    screen_lines,
    screen_text,
    typed,
)


def test_every_module_has_its_line_with_glyph_and_word() -> None:
    async def steps(app: FleetApp, _pilot: "Pilot[None]") -> None:
        assert line_with(app, "birch    ok").split()[:5] == ["birch", "ok", "^", "spin", "up"]
        assert "4310/9000" in line_with(app, "birch    ok")
        assert "-7000/9000" in line_with(app, "= holding")
        assert "5 upright" in line_with(app, "= holding")
        assert "17 s" in line_with(app, "cedar  ! silent")
        assert "3.31 V!" in line_with(app, "hazel  ! battery")
        assert "- tilted" in line_with(app, "larch  ! tilted")
        assert "++<+>_+%" in line_with(app, "^ spin up")
        assert "SIMULATED" in screen_lines(app)[0]

    play(FakeFleet(busy_view()), steps)


def test_80_by_24_shows_all_parts_without_a_line_too_long() -> None:
    async def steps(app: FleetApp, _pilot: "Pilot[None]") -> None:
        lines = screen_lines(app)
        assert all(len(line) == 80 for line in lines)
        for piece in ("link open", "log writing", "ctrl+g ALL-STOP", "f1 help", "ctrl+q quit"):
            assert piece in screen_text(app)
        line_with(app, "+ landed < short > over _ stuck % adrift x refused / cut ? unseen")
        line_with(app, "order>")
        line_with(app, "over, 2 faces")

    play(FakeFleet(busy_view()), steps)


def test_160_by_50_uses_the_room() -> None:
    async def steps(app: FleetApp, _pilot: "Pilot[None]") -> None:
        line_with(app, "pivot forward at 5200 on floor")
        assert "##########" not in line_with(app, "^ spin up")
        assert "#####" in line_with(app, "^ spin up")
        assert "pebble" in line_with(app, "^ spin up")
        assert "62%" in line_with(app, "! silent ")
        line_with(app, "cedar silent, hazel battery, larch tilted")
        line_with(app, "restarted since last seen")

    play(FakeFleet(busy_view()), steps, size=(160, 50))


def test_a_changed_terminal_size_brings_columns_back() -> None:
    async def steps(app: FleetApp, pilot: "Pilot[None]") -> None:
        assert "signal" not in screen_text(app)
        await pilot.resize_terminal(160, 40)
        await look(app, pilot)
        assert "signal" in screen_text(app)
        await pilot.resize_terminal(60, 24)
        await look(app, pilot)
        assert "outcomes:" in screen_text(app)
        assert all(len(line) == 60 for line in screen_lines(app))
        assert "heard" not in line_with(app, "name ")

    play(FakeFleet(busy_view()), steps)


def test_only_the_changed_row_is_drawn_again(monkeypatch: pytest.MonkeyPatch) -> None:
    source = FakeFleet(fleet_view(*eight()))
    drawn: list[int] = []
    draw = FleetTable.render_line
    monkeypatch.setattr(
        FleetTable, "render_line", lambda self, y: (drawn.append(y), draw(self, y))[1]
    )

    async def steps(app: FleetApp, pilot: "Pilot[None]") -> None:
        drawn.clear()
        source.change(3, wheel_rpm=1234, activity=1)
        source.change(6, battery_V=3.9)
        await look(app, pilot)
        assert sorted(drawn) == [2, 5]
        assert "1234/9000" in line_with(app, "cedar    ok")

    play(source, steps)


def test_nothing_is_drawn_while_time_passes_and_nothing_changes(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    source = FakeFleet(busy_view())
    drawn: list[str] = []
    for widget in (FleetTable, Lines):
        draw = widget.render_line
        monkeypatch.setattr(
            widget,
            "render_line",
            lambda self, y, draw=draw: (drawn.append(f"{self} {y}"), draw(self, y))[1],
        )

    async def steps(app: FleetApp, pilot: "Pilot[None]") -> None:
        drawn.clear()
        for _ in range(4):
            source.pass_time(0.5)
            await look(app, pilot)
        assert drawn == []

    play(source, steps)


def test_the_screen_looks_at_its_source_by_itself() -> None:
    source = FakeFleet(fleet_view(*eight()))

    async def steps(app: FleetApp, pilot: "Pilot[None]") -> None:
        source.change(3, wheel_rpm=1234, activity=1)
        await pilot.pause(3 * POLL_S)
        assert "1234/9000" in line_with(app, "cedar    ok")

    assert POLL_S == 1 / 8
    play(source, steps, poll_s=POLL_S)


def test_an_order_is_given_and_its_result_shown() -> None:
    source = FakeFleet(fleet_view(*eight()))

    async def steps(app: FleetApp, pilot: "Pilot[None]") -> None:
        await pilot.press(*"birch", "space", *"rest")
        assert "birch rest" in line_with(app, "order>")
        await pilot.press("enter")
        await pilot.pause()
        assert source.orders == ["birch rest"]
        line_with(app, "ok: order 1: birch rest (1 command)")
        assert "birch rest" not in line_with(app, "order>")

    play(source, steps)


def test_a_refusal_is_shown_with_its_reason() -> None:
    source = FakeFleet(fleet_view(*eight()))
    source.refuse = "elm: over the speed limit (9000 rpm)"

    async def steps(app: FleetApp, pilot: "Pilot[None]") -> None:
        await typed(pilot, "elm rest")
        await pilot.press("enter")
        await pilot.pause()
        line_with(app, "! refused: elm rest -- elm: over the speed limit (9000 rpm)")
        assert source.orders == []

    play(source, steps)


def test_an_empty_line_gives_no_order() -> None:
    source = FakeFleet(fleet_view(*eight()))

    async def steps(_app: FleetApp, pilot: "Pilot[None]") -> None:
        await pilot.press("enter", "space", "enter")
        await pilot.pause()
        assert source.orders == []

    play(source, steps)


def test_up_and_down_bring_orders_back() -> None:
    source = FakeFleet(fleet_view(*eight()))

    async def steps(app: FleetApp, pilot: "Pilot[None]") -> None:
        for order in ("all rest", "elm rest"):
            await typed(pilot, order)
            await pilot.press("enter")
        await typed(pilot, "be")
        await pilot.press("up", "up")
        await pilot.pause()
        assert "order> all rest" in line_with(app, "order>")
        await pilot.press("down", "down")
        await pilot.pause()
        assert "order> be" in line_with(app, "order>")
        await pilot.press("up", "enter")
        await pilot.pause()
        assert source.orders == ["all rest", "elm rest", "elm rest"]

    play(source, steps)


def test_tab_and_right_arrow_complete() -> None:
    source = FakeFleet(fleet_view(*eight()))

    async def steps(app: FleetApp, pilot: "Pilot[None]") -> None:
        await typed(pilot, "bi")
        await pilot.press("tab")
        await typed(pilot, "pi")
        await pilot.pause()
        await pilot.press("right")
        await pilot.pause()
        assert "order> birch pivot" in line_with(app, "order>")
        await pilot.press("space")
        await pilot.pause()
        assert "forward" in line_with(app, "next:")
        assert "back" in line_with(app, "next:")

    play(source, steps)


def test_tab_on_an_empty_line_goes_to_the_table_and_enter_names_a_module() -> None:
    source = FakeFleet(fleet_view(*eight()))

    async def steps(app: FleetApp, pilot: "Pilot[None]") -> None:
        await pilot.press("tab", "down", "down", "enter")
        await pilot.pause()
        assert "order> cedar" in line_with(app, "order>")
        line_with(app, ">cedar")
        await typed(pilot, " rest")
        await pilot.press("enter")
        await pilot.pause()
        assert source.orders == ["cedar rest"]

    play(source, steps)


def test_a_click_puts_the_cursor_there_and_orders_nothing() -> None:
    async def steps(app: FleetApp, pilot: "Pilot[None]") -> None:
        await pilot.click(FleetTable, offset=(5, 3))
        await look(app, pilot)
        line_with(app, ">elm")
        assert "elm" not in line_with(app, "order>")

    play(FakeFleet(fleet_view(*eight())), steps)


def test_typing_in_the_table_goes_to_the_order_line() -> None:
    async def steps(app: FleetApp, pilot: "Pilot[None]") -> None:
        await pilot.press("tab", "e", "l", "m")
        await pilot.pause()
        assert "order> elm" in line_with(app, "order>")

    play(FakeFleet(fleet_view(*eight())), steps)


def test_a_clear_by_number_lifts_the_stop_and_a_wrong_one_does_not() -> None:
    source = FakeFleet(fleet_view(*eight()))
    source.stop("test")

    async def steps(app: FleetApp, pilot: "Pilot[None]") -> None:
        line_with(app, "lift: clear 1")
        await typed(pilot, "clear 7")
        await pilot.press("enter")
        await pilot.pause()
        line_with(app, "refused: clear 7 -- all-stop 7 is not the newest: clear 1")
        await typed(pilot, "clear 1")
        await pilot.press("enter")
        await look(app, pilot)
        assert source.cleared == [(1, "Ida")]
        line_with(app, "all-stop not in force")

    play(source, steps)


def test_a_thousand_modules_scroll_under_a_fixed_header() -> None:
    source = FakeFleet(fleet_view(*(module(n, f"m{n:04}") for n in range(1, 1001))))

    async def steps(app: FleetApp, pilot: "Pilot[None]") -> None:
        assert "m0001" in screen_text(app)
        await pilot.press(*["pagedown"] * 5)
        await look(app, pilot)
        assert "m0001" not in screen_text(app)
        line_with(app, "rpm/limit")
        await pilot.press("tab", "end")
        await look(app, pilot)
        line_with(app, ">m1000")
        source.change(1000, wheel_rpm=777, activity=1)
        await look(app, pilot)
        assert "777/9000" in line_with(app, ">m1000")
        await pilot.press("home")
        await look(app, pilot)
        line_with(app, ">m0001")

    play(source, steps)


def test_f3_goes_to_trouble_far_down_the_table() -> None:
    source = FakeFleet(fleet_view(*(module(n, f"m{n:04}") for n in range(1, 301))))
    source.change(250, face_up=0)

    async def steps(app: FleetApp, pilot: "Pilot[None]") -> None:
        await pilot.press("f3")
        await look(app, pilot)
        assert "! tilted" in line_with(app, ">m0250")

    play(source, steps)


def test_f3_says_where_nothing_is_wrong() -> None:
    async def steps(app: FleetApp, pilot: "Pilot[None]") -> None:
        await pilot.press("f3")
        await pilot.pause()
        line_with(app, "no module is in trouble")

    play(FakeFleet(fleet_view(*eight())), steps)


def test_modules_that_come_later_get_their_lines() -> None:
    source = FakeFleet(fleet_view())

    async def steps(app: FleetApp, pilot: "Pilot[None]") -> None:
        line_with(app, "none heard yet")
        source.now = fleet_view(*eight()[:2], module(3, "long-name-12"))
        await look(app, pilot)
        line_with(app, "long-name-12   ok")
        line_with(app, "modules 3  nothing moves")

    play(source, steps)


def test_log_trouble_and_a_lost_link_come_into_sight() -> None:
    source = FakeFleet(fleet_view(*eight()))

    async def steps(app: FleetApp, pilot: "Pilot[None]") -> None:
        source.trouble = "disk full"
        source.now = replace(source.now, links=(replace(source.now.links[0], state="lost"),))
        await look(app, pilot)
        assert "! LOG NOT WRITING: disk full" in screen_lines(app)[0]
        assert "! link LOST sim://" in screen_lines(app)[0]

    play(source, steps)


def test_a_stuck_engine_is_called_out() -> None:
    source = FakeFleet(fleet_view(*eight()))
    now_ns = [0]

    async def steps(app: FleetApp, pilot: "Pilot[None]") -> None:
        assert "NOT ANSWERING" not in screen_text(app)
        now_ns[0] = 4_500_000_000
        await look(app, pilot)
        line_with(app, "CONSOLE NOT ANSWERING for 4 s")
        source.pass_time(1)
        await look(app, pilot)
        assert "NOT ANSWERING" not in screen_text(app)

    play(source, steps, clock_ns=lambda: now_ns[0])


def test_names_from_the_link_cannot_drive_the_terminal() -> None:
    source = FakeFleet(fleet_view(module(1, "\x1b[2Jbad", wheel_rpm=5), notices=((0, "a\x07b"),)))

    async def steps(app: FleetApp, _pilot: "Pilot[None]") -> None:
        text = screen_text(app)
        assert "\x1b[2J" not in text
        assert "\x07" not in text
        line_with(app, "a?b")

    play(source, steps)


def test_without_colour_no_colour_is_sent_and_words_stay(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("NO_COLOR", "1")

    async def steps(app: FleetApp, _pilot: "Pilot[None]") -> None:
        styles = [
            segment.style
            for line in app.screen._compositor.render_strips()
            for segment in line
            if segment.style is not None
        ]
        colours = {style.color for style in styles} | {style.bgcolor for style in styles}
        assert {each.name for each in colours if each is not None} <= {"default"}
        assert any(style.reverse for style in styles)
        line_with(app, "! silent ")

    play(FakeFleet(busy_view()), steps)


def test_other_themes_work() -> None:
    async def steps(app: FleetApp, pilot: "Pilot[None]") -> None:
        for theme in ("textual-light", "nord", "gruvbox"):
            app.theme = theme
            await look(app, pilot)
            line_with(app, "larch  ! tilted")

    play(FakeFleet(busy_view()), steps)


def test_a_picture_can_be_taken(tmp_path: Path) -> None:
    async def steps(app: FleetApp, _pilot: "Pilot[None]") -> None:
        path = tmp_path / "fleet.svg"
        path.write_text(app.export_screenshot(), encoding="utf-8")
        assert "cedar" in path.read_text(encoding="utf-8")

    play(FakeFleet(busy_view()), steps, size=(160, 50))


def test_each_look_is_a_sign_of_life() -> None:
    source = FakeFleet(busy_view())

    async def steps(app: FleetApp, pilot: "Pilot[None]") -> None:
        before = source.beats
        await look(app, pilot)
        assert source.beats == before + 1

    play(source, steps)
