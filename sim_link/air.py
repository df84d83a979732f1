"""The channel that all radios share: one frequency, one at a time, and none hears while it sends.

Owns airtime, collisions and access: a frame takes its bits at the air rate, two that overlap are
both lost to everybody, and a radio that listens first waits while it hears another. Knows nothing
of what a path loses besides (radio.py), of modules or of the bridge: senders are numbers, frames
bytes. Virtual time only; times are nanoseconds.

Not modelled: capture (the stronger of two that overlap is not heard either), places (everybody
disturbs everybody), and the time that light takes.
"""

import heapq
from collections import deque
from dataclasses import dataclass
from typing import Final, NamedTuple

from sim_link.randomness import Draws

OVERHEAD_BYTES: Final = 8
"""Preamble, synchronisation word and length that a radio puts before a frame (common practice of
the trade: 4 to 10 bytes)."""
TURNAROUND_NS: Final = 150_000
"""From the start of a sending until others hear it; whoever starts within it collides."""
_BACKOFF_SLOTS: Final = 8
"""Who found the channel busy waits by luck for one to so many turnarounds once it is free. Who
alone was asked answers at once, and so before them."""
_SPREAD_SLOTS: Final = 64
"""The same for those who answer a broadcast: all would else begin in the same instant."""
GAP_NS: Final = 4 * TURNAROUND_NS
"""Who listens and has more to send leaves so much for an answer to begin."""
_BITS_A_BYTE: Final = 8
_NS_A_S: Final = 1_000_000_000


class Sent(NamedTuple):
    """A frame whose time on the air is over. ``clear``: nobody else sent meanwhile."""

    sender: int
    data: bytes
    clear: bool


@dataclass(slots=True)
class _Sending:
    """One frame on the air."""

    start_ns: int
    end_ns: int
    sender: int
    data: bytes
    clear: bool = True


class _Radio:
    """One sender: what waits in it, and whether it is on the air or about to be."""

    __slots__ = ("busy", "queue", "tries")

    def __init__(self) -> None:
        self.queue: deque[bytes] = deque()
        self.busy = False
        self.tries = 0


class Air:
    """A half-duplex channel in time. ``listens``: radios wait while they hear another send."""

    def __init__(self, rate_bit_s: int, seed: int, *, listens: bool) -> None:
        self._rate_bit_s = rate_bit_s
        self._listens = listens
        self._seed = seed
        self._radios: dict[int, _Radio] = {}
        self._events: list[tuple[int, int, int]] = []
        self._order = 0
        self._on_air: deque[_Sending] = deque()
        self.busy_ns = 0
        """Airtime of all frames so far, overlaps counted each."""
        self.delivered_ns = 0
        """Airtime of those that nobody disturbed."""

    def airtime_ns(self, count: int) -> int:
        """How long a frame of so many bytes is on the air, rounded up."""
        bits = (OVERHEAD_BYTES + count) * _BITS_A_BYTE
        return -(-bits * _NS_A_S // self._rate_bit_s)

    def waiting(self, sender: int) -> int:
        """How many frames wait in a radio, the one on the air included."""
        radio = self._radios.get(sender)
        return 0 if radio is None else len(radio.queue)

    def offer(self, sender: int, data: bytes, t_ns: int, *, spread: bool = False) -> None:
        """Give a radio a frame to send, behind those that wait in it. ``spread``: others will
        begin at this time as well."""
        radio = self._radios.setdefault(sender, _Radio())
        radio.queue.append(data)
        if not radio.busy:
            radio.busy = True
            luck_ns = self._luck_ns(sender, radio, _SPREAD_SLOTS) if spread else 0
            self._note(t_ns + luck_ns, sender)

    def forget(self, sender: int) -> None:
        """Let a radio forget what waits in it; what is on the air goes on."""
        radio = self._radios.get(sender)
        if radio is not None and radio.queue:
            sending = any(each.sender == sender for each in self._on_air)
            kept = [radio.queue[0]] if sending else []
            radio.queue = deque(kept)

    @property
    def next_ns(self) -> int | None:
        """When something next begins or ends on the air."""
        starts = self._events[0][0] if self._events else None
        ends = self._on_air[0].end_ns if self._on_air else None
        return min((each for each in (starts, ends) if each is not None), default=None)

    def advance(self, t_ns: int) -> list[Sent]:
        """Let happen what is due by ``t_ns``; return what was sent, in order of its end.

        At one time ends come before starts: frames in adjoining slots do not touch.
        """
        sent = []
        while (due_ns := self.next_ns) is not None and due_ns <= t_ns:
            if self._on_air and self._on_air[0].end_ns == due_ns:
                sent.append(self._end())
            else:
                _, _, sender = heapq.heappop(self._events)
                self._try(sender, due_ns)
        return sent

    def _note(self, t_ns: int, sender: int) -> None:
        self._order += 1
        heapq.heappush(self._events, (t_ns, self._order, sender))

    def _try(self, sender: int, t_ns: int) -> None:
        """Send now, or look again once the channel should be free and some luck has passed."""
        radio = self._radios[sender]
        if not radio.queue:
            radio.busy = False
            return
        heard = [each.end_ns for each in self._on_air if each.start_ns + TURNAROUND_NS <= t_ns]
        if self._listens and heard:
            self._note(max(heard) + self._luck_ns(sender, radio, _BACKOFF_SLOTS), sender)
            return
        self._start(sender, radio.queue[0], t_ns)

    def _luck_ns(self, sender: int, radio: _Radio, slots: int) -> int:
        """How long a radio waits that listens: one to so many turnarounds."""
        if not self._listens:
            return 0
        radio.tries += 1
        word = Draws(self._seed, sender).word(radio.tries, "backoff")
        return (1 + word % slots) * TURNAROUND_NS

    def _start(self, sender: int, data: bytes, t_ns: int) -> None:
        sending = _Sending(t_ns, t_ns + self.airtime_ns(len(data)), sender, data)
        for other in self._on_air:
            other.clear = sending.clear = False
        self._on_air.append(sending)
        if len(self._on_air) > 1 and sending.end_ns < self._on_air[-2].end_ns:
            self._on_air = deque(sorted(self._on_air, key=lambda each: each.end_ns))

    def _end(self) -> Sent:
        sending = self._on_air.popleft()
        radio = self._radios[sending.sender]
        if radio.queue:
            radio.queue.popleft()
        airtime_ns = sending.end_ns - sending.start_ns
        self.busy_ns += airtime_ns
        self.delivered_ns += airtime_ns if sending.clear else 0
        radio.busy = bool(radio.queue)
        if radio.busy:
            gap_ns = GAP_NS if self._listens else 0
            self._note(sending.end_ns + gap_ns, sending.sender)
        return Sent(sending.sender, sending.data, sending.clear)
