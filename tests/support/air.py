"""Virtual time, and an air that does its worst: loses, repeats, delays, reorders, damages.

Owns the heap of what is still to happen, and what becomes of a frame between two ends. Everything
from one seed, on one thread.
"""

import random
from collections.abc import Callable
from dataclasses import dataclass
from heapq import heappop, heappush

from protocol.frame import FrameDecoder, frame
from protocol.message import Packet, decode, encode

MS = 1_000_000


@dataclass(frozen=True)
class Weather:
    """How bad the air is. Parts are probabilities for each frame and direction; ``restart`` is
    one for each half second of a module, ``console_restart`` for each quarter of a console."""

    loss: float = 0.2
    repeat: float = 0.1
    damage: float = 0.05
    delay_ms: int = 10
    spread_ms: int = 60
    late: float = 0.02
    late_ms: int = 150
    restart: float = 0.02
    deaf_ms: int = 400
    capacity: int = 8
    console_restart: float = 0.004


class Clock:
    """Virtual time: a heap of what is still to happen."""

    def __init__(self) -> None:
        self.t_ns = 0
        self._heap: list[tuple[int, int, Callable[[], None]]] = []
        self._count = 0

    def at(self, t_ns: int, act: Callable[[], None]) -> None:
        self._count += 1
        heappush(self._heap, (t_ns, self._count, act))

    def after(self, wait_ms: float, act: Callable[[], None]) -> None:
        self.at(self.t_ns + int(wait_ms * MS), act)

    def run(self, until: Callable[[], bool]) -> None:
        while self._heap and not until():
            self.t_ns, _, act = heappop(self._heap)
            act()

    def drain(self, t_ns: int) -> None:
        while self._heap and self._heap[0][0] <= t_ns:
            self.t_ns, _, act = heappop(self._heap)
            act()


class Air:
    """One direction of one module's radio, as one end hears it."""

    def __init__(
        self, clock: Clock, rng: random.Random, weather: Weather, heard: Callable[[Packet], None]
    ) -> None:
        self._clock, self._rng, self._weather, self._heard = clock, rng, weather, heard
        self._decoder = FrameDecoder()

    def carry(self, packet: Packet) -> None:
        weather, rng = self._weather, self._rng
        data = b""
        for _ in range(2 if rng.random() < weather.repeat else 1):
            if rng.random() < weather.loss:
                continue
            data = data or frame(encode(packet))
            copy = bytearray(data)
            if rng.random() < weather.damage:
                copy[rng.randrange(len(copy))] ^= rng.randrange(1, 256)
            delay_ms = weather.delay_ms + weather.spread_ms * rng.random()
            if rng.random() < weather.late:
                delay_ms += weather.late_ms * rng.random()
            self._clock.after(delay_ms, lambda copy=bytes(copy): self._arrive(copy))  # type: ignore[misc]

    def _arrive(self, data: bytes) -> None:
        for piece in self._decoder.feed(data):
            if isinstance(piece, bytes):
                self._heard(decode(piece))


FAIR = Weather()
FOUL = Weather(loss=0.4, repeat=0.2, damage=0.1)
CLEAR_SKY = Weather(loss=0, repeat=0, damage=0, late=0, restart=0, console_restart=0)
SLOW = Weather(loss=0.1, repeat=0.3, late=0.3, late_ms=3000, restart=0.1, deaf_ms=20, capacity=2)
"""Copies arrive seconds late, long after a restart, a takeover, or after a small memory has moved
on. With copies later than those take, no console can know of a refusal that nothing came before."""
