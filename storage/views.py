"""Views: the usual questions, each answered by one SELECT in any SQLite tool.

Owns their statements, as each migration wrote them. In a view ``module`` is a name, a
person's latest correction stands over the drawn outcome, and units stand in the names.
"""

from typing import Final

MOTIONS_NAMED: Final = """
CREATE VIEW motions_named AS
SELECT
    motions.session,
    motions.command,
    coalesce(
        strftime(
            '%Y-%m-%dT%H:%M:%fZ',
            sessions.opened_utc,
            printf(
                '%+.3f seconds',
                (commands.t_ns - sessions.opened_t_ns) / 1e9 / nullif(sessions.pace, 0)
            )
        ),
        sessions.opened_utc
    ) AS time_utc,
    coalesce(nullif(modules.name, ''), modules.identity, commands.identity, '') AS module,
    modules.kind,
    commands.identity,
    commands.boot,
    commands.number,
    motions.simulated,
    motions.motion,
    motions.setting,
    motions.direction,
    motions.speed_rpm,
    motions.trial,
    orders.source,
    coalesce(corrections.outcome, motions.outcome) AS outcome,
    motions.outcome AS drawn_outcome,
    corrections.person AS corrected_by,
    corrections.reason AS correction_reason,
    motions.turned_deg,
    motions.peak_tilt_deg,
    motions.face_before,
    motions.face_after,
    motions.settled,
    motions.peak_rate_dps,
    motions.wheel_at_brake_rpm,
    motions.brake_ms,
    motions.spin_up_ms,
    motions.settle_ms,
    motions.sag_V
FROM motions
JOIN sessions ON sessions.session = motions.session
LEFT JOIN modules
    ON modules.session = motions.session AND modules.module = motions.module
LEFT JOIN commands
    ON commands.session = motions.session AND commands.command = motions.command
LEFT JOIN orders
    ON orders.session = commands.session AND orders.order_no = commands.order_no
LEFT JOIN corrections
    ON corrections.session = motions.session
    AND corrections.record = (
        SELECT max(latest.record) FROM corrections AS latest
        WHERE latest.session = commands.session
            AND latest.identity = commands.identity
            AND latest.boot = commands.boot
            AND latest.number = commands.number
    )"""
"""Every motion with names. ``time_utc``: when it was ordered, fleet time turned to real time."""

# Counted: what a motion that ran its course can come to. A sheet's return motions (trial 0)
# are no trials; what a person typed is one, whatever its trial number.
TRIALS_COUNTED: Final = """
CREATE VIEW trials_counted AS
SELECT
    session, command, time_utc, module, kind, identity, motion, setting, direction, speed_rpm,
    outcome, outcome = 'landed' AS landed, simulated, trial, brake_ms
FROM motions_named
WHERE outcome IN ('landed', 'short', 'over', 'stuck', 'adrift')
    AND (trial > 0 OR source IS NOT 'sheet')"""

SUCCESS: Final = """
CREATE VIEW success AS
SELECT
    module, kind, motion, setting, speed_rpm,
    count(*) AS trials,
    sum(landed) AS landed,
    round(avg(landed), 4) AS rate,
    simulated
FROM trials_counted
GROUP BY module, kind, motion, setting, speed_rpm, simulated
ORDER BY module, motion, setting, speed_rpm, simulated"""
"""How often which module succeeds at which speed; ``rate`` from 0 to 1; simulated apart."""

FIRST_VIEWS: Final[tuple[str, ...]] = (MOTIONS_NAMED, TRIALS_COUNTED, SUCCESS)

SETTINGS_NOW: Final = """
CREATE VIEW settings_now AS
SELECT
    settings.session,
    coalesce(nullif(modules.name, ''), modules.identity, '') AS module,
    settings.setting,
    settings.value,
    settings.lowest,
    settings.highest,
    settings.lowest = settings.highest AS read_only,
    (settings.t_ns - sessions.opened_t_ns) / 1e9 AS t_s
FROM settings
JOIN sessions ON sessions.session = settings.session
LEFT JOIN modules
    ON modules.session = settings.session AND modules.module = settings.module
WHERE (settings.record, settings.part) = (
    SELECT latest.record, latest.part FROM settings AS latest
    WHERE latest.session = settings.session
        AND latest.module = settings.module
        AND latest.setting = settings.setting
    ORDER BY latest.record DESC, latest.part DESC
    LIMIT 1
)"""
"""Each module's settings as last read; ``t_s``: fleet seconds since the session's opening."""


def _number(at: int, signed: bool) -> str:
    """SQL for the 16-bit number, low byte first, at byte ``at`` of the 16 digits in ``digits``:
    SQLite has no function that reads a number out of a blob."""
    places = ((2 * at + 1, 16), (2 * at + 2, 1), (2 * at + 3, 4096), (2 * at + 4, 256))
    terms = [
        f"(instr('0123456789ABCDEF', substr(digits, {place}, 1)) - 1) * {weight}"
        for place, weight in places
    ]
    value = f"({' + '.join(terms)})"
    return f"(({value} + 32768) % 65536 - 32768)" if signed else value


TRACE_SAMPLES: Final = f"""
CREATE VIEW trace_samples AS
WITH RECURSIVE counted (session, command, sample) AS (
    SELECT session, command, 0 FROM traces WHERE samples > 0
    UNION ALL
    SELECT counted.session, counted.command, counted.sample + 1
    FROM counted
    JOIN traces ON traces.session = counted.session AND traces.command = counted.command
    WHERE counted.sample + 1 < traces.samples
)
SELECT
    session, command, sample, t_ms, braked,
    {_number(0, signed=True)} AS wheel_rpm,
    {_number(2, signed=True)} AS rate_dps,
    {_number(4, signed=True)} / 10.0 AS tilt_deg,
    {_number(6, signed=False)} / 1000.0 AS battery_V
FROM (
    SELECT
        counted.session, counted.command, counted.sample,
        counted.sample * traces.period_us / 1000.0 AS t_ms,
        counted.sample >= traces.brake_sample AS braked,
        hex(substr(traces.data, counted.sample * 8 + 1, 8)) AS digits
    FROM counted
    JOIN traces ON traces.session = counted.session AND traces.command = counted.command
)"""
"""Each sample of each trace; ``t_ms`` counts from the first one. Ask for one session and command:
the samples of all are counted out before a wider question is answered."""

SECOND_VIEWS: Final[tuple[str, ...]] = (SETTINGS_NOW, TRACE_SAMPLES)
