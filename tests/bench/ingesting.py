"""`ingest_vs_floor`: bytes in to fleet state and committed rows, against a hand loop.

Unit: frames a second. The floor decodes by hand, keeps the newest values of each module in a
dictionary, and writes two tables (bytes; telemetry) with executemany, all in one transaction.
Ours folds every record through the reducer and hands it to the log's writer, with keys, events
and views, until the log is closed: everything is on the disk when the time is taken.
"""

import sqlite3
import tempfile
from collections.abc import Callable
from pathlib import Path

from cobs import cobs
from crcmod.predefined import mkCrcFun

from console.fleet import FleetReducer
from storage.records import BytesIn, LinkChanged, Record, SessionOpened
from storage.writer import LogWriter
from tests.bench.decoding import CHECK, FIELDS
from tests.bench.measure import Figure, rate_ratio
from tests.bench.stream import EPOCH, Stream, make_stream

FRAMES = 40_000
ROUNDS = 7
TELEMETRY_COLUMNS = 13
VIEW_EVERY_RECORDS = 100


def by_hand(stream: Stream, folder: Path) -> Callable[[], int]:
    """The floor's loop; a new file each time."""
    crc: Callable[[bytes], int] = mkCrcFun("crc-32c")
    chunks = stream.chunks()
    count = 0

    def loop() -> int:
        nonlocal count
        count += 1
        connection = sqlite3.connect(folder / f"floor{count}.db")
        connection.execute("PRAGMA journal_mode = WAL")
        connection.execute("PRAGMA synchronous = NORMAL")
        connection.execute("CREATE TABLE wire (t_ns INTEGER, data BLOB)")
        columns = ", ".join(f"c{column}" for column in range(TELEMETRY_COLUMNS))
        connection.execute(f"CREATE TABLE telemetry ({columns})")
        wire, rows, newest, rest = [], [], {}, b""
        for t_ns, chunk in enumerate(chunks):
            wire.append((t_ns, chunk))
            *pieces, rest = (rest + chunk).split(b"\0")
            for piece in pieces:
                raw = cobs.decode(piece)
                payload = raw[:-4]
                (check,) = CHECK.unpack_from(raw, len(payload))
                if crc(payload) == check:
                    fields = FIELDS.unpack_from(payload)
                    newest[fields[3]] = fields
                    rows.append((t_ns, *fields[3:]))
        connection.executemany("INSERT INTO wire VALUES (?, ?)", wire)
        marks = ", ".join("?" * TELEMETRY_COLUMNS)
        connection.executemany(f"INSERT INTO telemetry VALUES ({marks})", rows)
        connection.commit()
        connection.close()
        return len(rows)

    return loop


def ours(stream: Stream, folder: Path) -> Callable[[], int]:
    """The console's own way, without threads of a link; a new log each time."""
    chunks = [stream.roll, *stream.chunks()]
    count = 0

    def loop() -> int:
        nonlocal count
        count += 1
        opened = SessionOpened(0, "2026-01-01T00:00:00Z", "bench", EPOCH, 1.0, "bench")
        log = LogWriter.open(folder / f"ours{count}.db", opened)
        fleet = FleetReducer()
        records: list[Record] = [opened, LinkChanged(0, 0, "bench", "open", "")]
        records += [BytesIn(t_ns, 0, chunk) for t_ns, chunk in enumerate(chunks)]
        frames = 0
        for number, record in enumerate(records, start=1):
            step = fleet.apply(number, record)
            log.append(number, record, step.rows)
            frames += len(step.packets)
            if number % VIEW_EVERY_RECORDS == 0:
                fleet.view(number)
        log.close("closed", "2026-01-01T01:00:00Z")
        return frames

    return loop


def check_rows(log: Path, frames: int) -> None:
    """Both sides must have written every frame. Raises RuntimeError."""
    connection = sqlite3.connect(log)
    (written,) = connection.execute("SELECT count(*) FROM telemetry").fetchone()
    connection.close()
    if written != frames:
        raise RuntimeError(f"{log.name} holds {written} of {frames} frames")


def ingest_vs_floor() -> Figure:
    """Measure."""
    stream = make_stream(200, FRAMES)
    with tempfile.TemporaryDirectory(prefix="bench-") as name:
        folder = Path(name)
        figure = rate_ratio(ours(stream, folder), by_hand(stream, folder), ROUNDS)
        check_rows(folder / "ours1.db", FRAMES)
        check_rows(folder / "floor1.db", FRAMES)
    return figure
