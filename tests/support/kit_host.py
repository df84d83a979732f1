"""A console's end for the tests of the C kit's host program: one process, one line, few words.

Owns the process and the way from messages to bytes and back, by our own protocol package. Knows
nothing of what a module should do. While it waits it renews the drive permit, if it was told to.
"""

import os
import select
import subprocess
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any, Final, TypeVar

from protocol.codes import CONSOLE_ADDRESS, EVERYONE_ADDRESS, identity_bits
from protocol.frame import Dropped, FrameDecoder, frame
from protocol.message import (
    Command,
    Echo,
    Message,
    Packet,
    Permit,
    Presence,
    Probe,
    RollCall,
    decode,
    encode,
)
from protocol.seal import KeyRing, Refused, Sealer
from protocol.seal_gate import ConsoleGate

EPOCH: Final = 1_700_000_000
CONSOLE: Final = 0x0A11CE01
PATIENCE_S: Final = 15.0
"""What a test waits at most; a module answers in milliseconds, a motion takes some seconds."""

_BOUND_MS: Final = 20
_RENEW_S: Final = 0.125
_PERMIT_MS: Final = 1_000
_MessageT = TypeVar("_MessageT")


class HostLine:
    """One line to the modules of one host program."""

    def __init__(self, path: str, keys: KeyRing | None = None, epoch: int = EPOCH) -> None:
        self.path = path
        self.epoch = epoch
        self.permits = False
        """Whether waiting renews the permit."""
        self.heard: list[Packet] = []
        self.offset_ms = 0
        """Module time less fleet time, once it is taken over."""
        self._file = os.open(path, os.O_RDWR | os.O_NOCTTY | os.O_NONBLOCK)
        self._decoder = FrameDecoder()
        self._sealer = None if keys is None else Sealer(keys, epoch)
        self._gate = None if keys is None else ConsoleGate(keys, epoch)
        self._renewed_s = 0.0
        self.asked_ms = 0
        """Fleet time of the last Probe."""

    def close(self) -> None:
        """Go away; the program stays."""
        os.close(self._file)

    @staticmethod
    def fleet_ms() -> int:
        """Fleet time: this computer's, cut to 32 bits."""
        return time.monotonic_ns() // 1_000_000 & 0xFFFF_FFFF

    def say(self, message: Message, destination: int = EVERYONE_ADDRESS, times: int = 1) -> None:
        """Send one message, perhaps the same frame several times."""
        payload = encode(Packet(destination, CONSOLE_ADDRESS, message))
        data = frame(payload if self._sealer is None else self._sealer.seal(payload))
        for _ in range(times):
            self.send(data)

    def send(self, data: bytes) -> None:
        """Send bytes as they are."""
        while data:
            select.select([], [self._file], [], PATIENCE_S)
            data = data[os.write(self._file, data) :]

    def listen(self, seconds: float) -> list[Packet]:
        """Hear for so long; return what came."""
        before, end_s = len(self.heard), time.monotonic() + seconds
        while (left_s := end_s - time.monotonic()) > 0:
            self._renew()
            if select.select([self._file], [], [], min(left_s, 0.02))[0]:
                self._take(os.read(self._file, 4096))
        return self.heard[before:]

    def wait(
        self, kind: type[_MessageT], that: Callable[[_MessageT], bool] = lambda _: True
    ) -> _MessageT:
        """The next message of this kind that is as it should be. Fails after PATIENCE_S."""
        seen, end_s = len(self.heard), time.monotonic() + PATIENCE_S
        while time.monotonic() < end_s:
            self.listen(0.02)
            for packet in self.heard[seen:]:
                if isinstance(packet.message, kind) and that(packet.message):
                    return packet.message
            seen = len(self.heard)
        raise AssertionError(f"no {kind.__name__} came; heard {self.heard[-5:]}")

    def roll(self) -> tuple[int, Presence]:
        """Call the roll until somebody answers; their address and Presence."""
        end_s = time.monotonic() + PATIENCE_S
        while time.monotonic() < end_s:
            self.say(RollCall(self.epoch, CONSOLE))
            for packet in self.listen(0.2):
                if isinstance(packet.message, Presence) and packet.message.epoch == self.epoch:
                    return packet.source, packet.message
        raise AssertionError("nobody answered the roll call")

    def take_over(self) -> tuple[int, Presence]:
        """Call the roll, learn the module's clock, tell it, and renew the permit from now on."""
        address, me = self.roll()
        bits = identity_bits(me.identity)
        while (echo := self._probe(address, me, 0, 0xFFFF)) is None:
            pass
        # It was heard a moment after it was sent, well within the bound.
        self.offset_ms = (echo.received_us // 1_000 - self.asked_ms) & 0xFFFF_FFFF
        while self._probe(address, me, self.offset_ms, _BOUND_MS) is None:
            pass
        assert echo.identity_bits == bits
        self.permits = True
        self.listen(0.1)
        return address, me

    def latest_ms(self) -> int:
        """Module time until which a motion that is ordered now may start."""
        return (self.fleet_ms() + self.offset_ms + 5_000) & 0xFFFF_FFFF

    def order(self, address: int, command: Command, kind: type[_MessageT]) -> _MessageT:
        """Send a command again and again until a reply of this kind to its number comes."""
        end_s = time.monotonic() + PATIENCE_S
        while time.monotonic() < end_s:
            self.say(command, address)
            for packet in self.listen(0.1):
                found = packet.message
                if isinstance(found, kind) and getattr(found, "number", None) == command.number:
                    return found
        raise AssertionError(f"no {kind.__name__} to {command}")

    def _probe(self, address: int, me: Presence, offset_ms: int, bound_ms: int) -> Echo | None:
        bits = identity_bits(me.identity)
        self.asked_ms = self.fleet_ms()
        self.say(Probe(CONSOLE, me.boot, 1, bits, offset_ms, bound_ms), address)
        found = [each.message for each in self.listen(0.05) if isinstance(each.message, Echo)]
        return found[-1] if found else None

    def _renew(self) -> None:
        if self.permits and time.monotonic() - self._renewed_s >= _RENEW_S:
            self._renewed_s = time.monotonic()
            self.say(Permit(CONSOLE, (self.fleet_ms() + _PERMIT_MS) & 0xFFFF_FFFF))

    def _take(self, data: bytes) -> None:
        for piece in self._decoder.feed(data):
            if isinstance(piece, Dropped):
                continue
            packet: Any = decode(piece) if self._gate is None else self._gate.admit(piece)
            if not isinstance(packet, Refused):
                self.heard.append(packet)


@contextmanager
def host(program: Path, *words: str) -> Iterator[str]:
    """The program on a pseudo-terminal; the path of that. It must end when it is told to."""
    with subprocess.Popen(
        [program, "--pty", *words], stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True
    ) as process:
        try:
            assert process.stdout is not None
            yield process.stdout.readline().strip()
        finally:
            process.terminate()
            assert process.wait(PATIENCE_S) == 0
