"""Sources: a CSV file as people write them, and a log as it is."""

import csv
import io
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from console.errors import InputError, LogError
from console.review.rates import ReviewTrial
from console.review.source import parse_csv, trials_from_csv, trials_from_log
from console.view import Outcome
from storage.reader import LogReader
from storage.writer import LogWriter
from tests.support.log_samples import (
    CLOSED_UTC,
    OPENED,
    bytes_in,
    module_row,
    motion_rows,
)

HEADER = "module,motion,setting,speed_rpm,outcome"


def read(text: str) -> list[ReviewTrial]:
    return parse_csv(text, "notes.csv", "notes.csv")


def row(**changes: object) -> ReviewTrial:
    values: dict[str, object] = {
        "module": "birch",
        "kind": "",
        "motion": "pivot",
        "setting": "floor",
        "speed_rpm": 4400,
        "outcome": Outcome.LANDED,
        "simulated": False,
        "session": "notes.csv",
        "time_utc": "",
        "brake_ms": None,
        **changes,
    }
    return ReviewTrial(**values)  # type: ignore[arg-type]


GOOD = {
    "line feeds": f"{HEADER}\nbirch,pivot,floor,4400,landed\n",
    "carriage returns too": f"{HEADER}\r\nbirch,pivot,floor,4400,landed\r\n",
    "no last line break": f"{HEADER}\nbirch,pivot,floor,4400,landed",
    "quotation marks": f'"module"{HEADER[6:]}\n"birch",pivot,floor,"4400",landed',
    "blanks and letter case": f"{HEADER}\n birch , Pivot,FLOOR, 4400,Landed ",
    "empty lines": f"\n{HEADER}\n\nbirch,pivot,floor,4400,landed\n\n",
    "other order": "outcome,speed_rpm,setting,motion,module\nlanded,4400,floor,pivot,birch",
    "more columns": f"{HEADER},remark,remark\nbirch,pivot,floor,4400,landed,x,y",
    "optional, empty": f"{HEADER},time_utc,brake_ms\nbirch,pivot,floor,4400,landed,,",
}


@pytest.mark.parametrize("text", GOOD.values(), ids=GOOD.keys())
def test_good_files(text: str) -> None:
    assert read(text) == [row()]


def test_a_header_alone_holds_no_motion() -> None:
    assert read(HEADER) == []


def test_quoted_fields_hold_commas_marks_and_line_breaks() -> None:
    """RFC 4180 section 2, rules 6 and 7."""
    text = f'{HEADER}\r\n"birch, the ""old"" one\r\nof two",pivot,floor,4400,short\r\n'
    assert read(text) == [row(module='birch, the "old" one\r\nof two', outcome=Outcome.SHORT)]


def test_a_byte_order_mark_is_passed_over(tmp_path: Path) -> None:
    path = tmp_path / "notes.csv"
    path.write_bytes(b"\xef\xbb\xbf" + f"{HEADER}\r\nbirch,pivot,floor,4400,landed\r\n".encode())
    assert trials_from_csv(path) == [row()]


@pytest.mark.parametrize(
    ("written", "time_utc"),
    [
        ("2025-11-03T14:05:09Z", "2025-11-03T14:05:09.000Z"),
        ("2025-11-03 14:05:09", "2025-11-03T14:05:09.000Z"),
        ("2025-11-03T15:05:09.25+01:00", "2025-11-03T14:05:09.250Z"),
        ("2025-11-03", "2025-11-03T00:00:00.000Z"),
    ],
)
def test_times_are_read_as_utc(written: str, time_utc: str) -> None:
    text = f"{HEADER},time_utc,brake_ms\nbirch,pivot,floor,4400,landed,{written},38.5"
    assert read(text) == [row(time_utc=time_utc, brake_ms=38.5)]


def test_a_hop_needs_no_setting() -> None:
    assert read(f"{HEADER}\nbirch,hop,,7000,landed") == [
        row(motion="hop", setting="", speed_rpm=7000)
    ]


BAD_HEADERS = [
    ("", "^notes.csv: empty; expected a header line with module, motion"),
    ("\n\n", "^notes.csv: empty"),
    ("module;motion;setting;speed_rpm;outcome", "line 1: expected commas .* not semicolons"),
    ("module,motion,setting,outcome", "line 1: no column speed_rpm: expected module, motion"),
    ("module,motion,setting,speed,outcome", "no column speed_rpm: .*; is it 'speed'"),
    ("Module,motion,setting,speed_rpm,outcome", "no column module: .*; is it 'Module'"),
    (f"\n\n{HEADER},module", "line 3: column module: expected once"),
    (f"{HEADER},brake_ms,brake_ms", "column brake_ms: expected once"),
]


@pytest.mark.parametrize(("text", "words"), BAD_HEADERS)
def test_bad_headers(text: str, words: str) -> None:
    with pytest.raises(InputError, match=words):
        read(text)


# A record and the essential words of its error, after "notes.csv, line 3".
BAD = [
    ("birch,pivot,floor,4400", "expected 7 columns as in the header, not 4"),
    ("birch,pivot,floor,4400,landed,,,", "expected 7 columns as in the header, not 8"),
    (",pivot,floor,4400,landed,,", "column module: expected the name of a module, not nothing"),
    ("birch,pviot,floor,4400,landed,,", "column motion: expected pivot, hop, twist, .*'pivot'"),
    ("birch,spin,floor,4400,landed,,", "column motion: expected pivot, hop, twist, not 'spin'"),
    (
        "birch,pivot,,4400,landed,,",
        "column setting: expected floor, wall, crest, flat, not nothing",
    ),
    ("birch,pivot,table,4400,landed,,", "column setting: expected floor"),
    ("birch,pivot,floor,44.5,landed,,", "column speed_rpm: expected a whole speed .*'44.5'"),
    ("birch,pivot,floor,4_400,landed,,", "column speed_rpm: expected a whole speed"),
    ("birch,pivot,floor,0,landed,,", "column speed_rpm: expected a whole speed in rpm, from 1"),
    ("birch,pivot,floor,65536,landed,,", "column speed_rpm: expected a whole speed"),
    (f"birch,pivot,floor,{'9' * 5000},landed,,", "column speed_rpm: expected a whole speed"),
    ("birch,pivot,floor,-4400,landed,,", "column speed_rpm: expected a whole speed"),
    ("birch,pivot,floor,,landed,,", "column speed_rpm: .* not nothing"),
    ("birch,pivot,floor,4400,lande,,", "column outcome: expected landed, short.*mean 'landed'"),
    ("birch,pivot,floor,4400,success,,", "column outcome: .*unseen, not 'success'"),
    ("birch,pivot,floor,4400,,,", "column outcome: .* not nothing"),
    ("birch,pivot,floor,4400,landed,3.11.2025,", "column time_utc: expected a UTC time"),
    ("birch,pivot,floor,4400,landed,0001-01-01T00:00+09:00,", "column time_utc: expected"),
    ("birch,pivot,floor,4400,landed,,fast", "column brake_ms: expected a time in ms above 0"),
    ("birch,pivot,floor,4400,landed,,nan", "column brake_ms: expected"),
    ("birch,pivot,floor,4400,landed,,inf", "column brake_ms: expected"),
    ("birch,pivot,floor,4400,landed,,0", "column brake_ms: expected"),
    ('"birch"x,pivot,floor,4400,landed,,', "not CSV as in RFC 4180"),
    ('"birch,pivot,floor,4400,landed,,', "not CSV as in RFC 4180"),
]


@pytest.mark.parametrize(("record", "words"), BAD, ids=[record[:40] for record, _ in BAD])
def test_bad_records_name_file_line_and_column(record: str, words: str) -> None:
    good = "birch,pivot,floor,4400,landed,,"
    with pytest.raises(InputError, match=rf"^notes\.csv, line 3[:,].*{words}") as caught:
        read(f"{HEADER},time_utc,brake_ms\n{good}\n{record}\n{good}\n")
    assert len(str(caught.value)) < 200


def test_lines_are_counted_through_quoted_line_breaks() -> None:
    """A record's place is the line on which it begins."""
    text = f'{HEADER}\n"a\nb",pivot,floor,4400,landed\n\n"c\nd",pivot,floor,4400,gone\n'
    with pytest.raises(InputError, match=r"^notes\.csv, line 5, column outcome"):
        read(text)


def test_files_that_cannot_be_read(tmp_path: Path) -> None:
    with pytest.raises(InputError, match=r"none\.csv: cannot be read"):
        trials_from_csv(tmp_path / "none.csv")
    latin = tmp_path / "latin.csv"
    latin.write_bytes(f"{HEADER}\nbj\xf6rk,pivot,floor,4400,landed\n".encode("latin-1"))
    with pytest.raises(InputError, match=r"latin\.csv, line 2: expected UTF-8"):
        trials_from_csv(latin)


@given(
    st.lists(
        st.builds(
            row,
            module=st.text(
                st.characters(codec="utf-8", exclude_characters="\0"), min_size=1, max_size=8
            ).filter(lambda name: name == name.strip() != ""),
            speed_rpm=st.integers(1, 65_535),
            outcome=st.sampled_from(Outcome),
            brake_ms=st.none() | st.floats(0.001, 1e6),
        ),
        max_size=5,
    )
)
def test_what_a_csv_writer_writes_is_read_back(trials: list[ReviewTrial]) -> None:
    columns = [*HEADER.split(","), "brake_ms"]
    text = io.StringIO(newline="")
    writer = csv.writer(text)
    writer.writerow(columns)
    writer.writerows([getattr(each, column) for column in columns] for each in trials)
    assert read(text.getvalue()) == trials


def write_log(path: Path) -> None:
    """One session: two modules, one of them simulated, and motions of every source."""
    rows = [
        module_row(1, "birch"),
        module_row(2, "elm", simulated=1, kind="pebble"),
        *motion_rows(1, "landed", trial=1, source="sheet"),
        *motion_rows(2, "landed", trial=0, source="sheet"),
        *motion_rows(3, "refused", brake_ms=None),
        *motion_rows(4, "short", module=2, simulated=1, speed_rpm=4000),
    ]
    writer = LogWriter.open(path, OPENED)
    writer.append(2, bytes_in(2), rows)
    writer.close("closed", CLOSED_UTC)


def test_a_log_gives_its_trials_with_kinds_and_without_return_motions(tmp_path: Path) -> None:
    write_log(tmp_path / "log.db")
    reader = LogReader.open(tmp_path / "log.db")
    try:
        trials = trials_from_log(reader, None)
        assert trials_from_log(reader, 1) == trials
    finally:
        reader.close()
    assert [(each.module, each.kind, each.outcome, each.simulated) for each in trials] == [
        ("birch", "paver", "landed", False),
        ("birch", "paver", "refused", False),
        ("elm", "pebble", "short", True),
    ]
    assert [(each.speed_rpm, each.brake_ms, each.session) for each in trials] == [
        (4350, 41.5, 1),
        (4350, None, 1),
        (4000, 41.5, 1),
    ]
    # OPENED is at 08:00:00; the first sample motion is ordered ten seconds later.
    assert trials[0].time_utc == "2026-03-02T08:00:10.000Z"


def test_an_outcome_that_is_not_known_is_said(tmp_path: Path) -> None:
    writer = LogWriter.open(tmp_path / "log.db", OPENED)
    writer.append(2, bytes_in(2), [module_row(1, "birch"), *motion_rows(1, "flew")])
    writer.close("closed", CLOSED_UTC)
    reader = LogReader.open(tmp_path / "log.db")
    try:
        with pytest.raises(LogError, match=r"session 1: expected an outcome of landed.*'flew'"):
            trials_from_log(reader, 1)
    finally:
        reader.close()
