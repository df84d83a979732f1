"""The whole simulated fleet behind one serial line: modules, radio paths, bridge.

Owns the order of events. Knows nothing of clocks, threads or ports: bytes and times in, bytes
out, so that real time and virtual time run the same code. One seed, one history, byte for byte.

The way of a frame: console's line at the line rate, bridge (drops what fails its check), one
radio path a module, the module's decoder; and back the same way. The bridge passes a frame on as it
is, and answers questions about itself; with keys set it has none of its own and answers nothing.
"""

import heapq
from collections.abc import Callable
from dataclasses import dataclass
from typing import Final

from protocol.codes import BRIDGE_ADDRESS, CONSOLE_ADDRESS, FIRST_GROUP_ADDRESS
from protocol.errors import RemoteProtocolError
from protocol.frame import Dropped, FrameDecoder, frame
from protocol.message import HEADER, BridgeAsk, BridgeStatus, Packet, decode, encode
from sim_link.fleet_file import load_fleet
from sim_link.line import Line
from sim_link.module import VirtualModule
from sim_link.module_seal import ModuleSeal, load_keys
from sim_link.options import SimOptions
from sim_link.radio import Channel, Quality, Way
from sim_link.tally import TallyEntry

_SIGNAL_dBm: Final = -62
_NOISE_dBm: Final = -97
"""What a receiver in the invented hall would show; this radio's losses do not hang on them."""

_U16: Final = 0xFFFF
_U32: Final = 0xFFFF_FFFF

_TO_CONSOLE: Final = -1
"""In place of a module's index: what arrives at the bridge."""


@dataclass(slots=True)
class WorldCounts:
    """What crossed the world so far; for tests and for a person who wonders."""

    frames_from_console: int = 0
    frames_to_console: int = 0
    dropped_at_bridge: int = 0
    dropped_at_modules: int = 0


@dataclass(frozen=True, slots=True)
class _Station:
    """One module with its two radio paths and its own decoder."""

    module: VirtualModule
    hears: Channel
    speaks: Channel
    decoder: FrameDecoder
    seal: ModuleSeal | None


class World:
    """A simulated fleet in time. Times are nanoseconds of fleet time, from 0, never backwards.

    Raises SimInputError for a fleet file or a fault that cannot be used.
    """

    def __init__(
        self, options: SimOptions, tally: Callable[[TallyEntry], None] | None = None
    ) -> None:
        fleet = load_fleet(options.fleet).of_size(options.modules).with_faults(options.fault)
        quality = Quality(
            options.loss, options.damage, options.repeat, options.reorder, options.delay_ms
        )
        keys = None if options.keys is None else load_keys(options.keys)
        self.options = options
        self.counts = WorldCounts()
        self._stations = [
            _Station(
                VirtualModule(spec, options.seed, tally),
                Channel(quality, options.seed, place, Way.TO_MODULE),
                Channel(quality, options.seed, place, Way.TO_CONSOLE),
                FrameDecoder(),
                None if keys is None else ModuleSeal(keys),
            )
            for place, spec in enumerate(fleet.modules)
        ]
        self._by_address: dict[int, tuple[int, ...]] = {}
        for place, station in enumerate(self._stations):
            address = station.module.spec.address
            self._by_address[address] = (*self._by_address.get(address, ()), place)
        self._from_console = Line(options.rate)
        self._to_console = Line(options.rate)
        self._bridge = FrameDecoder()
        self._t_ns = 0
        self._order = 0
        self._most_on_air = 0
        self._arrivals: list[tuple[int, int, int, bytes]] = []
        self._wakes: list[tuple[int, int]] = []
        for place in range(len(self._stations)):
            self._note_wake(place)

    @property
    def modules(self) -> tuple[VirtualModule, ...]:
        """The virtual modules, for tests that look behind the curtain."""
        return tuple(station.module for station in self._stations)

    @property
    def next_event_ns(self) -> int | None:
        """When something next happens by itself, or a frame is across to the console."""
        times = [heap[0][0] for heap in (self._arrivals, self._wakes) if heap]
        lines = (self._from_console.next_ns, self._to_console.next_ns)
        times += [line_ns for line_ns in lines if line_ns is not None]
        return min(times, default=None)

    def write(self, data: bytes, t_ns: int) -> None:
        """Hand bytes to the console's end of the line at ``t_ns``."""
        self.advance(t_ns)
        self._from_console.put(data, self._t_ns)

    def read(self, t_ns: int) -> bytes:
        """Return all bytes that have arrived at the console's end by ``t_ns``."""
        self.advance(t_ns)
        return self._to_console.take(self._t_ns)

    def unsent(self, t_ns: int) -> int:
        """Return how many bytes wait at the console's end at ``t_ns``."""
        self.advance(t_ns)
        return self._from_console.waiting(self._t_ns)

    def discard_unsent(self, t_ns: int) -> None:
        """Drop the bytes that wait at the console's end and have not started."""
        self.advance(t_ns)
        self._from_console.discard(self._t_ns)

    def advance(self, t_ns: int) -> None:
        """Let everything happen that is due by ``t_ns``, in order of time."""
        while (due := self._next_due()) is not None and due[0] <= t_ns:
            self._t_ns = max(self._t_ns, due[0])
            due[1]()
        self._t_ns = max(self._t_ns, t_ns)

    def _next_due(self) -> tuple[int, Callable[[], None]] | None:
        """Find what happens next. At one time: the line first, then arrivals, then wakes."""
        due: tuple[int, Callable[[], None]] | None = None
        line_ns = self._from_console.next_ns
        if line_ns is not None:
            due = line_ns, self._piece_across
        if self._arrivals and (due is None or self._arrivals[0][0] < due[0]):
            due = self._arrivals[0][0], self._arrive
        if self._wakes and (due is None or self._wakes[0][0] < due[0]):
            due = self._wakes[0][0], self._wake
        return due

    def _piece_across(self) -> None:
        """Take what the line brought to the bridge, and put good frames on the air."""
        for found in self._bridge.feed(self._from_console.take(self._t_ns)):
            if isinstance(found, Dropped):
                self.counts.dropped_at_bridge += 1
                continue
            self.counts.frames_from_console += 1
            self._bridge_hears(found)
            frame_bytes = frame(found)
            for place in self._addressed(found):
                self._send(self._stations[place].hears, frame_bytes, place)

    def _addressed(self, payload: bytes) -> range | tuple[int, ...]:
        """Return the modules to whose radio a frame matters: one, all, or those that share its
        address by mistake. A bridge reads the header only, sealed or not."""
        if len(payload) < HEADER.size:
            self.counts.dropped_at_bridge += 1
            return ()
        destination = HEADER.unpack_from(payload)[2]
        if destination >= FIRST_GROUP_ADDRESS:  # a group or everyone: who is in it, modules know
            return range(len(self._stations))
        return self._by_address.get(destination, ())

    def _bridge_hears(self, payload: bytes) -> None:
        """Answer a question about the bridge itself. In a sealed fleet it answers nothing: it holds
        no key to seal an answer with, and a console with keys would drop any other."""
        if self.options.keys is not None or len(payload) < HEADER.size:
            return
        if HEADER.unpack_from(payload)[2] == BRIDGE_ADDRESS:
            ask = _understood(payload)
            if ask is not None and isinstance(ask.message, BridgeAsk):
                status = self._bridge_status(ask.message)
                answer = Packet(CONSOLE_ADDRESS, BRIDGE_ADDRESS, status)
                self._to_console.put(frame(encode(answer)), self._t_ns)

    def _bridge_status(self, ask: BridgeAsk) -> BridgeStatus:
        """What is on its way over the air, either way, stands for what waits for it."""
        counts = self.counts
        return BridgeStatus(
            sequence=ask.sequence,
            uptime_ms=self._t_ns // 1_000_000 & _U32,
            frames_from_console=counts.frames_from_console & _U32,
            frames_to_console=counts.frames_to_console & _U32,
            dropped=counts.dropped_at_bridge & _U32,
            queue=min(len(self._arrivals), _U16),
            queue_most=min(self._most_on_air, _U16),
            signal_dBm=_SIGNAL_dBm,
            noise_dBm=_NOISE_dBm,
        )

    def _send(self, channel: Channel, frame_bytes: bytes, place: int) -> None:
        for arrival_ns, data in channel.offer(frame_bytes, self._t_ns):
            self._order += 1
            heapq.heappush(self._arrivals, (arrival_ns, self._order, place, data))
        self._most_on_air = max(self._most_on_air, len(self._arrivals))

    def _arrive(self) -> None:
        _, _, place, data = heapq.heappop(self._arrivals)
        if place == _TO_CONSOLE:
            self.counts.frames_to_console += 1
            self._to_console.put(data, self._t_ns)
            return
        station = self._stations[place]
        for found in station.decoder.feed(data):
            packet = None if isinstance(found, Dropped) else _admitted(station, found)
            if packet is None:
                self.counts.dropped_at_modules += 1
            else:
                self._put_on_air(station, station.module.receive(packet, self._t_ns))
        self._note_wake(place)

    def _wake(self) -> None:
        """Wake the module whose time it is; skip a note that a later one has replaced."""
        wake_ns, place = heapq.heappop(self._wakes)
        station = self._stations[place]
        if station.module.next_wake_ns == wake_ns:
            self._put_on_air(station, station.module.wake(self._t_ns))
            self._note_wake(place)

    def _put_on_air(self, station: _Station, packets: list[Packet]) -> None:
        for packet in packets:
            payload = encode(packet)
            if station.seal is not None:
                payload = station.seal.seal(payload, station.module.boot)
            self._send(station.speaks, frame(payload), _TO_CONSOLE)

    def _note_wake(self, place: int) -> None:
        heapq.heappush(self._wakes, (self._stations[place].module.next_wake_ns, place))


def _understood(payload: bytes) -> Packet | None:
    """Decode a payload; None where it is no message of this version."""
    try:
        return decode(payload)
    except RemoteProtocolError:
        return None


def _admitted(station: _Station, payload: bytes) -> Packet | None:
    """Decode what a module received; what it does not understand or obey counts as dropped."""
    if station.seal is None:
        return _understood(payload)
    try:
        return station.seal.admit(payload, station.module.boot, station.module.epoch)
    except RemoteProtocolError:
        return None
