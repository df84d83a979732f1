"""What modules and bridges say beside telemetry and answers, with everyday values.

For sessions in which all of it occurs: replay and rebuild must come to the same end with it.
"""

from protocol.codes import BRIDGE_ADDRESS, Fault, SettingId, identity_bits
from protocol.message import (
    BOUND_UNKNOWN,
    BridgeStatus,
    Echo,
    FaultNotice,
    LockState,
    Message,
    Probe,
    SettingValue,
    TraceAsk,
    TraceChunk,
)
from protocol.trace import TraceHead, TraceSample, pack_trace
from tests.support.wire_script import BOOT, CONSOLE, EPOCH, IDENTITY, Script

BITS = identity_bits(IDENTITY)
SETTINGS = {
    SettingId.WHEEL_LIMIT_RPM: (9000, 500, 9000),
    SettingId.TELEMETRY_PERIOD_MS: (500, 50, 5000),
    SettingId.BATTERY_LOW_MV: (3500, 3200, 3900),
    SettingId.GROUPS: (0b101, -(2**31), 2**31 - 1),
    SettingId.CALIBRATION: (4, 4, 4),
}


def probe(sequence: int) -> Probe:
    """A Probe that tells nothing yet."""
    return Probe(CONSOLE, BOOT, sequence, BITS, 0, BOUND_UNKNOWN)


def echo(sequence: int, received_us: int, held_us: int = 150) -> Echo:
    """Its answer."""
    return Echo(BOOT, sequence, BITS, received_us, held_us)


def lock_state(person: str = "Ada") -> LockState:
    """Locked out by this person, or by nobody."""
    return LockState(BOOT, BITS, int(bool(person)), person.encode())


def fault(standing: int, time_ms: int, which: int = Fault.OVERHEATED) -> FaultNotice:
    """Too hot, at 61.2 degrees."""
    return FaultNotice(BOOT, BITS, which, standing, time_ms, 612)


def settings_read(**changes: int) -> list[SettingValue]:
    """All settings, as read."""
    made = [
        SettingValue(BOOT, BITS, setting, len(SETTINGS), *figures)
        for setting, figures in SETTINGS.items()
    ]
    return [each._replace(**changes) for each in made]


def trace_chunks(number: int, samples: int = 7) -> list[TraceChunk]:
    """The whole trace of the motion of this wire number."""
    made = [TraceSample(300 * at, -at, 9 * at, 4000 - at) for at in range(samples)]
    datas = pack_trace(TraceHead(2500, samples, samples - 2, 20_500), made)
    total = len(datas)
    return [TraceChunk(BOOT, number, BITS, at, total, data) for at, data in enumerate(datas)]


def trace_ask(number: int, first: int = 0, wanted: int = 1) -> TraceAsk:
    """The question about it."""
    return TraceAsk(EPOCH, BOOT, number, BITS, first, wanted)


def bridge_status(sequence: int, uptime_ms: int) -> BridgeStatus:
    """A bridge in good health."""
    return BridgeStatus(sequence, uptime_ms, 100, 200, 3, 1, 9, -61, -97)


def upkeep(script: Script, number: int) -> Script:
    """What a console asks by itself, and what comes back: clock, settings, trace, bridge."""
    script.sent(probe(number)).heard(echo(number, 1_000 * number + 300))
    script.heard(*settings_read()[: number + 1])
    script.sent(trace_ask(number)).heard(*trace_chunks(number))
    return script.heard(bridge_status(number, 2_000 * number), address=BRIDGE_ADDRESS)


def words(number: int) -> list[Message]:
    """One of each that a module may say at any time, varied by ``number``."""
    return [
        echo(number, 1_000 * number + 300),
        lock_state(("Ada", "", "Mira")[number % 3]),
        fault(number % 2, 100 * number),
        settings_read()[number % len(SETTINGS)]._replace(value=3500 + number % 3),
        trace_chunks(number)[number % 4],
    ]
