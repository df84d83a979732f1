"""Views against counts made by hand, and the latest correction over the drawn outcome."""

import shutil
import sqlite3
import struct
import subprocess
from collections.abc import Callable, Sequence
from pathlib import Path
from typing import Any

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from storage.connect import connect_to_write
from storage.inserts import Inserter, group
from storage.later_tables import SECOND_TABLES
from storage.log_file import LogFile
from storage.records import SessionOpened
from storage.rows import CorrectionRow, Row, SettingRow, TraceRow
from storage.tables import FIRST_TABLES
from storage.views import SECOND_VIEWS
from tests.support.log_samples import (
    OPENED,
    ask,
    expired,
    identity,
    module_row,
    motion_rows,
)

Fill = Callable[[Sequence[Row]], int]


@pytest.fixture
def path(tmp_path: Path) -> Path:
    return tmp_path / "fleet.db"


@pytest.fixture
def fill(path: Path) -> Fill:
    """Write rows into a new session and return its number."""

    def write(rows: Sequence[Row], opened: SessionOpened = OPENED) -> int:
        log = LogFile.open(path, opened, connect_to_write)
        log.write([(1, expired(1), rows)], durable=False, lost_records=0, lost_rows=0)
        log.close()
        return log.session

    return write


def correct(record: int, command: int, outcome: str, *, boot: int = 77) -> CorrectionRow:
    return CorrectionRow(
        record=record,
        t_ns=record,
        utc="2026-03-02T08:50:00Z",
        identity=identity(1),
        boot=boot,
        number=command + 100,
        outcome=outcome,
        person="Jo",
        reason="looked at the video",
    )


def test_success_by_module_and_speed(fill: Fill, path: Path) -> None:
    """By hand: birch at 4350 has 5 counted, 3 landed; at 4700 2 and 2; elm at 4350 1 and 0."""
    outcomes = ["landed", "landed", "short", "landed", "stuck", "refused", "unseen", "cut"]
    rows: list[Row] = [module_row(1, "birch"), module_row(2, "elm", kind="pebble")]
    for command, outcome in enumerate(outcomes, 1):
        rows += motion_rows(command, outcome)
    rows += motion_rows(20, "landed", speed_rpm=4_700) + motion_rows(21, "landed", speed_rpm=4_700)
    rows += motion_rows(30, "over", module=2)
    fill(rows)
    assert ask(path, "SELECT * FROM success") == [
        ("birch", "paver", "pivot", "floor", 4350, 5, 3, 0.6, 0),
        ("birch", "paver", "pivot", "floor", 4700, 2, 2, 1.0, 0),
        ("elm", "pebble", "pivot", "floor", 4350, 1, 0, 0.0, 0),
    ]


def test_success_adds_up_over_sessions(fill: Fill, path: Path) -> None:
    fill([module_row(1, "birch"), *motion_rows(1, "landed")])
    fill(
        [
            module_row(4, "birch"),
            *motion_rows(1, "short", module=4),
            *motion_rows(2, "adrift", module=4),
        ]
    )
    assert ask(path, "SELECT module, trials, landed, rate FROM success") == [
        ("birch", 3, 1, 0.3333)
    ]


def test_simulated_motions_stand_apart(fill: Fill, path: Path) -> None:
    fill([module_row(1, "birch"), *motion_rows(1, "landed")])
    fill([module_row(1, "birch", simulated=1), *motion_rows(1, "short", simulated=1)])
    assert ask(path, "SELECT module, trials, landed, simulated FROM success") == [
        ("birch", 1, 1, 0),
        ("birch", 1, 0, 1),
    ]


def test_return_motions_of_a_sheet_are_no_trials(fill: Fill, path: Path) -> None:
    rows: list[Row] = [module_row(1, "birch")]
    rows += motion_rows(1, "landed", trial=1, source="sheet")
    rows += motion_rows(2, "short", trial=0, source="sheet")
    rows += motion_rows(3, "landed", trial=0, source="typed")
    fill(rows)
    assert ask(path, "SELECT trials, landed FROM success") == [(2, 2)]
    assert ask(path, "SELECT command, trial FROM trials_counted ORDER BY command") == [
        (1, 1),
        (3, 0),
    ]
    assert ask(path, "SELECT count(*) FROM motions_named") == [(3,)]


def test_the_columns_of_success_are_plain(fill: Fill, path: Path) -> None:
    fill([])
    names = [column[1] for column in ask(path, "PRAGMA table_info(success)")]
    assert names == [
        *("module", "kind", "motion", "setting", "speed_rpm"),
        *("trials", "landed", "rate", "simulated"),
    ]


def test_the_latest_correction_overrules(fill: Fill, path: Path) -> None:
    rows: list[Row] = [module_row(1, "birch"), *motion_rows(1, "short"), *motion_rows(2, "short")]
    rows += [correct(50, 1, "landed"), correct(60, 1, "adrift"), correct(55, 1, "over")]
    fill(rows)
    found = ask(
        path,
        "SELECT command, outcome, drawn_outcome, corrected_by, correction_reason"
        " FROM motions_named ORDER BY command",
    )
    assert found == [
        (1, "adrift", "short", "Jo", "looked at the video"),
        (2, "short", "short", None, None),
    ]


def test_a_correction_moves_the_count(fill: Fill, path: Path) -> None:
    rows: list[Row] = [module_row(1, "birch")]
    rows += [*motion_rows(1, "short"), *motion_rows(2, "landed"), *motion_rows(3, "unseen")]
    rows += [correct(50, 1, "landed"), correct(51, 3, "landed"), correct(52, 2, "cut")]
    fill(rows)
    assert ask(path, "SELECT trials, landed FROM success") == [(2, 2)]


@pytest.mark.parametrize(
    "other",
    [
        correct(50, 1, "landed", boot=78),
        correct(50, 2, "landed"),
        correct(50, 1, "landed")._replace(identity=identity(2)),
    ],
)
def test_a_correction_of_another_motion_changes_nothing(
    fill: Fill, path: Path, other: CorrectionRow
) -> None:
    fill([module_row(1, "birch"), *motion_rows(1, "short"), other])
    assert ask(path, "SELECT outcome FROM motions_named") == [("short",)]


def test_a_correction_in_another_session_changes_nothing(fill: Fill, path: Path) -> None:
    fill([module_row(1, "birch"), *motion_rows(1, "short")])
    fill([correct(50, 1, "landed")])
    assert ask(path, "SELECT outcome FROM motions_named") == [("short",)]


def test_a_nameless_module_shows_its_identity(fill: Fill, path: Path) -> None:
    fill([module_row(1, ""), *motion_rows(1, "landed")])
    assert ask(path, "SELECT module FROM success") == [("00000000000000a1",)]


def test_a_motion_without_its_module_is_not_lost(fill: Fill, path: Path) -> None:
    fill(motion_rows(1, "landed"))
    assert ask(path, "SELECT module, kind, outcome FROM motions_named") == [
        (identity(1), None, "landed")
    ]


@pytest.mark.parametrize(
    ("opened_utc", "pace", "expected"),
    [
        ("2026-03-02T08:00:00Z", 1.0, "2026-03-02T08:00:10.000Z"),
        ("2026-03-02T08:00:00Z", 4.0, "2026-03-02T08:00:02.500Z"),
        ("2026-12-31T23:59:55.250Z", 1.0, "2027-01-01T00:00:05.250Z"),
        ("2026-03-02T08:00:00+02:00", 1.0, "2026-03-02T06:00:10.000Z"),
        ("2026-03-02T08:00:00Z", 0.0, "2026-03-02T08:00:00.000Z"),
        ("on Monday", 1.0, "on Monday"),
    ],
)
def test_the_time_of_a_motion_in_utc(
    fill: Any, path: Path, opened_utc: str, pace: float, expected: str
) -> None:
    """Command 1 was ordered 10 s of fleet time after the opening; 4 of those are one real."""
    opened = SessionOpened(OPENED.t_ns, opened_utc, "Mira", 1, pace, "x")
    fill([module_row(1, "birch"), *motion_rows(1, "landed")], opened)
    assert ask(path, "SELECT time_utc FROM motions_named") == [(expected,)]


def test_measured_values_pass_through_with_their_units(fill: Fill, path: Path) -> None:
    fill([module_row(1, "birch"), *motion_rows(1, "landed")])
    (found,) = ask(
        path,
        "SELECT turned_deg, peak_tilt_deg, face_before, face_after, settled, peak_rate_dps,"
        " wheel_at_brake_rpm, brake_ms, spin_up_ms, settle_ms, sag_V FROM motions_named",
    )
    assert found == (90.1, 95.0, 1, 2, 1, 410, 4330, 41.5, 900, 350, 0.21)


def test_the_shell_shows_success(fill: Fill, path: Path) -> None:
    """A person with SQLite's own shell and nothing else."""
    shell = shutil.which("sqlite3")
    if shell is None:
        pytest.skip("needs the sqlite3 shell")
    fill([module_row(1, "birch"), *motion_rows(1, "landed"), *motion_rows(2, "short")])
    done = subprocess.run(
        [shell, str(path), "select * from success"], capture_output=True, text=True, check=True
    )
    assert done.stdout.strip() == "birch|paver|pivot|floor|4350|2|1|0.5|0"


def test_many_motions_are_answered_through_keys(fill: Fill, path: Path) -> None:
    """No scan of commands, modules, orders or corrections for each motion."""
    fill([])
    connection = sqlite3.connect(path)
    Inserter(1).insert(connection, group([(2, expired(2), motion_rows(1, "landed"))]))
    plan = [row[3] for row in connection.execute("EXPLAIN QUERY PLAN SELECT * FROM motions_named")]
    connection.close()
    scans = [line for line in plan if line.startswith("SCAN")]
    assert len(scans) == 1, plan
    assert not [line for line in plan if "AUTOMATIC" in line], plan


# -- settings and traces -----------------------------------------------------------------


def test_settings_now_are_those_read_last(fill: Fill, path: Path) -> None:
    limit, low = "wheel_limit_rpm", "battery_low_mv"
    rows: list[Row] = [module_row(1, "birch"), module_row(2, "")]
    rows += [
        SettingRow(1, limit, 10, 0, OPENED.t_ns + 1_500_000_000, 9000, 100, 9000),
        SettingRow(1, limit, 30, 1, OPENED.t_ns + 4_000_000_000, 5000, 100, 9000),
        SettingRow(1, limit, 30, 0, OPENED.t_ns + 4_000_000_000, 6000, 100, 9000),
        SettingRow(1, low, 20, 4, OPENED.t_ns + 2_000_000_000, 3500, 3000, 4000),
        SettingRow(2, "calibration", 20, 2, OPENED.t_ns + 2_000_000_000, 7, 7, 7),
    ]
    fill(rows)
    assert ask(path, "SELECT * FROM settings_now ORDER BY module, setting") == [
        (1, identity(2), "calibration", 7, 7, 7, 1, 2.0),
        (1, "birch", low, 3500, 3000, 4000, 0, 2.0),
        (1, "birch", limit, 5000, 100, 9000, 0, 4.0),
    ]


SAMPLES = [
    (0, 0, 0, 4100),
    (-1, 1, -1, 65_535),
    (32_767, -32_768, 256, 255),
    (-256, 4660, -4660, 0),
]
"""Borders of a signed and an unsigned number of 16 bits, and bytes that differ (0x1234)."""


def test_samples_of_a_trace_are_read_out_of_its_bytes(fill: Fill, path: Path) -> None:
    """Packed by Python's struct, little-endian; read by SQL alone."""
    data = b"".join(struct.pack("<hhhH", *each) for each in SAMPLES)
    fill([TraceRow(3, 2500, 4, 2, 20_500, data), TraceRow(4, 1000, 0, 0, 0, b"")])
    found = ask(path, "SELECT * FROM trace_samples WHERE session = 1 AND command = 3")
    assert found == [
        (1, 3, number, number * 2.5, int(number >= 2), rpm, dps, ddeg / 10, mV / 1000)
        for number, (rpm, dps, ddeg, mV) in enumerate(SAMPLES)
    ]
    assert ask(path, "SELECT count(*) FROM trace_samples") == [(4,)]


@settings(max_examples=30, deadline=None)
@given(
    st.lists(
        st.tuples(*[st.integers(-(2**15), 2**15 - 1)] * 3, st.integers(0, 2**16 - 1)), max_size=70
    )
)
def test_any_samples_come_out_as_they_went_in(samples: list[tuple[int, ...]]) -> None:
    data = b"".join(struct.pack("<hhhH", *each) for each in samples)
    connection = sqlite3.connect(":memory:")
    for statement in FIRST_TABLES + SECOND_TABLES + SECOND_VIEWS:
        connection.execute(statement)
    connection.execute("INSERT INTO traces VALUES (1, 1, 1000, ?, 0, 0, ?)", (len(samples), data))
    found = connection.execute(
        "SELECT wheel_rpm, rate_dps, tilt_deg, battery_V FROM trace_samples ORDER BY sample"
    )
    assert found.fetchall() == [(rpm, dps, ddeg / 10, mV / 1000) for rpm, dps, ddeg, mV in samples]
    connection.close()
