"""Motion traces: the fast samples of one motion, cut into chunks, and fetched chunk by chunk.

Owns what the data of a TraceChunk mean, and which chunks a console still has to ask for. Chunk
0 is the head; each other carries three samples. Knows no links and no time: the caller decides
when to ask again.
"""

import struct
from collections.abc import Sequence
from typing import Final, NamedTuple

from protocol.errors import LocalProtocolError, RemoteProtocolError
from protocol.message import TraceChunk

CHUNK_BYTES: Final = 24
SAMPLES_A_CHUNK: Final = 3
ASK_AT_ONCE: Final = 8
"""Chunks that a console asks for at once: half a kilobyte, so that nothing waits long for it.
The message has room for 32."""

_HEAD: Final = struct.Struct("<IHHI12x")
_SAMPLE: Final = struct.Struct("<hhhH")


class TraceHead(NamedTuple):
    """What chunk 0 says. ``brake_sample``: first sample after the brake engaged; ``started_ms``:
    module time of the first sample."""

    period_us: int
    samples: int
    brake_sample: int
    started_ms: int


class TraceSample(NamedTuple):
    """One sample; signs as in Facts and Telemetry."""

    wheel_rpm: int
    rate_dps: int
    tilt_ddeg: int
    battery_mV: int


class Trace(NamedTuple):
    """A whole trace."""

    head: TraceHead
    samples: tuple[TraceSample, ...]


def chunks_of(samples: int) -> int:
    """How many chunks a trace of so many samples has, its head included."""
    return 1 + -(-samples // SAMPLES_A_CHUNK)


def pack_trace(head: TraceHead, samples: Sequence[TraceSample]) -> list[bytes]:
    """Lay a trace out as the data of its chunks. Raises LocalProtocolError where the head does
    not fit the samples, or a value its width."""
    if head.samples != len(samples):
        raise LocalProtocolError(f"a head for {head.samples} samples, and {len(samples)} samples")
    try:
        body = b"".join(_SAMPLE.pack(*each) for each in samples)
        first = _HEAD.pack(*head)
    except struct.error as error:
        raise LocalProtocolError(f"a trace's value does not fit: {error}") from error
    body += bytes(-len(body) % CHUNK_BYTES)
    return [first, *(body[at : at + CHUNK_BYTES] for at in range(0, len(body), CHUNK_BYTES))]


def unpack_trace(chunks: Sequence[bytes]) -> Trace:
    """Read the data of all chunks. Raises RemoteProtocolError where they are not whole."""
    if not chunks or any(len(each) != CHUNK_BYTES for each in chunks):
        raise RemoteProtocolError("a trace has chunks of 24 bytes, the first its head")
    head = TraceHead(*_HEAD.unpack(chunks[0]))
    if len(chunks) != chunks_of(head.samples):
        raise RemoteProtocolError(f"{len(chunks)} chunks cannot hold {head.samples} samples")
    body = b"".join(chunks[1:])[: head.samples * _SAMPLE.size]
    return Trace(head, tuple(TraceSample(*each) for each in _SAMPLE.iter_unpack(body)))


class TraceFetch:
    """Gathers the chunks of one trace, in any order, repeated or not: selective repeat."""

    def __init__(self) -> None:
        self._chunks: dict[int, bytes] = {}
        self._total: int | None = None

    def take(self, chunk: TraceChunk) -> None:
        """Take a chunk. Raises RemoteProtocolError for one that contradicts those before."""
        if self._total not in (None, chunk.chunks) or chunk.chunk >= max(chunk.chunks, 1):
            raise RemoteProtocolError(f"chunk {chunk.chunk} of {chunk.chunks} fits no trace here")
        self._total = chunk.chunks
        if chunk.chunks:
            self._chunks.setdefault(chunk.chunk, chunk.data)

    @property
    def absent(self) -> bool:
        """Whether the module has said that it has no such trace."""
        return self._total == 0

    @property
    def complete(self) -> bool:
        """Whether every chunk is there."""
        return self._total is not None and len(self._chunks) == self._total > 0

    def missing(self, at_most: int = ASK_AT_ONCE) -> tuple[int, int]:
        """The next question: first chunk, and the mask of those wanted from it on; mask 0 where
        nothing is to be asked."""
        if self._total is None:
            return 0, 1
        lacking = [each for each in range(self._total) if each not in self._chunks]
        if not lacking:
            return 0, 0
        first = lacking[0]
        wanted = [each - first for each in lacking[:at_most] if each - first < 32]
        return first, sum(1 << each for each in wanted)

    def trace(self) -> Trace:
        """The trace, once complete. Raises LocalProtocolError before, RemoteProtocolError where
        its chunks make no trace."""
        if not self.complete:
            raise LocalProtocolError("the trace is not complete")
        return unpack_trace([self._chunks[each] for each in range(len(self._chunks))])
