"""A virtual module's end of the seal."""

from pathlib import Path

import pytest

from protocol.codes import CONSOLE_ADDRESS, EVERYONE_ADDRESS
from protocol.message import Clear, Message, Packet, Query, RollCall, Stop, Telemetry, encode
from protocol.seal import KeyRing, Opened, Sealer, open_seal
from sim_link.errors import SimInputError
from sim_link.module_seal import ModuleSeal, load_keys

KEY = bytes(range(32))
KEYS = KeyRing({0: KEY}, 0)
TELEMETRY = Telemetry(5, 1, 0, 0, 0, 1, 0, 4000, 2000, 0, 7)


def said(message: Message) -> bytes:
    return encode(Packet(CONSOLE_ADDRESS, 0x10, message))


def counter(payload: bytes) -> int:
    opened = open_seal(KEYS, payload)
    assert isinstance(opened, Opened)
    return opened.counter


def test_the_boot_number_is_the_opening() -> None:
    seal = ModuleSeal(KEYS)
    first, second = (counter(seal.seal(said(TELEMETRY), 77)) for _ in range(2))
    assert (first, second) == (77 << 32 | 1, 77 << 32 | 2)
    assert counter(seal.seal(said(TELEMETRY), 78)) == 78 << 32 | 1


def test_a_restart_forgets_what_was_proven() -> None:
    seal, console = ModuleSeal(KEYS), Sealer(KEYS, 1000)

    def heard(message: Message, boot: int) -> Packet | None:
        payload = encode(Packet(EVERYONE_ADDRESS, CONSOLE_ADDRESS, message))
        return seal.admit(console.seal(payload), boot, epoch=1000)

    assert heard(Clear(1), 77) is None
    assert heard(Query(1000, 77, 0), 77) is not None
    assert heard(Clear(1), 77) is not None
    assert heard(Clear(1), 78) is None
    assert heard(Stop(2), 78) is not None


def test_another_epoch_forgets_what_was_proven_too() -> None:
    seal = ModuleSeal(KEYS)
    first, second = Sealer(KEYS, 1000), Sealer(KEYS, 1001)

    def heard(console: Sealer, message: Message, epoch: int) -> Packet | None:
        payload = encode(Packet(EVERYONE_ADDRESS, CONSOLE_ADDRESS, message))
        return seal.admit(console.seal(payload), 77, epoch)

    assert heard(first, Query(1000, 77, 0), 1000) is not None
    assert heard(second, RollCall(1001, 5), 1000) is not None
    assert heard(first, Clear(1), 1000) is not None
    assert heard(first, Clear(1), 1001) is None
    assert heard(second, Clear(1), 1001) is None
    assert heard(second, Query(1001, 77, 0), 1001) is not None
    assert heard(second, Clear(1), 1001) is not None


def test_unsealed_words_are_not_heard() -> None:
    payload = encode(Packet(EVERYONE_ADDRESS, CONSOLE_ADDRESS, Stop(1)))
    assert ModuleSeal(KEYS).admit(payload, 77, 1000) is None


@pytest.mark.parametrize("text", ["", "[[key]]\nslot = 0\nhex = 'ab'\n"])
def test_a_bad_key_file_is_bad_input(text: str, tmp_path: Path) -> None:
    path = tmp_path / "keys.toml"
    path.write_text(text)
    with pytest.raises(SimInputError, match=r"keys\.toml"):
        load_keys(path)


def test_a_missing_key_file_is_bad_input(tmp_path: Path) -> None:
    with pytest.raises(SimInputError, match="can be read"):
        load_keys(tmp_path / "none.toml")
