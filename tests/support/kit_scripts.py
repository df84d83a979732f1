"""Random scripts for a whole module, with what the simulated one says to them: for the C kit.

Owns the making of the messages. They are mostly in good order, and often wrong in one field, since
what is wrong in all of them says nothing. No wheel is ever driven: the wheel of the kit's checking
program is not that of the simulator; so motions are staged and never begun, and spins are faster
than any wheel. Steps are lines for the checking program.
"""

import random
from collections.abc import Iterator
from dataclasses import replace
from typing import Any, Final

from protocol.codes import EVERYONE_ADDRESS, FIRST_GROUP_ADDRESS, SettingId
from protocol.message import (
    Clear,
    FaultNotice,
    Flash,
    Hop,
    LockOut,
    Message,
    Nameplate,
    Packet,
    Permit,
    Pivot,
    Presence,
    Probe,
    Query,
    Release,
    Rest,
    RollCall,
    SettingAsk,
    SettingValue,
    SettingWrite,
    Spin,
    Stop,
    Telemetry,
    TraceAsk,
    Twist,
    Unlock,
    encode,
)
from sim_link.deed import Deed
from sim_link.fleet_file import load_fleet
from sim_link.module import VirtualModule

IDENTITY: Final = 0x8000_00AA_BBCC_2211
BOOT: Final = 0x0A0B0C0D
ADDRESS: Final = 0x0011
NOT_LISTED: Final = (Presence, Nameplate, Telemetry, FaultNotice, SettingValue)
TOO_FAST_RPM: Final = 9_500

_EPOCH: Final = 1_700_000_000
_CONSOLES: Final = (0x0A11CE01, 0x0B0B0002)
_PEOPLE: Final = (b"Ada", b"Bo", b"")
_ODD: Final = 0.06
"""How often one field of an envelope is wrong."""


class Script:
    """One module's script: a console that knows what it has said so far."""

    def __init__(self, rng: random.Random) -> None:
        self.rng = rng
        self.number = 0
        self.epoch = _EPOCH
        self.now_ms = 0

    def odd(self, right: int, wrong: int) -> int:
        """Mostly what is right."""
        return wrong if self.rng.random() < _ODD else right

    def envelope(self) -> tuple[int, int, int, int]:
        """Whom a command names: mostly this module, and mostly a new number."""
        if self.rng.random() < 0.7:
            self.number += self.rng.choice((1, 1, 1, 2, 9))
        number = max(0, self.number - (self.rng.randrange(10) if self.rng.random() < 0.2 else 0))
        boot, bits = self.odd(BOOT, BOOT + 1), self.odd(IDENTITY & 0xFFFF, 7)
        return self.odd(self.epoch, self.epoch + 1), boot, self.odd(number, 0), bits

    def staged(self) -> Any:
        """Stage, direction and speed, mostly good."""
        return (
            self.rng.randrange(1, 4),
            self.rng.choice((1, -1, -1, 1, 0)),
            self.rng.choice((5_000, 5_200, TOO_FAST_RPM, 0)),
        )

    def latest_ms(self) -> int:
        """Mostly ahead."""
        return max(0, self.now_ms + self.rng.choice((-5, 0, 40, 400, 4_000, 40_000)))

    def console(self) -> int:
        """Mostly the first."""
        return self.odd(_CONSOLES[0], _CONSOLES[1])

    def message(self) -> Message:
        """The next message."""
        rng = self.rng
        stage, direction, speed_rpm = self.staged()
        makers: tuple[Any, ...] = (
            lambda: RollCall(self.roll_epoch(), self.console()),
            lambda: Query(*self.envelope()[:3]),
            lambda: Probe(self.console(), BOOT, 3, self.odd(IDENTITY & 0xFFFF, 7), 0,
                          self.odd(rng.randrange(50), 0xFFFF)),
            lambda: Permit(self.console(), self.now_ms + rng.choice((50, 500, 3_000, 70_000))),
            lambda: Permit(self.console(), self.now_ms + 2_000),
            lambda: Release(self.odd(1, _CONSOLES[0])),
            lambda: SettingAsk(rng.randrange(8)),
            lambda: TraceAsk(self.epoch, BOOT, self.number, IDENTITY & 0xFFFF, 0, 1),
            lambda: Pivot(*self.envelope(), self.latest_ms(), stage, self.odd(1, rng.randrange(6)),
                          direction, speed_rpm),
            lambda: Hop(*self.envelope(), self.latest_ms(), stage, direction, speed_rpm),
            lambda: Twist(*self.envelope(), self.latest_ms(), stage, direction, speed_rpm),
            lambda: Spin(*self.envelope(), self.latest_ms(), rng.choice((0, TOO_FAST_RPM)),
                         rng.choice((0, 9))),
            lambda: Rest(*self.envelope()),
            lambda: Flash(*self.envelope(), rng.choice((0, 5, 50, 500))),
            lambda: LockOut(*self.envelope(), rng.choice(_PEOPLE)),
            lambda: Unlock(*self.envelope(), rng.choice(_PEOPLE)),
            lambda: SettingWrite(*self.envelope(), rng.randrange(7), rng.choice((-1, 0, 3, 3_600))),
            lambda: SettingWrite(*self.envelope(), SettingId.GROUPS, rng.choice((0, 3))),
            lambda: Stop(rng.randrange(5)),
            lambda: Clear(rng.randrange(5)),
            lambda: Clear(4),
        )  # fmt: skip
        made: Message = rng.choice(makers)()
        return made

    def roll_epoch(self) -> int:
        """Now and then a newer one; then numbers are counted anew."""
        if self.rng.random() < 0.1:
            self.epoch += 1
            self.number = 0
        return self.epoch

    def destination(self) -> int:
        """Mostly the module alone."""
        others = (EVERYONE_ADDRESS, FIRST_GROUP_ADDRESS + 1, FIRST_GROUP_ADDRESS + 40, ADDRESS + 1)
        return self.rng.choice(others) if self.rng.random() < 0.2 else ADDRESS


def _module() -> VirtualModule:
    first = load_fleet(None).modules[0]
    able = frozenset({Deed.FLOOR})
    spec = replace(first, address=ADDRESS, identity=IDENTITY, charge=1.0, able=able)
    return VirtualModule(spec, 1, boot=BOOT, drift_ppm=0.0)


def script_lines(rng: random.Random, steps: int) -> Iterator[str]:
    """One script: the module's start, the console's opening, and so many messages."""
    module, script = _module(), Script(rng)
    yield f"module {IDENTITY:016x} {BOOT} {ADDRESS}"
    opening = [
        RollCall(_EPOCH, _CONSOLES[0]),
        Probe(_CONSOLES[0], BOOT, 1, IDENTITY & 0xFFFF, 0, 9),
    ]
    for step in range(steps):
        script.now_ms += rng.choice((0, 1, 7, 90, 700))
        message = opening[step] if step < len(opening) else script.message()
        packet = Packet(script.destination(), 1, message)
        t_ns = script.now_ms * 1_000_000 + 999
        sent = [
            each for each in module.receive(packet, t_ns) if type(each.message) not in NOT_LISTED
        ]
        said = [encode(each).hex() for each in sent]
        yield " ".join(("hears", str(script.now_ms), encode(packet).hex(), *said))
