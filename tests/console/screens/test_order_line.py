"""History and completion of the order line, without a screen."""

import pytest
from hypothesis import given
from hypothesis import strategies as st

from console.orders import complete
from console.widgets.order_line import History, continued, first_continued
from tests.support.fake_fleet import NAMES


@pytest.mark.parametrize(
    ("text", "offered", "whole"),
    [
        ("bi", "birch", "birch"),
        ("BI", "birch", "birch"),
        ("birch ", "pivot", "birch pivot"),
        ("birch pi", "pivot", "birch pivot"),
        ("birch,", "elm", "birch,elm"),
        ("birch, e", "elm", "birch, elm"),
        ("birch pivot for", "birch pivot forward at 4500", "birch pivot forward at 4500"),
        ('"north g', '"north gate"', '"north gate"'),
        ('elm, "north g', '"north gate"', 'elm, "north gate"'),
        ("all re", "rest", "all rest"),
        ("birch at 4500", "rpm", ""),
        ("zz", "birch", ""),
    ],
)
def test_a_completion_continues_the_line(text: str, offered: str, whole: str) -> None:
    assert continued(text, offered) == whole


@given(st.text(max_size=20), st.text(max_size=12))
def test_a_continued_line_ends_in_what_was_offered(text: str, offered: str) -> None:
    whole = continued(text, offered)
    assert whole == "" or whole.endswith(offered)


def test_the_first_that_makes_the_line_longer_is_taken() -> None:
    assert first_continued("elm", ["elm", "elmwood"]) == "elmwood"
    assert first_continued("elm", ["elm"]) == ""


def test_the_grammar_leads_from_word_to_word() -> None:
    line = "bi"
    for _ in range(4):
        line = first_continued(line, complete(line, NAMES)) + " "
    assert line == "birch pivot forward at "


def test_history_walks_up_and_back_down_to_the_line_begun() -> None:
    history = History()
    for line in ("one", "two", "three"):
        history.add(line)
    up = [history.walk(-1, "begun"), history.walk(-1, "three"), history.walk(-1, "two")]
    assert up == ["three", "two", "one"]
    assert history.walk(-1, "one") == "one"
    down = [history.walk(1, "one"), history.walk(1, "two"), history.walk(1, "three")]
    assert down == ["two", "three", "begun"]
    assert history.walk(1, "begun") == "begun"


def test_the_same_line_twice_running_is_kept_once() -> None:
    history = History()
    for line in ("one", "two", "two"):
        history.add(line)
    assert [history.walk(-1, ""), history.walk(-1, "two")] == ["two", "one"]


def test_an_empty_history_leaves_the_line_alone() -> None:
    assert History().walk(-1, "begun") == "begun"
