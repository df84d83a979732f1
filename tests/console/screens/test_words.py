"""Words, glyphs, bars and short times: tables complete, glyphs apart, widths kept."""

from dataclasses import replace

import pytest
from hypothesis import given
from hypothesis import strategies as st

from console.view import Outcome
from console.widgets import words
from protocol.codes import Activity, Flags
from tests.support.fake_fleet import SECOND_NS, module

NOW = 3600 * SECOND_NS
TEXTS = st.text(max_size=30)


def test_each_outcome_and_activity_has_a_word_and_a_glyph_of_its_own() -> None:
    assert set(words.OUTCOMES) == set(Outcome)
    assert set(words.ACTIVITIES) == set(Activity)
    for table in (words.OUTCOMES, words.ACTIVITIES):
        glyphs = [word.glyph for word in table.values()]
        assert len(set(glyphs)) == len(glyphs)
        assert all(len(glyph) == 1 and glyph.isascii() for glyph in glyphs)


def test_states_are_told_apart_without_colour() -> None:
    assert len({word.word for word in words.STATES}) == len(words.STATES)


@pytest.mark.parametrize(
    ("changes", "state"),
    [
        ({}, "ok"),
        ({"heard_t_ns": None}, "unheard"),
        ({"heard_t_ns": NOW - 3 * SECOND_NS}, "silent"),
        ({"heard_t_ns": NOW - 3 * SECOND_NS + 1}, "ok"),
        ({"wheel_rpm": 9001}, "overspeed"),
        ({"wheel_rpm": -9001}, "overspeed"),
        ({"wheel_rpm": 9000}, "ok"),
        ({"wheel_rpm": 9001, "wheel_max_rpm": 0}, "ok"),
        ({"flags": int(Flags.BATTERY_LOW)}, "battery"),
        ({"face_up": 0}, "tilted"),
        ({"face_up": 0, "activity": Activity.BRAKING}, "ok"),
        ({"flags": int(Flags.UNSETTLED)}, "unsettled"),
        ({"flags": int(Flags.UNSETTLED), "activity": Activity.SETTLING}, "ok"),
        ({"latched": True}, "stopped"),
        ({"latched": True, "flags": int(Flags.BATTERY_LOW)}, "stopped"),
        ({"latched": True, "heard_t_ns": NOW - 9 * SECOND_NS}, "silent"),
        ({"latched": True, "wheel_rpm": 9500}, "overspeed"),
        ({"flags": int(Flags.FAULTY)}, "fault"),
        ({"flags": int(Flags.FAULTY), "latched": True}, "fault"),
        ({"flags": int(Flags.LOCKED_OUT)}, "locked"),
        ({"flags": int(Flags.LOCKED_OUT | Flags.BATTERY_LOW), "latched": True}, "locked"),
        ({"flags": int(Flags.LOCKED_OUT | Flags.FAULTY)}, "fault"),
        ({"flags": int(Flags.LOCKED_OUT), "wheel_rpm": 9500}, "overspeed"),
    ],
)
def test_the_most_pressing_state_is_shown(changes: dict[str, object], state: str) -> None:
    assert words.module_state(module(1, "alder", **changes), NOW).word == state


def test_a_latch_hides_a_low_battery_from_the_state_but_not_from_the_trouble() -> None:
    low = module(1, "alder", latched=True, flags=int(Flags.BATTERY_LOW))
    trouble = words.module_trouble(low, NOW)
    assert trouble is not None
    assert trouble.word == "battery"


@pytest.mark.parametrize(
    ("changes", "moving"),
    [
        ({}, False),
        ({"activity": Activity.FLASHING}, False),
        ({"activity": Activity.STAGED}, False),
        ({"activity": Activity.SETTLING}, True),
        ({"wheel_rpm": -1}, True),
        ({"activity": 99}, True),
    ],
)
def test_what_counts_as_moving(changes: dict[str, object], moving: bool) -> None:
    assert words.is_moving(module(1, "alder", **changes)) is moving


def test_an_activity_of_a_later_version_shows_its_number() -> None:
    assert words.activity(module(1, "alder", activity=77)).text == "? code 77"


@pytest.mark.parametrize(
    ("face", "text"),
    [(0, "- tilted"), (1, "1 level"), (4, "4 level"), (5, "5 upright"), (6, "6 upright")],
)
def test_posture_names_the_face_and_the_wheel_axis(face: int, text: str) -> None:
    # protocol.message.Telemetry: faces 1 to 4 turn about the wheel axis, 5 and 6 are its ends.
    assert words.posture(replace(module(1, "alder"), face_up=face)) == text


@pytest.mark.parametrize(
    ("age_s", "text"),
    [
        (0, "<2 s"),
        (1.999, "<2 s"),
        (2, "2 s"),
        (99.9, "99 s"),
        (100, "1 min"),
        (5999, "99 min"),
        (6000, "1 h"),
        (7200, "2 h"),
    ],
)
def test_age_of_the_last_word(age_s: float, text: str) -> None:
    assert words.age_text(NOW - int(age_s * SECOND_NS), NOW) == text


@given(st.integers(0, 2**63))
def test_an_age_fits_its_column(age_ns: int) -> None:
    assert len(words.age_text(0, age_ns)) <= 6


def test_no_word_yet() -> None:
    assert words.age_text(None, NOW) == "never"


@pytest.mark.parametrize(
    ("t_ns", "text"),
    [(-5, "0:00:00"), (59 * SECOND_NS, "0:00:59"), (36_061 * SECOND_NS, "10:01:01")],
)
def test_session_time(t_ns: int, text: str) -> None:
    assert words.session_time(t_ns) == text


@pytest.mark.parametrize(
    ("speed", "limit", "bar"),
    [
        (0, 9000, ".........."),
        (1, 9000, "#........."),
        (-4500, 9000, "#####....."),
        (8999, 9000, "#########."),
        (9000, 9000, "##########"),
        (9001, 9000, "#########!"),
        (0, 0, ".........."),
        (50, 0, "??????????"),
    ],
)
def test_speed_bar(speed: int, limit: int, bar: str) -> None:
    assert words.speed_bar(speed, limit, 10) == bar


@given(st.integers(-70_000, 70_000), st.integers(0, 65_535), st.integers(2, 30))
def test_a_speed_bar_keeps_its_width(speed: int, limit: int, width: int) -> None:
    assert len(words.speed_bar(speed, limit, width)) == width


@given(TEXTS)
def test_no_control_character_reaches_the_terminal(text: str) -> None:
    shown = words.printable(text)
    assert shown.isprintable()
    assert len(shown) == len(text)
    assert shown == text or not text.isprintable()


def test_an_escape_sequence_in_a_name_is_taken_apart() -> None:
    assert words.printable("\x1b[2Jelm") == "?[2Jelm"
