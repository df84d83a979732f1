"""A stretch of wire as both sides of a benchmark read it: telemetry of a fleet, no damage."""

from dataclasses import dataclass

from protocol.codes import CONSOLE_ADDRESS, FIRST_MODULE_ADDRESS, SIMULATED_BIT
from protocol.frame import frame
from protocol.message import Message, Nameplate, Packet, Presence, Telemetry, encode

EPOCH = 1_700_000_000
CHUNK_BYTES = 512
"""What a read returns at 921,600 baud in 5.5 ms: a busy line."""


@dataclass(frozen=True, slots=True)
class Stream:
    """``roll``: presence and nameplate of every module; ``telemetry``: ``frames`` frames."""

    roll: bytes
    telemetry: bytes
    frames: int

    def chunks(self) -> list[bytes]:
        """The telemetry as reads return it."""
        data = self.telemetry
        return [data[at : at + CHUNK_BYTES] for at in range(0, len(data), CHUNK_BYTES)]


def _framed(source: int, message: Message) -> bytes:
    return frame(encode(Packet(CONSOLE_ADDRESS, source, message)))


def make_stream(modules: int, frames: int) -> Stream:
    """Build the same bytes for the same figures."""
    roll, telemetry = [], []
    for place in range(modules):
        identity = SIMULATED_BIT | (0x5000_0000 + place)
        source = FIRST_MODULE_ADDRESS + place
        roll.append(_framed(source, Presence(identity, 100 + place, EPOCH, 9, 0, 5, 3000, 0, 1)))
        name = b"m%d" % place
        roll.append(_framed(source, Nameplate(identity, 9000, 1, name, b"paver")))
    for count in range(frames):
        place, turn = count % modules, count // modules
        message = Telemetry(
            boot=100 + place,
            sequence=turn & 0xFFFF,
            time_ms=1000 * turn,
            activity=2,
            flags=0,
            face_up=1,
            wheel_rpm=3000 + turn % 7,
            battery_mV=4100 - turn % 50,
            temperature_cC=2300 + turn % 11,
            tilt_ddeg=turn % 3,
            identity_bits=(0x5000_0000 + place) & 0xFFFF,
        )
        telemetry.append(_framed(FIRST_MODULE_ADDRESS + place, message))
    return Stream(b"".join(roll), b"".join(telemetry), frames)
