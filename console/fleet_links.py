"""What crosses a link: bytes to messages, both ways, and the link's own coming and going.

Owns the table from message type to rule, and when a link counts as bad. Must not know what a
message means: that is in the modules whose functions the tables name.
"""

from collections.abc import Callable
from typing import Any, Final, get_args

from console.fleet_clock import note_probe, take_echo
from console.fleet_commands import note_asked, note_command_sent, take_answer, take_facts
from console.fleet_kept import note_trace_ask, take_setting_value, take_trace_chunk
from console.fleet_modules import take_nameplate, take_presence, take_telemetry
from console.fleet_reports import take_bridge_status, take_fault_notice, take_lock_state
from console.fleet_rows import write_alarm, write_link_event
from console.fleet_state import FleetState, LinkState, Moment
from console.fleet_stop import take_stopped
from protocol.errors import RemoteProtocolError
from protocol.frame import Dropped
from protocol.message import (
    Answer,
    BridgeStatus,
    Command,
    Echo,
    Facts,
    FaultNotice,
    LockState,
    Nameplate,
    Packet,
    Presence,
    Probe,
    Query,
    SettingValue,
    Stopped,
    Telemetry,
    TraceAsk,
    TraceChunk,
    decode,
)
from protocol.seal import unsealed_form
from storage.records import BytesIn, BytesOut, FramesRefused, LinkChanged, SlotsPlanned

BAD_DROPS: Final = 16
BAD_WITHIN_FRAMES: Final = 64
"""A link is bad when 16 of its last 64 frames were dropped. A quarter lost makes resending cost
more than it mends; fewer are a radio's everyday, and a line each would bury what matters."""

UNKNOWN_MESSAGE: Final = "unknown message"
"""Reason of a drop that has a good check, but no meaning here."""

_Take = Callable[[FleetState, Moment, int, Any], None]

FROM_MODULES: Final[dict[type[Any], _Take]] = {
    Telemetry: take_telemetry,
    Answer: take_answer,
    Facts: take_facts,
    Presence: take_presence,
    Nameplate: take_nameplate,
    Stopped: take_stopped,
    Echo: take_echo,
    LockState: take_lock_state,
    SettingValue: take_setting_value,
    TraceChunk: take_trace_chunk,
    FaultNotice: take_fault_notice,
    BridgeStatus: take_bridge_status,
}
"""By message type, with the sender's address. Anything else that comes in is an echo of what a
console sent, and changes nothing."""

FROM_CONSOLE: Final[dict[type[Any], _Take]] = {
    **dict.fromkeys(get_args(Command), note_command_sent),
    Query: note_asked,
    Probe: note_probe,
    TraceAsk: note_trace_ask,
}
"""By message type, with the destination's address."""


def take_bytes_in(state: FleetState, at: Moment, record: BytesIn) -> None:
    """Fold what came over a link."""
    link = state.link_of(record.link)
    link.bytes_in += len(record.data)
    at.link = record.link
    before = link.frames_in + link.dropped
    good = 0
    packets = at.step.packets
    refused, link.refused = link.refused, {}
    for count, piece in enumerate(link.inbound.feed(record.data)):
        packet = None if count in refused else _read(piece, state.sealed)
        if packet is None:
            _drop(state, at, link, _why(piece, refused.get(count)), before + count)
            continue
        good += 1
        packets.append((record.link, packet))
        take = FROM_MODULES.get(type(packet.message))
        if take is not None:
            at.message = count
            take(state, at, packet.source, packet.message)
    link.frames_in += good


def take_bytes_out(state: FleetState, at: Moment, record: BytesOut) -> None:
    """Fold what was handed to a link: which commands were sent, which were asked about."""
    link = state.link_of(record.link)
    link.bytes_out += len(record.data)
    at.link = record.link
    for count, piece in enumerate(link.outbound.feed(record.data)):
        packet = _read(piece, state.sealed)
        if packet is None:
            continue
        link.frames_out += 1
        take = FROM_CONSOLE.get(type(packet.message))
        if take is not None:
            at.message = count
            take(state, at, packet.destination, packet.message)


def refuse_frames(state: FleetState, at: Moment, record: FramesRefused) -> None:
    """Keep what the gate said until the bytes it said it of."""
    link = state.link_of(record.link)
    link.refused = dict(zip(record.pieces, record.faults, strict=True))


def _read(piece: bytes | Dropped, sealed: bool) -> Packet | None:
    """Decode a piece; in a sealed session the gate has looked at its seal before."""
    if isinstance(piece, Dropped):
        return None
    try:
        return decode(unsealed_form(piece) if sealed else piece)
    except RemoteProtocolError:
        return None  # The caller counts it; the bytes themselves stay in the wire record.


def _why(piece: bytes | Dropped, fault: str | None) -> str:
    if fault is not None:
        return fault
    return piece.reason.value if isinstance(piece, Dropped) else UNKNOWN_MESSAGE


def _drop(state: FleetState, at: Moment, link: LinkState, reason: str, frame_count: int) -> None:
    """Count a dropped frame, and tell when they become too many; again only once they were few
    in between."""
    link.dropped += 1
    link.reasons[reason] = link.reasons.get(reason, 0) + 1
    link.drops_at.append(frame_count)
    if len(link.drops_at) < BAD_DROPS:
        return
    bad = frame_count - link.drops_at.popleft() < BAD_WITHIN_FRAMES
    if bad and not link.bad:
        counts = ", ".join(f"{each} {count}" for each, count in sorted(link.reasons.items()))
        text = f"link {link.link}: {BAD_DROPS} of the last {BAD_WITHIN_FRAMES} frames dropped"
        write_alarm(at, None, "damage", f"{text} (in all: {counts})")
        state.notice(at, text)
    link.bad = bad


def share_out(state: FleetState, at: Moment, record: SlotsPlanned) -> None:
    """Tell a person where a link's channel carries less telemetry than was asked for."""
    if record.period_ms > record.asked_ms:
        state.notice(
            at,
            f"link {record.link}: {record.air_rate_bps} bits a second carry the telemetry of "
            f"{record.modules} modules every {record.period_ms / 1000:g} s, not every "
            f"{record.asked_ms / 1000:g} s, in {record.duty_percent:g} % of the time",
        )
    if record.left_out:
        state.notice(at, f"link {record.link}: no telemetry slot for {record.left_out} modules")


def change_link(state: FleetState, at: Moment, record: LinkChanged) -> None:
    """Note that a link was opened, lost or closed. What had begun to come is given up: it would
    only spoil the first frame after."""
    link = state.link_of(record.link)
    link.url, link.state = record.url, record.state
    link.inbound.reset()
    link.outbound.reset()
    write_link_event(at, record)
    if link.gone:
        state.bridges.pop(record.link, None)
    if record.state == "lost":
        write_alarm(at, None, "link lost", f"link {record.link}, {record.url}: {record.detail}")
        state.notice(at, f"link {record.link} lost: {record.detail}")
