"""The reducer as a whole: the session's own records, its pictures, and what must not matter."""

import random
import sqlite3
from typing import Any, get_args, get_type_hints

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from console.errors import LogError
from console.fleet import RULES, FleetReducer
from protocol.codes import BRIDGE_ADDRESS, SIMULATED_BIT, AnswerState, Reason, identity_bits
from protocol.message import Message, Report, Request, RollCall
from storage.inserts import Inserter, group
from storage.later_tables import SECOND_TABLES
from storage.records import (
    BytesIn,
    BytesOut,
    CommandExpired,
    Correction,
    EpochChosen,
    NoteRecord,
    OrderVoided,
    Record,
    Remark,
    SessionClosed,
    SheetClosed,
    SheetOpened,
    StageStarted,
    StopLifted,
    StopPressed,
    WireRecord,
)
from storage.rows import TABLES, AlarmRow, CorrectionRow, RemarkRow, Row, SheetRow
from storage.tables import FIRST_TABLES
from tests.support.module_words import (
    bridge_status,
    probe,
    trace_ask,
    trace_chunks,
    upkeep,
    words,
)
from tests.support.wire_script import (
    BOOT,
    CONSOLE,
    EPOCH,
    IDENTITY,
    Fold,
    Script,
    Tables,
    answer,
    facts,
    from_module,
    nameplate,
    pivot,
    planned,
    presence,
    query,
    stopped,
    tables_of,
    telemetry,
    to_everyone,
    to_module,
)


def test_every_record_type_has_its_rule() -> None:
    assert set(RULES) == {*NoteRecord.__args__, *WireRecord.__args__}  # type: ignore[attr-defined]


def test_the_opening_shows_in_the_picture() -> None:
    fold = Fold(Script().open())
    view = fold.view
    assert (view.opened_utc, view.operator, view.epoch) == ("2026-03-04T09:00:00Z", "R. Ode", EPOCH)
    assert (view.modules, view.notices, view.closed, view.simulated) == ((), (), False, False)
    assert fold.reducer.view(77).t_ns == 77


def test_a_chosen_epoch_takes_the_place_of_the_first() -> None:
    script = Script().open()
    script.add(EpochChosen, EPOCH + 9)
    fold = Fold(script)
    assert fold.reducer.epoch == fold.view.epoch == EPOCH + 9


def test_a_sheet_s_row_is_written_at_its_opening_and_again_at_its_close() -> None:
    script = Script().open()
    opened = script.add(SheetOpened, 1, "morning", "[sheet]", 7, 40)
    fold = Fold(script)
    row = SheetRow(1, opened.t_ns, None, "morning", 7, 40, None, "[sheet]")
    assert fold.table("sheets") == [row]
    script.add(SheetClosed, 1, "all-stop")
    fold.on()
    assert fold.table("sheets") == [row._replace(closed_t_ns=script.t_ns, stopped="all-stop")]


def test_a_sheet_closed_that_never_opened_is_an_error_in_one_line() -> None:
    with pytest.raises(LogError, match="record 4 closes sheet 2, of whose opening"):
        FleetReducer().apply(4, SheetClosed(1, 2, ""))


def test_remarks_and_corrections_are_rows_and_change_no_verdict() -> None:
    script = Script().open().heard(presence()).order(planned()).sent(pivot()).heard(facts())
    script.add(Remark, "2026-03-04T09:05:00Z", "R. Ode", "belt slipped")
    remarked = (len(script.records), script.t_ns)
    values = ("2026-03-04T09:06:00Z", IDENTITY, BOOT, 1, "adrift", "R. Ode", "seen to fall")
    script.add(Correction, *values)
    fold = Fold(script)
    assert fold.table("remarks") == [
        RemarkRow(*remarked, "2026-03-04T09:05:00Z", "R. Ode", "belt slipped")
    ]
    number = len(script.records)
    text = "80005a5a00001111"
    assert fold.table("corrections") == [
        CorrectionRow(number, script.t_ns, values[0], text, *values[2:])
    ]
    assert fold.table("motions")[0].outcome == "landed"


def test_the_close_shows_in_the_picture() -> None:
    script = Script().open()
    script.add(SessionClosed, "2026-03-04T10:00:00Z", "closed")
    assert Fold(script).view.closed


def test_notices_are_the_newest_fifty_oldest_first() -> None:
    script = Script().open()
    for number in range(1, 61):
        script.add(StopPressed, number, "key")
    notices = Fold(script).view.notices
    assert len(notices) == 50
    assert notices[0][1] == "all-stop 11 by key"
    assert notices[-1] == (script.t_ns, "all-stop 60 by key")


def test_only_what_changed_is_pictured_anew() -> None:
    script = Script().open().heard(presence())
    other = SIMULATED_BIT | 0x2222
    script.heard(presence(identity=other), address=0x11)
    fold = Fold(script)
    before = fold.view.modules
    assert fold.view.modules is before
    fold.script.heard(telemetry(1, face_up=2))
    fold.on()
    after = fold.view.modules
    assert after[1] is before[1]
    assert (before[0].face_up, after[0].face_up) == (1, 2)


# -- what must not matter ----------------------------------------------------------------

ELM = 0x11
ELM_IDENTITY = SIMULATED_BIT | 0x2222


def lively(seed: int) -> Script:
    """A session of two modules in which nearly everything happens, in an order of its own.

    Built of stretches that are each alike, so that a chunk may hold several messages.
    """
    draw = random.Random(seed)
    script = Script().open()
    for identity, address, name in ((IDENTITY, 0x10, "birch"), (ELM_IDENTITY, ELM, "elm")):
        script.heard(
            presence(identity=identity), nameplate(name, identity=identity), address=address
        )
    bits = identity_bits(ELM_IDENTITY)
    for number in range(1, 9):
        script.order(planned(number, stage=draw.randrange(2)))
        script.sent(pivot(number))
        script.sent(probe(number))
        if draw.randrange(2):
            upkeep(script, number)
        replies = [
            from_module(answer(number, AnswerState.ACCEPTED)),
            from_module(telemetry(number * 3, wheel_rpm=100 * number)),
            from_module(telemetry(number, identity_bits=bits, boot=BOOT), ELM),
            from_module(facts(number, turned_ddeg=draw.choice([0, 900, 1800]))),
            from_module(facts(number)),
            from_module(answer(number, AnswerState.REFUSED, Reason.BUSY)),
            from_module(stopped(2, latched=draw.randrange(2))),
            from_module(presence(stop_number=draw.randrange(4), flags=draw.randrange(2))),
            from_module(presence(identity=ELM_IDENTITY, boot=BOOT + draw.randrange(3)), ELM),
            *map(from_module, words(number)),
            *map(from_module, trace_chunks(number)),
            from_module(bridge_status(number, draw.randrange(9_000)), BRIDGE_ADDRESS),
            from_module(telemetry(number * 3 + 1, flags=draw.randrange(128))),
            bytes(draw.randrange(1, 256) for _ in range(9)) + b"\0",
        ]
        draw.shuffle(replies)
        script.add(BytesIn, 0, b"".join(replies[: draw.randrange(3, len(replies) + 1)]))
        deed = draw.choice(
            [
                (CommandExpired, number),
                (StopPressed, number, "key"),
                (StopLifted, number, "key"),
                (OrderVoided, number, "full"),
                (StageStarted, number, draw.choice([None, 77])),
                (BytesOut, 0, to_module(trace_ask(number)) * draw.randrange(1, 11)),
                (BytesOut, 0, to_everyone(RollCall(EPOCH, CONSOLE)) + to_module(query(number))),
            ]
        )
        script.add(*deed)
    script.add(SessionClosed, "2026-03-04T10:00:00Z", "closed")
    return script


UNTIMED = {"record", "part", "t_ns", "ended_t_ns", "opened_t_ns", "closed_t_ns"}


def untimed(tables: Tables) -> dict[str, list[tuple[Any, ...]]]:
    """Tables without the columns that say where in the stream something came."""
    return {
        name: [
            tuple(getattr(row, column) for column in row._fields if column not in UNTIMED)
            for row in rows.values()
        ]
        for name, rows in tables.items()
    }


def fold_all(records: list[tuple[int, Record]]) -> tuple[list[Row], list[Any], FleetReducer]:
    """Rows, pictures after each record, and the reducer."""
    reducer = FleetReducer()
    rows: list[Row] = []
    views: list[Any] = []
    for number, record in records:
        rows += reducer.apply(number, record).rows
        views.append(reducer.view(record.t_ns))
    return rows, views, reducer


def rechunked(script: Script, draw: random.Random) -> list[tuple[int, Record]]:
    """The same bytes, cut elsewhere: within a record's bytes, at random places."""
    made: list[Record] = []
    for _, record in script.records:
        if not isinstance(record, BytesIn | BytesOut):
            made.append(record)
            continue
        data = record.data
        while data:
            size = draw.choice([1, 2, 7, 30, 64, 500])
            made.append(type(record)(record.t_ns, record.link, data[:size]))
            data = data[size:]
    return list(enumerate(made, 1))


@settings(max_examples=60, deadline=None)
@given(st.integers(0, 10**6), st.integers(0, 10**6))
def test_how_the_bytes_were_chunked_changes_no_table(seed: int, cuts: int) -> None:
    script = lively(seed)
    whole, _, one = fold_all(script.records)
    parts, _, other = fold_all(rechunked(script, random.Random(cuts)))
    assert untimed(tables_of(parts)) == untimed(tables_of(whole))
    assert other.view(1).modules == one.view(1).modules
    assert other.view(1).stop == one.view(1).stop
    assert other.view(1).bridges == one.view(1).bridges
    assert other.trace_wanted() == one.trace_wanted()
    assert other.settings_wanted() == one.settings_wanted()
    assert [text for _, text in other.view(1).notices] == [text for _, text in one.view(1).notices]


@settings(max_examples=30, deadline=None)
@given(st.integers(0, 10**6))
def test_folding_again_gives_the_same_rows_and_pictures(seed: int) -> None:
    records = lively(seed).records
    rows, views, _ = fold_all(records)
    again_rows, again_views, _ = fold_all(records)
    assert again_rows == rows
    assert [type(row) for row in again_rows] == [type(row) for row in rows]
    assert again_views == views


@settings(max_examples=30, deadline=None)
@given(st.integers(0, 10**6))
def test_looking_changes_nothing(seed: int) -> None:
    """A picture after each record, or one at the end: the same end."""
    records = lively(seed).records
    rows, views, _ = fold_all(records)
    unseen = FleetReducer()
    blind = [row for number, record in records for row in unseen.apply(number, record).rows]
    assert blind == rows
    assert unseen.view(records[-1][1].t_ns) == views[-1]


@settings(max_examples=60, deadline=None)
@given(st.integers(0, 10**6))
def test_no_two_rows_of_one_record_share_a_key(seed: int) -> None:
    """Rows that tell of a moment are keyed by record and part; none may hide another."""
    rows, _, _ = fold_all(lively(seed).records)
    for row_type, table in TABLES.items():
        if table.key[0] == "record":
            keys = [tuple(getattr(r, k) for k in table.key) for r in rows if type(r) is row_type]
            assert len(keys) == len(set(keys))


@settings(max_examples=60, deadline=None)
@given(st.integers(0, 10**6))
def test_rows_and_pictures_agree(seed: int) -> None:
    """What the log holds at the end is what the screens show at the end."""
    rows, _, reducer = fold_all(lively(seed).records)
    tables = tables_of(rows)
    view = reducer.view(1)
    assert [(m.module, m.name, m.boot, m.address) for m in view.modules] == [
        (row.module, row.name, row.boot, row.address)
        for row in sorted(tables["modules"].values())  # type: ignore[type-var]
    ]
    assert [module.locked_by for module in view.modules] == [
        row.locked_by  # type: ignore[union-attr]
        for row in sorted(tables["modules"].values())  # type: ignore[type-var]
    ]
    motions = tables["motions"]
    for row in tables["commands"].values():
        shown = reducer.command(row.command)  # type: ignore[union-attr]
        assert shown is not None
        assert shown.ending == (row.ending or "")  # type: ignore[union-attr]
        assert (shown.sends, shown.repeats_ignored) == (row.sends, row.repeats_ignored)  # type: ignore[union-attr]
        assert shown.final == bool(row.final)  # type: ignore[union-attr]
        kept = motions.get((shown.command,))
        assert (shown.outcome or None) == (kept and kept.outcome)  # type: ignore[union-attr]


@settings(max_examples=100, deadline=None)
@given(st.lists(st.binary(max_size=80), max_size=10), st.integers(0, 3))
def test_any_bytes_at_all_are_taken(chunks: list[bytes], link: int) -> None:
    script = Script().open().heard(presence())
    for chunk in chunks:
        script.add(BytesIn, link, chunk)
        script.add(BytesOut, link, chunk)
    view = Fold(script).view
    assert len(view.modules) == 1
    inward = sum(map(len, chunks))
    assert sum(each.bytes_out for each in view.links) == inward


def test_the_lively_session_holds_something_of_everything() -> None:
    """Or else the properties above would say nothing of it."""
    rows: list[Row] = []
    for seed in range(12):
        rows += fold_all(lively(seed).records)[0]
    missing = {"link_events", "sheets", "remarks", "corrections"}
    assert {TABLES[type(row)].name for row in rows} >= {
        table.name for table in TABLES.values()
    } - missing
    alarms = {row.alarm for row in rows if isinstance(row, AlarmRow)}
    assert alarms >= {"restart", "fault", "locked out", "unlocked", "bridge restart", "all-stop"}


# -- whatever modules may say ------------------------------------------------------------

FORMS = {
    "B": st.integers(0, 2**8 - 1),
    "H": st.integers(0, 2**16 - 1),
    "I": st.integers(0, 2**32 - 1),
    "Q": st.integers(0, 2**64 - 1),
    "b": st.integers(-(2**7), 2**7 - 1),
    "h": st.integers(-(2**15), 2**15 - 1),
    "i": st.integers(-(2**31), 2**31 - 1),
    "12s": st.binary(max_size=12),
    "24s": st.binary(min_size=24, max_size=24),
}
"""What a field of each width may hold (protocol/layout.py)."""

LIKELY = {
    "identity": IDENTITY,
    "boot": BOOT,
    "epoch": EPOCH,
    "console": CONSOLE,
    "identity_bits": identity_bits(IDENTITY),
}
"""Fields without which a message would nearly always be a stranger's."""


def any_field(name: str, form: str) -> st.SearchStrategy[Any]:
    """A field's value: of those that name somebody mostly birch's, of numbers often small."""
    anything = FORMS[form]
    if name in LIKELY:
        return st.one_of(st.just(LIKELY[name]), st.just(LIKELY[name]), anything)
    if name in {"number", "sequence", "chunk", "chunks", "setting", "settings", "fault"}:
        return st.one_of(st.integers(0, 3), anything)
    return anything


def any_message(kind: type[Any]) -> st.SearchStrategy[Message]:
    """Any message of a kind that its layout can carry."""
    hints = get_type_hints(kind, include_extras=True)
    return st.builds(
        kind, **{name: any_field(name, get_args(hint)[1]) for name, hint in hints.items()}
    )


REPORTS = st.one_of([any_message(kind) for kind in get_args(Report)])
REQUESTS = st.one_of([any_message(kind) for kind in get_args(Request)])
SENDERS = st.sampled_from([0x10, 0x10, 0x10, BRIDGE_ADDRESS, 0x11])


@settings(max_examples=300, deadline=None)
@given(st.lists(st.tuples(REPORTS, REQUESTS, SENDERS), max_size=12))
def test_whatever_is_said_the_rows_fit_the_log(said: list[tuple[Message, Message, int]]) -> None:
    """Authentic nonsense: every field of every message at any value that it can carry."""
    script = Script().open().heard(presence(), nameplate()).order(planned())
    script.sent(pivot()).heard(facts())
    for report, request, address in said:
        script.sent(request, address=address).heard(report, address=address)
    fold = Fold(script)
    connection = sqlite3.connect(":memory:")
    for statement in FIRST_TABLES + SECOND_TABLES:
        connection.execute(statement)
    entries = [
        (number, record, step.rows)
        for (number, record), step in zip(script.records, fold.steps, strict=True)
    ]
    Inserter(1).insert(connection, group(entries))
    for table in TABLES.values():
        (count,) = connection.execute(f"SELECT count(*) FROM {table.name}").fetchone()
        assert count == len(fold.table(table.name))
    connection.close()
    assert fold.view == Fold(script).view
