"""The whole simulated fleet behind one serial line: stations, the air, the bridge.

Owns the order of events. Knows nothing of clocks, threads or ports: bytes and times in, bytes
out, so that real time and virtual time run the same code. One seed, one history, byte for byte.

The way of a frame: console's line at the line rate, bridge, the shared channel where an air rate is
given, one radio path a module, the module; and back the same way.
"""

import heapq
from collections import deque
from collections.abc import Callable, Sequence
from typing import Final, NamedTuple

from protocol.codes import BRIDGE_ADDRESS, FIRST_GROUP_ADDRESS
from sim_link import schedule
from sim_link.air import Air
from sim_link.bridge import BOUNDLESS_LINE_BYTES, LINE_BYTES, Bridge
from sim_link.fleet_file import load_fleet
from sim_link.line import Line
from sim_link.module import VirtualModule
from sim_link.module_seal import load_keys
from sim_link.options import Access, BridgeKind, FaultKind, SimOptions
from sim_link.radio import Channel
from sim_link.reading import understood
from sim_link.station import Station, Tally

_BRIDGE: Final = -1
"""In place of a module's number: the bridge, as a sender and as a receiver."""


class WorldCounts(NamedTuple):
    """What crossed the world so far; for tests and for a person who wonders."""

    frames_from_console: int
    frames_to_console: int
    dropped_at_bridge: int
    dropped_at_modules: int
    collided: int


class World:
    """A simulated fleet in time. Times are nanoseconds of fleet time, from 0, never backwards.

    Raises SimInputError for a fleet file or a fault that cannot be used.
    """

    def __init__(self, options: SimOptions, tally: Tally = None) -> None:
        fleet = load_fleet(options.fleet).of_size(options.modules).with_faults(options.fault)
        keys = None if options.keys is None else load_keys(options.keys)
        self.options = options
        self._stations = [
            Station(place, spec, options, tally, keys) for place, spec in enumerate(fleet.modules)
        ]
        self._by_address: dict[int, tuple[int, ...]] = {}
        for place, station in enumerate(self._stations):
            sharing = self._by_address.get(station.address, ())
            self._by_address[station.address] = (*sharing, place)
        self._places = {spec.name: place for place, spec in enumerate(fleet.modules)}
        self._from_console = Line(options.rate)
        self._to_console = Line(options.rate)
        line_bytes = BOUNDLESS_LINE_BYTES if options.air_rate is None else LINE_BYTES
        self._bridge = Bridge(options.bridge, sealed=keys is not None, line_bytes=line_bytes)
        self._air = _air_of(options)
        filtering = options.bridge is BridgeKind.FILTERING
        perfect = all(station.hears.perfect for station in self._stations)
        self._read_once = filtering and perfect and keys is None
        """Whether every module hears the same whole frames: then one reading serves all."""
        self._outgoing: deque[Sequence[int]] = deque()
        """Whom the frames are for that wait in the bridge's radio."""
        self._t_ns = 0
        self._order = 0
        self._sent = self._heard = self._collided = 0
        self._arrivals: list[tuple[int, int, int, bytes]] = []
        self._wakes: list[tuple[int, int]] = []
        self._noted_ns = [-1] * len(self._stations)
        """When each module is next woken; a note in the heap that says otherwise is old."""
        self._actions: list[tuple[int, int, Callable[[], None]]] = []
        for place in range(len(self._stations)):
            self._note_wake(place)
        schedule.enter(fleet.faults, self)

    @property
    def modules(self) -> tuple[VirtualModule, ...]:
        """The virtual modules, for tests that look behind the curtain."""
        return tuple(station.module for station in self._stations)

    @property
    def counts(self) -> WorldCounts:
        """What crossed so far."""
        dropped = sum(station.dropped for station in self._stations)
        return WorldCounts(self._sent, self._heard, self._bridge.dropped, dropped, self._collided)

    @property
    def unplugged(self) -> bool:
        """Whether the bridge's cable is pulled."""
        return self._bridge.unplugged

    @property
    def next_event_ns(self) -> int | None:
        """When something next happens by itself, or a frame is across to the console."""
        due, back = self._next_due(), self._to_console.next_ns
        times = [each for each in (None if due is None else due[0], back) if each is not None]
        return min(times, default=None)

    # -- the console's end ---------------------------------------------------------------

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

    # -- what goes wrong -----------------------------------------------------------------

    def at(self, t_ns: int, action: Callable[[], None]) -> None:
        """Have ``action`` called once the fleet is so old; those of one time in their order."""
        self._order += 1
        heapq.heappush(self._actions, (t_ns, self._order, action))

    def strike(self, module: str, kind: FaultKind, begins: bool) -> None:
        """Let a fault of a module, by its name, begin or end now."""
        place = self._places[module]
        station = self._stations[place]
        change = station.module.begin if begins else station.module.end
        self._say(place, station.frames(change(kind, self._t_ns)))
        self._note_wake(place)

    def reset_bridge(self) -> None:
        """Let the bridge start anew in the middle of everything: what waits in it is lost."""
        self._bridge.reset(self._t_ns)
        self._empty_bridge()

    def silence_bridge(self, silent: bool) -> None:
        """Let the bridge pass nothing on and say nothing, either way, or everything again. What
        waits in it as it falls silent is lost."""
        self._bridge.silence(silent)
        if silent:
            self._empty_bridge()

    def unplug(self, unplugged: bool) -> None:
        """Pull the bridge's cable, or plug it in again: it has its power from there, and starts
        anew. What is written meanwhile is lost."""
        self._bridge.unplugged = unplugged
        self._from_console = Line(self.options.rate)
        self._to_console = Line(self.options.rate)
        self.reset_bridge()

    def _empty_bridge(self) -> None:
        """Lose what waits, either way; the byte and the frame that have begun go on."""
        self._to_console.discard(self._t_ns)
        if self._air is not None:
            self._air.forget(_BRIDGE)
            while len(self._outgoing) > self._air.waiting(_BRIDGE):
                self._outgoing.pop()

    # -- the order of events -------------------------------------------------------------

    def advance(self, t_ns: int) -> None:
        """Let everything happen that is due by ``t_ns``, in order of time."""
        while (due := self._next_due()) is not None and due[0] <= t_ns:
            self._t_ns = max(self._t_ns, due[0])
            due[1]()
        self._t_ns = max(self._t_ns, t_ns)

    def _next_due(self) -> tuple[int, Callable[[], None]] | None:
        """Find what happens next. At one time: the line, the air, arrivals, wakes, actions."""
        due: tuple[int, Callable[[], None]] | None = None
        line_ns = self._from_console.next_ns
        if line_ns is not None:
            due = line_ns, self._piece_across
        if self._air is not None:
            air_ns = self._air.next_ns
            if air_ns is not None and (due is None or air_ns < due[0]):
                due = air_ns, self._air_step
        if self._arrivals and (due is None or self._arrivals[0][0] < due[0]):
            due = self._arrivals[0][0], self._arrive
        if self._wakes and (due is None or self._wakes[0][0] < due[0]):
            due = self._wakes[0][0], self._wake
        if self._actions and (due is None or self._actions[0][0] < due[0]):
            due = self._actions[0][0], self._act
        return due

    def _act(self) -> None:
        heapq.heappop(self._actions)[2]()

    def _piece_across(self) -> None:
        """Take what the line brought to the bridge, and put it on the air."""
        data = self._from_console.take(self._t_ns)
        if self._bridge.deaf(self._t_ns):
            return
        for address, frame_bytes in self._bridge.from_line(data):
            self._sent += 1
            answer = self._bridge.answer(address, frame_bytes, self._waiting, self._t_ns)
            if answer is not None:
                self._to_console.put(answer, self._t_ns)
            if address == BRIDGE_ADDRESS:  # for itself: it does not go on the air
                continue
            places = self._addressed(address)
            if self._air is None:
                self._to_modules(frame_bytes, places)
            elif self._bridge.takes(self._air.waiting(_BRIDGE)):
                self._outgoing.append(places)
                self._air.offer(_BRIDGE, frame_bytes, self._t_ns)
            self._bridge.note_waiting(self._waiting)

    @property
    def _waiting(self) -> int:
        """What waits in the bridge for the air; without airtime, what is on its way stands for
        it."""
        return len(self._arrivals) if self._air is None else self._air.waiting(_BRIDGE)

    def _addressed(self, address: int) -> Sequence[int]:
        """The modules to whose radio a frame matters: one, all, or those that share its address by
        mistake. A modem sends to all: addresses are nothing to it."""
        if address >= FIRST_GROUP_ADDRESS:  # a group or everyone: who is in it, modules know
            return range(len(self._stations))
        return self._by_address.get(address, ())

    def _air_step(self) -> None:
        """Let the air go on; what nobody disturbed goes its way."""
        if self._air is None:
            return
        for sender, data, clear in self._air.advance(self._t_ns):
            places = self._outgoing.popleft() if sender == _BRIDGE else ()
            if not clear:
                self._collided += 1
            elif sender == _BRIDGE:
                self._to_modules(data, places)
            else:
                self._send(self._stations[sender].speaks, data, _BRIDGE)

    def _to_modules(self, data: bytes, places: Sequence[int]) -> None:
        if self._read_once:
            packet = understood(data)
            for place in places:
                station = self._stations[place]
                self._say(place, station.take(packet, self._t_ns), spread=station.heard_all)
                self._note_wake(place)
            return
        for place in places:
            self._send(self._stations[place].hears, data, place)

    def _send(self, channel: Channel, data: bytes, place: int) -> None:
        """Let a frame take its path; one without faults takes no time, and is there at once."""
        if channel.perfect:
            self._arrived(place, data)
            return
        for arrival_ns, copy in channel.offer(data, self._t_ns):
            self._order += 1
            heapq.heappush(self._arrivals, (arrival_ns, self._order, place, copy))

    def _arrive(self) -> None:
        _, _, place, data = heapq.heappop(self._arrivals)
        self._arrived(place, data)

    def _arrived(self, place: int, data: bytes) -> None:
        if place == _BRIDGE:
            deaf = self._bridge.deaf(self._t_ns)
            if not deaf and self._bridge.to_line(self._to_console.behind(self._t_ns)):
                self._heard += 1
                self._to_console.put(data, self._t_ns)
            return
        station = self._stations[place]
        self._say(place, station.hear(data, self._t_ns), spread=station.heard_all)
        self._note_wake(place)

    def _wake(self) -> None:
        """Wake the module whose time it is; skip a note that a later one has replaced."""
        wake_ns, place = heapq.heappop(self._wakes)
        station = self._stations[place]
        if self._noted_ns[place] == wake_ns:
            self._say(place, station.frames(station.module.wake(self._t_ns)))
            self._note_wake(place)

    def _say(self, place: int, frames: list[bytes], *, spread: bool = False) -> None:
        """Put what a module says on the air; ``spread``: others say something at this time too."""
        if not frames:
            return
        if self._air is not None:
            for data in frames:
                self._air.offer(place, data, self._t_ns, spread=spread)
            return
        speaks = self._stations[place].speaks
        for data in frames:
            self._send(speaks, data, _BRIDGE)

    def _note_wake(self, place: int) -> None:
        wake_ns = self._stations[place].module.next_wake_ns
        if wake_ns != self._noted_ns[place]:
            self._noted_ns[place] = wake_ns
            heapq.heappush(self._wakes, (wake_ns, place))


def _air_of(options: SimOptions) -> Air | None:
    if options.air_rate is None:
        return None
    listens = options.access is Access.LISTEN
    return Air(options.air_rate, options.seed, listens=listens)
