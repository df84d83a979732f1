"""Records come back from their stored form as they were, and damage is told apart."""

import json
from dataclasses import FrozenInstanceError
from typing import Any

import pytest
from hypothesis import given
from hypothesis import strategies as st

from storage.errors import LogUnavailableError, StorageError
from storage.records import (
    BytesIn,
    BytesOut,
    CommandExpired,
    Correction,
    LinkChanged,
    OrderGiven,
    Remark,
    SessionOpened,
    SlotsPlanned,
    StageStarted,
    note_body,
    note_sort,
    read_note,
)
from tests.support.log_samples import NOTE_TYPES, OPENED, RECORD_TYPES, built, planned


@given(st.one_of([built(each) for each in NOTE_TYPES]))
def test_every_note_comes_back_as_it_was(record: Any) -> None:
    assert read_note(note_sort(record), record.t_ns, note_body(record)) == record


@given(st.one_of([built(each) for each in NOTE_TYPES]))
def test_a_stored_body_is_one_json_object_without_the_time(record: Any) -> None:
    body = json.loads(note_body(record))
    assert isinstance(body, dict)
    assert "t_ns" not in body


def test_sorts_are_distinct() -> None:
    assert len({each.__name__ for each in NOTE_TYPES}) == len(NOTE_TYPES) >= 12


@pytest.mark.parametrize("cls", RECORD_TYPES)
def test_records_begin_with_their_time_and_cannot_be_changed(cls: Any) -> None:
    assert next(iter(cls.__dataclass_fields__)) == "t_ns"
    assert cls.__dataclass_params__.frozen
    assert "__slots__" in vars(cls)


def test_a_record_is_frozen() -> None:
    record = CommandExpired(1, 2)
    with pytest.raises(FrozenInstanceError):
        record.command = 3  # type: ignore[misc]


def test_an_identity_of_64_bits_survives_json() -> None:
    given_order = OrderGiven(1, 1, "birch pivot back at 4350", "typed", (planned(1), planned(2)))
    again = read_note("OrderGiven", 1, note_body(given_order))
    assert isinstance(again, OrderGiven)
    assert again.commands[0].identity == 2**64 - 1
    assert isinstance(again.commands, tuple)


def test_the_stored_form_of_a_session_is_what_old_logs_hold() -> None:
    """Written by hand: a log must stay readable, so names and sorts never change."""
    body = (
        '{"utc":"2026-03-02T08:00:00Z","operator":"Mira","epoch":1772438400,"pace":1.0,'
        '"program":"tumblewire 0.1.0"}'
    )
    assert read_note("SessionOpened", 5_000_000_000, body) == OPENED  # before there was a seal
    assert note_body(OPENED) == body[:-1] + ',"sealed":false,"console":0}'


def test_a_command_of_an_old_log_takes_what_it_lacks_as_nothing() -> None:
    """As it was stored before a command had a latest start, a stage, a person and a value."""
    body = (
        '{"order":1,"text":"birch pivot back at 4350","source":"typed","commands":[{"command":1,'
        '"module":1,"identity":161,"boot":77,"epoch":9,"number":1,"motion":"pivot","setting":1,'
        '"direction":-1,"speed_rpm":4350,"duration_ms":0,"trial":0}]}'
    )
    record = read_note("OrderGiven", 1, body)
    assert isinstance(record, OrderGiven)
    (command,) = record.commands
    assert (command.identity, command.direction, command.trial) == (161, -1, 0)
    assert (command.latest_ms, command.stage, command.person, command.value) == (0, 0, "", 0)


@pytest.mark.parametrize(("start_ms", "stored"), [(4_000_000_000, "4000000000"), (None, "null")])
def test_a_stage_s_start_is_a_time_or_none(start_ms: int | None, stored: str) -> None:
    body = f'{{"order":7,"start_ms":{stored}}}'
    assert note_body(StageStarted(1, 7, start_ms)) == body
    assert read_note("StageStarted", 1, body) == StageStarted(1, 7, start_ms)


def test_the_stored_form_of_a_plan_is_what_old_logs_hold() -> None:
    body = (
        '{"link":0,"air_rate_bps":9600,"duty_percent":25.0,"modules":12,"left_out":0,'
        '"asked_ms":500,"period_ms":1720,"load_percent":24.99}'
    )
    plan = SlotsPlanned(9, 0, 9_600, 25.0, 12, 0, 500, 1_720, 24.99)
    assert note_body(plan) == body
    assert read_note("SlotsPlanned", 9, body) == plan


def test_the_stored_form_of_a_correction_is_what_old_logs_hold() -> None:
    body = (
        '{"utc":"u","identity":161,"boot":77,"number":101,"outcome":"landed","person":"Jo",'
        '"reason":"the wall moved"}'
    )
    expected = Correction(9, "u", 161, 77, 101, "landed", "Jo", "the wall moved")
    assert read_note("Correction", 9, body) == expected


def test_text_beyond_ascii_is_stored_readably() -> None:
    assert "Zoë" in note_body(Remark(1, "u", "Zoë", "übergekippt"))


def test_text_that_is_no_utf8_survives() -> None:
    """A device name in another encoding reaches Python with lone surrogates (PEP 383)."""
    record = LinkChanged(1, 0, b"/dev/tty\xff".decode(errors="surrogateescape"), "open", "")
    body = note_body(record)
    assert body.encode()
    assert read_note("LinkChanged", 1, body) == record


@pytest.mark.parametrize(
    ("sort", "body"),
    [
        ("Unheard", "{}"),
        ("BytesIn", '{"link":0,"data":"00"}'),
        ("CommandExpired", "{}"),
        ("CommandExpired", '{"command":1,"extra":2}'),
        ("CommandExpired", '{"command":1,"t_ns":2}'),
        ("CommandExpired", "not json"),
        ("CommandExpired", "[1]"),
        ("CommandExpired", "null"),
        ("OrderGiven", '{"order":1,"text":"","source":""}'),
        ("OrderGiven", '{"order":1,"text":"","source":"","commands":[{"command":1}]}'),
        ("OrderGiven", '{"order":1,"text":"","source":"","commands":[7]}'),
        ("OrderGiven", "[]"),
    ],
)
def test_a_damaged_record_is_the_logs_fault(sort: str, body: str) -> None:
    with pytest.raises(LogUnavailableError) as caught:
        read_note(sort, 1, body)
    assert sort in str(caught.value)
    assert "\n" not in str(caught.value)
    assert isinstance(caught.value, StorageError)


def test_bytes_records_differ_by_direction() -> None:
    assert BytesIn(1, 0, b"x") != BytesOut(1, 0, b"x")


def test_session_opened_is_hashable_and_comparable() -> None:
    assert (
        SessionOpened(
            5_000_000_000, "2026-03-02T08:00:00Z", "Mira", 1_772_438_400, 1.0, "tumblewire 0.1.0"
        )
        == OPENED
    )
    assert len({OPENED, OPENED}) == 1
