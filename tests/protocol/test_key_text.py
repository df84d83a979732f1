"""Fleet keys as text."""

import pytest

from protocol.errors import LocalProtocolError
from protocol.key_text import read_keys

FIRST, SECOND = "ab" * 32, "cd" * 32
ONE = f'[[key]]\nslot = 4\nhex = "{FIRST}"\n'
TWO = ONE + f'[[key]]\nslot = 5\nhex = "{SECOND}"\n'


def test_one_key_is_the_one_to_send_under() -> None:
    keys = read_keys(ONE)
    assert keys.sending_slot == 4
    assert keys.key(4) == bytes.fromhex(FIRST)
    assert keys.key(5) is None


@pytest.mark.parametrize("slot", [4, 5])
def test_of_two_one_is_named(slot: int) -> None:
    keys = read_keys(f"sending_slot = {slot}\n{TWO}")
    assert keys.sending_slot == slot
    assert keys.key(5) == bytes.fromhex(SECOND)


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        (TWO, "sending_slot is needed"),
        ("sending_slot = 7\n" + TWO, "no key is set for slot 7"),
        ("sending_slot = true\n" + ONE, "sending_slot"),
        ("", "expected"),
        ("[key]\nslot = 1\n", "expected"),
        ("keys = 1\n" + ONE, "expected"),
        (ONE.replace("slot = 4", "slot = 8"), "0 to 7"),
        (ONE.replace(FIRST, FIRST + "ab"), "32 bytes"),
        (ONE.replace(FIRST, "not hexadecimal"), "slot 4 is not hexadecimal"),
        (ONE + "note = 1\n", "nothing else"),
        (ONE.replace('"', ""), "not TOML"),
    ],
)
def test_what_is_wrong_is_said_without_the_key(text: str, expected: str) -> None:
    with pytest.raises(LocalProtocolError, match=expected) as caught:
        read_keys(text)
    assert FIRST[:8] not in str(caught.value)
