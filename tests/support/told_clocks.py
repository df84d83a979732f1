"""What one console knows of its modules' clocks, and tells them: probes sent, echoes taken."""

from protocol.clock import ModuleClock
from protocol.errors import RemoteProtocolError
from protocol.message import BOUND_UNKNOWN, Echo, Probe

MS = 1_000_000
AGAIN_NS = 5_000 * MS
"""How long what was told well enough stands, before it is asked and told again."""


class ToldClocks:
    """Fleet time of one console counts from its opening."""

    def __init__(self, console: int, opened_ns: int) -> None:
        self._console, self._opened_ns = console, opened_ns
        self._clocks: dict[int, tuple[int, ModuleClock]] = {}
        self._asked: dict[int, tuple[int, int]] = {}
        self._told_ns: dict[tuple[int, int], int] = {}
        self._sequence = 0

    def fleet_ms(self, t_ns: int) -> int:
        """Fleet time of this console."""
        return (t_ns - self._opened_ns) // MS

    def probe(self, address: int, boot: int, bits: int, t_ns: int) -> Probe | None:
        """The next Probe to a module, where it is time."""
        known_boot, clock = self._clocks.get(address, (None, None))
        knows = known_boot == boot and clock is not None
        if knows and self._told_ns.get((address, boot), -AGAIN_NS) > t_ns - AGAIN_NS:
            return None
        offset_ms, bound_ms = 0, BOUND_UNKNOWN
        now_ns = t_ns - self._opened_ns
        if knows and clock is not None:
            offset_ms = round(clock.offset_ns(now_ns) / MS) % 2**32
            bound_ms = -(-clock.bound_ns(now_ns) // MS) + 1
            if clock.exchanges >= 4:
                self._told_ns[address, boot] = t_ns
        self._sequence += 1
        self._asked[self._sequence] = (address, now_ns)
        return Probe(self._console, boot, self._sequence % 65536, bits, offset_ms, bound_ms)

    def echo(self, source: int, echo: Echo, t_ns: int) -> None:
        """Take an answer; one of another boot begins anew."""
        asked = self._asked.pop(echo.sequence, None)
        if asked is None or asked[0] != source:
            return
        known_boot, clock = self._clocks.get(source, (None, None))
        if clock is None or known_boot != echo.boot:
            clock = ModuleClock(1_000)
            self._clocks[source] = (echo.boot, clock)
        heard_ns = echo.received_us * 1_000
        try:
            clock.sample(asked[1], heard_ns, heard_ns, t_ns - self._opened_ns)
        except RemoteProtocolError:
            return  # another console's sequence, by chance
