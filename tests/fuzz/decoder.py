"""What comes off a link, under a coverage-guided fuzzer: ``python -m tests.fuzz.decoder CORPUS``.

Each input is used twice: as bytes of the stream, and as the payload of a frame whose check is
right, so that what lies behind the check is reached. So each run tries two frames at least. An
error other than the documented ones, or more than 64 bytes held, ends it with a report.

Arguments are libFuzzer's; tests/long runs it with ``-runs``.
"""

import sys

import atheris

with atheris.instrument_imports(include=["protocol"]):
    from protocol.allegiance import LONGEST_PERMIT_MS, Allegiance
    from protocol.errors import RemoteProtocolError
    from protocol.frame import Dropped, FrameDecoder, frame
    from protocol.message import (
        Packet,
        Permit,
        Probe,
        Release,
        RollCall,
        TraceChunk,
        decode,
        encode,
    )
    from protocol.seal import KeyRing
    from protocol.seal_gate import ConsoleGate, ModuleGate
    from protocol.trace import TraceFetch

MOST_HELD = 64
MOST_PAYLOAD = 58
KEYS = KeyRing({0: bytes(range(100, 132)), 3: bytes(range(200, 232))}, 0)
"""Others than those of the vectors, so that no seed is authentic."""


class Target:
    """Ends of a link that live through all inputs, as in a long session."""

    def __init__(self) -> None:
        self.decoder = FrameDecoder()
        self.module = ModuleGate(KEYS, 7)
        self.console = ConsoleGate(KEYS, 9)
        self.allegiance = Allegiance()
        self.fetch = TraceFetch()
        self.now_ms = 0

    def __call__(self, data: bytes) -> None:
        """Try one input."""
        for found in self.decoder.feed(data + b"\0"):
            if not isinstance(found, Dropped):
                self.payload(found)
        if len(self.decoder._held) > MOST_HELD:
            raise AssertionError(f"{len(self.decoder._held)} bytes held")
        payload = data[:MOST_PAYLOAD]
        if payload:
            [found] = FrameDecoder().feed(frame(payload))
            if found != payload:
                raise AssertionError(f"{payload.hex()} came back as {found!r}")
            self.payload(payload)

    def payload(self, payload: bytes) -> None:
        """What stands behind the check: the seal's gates, the messages, and who takes them."""
        for gate in (self.module, self.console):
            try:
                if isinstance(gate.admit(payload), Packet):
                    raise AssertionError(f"a seal was forged: {payload.hex()}")
            except RemoteProtocolError:
                pass  # the documented answer to what is no message
        try:
            packet = decode(payload)
        except RemoteProtocolError:
            return
        if encode(packet) != payload:
            raise AssertionError(f"{payload.hex()} is not what {packet} encodes to")
        self.message(packet)

    def message(self, packet: Packet) -> None:
        """Let the module's side of the permit, and a trace's fetch, take it."""
        message, module = packet.message, self.allegiance
        self.now_ms = (self.now_ms + 97) % 2**32
        if isinstance(message, RollCall):
            module.roll_call(*message, self.now_ms)
        elif isinstance(message, Probe):
            module.hear_probe(message, self.now_ms)
        elif isinstance(message, Permit):
            module.hear_permit(message, self.now_ms)
        elif isinstance(message, Release):
            module.release(message.console)
        elif isinstance(message, TraceChunk):
            self.chunk(message)
        if not 0 <= module.permit_left_ms(self.now_ms) <= LONGEST_PERMIT_MS:
            raise AssertionError("a permit of a length that none has")

    def chunk(self, chunk: TraceChunk) -> None:
        """Gather a trace; one that is whole, or contradicts itself, makes room for the next."""
        try:
            self.fetch.take(chunk)
            if self.fetch.complete:
                self.fetch.trace()
                self.fetch = TraceFetch()
        except RemoteProtocolError:
            self.fetch = TraceFetch()


if __name__ == "__main__":
    atheris.Setup(sys.argv, Target())
    atheris.Fuzz()
