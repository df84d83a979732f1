"""Reports beside telemetry: lock states, faults, and what a bridge says of itself.

Owns how each is read and from whom it may come. What they lead to is fleet_conditions.py's, and
for the bridge here. Must not know commands.
"""

from typing import Final

from console.fleet_conditions import hear_fault, hear_lock, hear_moment
from console.fleet_modules import sender_of
from console.fleet_parts import BridgeState
from console.fleet_rows import write_alarm, write_bridge_status
from console.fleet_state import FleetState, Moment
from protocol.codes import BRIDGE_ADDRESS
from protocol.message import BridgeStatus, FaultNotice, LockState, field_text

_HALF_16: Final = 0x8000
_HALF_32: Final = 0x8000_0000


def take_lock_state(state: FleetState, at: Moment, address: int, message: LockState) -> None:
    """Take who has locked a module out, if anybody has."""
    module = sender_of(state, at, address, message.identity_bits, message.boot)
    if module is not None:
        hear_lock(state, at, module, bool(message.locked), field_text(message.person))


def take_fault_notice(state: FleetState, at: Moment, address: int, message: FaultNotice) -> None:
    """Take a fault's beginning, end or moment. A module tells why it restarted as soon as it can,
    perhaps before its presence; what stands it tells again when the roll is called."""
    module = sender_of(state, at, address, message.identity_bits, message.boot)
    if module is not None:
        hear_fault(state, at, module, message)
        return
    early = state.by_sender.get((at.link, address, message.identity_bits))
    if early is not None and message.boot not in early.boots and not message.standing:
        hear_moment(state, at, early, message)


def take_bridge_status(state: FleetState, at: Moment, address: int, message: BridgeStatus) -> None:
    """Take what the link's bridge says; only a bridge's address may say it. An uptime earlier
    than the last one says that it restarted, and that frames which waited in it are lost."""
    if address != BRIDGE_ADDRESS:
        return
    last = state.bridges.get(at.link)
    if last is not None:
        behind = (last.status.sequence - message.sequence) & 0xFFFF
        if behind < _HALF_16:
            return  # repeated, or overtaken
        ran_ms = (message.uptime_ms - last.status.uptime_ms) & 0xFFFF_FFFF
        if ran_ms >= _HALF_32:
            text = f"the bridge of link {at.link} restarted"
            write_alarm(at, None, "bridge restart", text)
            state.notice(at, text)
    state.bridges[at.link] = BridgeState(message, at.t_ns)
    write_bridge_status(at, message)
