"""Later tables: what each migration after the first added to the stored layout.

Owns those statements. None ever changes once released; a further version is a further tuple here
and a further line in schema.py. Rules of layout, names and units are those of tables.py. A column
that is added takes a default, or NULL, in the rows that are there.
"""

from typing import Final

SETTINGS: Final = """
CREATE TABLE settings (
    session INTEGER NOT NULL,
    module INTEGER NOT NULL,
    setting TEXT NOT NULL,
    record INTEGER NOT NULL,
    part INTEGER NOT NULL,
    t_ns INTEGER NOT NULL,
    value INTEGER NOT NULL,
    lowest INTEGER NOT NULL,
    highest INTEGER NOT NULL,
    PRIMARY KEY (session, module, setting, record, part)
) WITHOUT ROWID"""

TRACES: Final = """
CREATE TABLE traces (
    session INTEGER NOT NULL,
    command INTEGER NOT NULL,
    period_us INTEGER NOT NULL,
    samples INTEGER NOT NULL,
    brake_sample INTEGER NOT NULL,
    started_ms INTEGER NOT NULL,
    data BLOB NOT NULL,
    PRIMARY KEY (session, command)
)"""

BRIDGE_STATUS: Final = """
CREATE TABLE bridge_status (
    session INTEGER NOT NULL,
    record INTEGER NOT NULL,
    part INTEGER NOT NULL,
    t_ns INTEGER NOT NULL,
    link INTEGER NOT NULL,
    uptime_ms INTEGER NOT NULL,
    frames_from_console INTEGER NOT NULL,
    frames_to_console INTEGER NOT NULL,
    dropped INTEGER NOT NULL,
    queue INTEGER NOT NULL,
    queue_most INTEGER NOT NULL,
    signal_dBm INTEGER NOT NULL,
    noise_dBm INTEGER NOT NULL,
    PRIMARY KEY (session, record, part)
) WITHOUT ROWID"""

SECOND_TABLES: Final[tuple[str, ...]] = (
    "ALTER TABLE modules ADD COLUMN locked_by TEXT",
    "ALTER TABLE commands ADD COLUMN latest_ms INTEGER NOT NULL DEFAULT 0",
    "ALTER TABLE commands ADD COLUMN stage INTEGER NOT NULL DEFAULT 0",
    "ALTER TABLE commands ADD COLUMN person TEXT NOT NULL DEFAULT ''",
    "ALTER TABLE commands ADD COLUMN value INTEGER NOT NULL DEFAULT 0",
    "ALTER TABLE motions ADD COLUMN started_ms INTEGER",
    SETTINGS,
    TRACES,
    BRIDGE_STATUS,
)
"""Settings, traces and bridges; who locked a module out; what a command carries since."""
