"""Status lines: what they say, and that the pressing part survives in 80 columns."""

from dataclasses import replace

import pytest
from hypothesis import given
from hypothesis import strategies as st
from rich.cells import cell_len

from console.view import FleetView, LinkView, StopView
from console.widgets.picture import Part, Picture, fit, make_picture, names_within
from console.widgets.status import fleet_parts, path_parts, stop_parts
from console.widgets.words import Tone
from tests.support.fake_fleet import busy_view, eight, fleet_view, module

WIDTH = 78


def picture(view: FleetView, trouble: str = "", banner: str = "", stale_s: int = 0) -> Picture:
    return make_picture(view, trouble, banner=banner, operator="Ida", stale_s=stale_s)


def path(shown: Picture, width: int = WIDTH) -> str:
    return "".join(text for text, _ in fit(path_parts(shown), width))


def stop(shown: Picture, width: int = WIDTH) -> str:
    return "".join(text for text, _ in fit(stop_parts(shown, width), width))


def fleet(shown: Picture, width: int = WIDTH) -> str:
    return "".join(text for text, _ in fit(fleet_parts(shown, width), width))


def in_force(number: int, confirmed: int, missing: int) -> StopView:
    last = confirmed + missing + 1
    return StopView(number, True, tuple(range(1, confirmed + 1)), tuple(range(confirmed + 1, last)))


def test_all_is_well() -> None:
    shown = picture(fleet_view(*eight()))
    assert path(shown) == "link open  log writing  session 2026-03-05 09:30 UTC  operator Ida"
    assert stop(shown) == "all-stop not in force  ctrl+g brings every wheel to rest"
    assert fleet(shown) == "modules 8  nothing moves  nothing wrong"


def test_a_simulated_fleet_is_marked_even_where_nobody_said_so() -> None:
    assert "SIMULATED" in path(picture(fleet_view(*eight(), simulated=True)))
    assert "SIMULATED" not in path(picture(fleet_view(*eight(), simulated=False)))


def test_a_replay_says_so_and_of_what() -> None:
    shown = picture(fleet_view(*eight(), simulated=True), banner="REPLAY")
    assert "REPLAY" in path(shown)
    assert "of a simulated fleet" in path(shown)
    assert "a replay never transmits" in stop(shown)
    assert "ctrl+g" not in stop(shown)


def test_lost_link_and_log_trouble_stand_side_by_side_in_80_columns() -> None:
    lost = LinkView(0, "socket://10.0.0.7:5000/with/a/long/tail", "lost", 1, 1, 0, 1, 1)
    text = path(picture(fleet_view(*eight(), links=(lost,)), trouble="disk full"))
    assert "! link LOST socket://10.0.0.7:5000" in text
    assert "! LOG NOT WRITING: disk full" in text


def test_a_sealed_session_says_so() -> None:
    assert "sealed" not in path(picture(fleet_view(*eight())), 150)
    assert "sealed" in path(picture(fleet_view(*eight(), sealed=True)), 150)


def test_without_its_link_a_fleet_is_not_called_well() -> None:
    lost = LinkView(0, "a", "lost", 1, 1, 0, 1, 1)
    assert "nothing wrong" in fleet(picture(fleet_view(*eight())))
    unheard = fleet(picture(fleet_view(*eight(), links=(lost,))))
    assert "nothing wrong" not in unheard
    assert "! as last heard" in unheard


def test_two_links_of_which_one_is_lost() -> None:
    good = LinkView(0, "a", "open", 1, 1, 0, 1, 1)
    text = path(picture(fleet_view(links=(good, replace(good, link=1, url="b", state="lost")))))
    assert "! link LOST b" in text
    assert "links open 1 of 2" in text


def test_no_link_at_all() -> None:
    assert path(picture(fleet_view(links=()))).startswith("link none")


def test_an_engine_that_gives_no_new_view_is_called_out_first() -> None:
    text = path(picture(fleet_view(*eight()), stale_s=7))
    assert text.startswith("! CONSOLE NOT ANSWERING for 7 s")


def test_dropped_frames_are_told_where_there_is_room() -> None:
    link = LinkView(0, "a", "open", 900, 1, 12, 1, 1)
    shown = picture(fleet_view(*eight(), links=(link,)))
    assert "frames dropped 12" in path(shown, 158)
    assert "frames" not in path(shown, 60)


def test_all_stop_in_force_names_number_confirmed_missing_and_how_it_is_lifted() -> None:
    text = stop(picture(fleet_view(*eight(), stop=in_force(3, 6, 2))))
    assert "ALL-STOP 3 IN FORCE" in text
    assert "confirmed 6/8" in text
    assert "missing 2: maple, rowan" in text
    assert "clear 3" in text


def test_all_confirmed() -> None:
    text = stop(picture(fleet_view(*eight(), stop=in_force(12, 8, 0))))
    assert "confirmed 8/8" in text
    assert "missing" not in text
    assert "lift: clear 12" in text


@given(st.integers(0, 300), st.integers(1, 300), st.integers(1, 9999))
def test_whoever_is_missing_80_columns_tell_how_many(done: int, open_: int, number: int) -> None:
    modules = tuple(module(each, f"m{each}") for each in range(1, done + open_ + 1))
    text = stop(picture(fleet_view(*modules, stop=in_force(number, done, open_))))
    assert f"confirmed {done}/{done + open_}" in text
    assert f"missing {open_}" in text
    assert f"clear {number}" in text
    assert cell_len(text) <= WIDTH


def test_a_missing_module_that_the_view_does_not_know_is_counted_by_its_number() -> None:
    text = stop(picture(fleet_view(stop=StopView(1, True, (), (5,)))))
    assert "missing 1: module 5" in text


def test_who_moves_and_what_is_wrong() -> None:
    text = fleet(picture(busy_view()), 158)
    assert "moving 2: birch, elm" in text
    assert "wrong 3: cedar silent, hazel battery, larch tilted" in text


def test_in_80_columns_names_give_way_to_their_number() -> None:
    text = fleet(picture(busy_view()))
    assert "moving 2: birch, elm" in text
    assert "wrong 3: cedar silent +2 more" in text


def test_nobody_heard_yet() -> None:
    assert "none heard yet" in fleet(picture(fleet_view()))


@pytest.mark.parametrize(
    ("width", "text"),
    [
        (5, "elm +3 more"),
        (17, "elm +3 more"),
        (18, "elm, birch +2 more"),
        (22, "elm, birch +2 more"),
        (23, "elm, birch +2 more"),
        (24, "elm, birch, rowan, larch"),
        (99, "elm, birch, rowan, larch"),
    ],
)
def test_names_within(width: int, text: str) -> None:
    assert names_within(["elm", "birch", "rowan", "larch"], width) == text


@given(
    st.lists(st.tuples(st.text(max_size=12), st.integers(0, 3)), max_size=8),
    st.integers(1, 60),
)
def test_a_fitted_line_fits(pieces: list[tuple[str, int]], width: int) -> None:
    line = fit([Part(text, Tone.PLAIN, rank) for text, rank in pieces], width)
    text = "".join(each for each, _ in line)
    assert cell_len(text) <= width
    assert text.isprintable()


@given(st.permutations([("one", 0), ("two", 1), ("six", 2), ("ten", 3)]), st.integers(3, 20))
def test_parts_go_by_rank_and_the_rest_keep_their_order(
    pieces: list[tuple[str, int]], width: int
) -> None:
    line = fit([Part(text, Tone.PLAIN, rank) for text, rank in pieces], width)
    # Each part takes three cells and two between: so many of the lowest ranks fit.
    fitting = (width + 2) // 5
    expected = [text for text, rank in pieces if rank < fitting]
    assert "".join(each for each, _ in line) == "  ".join(expected)


def test_a_cut_line_ends_in_a_mark() -> None:
    assert fit([Part("abcdefgh", Tone.PLAIN)], 5) == (("abcd~", Tone.PLAIN),)
