"""A station of the air: one module with its two radio paths, its own decoder, and its seal.

Owns the step between bytes on the air and the module's packets. Knows neither order of events nor
other stations (world.py).
"""

import math
from collections.abc import Callable
from typing import Final

from protocol.codes import FIRST_GROUP_ADDRESS
from protocol.errors import RemoteProtocolError
from protocol.frame import Dropped, FrameDecoder, frame
from protocol.message import Packet, decode, encode
from protocol.seal import KeyRing
from sim_link.fleet_file import ModuleSpec
from sim_link.module import VirtualModule
from sim_link.module_seal import ModuleSeal
from sim_link.options import SimOptions
from sim_link.radio import Channel, Quality, Way, faintness
from sim_link.tally import TallyEntry

Tally = Callable[[TallyEntry], None] | None
_BRIDGE_M: Final = (0.0, 0.0)
"""Where the bridge stands."""


class Station:
    """One module as the air knows it. ``place``: its number in the fleet."""

    __slots__ = (
        "_decoder",
        "_seal",
        "address",
        "dropped",
        "heard_all",
        "hears",
        "module",
        "speaks",
    )

    def __init__(
        self, place: int, spec: ModuleSpec, options: SimOptions, tally: Tally, keys: KeyRing | None
    ) -> None:
        quality = _quality(spec, options)
        self.module = VirtualModule(spec, options.seed, tally)
        self.hears = Channel(quality, options.seed, place, Way.TO_MODULE)
        self.speaks = Channel(quality, options.seed, place, Way.TO_CONSOLE)
        self.address = spec.address
        self.dropped = 0
        """Frames that it heard and did not understand or obey."""
        self.heard_all = False
        """Whether what it heard last was for several: then others may answer at this time."""
        self._decoder = FrameDecoder()
        self._seal = None if keys is None else ModuleSeal(keys)

    def hear(self, data: bytes, t_ns: int) -> list[bytes]:
        """Take what came over the air; return the frames that the module says to it."""
        said: list[bytes] = []
        for found in self._decoder.feed(data):
            packet = None if isinstance(found, Dropped) else self._admitted(found)
            said += self.take(packet, t_ns)
        return said

    def take(self, packet: Packet | None, t_ns: int) -> list[bytes]:
        """The same for a whole frame that was read already; None: it makes no sense."""
        if packet is None:
            self.dropped += 1
            return []
        self.heard_all = packet.destination >= FIRST_GROUP_ADDRESS
        return self.frames(self.module.receive(packet, t_ns))

    def frames(self, packets: list[Packet]) -> list[bytes]:
        """What the module says, as frames for the air."""
        if not packets:
            return []
        if self._seal is None:
            return [frame(encode(packet)) for packet in packets]
        boot = self.module.boot
        return [frame(self._seal.seal(encode(packet), boot)) for packet in packets]

    def _admitted(self, payload: bytes) -> Packet | None:
        try:
            if self._seal is None:
                return decode(payload)
            return self._seal.admit(payload, self.module.boot, self.module.epoch)
        except RemoteProtocolError:
            return None


def _quality(spec: ModuleSpec, options: SimOptions) -> Quality:
    return Quality(
        loss=options.loss,
        damage=options.damage,
        repeat=options.repeat,
        reorder=options.reorder,
        delay_ms=options.delay_ms,
        burst=options.burst,
        spread_ms=options.spread_ms,
        faint=faintness(math.dist(spec.place_m, _BRIDGE_M), options.range_m),
    )
