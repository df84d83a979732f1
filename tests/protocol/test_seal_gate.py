"""Freshness: which authentic frames are obeyed after a restart of either end."""

import pytest

from protocol.codes import CONSOLE_ADDRESS, EVERYONE_ADDRESS
from protocol.errors import RemoteProtocolError
from protocol.message import (
    Clear,
    Go,
    Message,
    Packet,
    Permit,
    Presence,
    Probe,
    Query,
    Release,
    Rest,
    RollCall,
    SettingAsk,
    Stop,
    Telemetry,
    TraceAsk,
    encode,
)
from protocol.seal import KeyRing, Refused, Sealer, SealFault
from protocol.seal_gate import ConsoleGate, ModuleGate
from tests.support.forgery import assault

KEYS = KeyRing({0: bytes(range(32))}, 0)
BOOT, EPOCH, CONSOLE = 77, 1_700_000_000, 0xC0
MODULE = 0x10


class Console:
    """Seals what a console sends."""

    def __init__(self, opening: int = EPOCH) -> None:
        self._sealer = Sealer(KEYS, opening)

    def says(self, message: Message) -> bytes:
        destination = EVERYONE_ADDRESS if isinstance(message, Stop | RollCall) else MODULE
        return self._sealer.seal(encode(Packet(destination, CONSOLE_ADDRESS, message)))


class Module(Console):
    """Seals what a module sends."""

    def says(self, message: Message) -> bytes:
        return self._sealer.seal(encode(Packet(CONSOLE_ADDRESS, MODULE, message)))


def obeyed(gate: ModuleGate | ConsoleGate, payload: bytes) -> bool:
    return isinstance(gate.admit(payload), Packet)


def following(epoch: int = EPOCH, boot: int = BOOT) -> ModuleGate:
    """The gate of a module that has just adopted an epoch."""
    gate = ModuleGate(KEYS, boot)
    gate.follow(epoch)
    return gate


QUERY = Query(EPOCH, BOOT, 1)
TELEMETRY = Telemetry(BOOT, 1, 0, 0, 0, 1, 0, 4000, 2000, 0, 7)
PRESENCE = Presence(9, BOOT, EPOCH, CONSOLE, 0, 0, 0, 0, 1)


def test_a_module_that_restarted_obeys_only_stop_and_roll_call_until_proof() -> None:
    console, gate = Console(), following()
    assert obeyed(gate, console.says(Stop(1)))
    assert obeyed(gate, console.says(RollCall(EPOCH, CONSOLE)))
    assert gate.admit(console.says(Clear(1))) == Refused(SealFault.NOT_FRESH)
    assert gate.admit(console.says(Query(EPOCH, BOOT - 1, 1))) == Refused(SealFault.NOT_FRESH)
    assert obeyed(gate, console.says(QUERY))
    assert obeyed(gate, console.says(Clear(1)))


def test_what_was_sent_before_the_proof_is_old() -> None:
    console, gate = Console(), following()
    early = console.says(Clear(1))
    assert obeyed(gate, console.says(Rest(EPOCH, BOOT, 1, 9)))
    assert gate.admit(early) == Refused(SealFault.REPEATED)


def test_a_repeated_stop_is_obeyed_and_a_repeated_clear_is_not() -> None:
    console, gate = Console(), following()
    gate.admit(console.says(QUERY))
    stop, clear = console.says(Stop(1)), console.says(Clear(1))
    assert [obeyed(gate, each) for each in (stop, clear, stop, clear)] == [True, True, True, False]
    assert gate.faults[SealFault.REPEATED] == 1


def test_a_clear_of_the_boot_before_is_not_obeyed_after_a_restart() -> None:
    console = Console()
    clear = console.says(Clear(1))
    before = following()
    before.admit(console.says(QUERY))
    after = following(boot=BOOT + 1)
    assert not obeyed(after, clear)
    assert obeyed(after, console.says(Query(EPOCH, BOOT + 1, 1)))
    assert not obeyed(after, clear)


def test_a_new_session_of_the_console_shuts_the_one_before_out() -> None:
    old, new, gate = Console(EPOCH), Console(EPOCH + 1), following()
    assert obeyed(gate, old.says(QUERY))
    late = old.says(Clear(1))
    gate.follow(EPOCH + 1)
    assert gate.admit(late) == Refused(SealFault.OTHER_OPENING)
    assert gate.admit(new.says(Clear(1))) == Refused(SealFault.NOT_FRESH)
    assert obeyed(gate, new.says(Query(EPOCH + 1, BOOT, 1)))
    assert obeyed(gate, new.says(Clear(1)))
    assert gate.admit(late) == Refused(SealFault.OTHER_OPENING)


# Two consoles of one address: their openings are their epochs.


RIVAL = EPOCH + 7
OF_ANOTHER_CONSOLE: list[tuple[Message, bool]] = [
    (Stop(1), True),
    (RollCall(RIVAL, 0xC1), True),
    # Answered, which can only be a refusal, as long as the opening is honest about its epoch.
    (Rest(RIVAL, BOOT, 1, 9), True),
    (Query(RIVAL, BOOT, 1), True),
    (Rest(EPOCH, BOOT, 1, 9), False),
    (Query(EPOCH, BOOT, 1), False),
    (Clear(1), False),
    (Probe(0xC1, BOOT, 1, 9, 0, 5), False),
    (Permit(0xC1, 5000), False),
    (Release(0xC0), False),
    (Go(0xC0, 1, 5000), False),
    (SettingAsk(1), False),
    (TraceAsk(RIVAL, BOOT, 1, 9, 0, 1), False),
]


@pytest.mark.parametrize("proven", [False, True])
@pytest.mark.parametrize(("message", "heard"), OF_ANOTHER_CONSOLE)
def test_what_is_obeyed_of_another_opening(message: Message, heard: bool, proven: bool) -> None:
    rival, gate = Console(RIVAL), following()
    if proven:
        assert obeyed(gate, Console().says(QUERY))
    assert obeyed(gate, rival.says(message)) is heard
    assert gate.faults[SealFault.OTHER_OPENING] == (not heard)


@pytest.mark.parametrize("opening", [RIVAL, EPOCH - 7])
def test_another_opening_does_not_move_the_window(opening: int) -> None:
    console, rival, gate = Console(), Console(opening), following()
    assert obeyed(gate, console.says(QUERY))
    for _ in range(100):
        assert obeyed(gate, rival.says(RollCall(opening, 0xC1)))
        assert obeyed(gate, rival.says(Query(opening, BOOT, 1)))
    clear = console.says(Clear(1))
    assert obeyed(gate, clear)
    assert gate.admit(clear) == Refused(SealFault.REPEATED)


def test_another_opening_proves_nothing() -> None:
    console, rival, gate = Console(), Console(RIVAL), following()
    assert obeyed(gate, rival.says(Query(RIVAL, BOOT, 1)))
    assert gate.admit(console.says(Clear(1))) == Refused(SealFault.NOT_FRESH)


def test_adopting_the_epoch_it_follows_again_forgets_nothing() -> None:
    console, gate = Console(), following()
    assert obeyed(gate, console.says(QUERY))
    clear = console.says(Clear(1))
    assert obeyed(gate, clear)
    gate.follow(EPOCH)
    assert gate.admit(clear) == Refused(SealFault.REPEATED)


def test_before_any_epoch_only_what_harms_nothing_is_heard() -> None:
    console, gate = Console(), ModuleGate(KEYS, BOOT)
    assert obeyed(gate, console.says(Stop(1)))
    assert obeyed(gate, console.says(RollCall(EPOCH, CONSOLE)))
    assert obeyed(gate, console.says(QUERY))
    assert gate.admit(console.says(Clear(1))) == Refused(SealFault.OTHER_OPENING)


PROOFS: list[tuple[Message, bool]] = [
    (Rest(EPOCH, BOOT, 1, 9), True),
    (QUERY, True),
    (Probe(CONSOLE, BOOT, 1, 9, 0, 5), True),
    (TraceAsk(EPOCH, BOOT, 1, 9, 0, 1), True),
    (Rest(EPOCH, BOOT - 1, 1, 9), False),
    (Probe(CONSOLE, BOOT - 1, 1, 9, 0, 5), False),
    (TraceAsk(EPOCH, BOOT - 1, 1, 9, 0, 1), False),
    (Permit(CONSOLE, 5000), False),
    (SettingAsk(1), False),
    (Go(CONSOLE, 1, 5000), False),
]


@pytest.mark.parametrize(("message", "proof"), PROOFS)
def test_proof_is_what_carries_the_present_boot(message: Message, proof: bool) -> None:
    console, gate = Console(), following()
    assert obeyed(gate, console.says(message)) is proof
    assert obeyed(gate, console.says(Permit(CONSOLE, 5000))) is proof


def test_a_console_takes_presence_only_until_one_names_its_epoch() -> None:
    module, gate = Module(BOOT), ConsoleGate(KEYS, EPOCH)
    assert gate.admit(module.says(TELEMETRY)) == Refused(SealFault.NOT_FRESH)
    assert obeyed(gate, module.says(PRESENCE._replace(epoch=EPOCH - 5)))
    assert not obeyed(gate, module.says(TELEMETRY))
    proof = module.says(PRESENCE)
    assert obeyed(gate, proof)
    assert obeyed(gate, module.says(TELEMETRY))
    assert gate.admit(proof) == Refused(SealFault.REPEATED)


def test_another_epoch_asks_for_proof_again() -> None:
    module, gate = Module(BOOT), ConsoleGate(KEYS, EPOCH)
    gate.admit(module.says(PRESENCE))
    gate.set_epoch(EPOCH + 1)
    assert not obeyed(gate, module.says(TELEMETRY))
    assert obeyed(gate, module.says(PRESENCE._replace(epoch=EPOCH + 1)))
    assert obeyed(gate, module.says(TELEMETRY))


def test_unsealed_and_forged_frames_are_counted() -> None:
    gate = following()
    plain = encode(Packet(EVERYONE_ADDRESS, CONSOLE_ADDRESS, Stop(1)))
    foreign = Sealer(KeyRing({0: bytes(32)}, 0), 5).seal(plain)
    assert not obeyed(gate, plain)
    assert not obeyed(gate, foreign)
    assert gate.faults == {SealFault.UNSEALED: 1, SealFault.FORGED: 1}


def test_an_authentic_payload_that_is_no_message_takes_no_counter() -> None:
    gate, sealer = ModuleGate(KEYS, BOOT), Sealer(KEYS, EPOCH)
    unknown = bytearray(encode(Packet(EVERYONE_ADDRESS, CONSOLE_ADDRESS, Stop(1))))
    unknown[1] = 0x7F
    with pytest.raises(RemoteProtocolError):
        gate.admit(sealer.seal(bytes(unknown)))
    assert not gate.faults


@pytest.mark.parametrize("seed", [1, 2])
def test_no_forgery_is_accepted_and_no_honest_frame_refused(seed: int) -> None:
    result = assault(seed, 10_000)
    assert result.forged >= 10_000
    assert result.honest > 2_000
    assert (result.forged_accepted, result.honest_refused) == (0, 0)
