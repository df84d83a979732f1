"""Tables: the statements that make them, as the first migration wrote them.

Owns the stored layout's first version, which never changes: a later version is a further
migration in schema.py, with its statements in later_tables.py. Column order follows
storage/rows.py; a test compares the two. Units stand in the names; identities are 16 hexadecimal
digits, since SQLite's integers are signed.

Tables written at the line's rate have no rowid: their key is the tree's order, which saves a
second tree (measured: 20 % faster and a sixth smaller than a rowid table with the same key).
Tables with long texts keep their rowid, as SQLite's manual advises for rows beyond a twentieth
of a page. Not declared STRICT, so that SQLite tools older than 3.37 can open the file.
"""

from typing import Final

SESSIONS: Final = """
CREATE TABLE sessions (
    session INTEGER PRIMARY KEY,
    uid TEXT NOT NULL UNIQUE,
    opened_utc TEXT NOT NULL,
    opened_t_ns INTEGER NOT NULL,
    closed_utc TEXT,
    ending TEXT NOT NULL DEFAULT '',
    operator TEXT NOT NULL,
    epoch INTEGER NOT NULL,
    pace REAL NOT NULL,
    program TEXT NOT NULL,
    lost_records INTEGER NOT NULL DEFAULT 0,
    lost_rows INTEGER NOT NULL DEFAULT 0
)"""

WIRE: Final = """
CREATE TABLE wire (
    session INTEGER NOT NULL,
    record INTEGER NOT NULL,
    t_ns INTEGER NOT NULL,
    link INTEGER NOT NULL,
    outbound INTEGER NOT NULL,
    data BLOB NOT NULL,
    PRIMARY KEY (session, record)
) WITHOUT ROWID"""

RECORDS: Final = """
CREATE TABLE records (
    session INTEGER NOT NULL,
    record INTEGER NOT NULL,
    t_ns INTEGER NOT NULL,
    sort TEXT NOT NULL,
    body TEXT NOT NULL,
    PRIMARY KEY (session, record)
)"""

MODULES: Final = """
CREATE TABLE modules (
    session INTEGER NOT NULL,
    module INTEGER NOT NULL,
    identity TEXT NOT NULL,
    simulated INTEGER NOT NULL,
    address INTEGER NOT NULL,
    name TEXT NOT NULL,
    kind TEXT NOT NULL,
    firmware INTEGER NOT NULL,
    wheel_max_rpm INTEGER NOT NULL,
    boot INTEGER NOT NULL,
    boots_seen INTEGER NOT NULL,
    PRIMARY KEY (session, module)
) WITHOUT ROWID"""

TELEMETRY: Final = """
CREATE TABLE telemetry (
    session INTEGER NOT NULL,
    record INTEGER NOT NULL,
    part INTEGER NOT NULL,
    t_ns INTEGER NOT NULL,
    module INTEGER NOT NULL,
    boot INTEGER NOT NULL,
    sequence INTEGER NOT NULL,
    module_time_ms INTEGER NOT NULL,
    activity INTEGER NOT NULL,
    flags INTEGER NOT NULL,
    face_up INTEGER NOT NULL,
    wheel_rpm INTEGER NOT NULL,
    battery_mV INTEGER NOT NULL,
    temperature_cC INTEGER NOT NULL,
    tilt_ddeg INTEGER NOT NULL,
    PRIMARY KEY (session, record, part)
) WITHOUT ROWID"""

ORDERS: Final = """
CREATE TABLE orders (
    session INTEGER NOT NULL,
    order_no INTEGER NOT NULL,
    t_ns INTEGER NOT NULL,
    source TEXT NOT NULL,
    text TEXT NOT NULL,
    commands INTEGER NOT NULL,
    PRIMARY KEY (session, order_no)
)"""

COMMANDS: Final = """
CREATE TABLE commands (
    session INTEGER NOT NULL,
    command INTEGER NOT NULL,
    order_no INTEGER NOT NULL,
    t_ns INTEGER NOT NULL,
    module INTEGER NOT NULL,
    identity TEXT NOT NULL,
    boot INTEGER NOT NULL,
    epoch INTEGER NOT NULL,
    number INTEGER NOT NULL,
    motion TEXT NOT NULL,
    setting TEXT NOT NULL,
    direction TEXT NOT NULL,
    speed_rpm INTEGER NOT NULL,
    duration_ms INTEGER NOT NULL,
    trial INTEGER NOT NULL,
    sends INTEGER NOT NULL,
    repeats_ignored INTEGER NOT NULL,
    ending TEXT,
    reason TEXT,
    final INTEGER NOT NULL,
    ended_t_ns INTEGER,
    PRIMARY KEY (session, command)
) WITHOUT ROWID"""

COMMAND_EVENTS: Final = """
CREATE TABLE command_events (
    session INTEGER NOT NULL,
    record INTEGER NOT NULL,
    part INTEGER NOT NULL,
    t_ns INTEGER NOT NULL,
    command INTEGER NOT NULL,
    event TEXT NOT NULL,
    detail TEXT NOT NULL,
    PRIMARY KEY (session, record, part)
) WITHOUT ROWID"""

MOTIONS: Final = """
CREATE TABLE motions (
    session INTEGER NOT NULL,
    command INTEGER NOT NULL,
    module INTEGER NOT NULL,
    motion TEXT NOT NULL,
    setting TEXT NOT NULL,
    direction TEXT NOT NULL,
    speed_rpm INTEGER NOT NULL,
    trial INTEGER NOT NULL,
    simulated INTEGER NOT NULL,
    outcome TEXT NOT NULL,
    turned_deg REAL,
    peak_tilt_deg REAL,
    face_before INTEGER,
    face_after INTEGER,
    settled INTEGER,
    peak_rate_dps INTEGER,
    wheel_at_brake_rpm INTEGER,
    brake_ms REAL,
    spin_up_ms INTEGER,
    settle_ms INTEGER,
    sag_V REAL,
    PRIMARY KEY (session, command)
) WITHOUT ROWID"""

LINK_EVENTS: Final = """
CREATE TABLE link_events (
    session INTEGER NOT NULL,
    record INTEGER NOT NULL,
    t_ns INTEGER NOT NULL,
    link INTEGER NOT NULL,
    url TEXT NOT NULL,
    state TEXT NOT NULL,
    detail TEXT NOT NULL,
    PRIMARY KEY (session, record)
)"""

SHEETS: Final = """
CREATE TABLE sheets (
    session INTEGER NOT NULL,
    sheet INTEGER NOT NULL,
    opened_t_ns INTEGER NOT NULL,
    closed_t_ns INTEGER,
    name TEXT NOT NULL,
    seed INTEGER NOT NULL,
    planned INTEGER NOT NULL,
    stopped TEXT,
    text TEXT NOT NULL,
    PRIMARY KEY (session, sheet)
)"""

ALARMS: Final = """
CREATE TABLE alarms (
    session INTEGER NOT NULL,
    record INTEGER NOT NULL,
    part INTEGER NOT NULL,
    t_ns INTEGER NOT NULL,
    module INTEGER,
    alarm TEXT NOT NULL,
    detail TEXT NOT NULL,
    PRIMARY KEY (session, record, part)
) WITHOUT ROWID"""

REMARKS: Final = """
CREATE TABLE remarks (
    session INTEGER NOT NULL,
    record INTEGER NOT NULL,
    t_ns INTEGER NOT NULL,
    utc TEXT NOT NULL,
    person TEXT NOT NULL,
    text TEXT NOT NULL,
    PRIMARY KEY (session, record)
)"""

CORRECTIONS: Final = """
CREATE TABLE corrections (
    session INTEGER NOT NULL,
    record INTEGER NOT NULL,
    t_ns INTEGER NOT NULL,
    utc TEXT NOT NULL,
    identity TEXT NOT NULL,
    boot INTEGER NOT NULL,
    number INTEGER NOT NULL,
    outcome TEXT NOT NULL,
    person TEXT NOT NULL,
    reason TEXT NOT NULL,
    PRIMARY KEY (session, record)
)"""

CORRECTIONS_BY_MOTION: Final = """
CREATE INDEX corrections_by_motion ON corrections (session, identity, boot, number, record)"""

FIRST_TABLES: Final[tuple[str, ...]] = (
    SESSIONS,
    WIRE,
    RECORDS,
    MODULES,
    TELEMETRY,
    ORDERS,
    COMMANDS,
    COMMAND_EVENTS,
    MOTIONS,
    LINK_EVENTS,
    SHEETS,
    ALARMS,
    REMARKS,
    CORRECTIONS,
    CORRECTIONS_BY_MOTION,
)
