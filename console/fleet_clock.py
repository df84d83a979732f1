"""Module clocks as the records tell them: Probes sent, Echoes heard, and what voids a clock.

Owns which Echo belongs to which Probe, and so what is measured. Everything follows from the bytes'
own times, so that a replay comes to the same clocks. The arithmetic is protocol/clock.py's; when
to probe is upkeep.py's. Must not know timers or orders.

A module's clock is kept over its present link: what went or came another way says nothing of it.
"""

from typing import Final

from console.fleet_modules import sender_of
from console.fleet_rows import write_alarm
from console.fleet_state import FleetState, ModuleState, Moment
from protocol.clock import ModuleClock
from protocol.errors import RemoteProtocolError
from protocol.message import Echo, Probe

PROBES_KEPT: Final = 8
"""Outstanding Probes of a module: two seconds of the hasty schedule, beyond any round trip."""

NS_PER_US: Final = 1_000


def note_probe(state: FleetState, at: Moment, address: int, message: Probe) -> None:
    """Remember when a Probe was sent. One that is sent again measures nothing, since its Echo
    does not say which of the two it answers (Karn)."""
    module = state.by_sender.get((at.link, address, message.identity_bits))
    if module is None or module.link != at.link:
        return
    probes = module.clock.probes
    key = message.sequence, message.boot
    probes[key] = None if key in probes else at.t_ns
    if len(probes) > PROBES_KEPT:
        del probes[next(iter(probes))]


def take_echo(state: FleetState, at: Moment, address: int, message: Echo) -> None:
    """Take a module's answer to a Probe: one exchange of four timestamps."""
    module = sender_of(state, at, address, message.identity_bits, message.boot)
    if module is None or module.link != at.link:
        return
    sent_ns = module.clock.probes.pop((message.sequence, message.boot), None)
    if sent_ns is None:
        return
    received_ns = message.received_us * NS_PER_US
    held_ns = message.held_us * NS_PER_US
    kept = module.clock
    try:
        sample = kept.clock.sample(sent_ns, received_ns, received_ns + held_ns, at.t_ns)
    except RemoteProtocolError as error:
        _tell_bad(state, at, module, str(error))
        return
    kept.delays_ns.append(sample.delay_ns)
    offset_ns, bound_ns = kept.clock.offset_ns(at.t_ns), kept.clock.bound_ns(at.t_ns)
    kept.figures = at.t_ns, offset_ns, bound_ns, min(kept.delays_ns)


def _tell_bad(state: FleetState, at: Moment, module: ModuleState, why: str) -> None:
    """Count timestamps that cannot be; tell of them once a boot."""
    kept = module.clock
    kept.errors += 1
    if kept.bad_boot == module.boot:
        return
    kept.bad_boot = module.boot
    write_alarm(at, module, "clock", f"{module.name}: {why}")
    state.notice(at, f"{module.name}: its clock cannot be read: {why}")


def known_clock(module: ModuleState) -> ModuleClock | None:
    """A module's clock, None before its first exchange."""
    clock = module.clock.clock
    return clock if clock.exchanges else None
