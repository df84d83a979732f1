"""The desk: all-stop, clear and help are answered here, all else goes to the source."""

import pytest

from console.screens.desk import Desk
from console.view import StopView
from tests.support.fake_fleet import FakeFleet, eight, fleet_view


@pytest.fixture
def source() -> FakeFleet:
    return FakeFleet(fleet_view(*eight()))


@pytest.fixture
def desk(source: FakeFleet) -> Desk:
    return Desk(source, "Ida")


def put_in_force(source: FakeFleet, number: int) -> None:
    source.now = fleet_view(*eight(), stop=StopView(number, True, (1, 2), (3,)))


def test_an_order_goes_to_the_source_as_typed(source: FakeFleet, desk: Desk) -> None:
    reply = desk.give("Birch pivot forward at 4500")
    assert source.orders == ["Birch pivot forward at 4500"]
    assert reply.text == "order 1: Birch pivot forward at 4500 (1 command)"
    assert not reply.refused


def test_a_refusal_is_a_reply_with_its_reason(source: FakeFleet, desk: Desk) -> None:
    source.refuse = "birch: battery low (3.31 V)"
    reply = desk.give("birch rest")
    assert reply.refused
    assert reply.text == "birch: battery low (3.31 V)"


@pytest.mark.parametrize("text", ["stop", "STOP", "all stop", "All-Stop", "  all   stop "])
def test_an_all_stop_may_be_typed(source: FakeFleet, desk: Desk, text: str) -> None:
    assert not desk.give(text).refused
    assert source.stops == ["typed"]
    assert source.orders == []


@pytest.mark.parametrize("text", ["help", "?", "Help"])
def test_help_may_be_typed(source: FakeFleet, desk: Desk, text: str) -> None:
    assert desk.give(text).help
    assert source.orders == []


@pytest.mark.parametrize("text", ["clear 3", "CLEAR 3", " clear  3 "])
def test_clear_names_the_newest_stop(source: FakeFleet, desk: Desk, text: str) -> None:
    put_in_force(source, 3)
    reply = desk.give(text)
    assert source.cleared == [(3, "Ida")]
    assert reply.text == "all-stop 3 cleared by Ida"


@pytest.mark.parametrize(
    "text", ["clear", "clear 2", "clear 4", "clear three", "clear ²", "clear -3"]
)
def test_anything_else_lifts_nothing_and_says_what_would(
    source: FakeFleet, desk: Desk, text: str
) -> None:
    put_in_force(source, 3)
    reply = desk.give(text)
    assert reply.refused
    assert "clear 3" in reply.text
    assert source.cleared == []


def test_nothing_to_clear(source: FakeFleet, desk: Desk) -> None:
    reply = desk.give("clear 1")
    assert reply.refused
    assert "no all-stop is in force" in reply.text
    assert source.cleared == []


def test_a_module_called_clearing_is_no_clear(source: FakeFleet, desk: Desk) -> None:
    desk.give("clearing rest")
    assert source.orders == ["clearing rest"]


def test_own_words_are_offered_after_the_grammars(source: FakeFleet, desk: Desk) -> None:
    assert desk.words("c", ["cedar"]) == ["cedar"]
    put_in_force(source, 3)
    assert desk.words("c", ["cedar"]) == ["cedar", "clear 3"]
    assert desk.words("st", []) == ["stop"]
    assert desk.words("", ["alder"]) == ["alder"]
