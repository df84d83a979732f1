"""Motion traces: what a module kept of its last motions, sample by sample.

Owns the samples' times, and their making from the truth: before the brake from the drive's notes,
after it from the mechanics, computed again moment by moment. That is done only where somebody
asks, so a trace that nobody wants costs nothing. Knows no messages but the chunk.
"""

import math
from bisect import bisect_left
from collections import deque
from dataclasses import dataclass
from functools import cached_property
from typing import Final

from protocol.codes import identity_bits
from protocol.message import Motion, TraceAsk, TraceChunk
from protocol.trace import CHUNK_BYTES, TraceHead, TraceSample, pack_trace
from sim_link.box import Box
from sim_link.drive import STEADY_NS
from sim_link.drive import Motion as Noted
from sim_link.mechanics import Moment
from sim_link.module_time import ModuleTime
from sim_link.posture import Braking
from sim_link.wheel import RPM_A_RAD_S

PERIOD_US: Final = 4_000
MOST_SAMPLES: Final = 240
KEPT: Final = 3
"""Traces that a virtual module has memory for."""

_PERIOD_NS: Final = PERIOD_US * 1_000
_LINGER_NS: Final = 60_000_000
"""How long after the end of the motion samples are still taken."""
_I16: Final = 0x7FFF


@dataclass
class _Kept:
    """One motion, with what its trace is made from. ``brake_ns``: when the brake engaged."""

    key: tuple[int, int, int]
    noted: Noted
    braking: Braking
    brake_ns: int
    rest_V: float
    time: ModuleTime

    @cached_property
    def chunks(self) -> list[bytes]:
        """The data of all chunks."""
        moments: list[Moment] = []
        result = self.braking.again(moments.append)
        end_ns = self.brake_ns + int(result.settle_s * 1e9) + _LINGER_NS
        first_ns = max(self.noted.start_ns, end_ns - (MOST_SAMPLES - 1) * _PERIOD_NS)
        times_ns = list(range(first_ns, end_ns + 1, _PERIOD_NS))[:MOST_SAMPLES]
        at_s = [moment.t_s for moment in moments]
        samples = [self._sample(t_ns, moments, at_s) for t_ns in times_ns]
        brake_sample = sum(t_ns < self.brake_ns for t_ns in times_ns)
        head = TraceHead(PERIOD_US, len(samples), brake_sample, self.time.ms(first_ns))
        return pack_trace(head, samples)

    def _sample(self, t_ns: int, moments: list[Moment], at_s: list[float]) -> TraceSample:
        if t_ns < self.brake_ns:
            span_ns = max(1, self.brake_ns - STEADY_NS - self.noted.start_ns)
            part = min(1.0, (t_ns - self.noted.start_ns) / span_ns)
            sag_V = self.noted.sag_V * part if part < 1.0 else 0.0
            speed_rpm = self.noted.wheel_rad_s * RPM_A_RAD_S * part
            return TraceSample(_i16(speed_rpm), 0, 0, round((self.rest_V - sag_V) * 1e3))
        since_s = (t_ns - self.brake_ns) * 1e-9
        place = min(max(bisect_left(at_s, since_s), 1), len(moments) - 1)
        one, two = moments[place - 1], moments[place]
        span_s = two.t_s - one.t_s
        part = min(max((since_s - one.t_s) / span_s, 0.0), 1.0) if span_s > 0.0 else 1.0

        def between(early: float, late: float) -> float:
            return early + part * (late - early)

        wheel_rad_s = between(one.wheel_rad_s, two.wheel_rad_s)
        return TraceSample(
            _i16(wheel_rad_s * self.noted.direction * RPM_A_RAD_S),
            _i16(math.degrees(between(one.rate_rad_s, two.rate_rad_s))),
            _i16(math.degrees(between(one.angle_rad, two.angle_rad)) * 10.0),
            round(self.rest_V * 1e3),
        )


def _i16(value: float) -> int:
    return min(max(round(value), -_I16 - 1), _I16)


class TraceStore:
    """The traces of one module's last motions. A restart or another epoch empties it."""

    def __init__(self) -> None:
        self._kept: deque[_Kept] = deque(maxlen=KEPT)

    def keep(self, command: Motion, box: Box) -> None:
        """Keep what the trace of the drive's last motion is made from, if it braked."""
        noted, braking = box.drive.motion, box.drive.body.braking
        if noted is None or noted.spun_up_ns is None or noted.result is None or braking is None:
            return
        key = (command.epoch, command.boot, command.number)
        rest_V = box.drive.supply.battery.open_circuit_V
        brake_ns = noted.spun_up_ns + STEADY_NS
        self._kept.append(_Kept(key, noted, braking, brake_ns, rest_V, box.boot.time))

    def clear(self) -> None:
        """Forget all."""
        self._kept.clear()

    def answer(self, ask: TraceAsk, identity: int) -> list[TraceChunk]:
        """The chunks that are asked for, or the one that says that there are none."""
        key = (ask.epoch, ask.boot, ask.number)
        kept = next((each for each in self._kept if each.key == key), None)
        chunks = [] if kept is None else kept.chunks
        bits, total = identity_bits(identity), len(chunks)
        if not chunks:
            return [TraceChunk(ask.boot, ask.number, bits, 0, 0, bytes(CHUNK_BYTES))]
        places = [ask.first + at for at in range(32) if ask.wanted >> at & 1]
        return [
            TraceChunk(ask.boot, ask.number, bits, place, total, chunks[place])
            for place in places
            if place < total
        ]
