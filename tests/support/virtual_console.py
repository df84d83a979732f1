"""A console's mouth and ears for tests of the simulated fleet: packets in virtual time.

No exchange, no log: it says what a test tells it to and keeps everything it hears.
"""

from protocol.codes import CONSOLE_ADDRESS, EVERYONE_ADDRESS, identity_bits
from protocol.frame import FrameDecoder, frame
from protocol.message import (
    Answer,
    Facts,
    Flash,
    Message,
    Packet,
    Permit,
    Pivot,
    Presence,
    Probe,
    Rest,
    RollCall,
    Spin,
    decode,
    encode,
)
from sim_link.fleet_file import ModuleSpec
from sim_link.kinds import Kind
from sim_link.options import FaultKind
from sim_link.world import World

MS = 1_000_000
S = 1_000_000_000
EPOCH = 1000
CONSOLE = 0xC0C0
"""Number of the console that tests speak for."""
LATEST_MS = 2_000_000_000
"""A latest start that no test reaches."""
PERMIT_MS = 50_000
TOLD_BOUND_MS = 20

PAVER = Kind(
    name="paver",
    side_m=0.08,
    mass_kg=0.60,
    wheel_inertia_kg_m2=6.0e-5,
    body_inertia_kg_m2=6.4e-4,
    com_offset_m=(0.0, 0.0),
    wheel_max_rpm=9000.0,
    brake_torque_N_m=2.9,
    brake_onset_s=0.0,
    spin_up_torque_N_m=0.02,
    magnet_torque_N_m=0.35,
    magnet_angle_rad=0.06,
    held=True,
    floor_friction=0.6,
    face_friction=0.0,
    restitution=0.0,
    cell_capacity_mAh=500.0,
    cell_resistance_ohm=0.12,
)
"""An edge-held kind whose floor pivot needs about 4,350 rpm."""


def spec_of(
    kind: Kind = PAVER,
    face_up: int = 1,
    charge: float = 0.95,
    faults: frozenset[FaultKind] = frozenset(),
    telemetry_hz: float = 2.0,
) -> ModuleSpec:
    """Return one module at address 0x10 with a simulated identity."""
    return ModuleSpec(
        "alder", kind, 0x10, (1 << 63) | 0xABCD1234, telemetry_hz, face_up, charge, faults
    )


def to_module(message: Message, address: int = 0x10) -> Packet:
    """Address a message from the console to one module."""
    return Packet(address, CONSOLE_ADDRESS, message)


def to_all(message: Message) -> Packet:
    """Address a message from the console to everyone."""
    return Packet(EVERYONE_ADDRESS, CONSOLE_ADDRESS, message)


def pivot(
    to: Presence, number: int, speed_rpm: int = 6000, direction: int = 1, stage: int = 0
) -> Pivot:
    """Make a floor pivot for the module that introduced itself with ``to``."""
    bits = identity_bits(to.identity)
    return Pivot(EPOCH, to.boot, number, bits, LATEST_MS, stage, 1, direction, speed_rpm)


def spin(to: Presence, number: int, speed_rpm: int = 3000, hold_ms: int = 1000) -> Spin:
    """Make a spin for that module."""
    bits = identity_bits(to.identity)
    return Spin(EPOCH, to.boot, number, bits, LATEST_MS, speed_rpm, hold_ms)


def told(to: Presence, offset_ms: int, bound_ms: int = TOLD_BOUND_MS) -> Probe:
    """Tell that module what is made of its clock: module time less fleet time."""
    bits = identity_bits(to.identity)
    return Probe(CONSOLE, to.boot, 1, bits, offset_ms % 2**32, bound_ms)


def permit(t_ns: int, length_ms: int = PERMIT_MS) -> Permit:
    """A drive permit of so long from a fleet time on."""
    return Permit(CONSOLE, t_ns // MS + length_ms)


def rest(to: Presence, number: int) -> Rest:
    """Make a rest for that module."""
    return Rest(EPOCH, to.boot, number, identity_bits(to.identity))


def flash(to: Presence, number: int, duration_ms: int = 500) -> Flash:
    """Make a flash for that module."""
    return Flash(EPOCH, to.boot, number, identity_bits(to.identity), duration_ms)


class VirtualConsole:
    """Talks to a World in virtual time; ``t_ns`` is where it stands."""

    def __init__(self, world: World) -> None:
        self.world = world
        self.t_ns = 0
        self.heard: list[Packet] = []
        self.raw = b""
        self.present: dict[int, Presence] = {}
        self.present_ns: dict[int, int] = {}
        self._permit_ns = 0
        self._decoder = FrameDecoder()

    def say(self, packet: Packet) -> None:
        """Write one packet now."""
        self.world.write(frame(encode(packet)), self.t_ns)

    def run(self, duration_ns: int, step_ns: int = 50 * MS) -> list[Packet]:
        """Let time pass, reading every ``step_ns``; return what was heard meanwhile."""
        start = len(self.heard)
        end_ns = self.t_ns + duration_ns
        while self.t_ns < end_ns:
            self.t_ns = min(self.t_ns + step_ns, end_ns)
            if self.present and self.t_ns >= self._permit_ns:
                self._permit_ns = self.t_ns + PERMIT_MS * MS // 4
                self.say(to_all(permit(self.t_ns)))
            data = self.world.read(self.t_ns)
            self.raw += data
            for payload in self._decoder.feed(data):
                if isinstance(payload, bytes):
                    self._hear(decode(payload))
        return self.heard[start:]

    def call_roll(self, epoch: int = EPOCH) -> dict[int, Presence]:
        """Call the roll once, give who answered a permit, and return them by address."""
        self.say(to_all(RollCall(epoch, CONSOLE)))
        self.run(200 * MS)
        for address, presence in self.present.items():
            offset_ms = presence.time_ms - self.present_ns[address] // MS
            self.say(to_module(told(presence, offset_ms, 100), address))
        self._permit_ns = 0
        self.run(100 * MS)
        return self.present

    def replies(self, address: int, number: int) -> list[Answer | Facts]:
        """Return every answer and facts heard from a module about one number, in order."""
        return [
            packet.message
            for packet in self.heard
            if packet.source == address
            and isinstance(packet.message, Answer | Facts)
            and packet.message.number == number
        ]

    def _hear(self, packet: Packet) -> None:
        self.heard.append(packet)
        if isinstance(packet.message, Presence):
            self.present[packet.source] = packet.message
            self.present_ns[packet.source] = self.t_ns
