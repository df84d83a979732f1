"""Two hundred simulated modules on one radio channel, with the console's slots and without.

The channel is the simulated air alone (sim_link/air.py), driven here from frame to frame: what
collides on it is lost. Clocks are measured over that same air, by Probe and Echo. As a test of the
channel, telemetry may fill it here; what it may take every day is far less (airtime.py).
"""

import heapq
from dataclasses import replace

import pytest

from console.airtime import Channel
from console.limits import NS_PER_MS
from console.slots import SlotKeeper
from console.upkeep import told
from console.view import ModuleView
from protocol.clock import ModuleClock
from protocol.codes import CONSOLE_ADDRESS, EVERYONE_ADDRESS, Flags, SettingId, identity_bits
from protocol.frame import frame
from protocol.message import (
    BOUND_UNKNOWN,
    Echo,
    Message,
    Packet,
    Probe,
    RollCall,
    Telemetry,
    encode,
)
from sim_link.air import Air
from sim_link.fleet_file import load_fleet
from sim_link.module import VirtualModule
from tests.support.fake_fleet import module as picture

MODULES = 200
RATE_BPS = 9_600
SHORTEST_MS = 20
CONSOLE = 0xC0C0
BRIDGE = -1
S = 1_000 * NS_PER_MS


class Hall:
    """The modules, the air between them and a bridge, and what the bridge heard."""

    def __init__(self, telemetry_hz: float, *, listens: bool) -> None:
        fleet = load_fleet(None).of_size(MODULES)
        self.modules = [
            VirtualModule(replace(spec, telemetry_hz=telemetry_hz), 5) for spec in fleet.modules
        ]
        self.places = {each.spec.address: at for at, each in enumerate(self.modules)}
        self.air = Air(RATE_BPS, 5, listens=listens)
        self.t_ns = 0
        self.wakes = [(each.next_wake_ns, at) for at, each in enumerate(self.modules)]
        heapq.heapify(self.wakes)
        self.sent: dict[bytes, Packet] = {}
        self.heard: list[tuple[int, Packet]] = []
        self.lost = 0
        self.reports_ms: dict[int, int] = {}
        """Module time of the newest telemetry that the bridge heard, by place."""

    def say(self, sender: int, packet: Packet) -> None:
        data = frame(encode(packet))
        self.sent[data] = packet
        self.air.offer(sender, data, self.t_ns)

    def order(self, at: int, message: Message) -> None:
        """Let the bridge say something to one module."""
        self.say(BRIDGE, Packet(self.modules[at].spec.address, CONSOLE_ADDRESS, message))

    def run(self, until_ns: int) -> None:
        """Let time pass."""
        while True:
            air_ns = self.air.next_ns
            next_ns = min(self.wakes[0][0], until_ns if air_ns is None else air_ns)
            if next_ns > until_ns or next_ns == until_ns == self.t_ns:
                break
            self.t_ns = max(self.t_ns, next_ns)
            for sending in self.air.advance(self.t_ns):
                self._ended(sending.sender, self.sent[sending.data], sending.clear)
            while self.wakes[0][0] <= self.t_ns:
                _, at = heapq.heappop(self.wakes)
                self._spoken(at, self.modules[at].wake(self.t_ns))
            if self.t_ns == until_ns:
                break
        self.t_ns = until_ns

    def _ended(self, sender: int, packet: Packet, clear: bool) -> None:
        if not clear:
            self.lost += 1
        elif sender == BRIDGE:
            at = self.places[packet.destination]
            self._spoken(at, self.modules[at].receive(packet, self.t_ns))
        else:
            self.heard.append((self.t_ns, packet))
            if isinstance(packet.message, Telemetry):
                self.reports_ms[sender] = packet.message.time_ms

    def _spoken(self, at: int, packets: list[Packet]) -> None:
        for packet in packets:
            self.say(at, packet)
        heapq.heappush(self.wakes, (self.modules[at].next_wake_ns, at))

    def call(self) -> None:
        """Let all follow the console; who answers a roll call, and how, is not looked at here."""
        for each in self.modules:
            each.receive(Packet(EVERYONE_ADDRESS, CONSOLE_ADDRESS, RollCall(9, CONSOLE)), 0)

    def exchange(self, at: int, sequence: int, clock: ModuleClock) -> None:
        """One Probe and its Echo, with what is made of the clock so far; again where one of them
        is lost. Time passes meanwhile."""
        before = clock.exchanges
        while clock.exchanges == before:
            self._probe(at, sequence, clock)

    def _probe(self, at: int, sequence: int, clock: ModuleClock) -> None:
        module = self.modules[at]
        known = told(clock, self.t_ns) if clock.exchanges else (0, BOUND_UNKNOWN)
        bits = identity_bits(module.spec.identity)
        sent_ns = self.t_ns
        self.order(at, Probe(CONSOLE, module.boot, sequence, bits, *known))
        echoes: list[tuple[int, Packet]] = []
        while not echoes and self.t_ns < sent_ns + 100 * NS_PER_MS:
            self.run(self.t_ns + NS_PER_MS)
            echoes = [each for each in self.heard if isinstance(each[1].message, Echo)]
        self.heard.clear()
        for heard_ns, packet in echoes:
            echo = packet.message
            assert isinstance(echo, Echo)
            received_ns = echo.received_us * 1_000
            clock.sample(sent_ns, received_ns, received_ns + echo.held_us * 1_000, heard_ns)


def measured(hall: Hall, seconds: float) -> float:
    """Delivered airtime over elapsed time."""
    before_ns, began_ns = hall.air.delivered_ns, hall.t_ns
    hall.run(hall.t_ns + int(seconds * S))
    return (hall.air.delivered_ns - before_ns) / (hall.t_ns - began_ns)


def pictures(hall: Hall) -> list[ModuleView]:
    """The modules as the console sees them, each asked to report as often as a module can."""
    return [
        picture(
            at,
            each.spec.name,
            identity=each.spec.identity,
            address=each.spec.address,
            boot=each.boot,
            console=CONSOLE,
            flags=int(Flags.CLOCK_TOLD),
            settings=((int(SettingId.TELEMETRY_PERIOD_MS), SHORTEST_MS),),
        )
        for at, each in enumerate(hall.modules)
    ]


def slots_given(hall: Hall, clocks: list[ModuleClock]) -> SlotKeeper:
    """Let the console plan the channel and give every module its slot; again to those that it
    does not hear in it, since some are lost. Two minutes are more than enough."""
    keeper = SlotKeeper(Channel(RATE_BPS, duty_percent=100.0), sealed=False)
    views = pictures(hall)
    until_ns = hall.t_ns + 120 * S
    while hall.t_ns < until_ns:
        for saying in keeper.due(
            CONSOLE, views, lambda at: clocks[at], hall.reports_ms.get, hall.t_ns
        ):
            hall.order(hall.places[saying.address], saying.message)
        hall.run(max(keeper.next_ns, hall.t_ns + NS_PER_MS))
    return keeper


@pytest.fixture(scope="module")
def slotted() -> tuple[Hall, int]:
    """Everybody in its slot, and the period. Before, they hardly report at all."""
    hall = Hall(telemetry_hz=1 / 3_600, listens=True)
    hall.call()
    clocks = [ModuleClock(2_000) for _ in hall.modules]
    for sequence in (1, 2):
        for at, clock in enumerate(clocks):
            hall.exchange(at, sequence, clock)
    keeper = slots_given(hall, clocks)
    [planned] = keeper.plans()
    hall.run(hall.t_ns + 2 * planned.plan.period_ms * NS_PER_MS)
    return hall, planned.plan.period_ms


def test_with_slots_a_channel_can_be_filled(slotted: tuple[Hall, int]) -> None:
    """At least 0.85 of the time, and nothing is lost: 43 bytes at 9,600 bit/s are 35.8 ms, and a
    slot with its guard at most 42."""
    hall, period_ms = slotted
    assert period_ms <= MODULES * 42
    hall.heard.clear()
    lost = hall.lost
    assert measured(hall, 3 * period_ms / 1_000) >= 0.85
    assert hall.lost == lost
    reports = [packet.source for _, packet in hall.heard if isinstance(packet.message, Telemetry)]
    counts = {reports.count(source) for source in hall.places}
    assert counts == {3}


def test_without_slots_modules_talk_over_each_other(slotted: tuple[Hall, int]) -> None:
    """As often, each at a phase of its own. Reports that come at any time with a load of G deliver
    G * exp(-2 G) of the time (pure ALOHA, Abramson 1970; from memory): 0.16 at 0.87."""
    hall = Hall(telemetry_hz=1_000 / slotted[1], listens=False)
    hall.run(10 * S)
    share = measured(hall, 2 * slotted[1] / 1_000)
    assert 0.10 < share < 0.25
    assert hall.lost > MODULES
