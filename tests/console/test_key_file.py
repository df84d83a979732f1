"""The key file and the store of openings: who may read, and never twice."""

import os
from pathlib import Path

import pytest

from console.errors import InputError
from console.key_file import OpeningStore, load_keys

HEX = "ab" * 32
GOOD = f'[[key]]\nslot = 2\nhex = "{HEX}"\n'


def key_file(folder: Path, text: str, mode: int = 0o600) -> Path:
    path = folder / "keys.toml"
    path.write_text(text)
    path.chmod(mode)
    return path


def test_a_key_of_your_own_is_read(tmp_path: Path) -> None:
    keys = load_keys(key_file(tmp_path, GOOD))
    assert keys.sending_slot == 2
    assert keys.key(2) == bytes.fromhex(HEX)


def test_two_keys_name_the_one_to_send_under(tmp_path: Path) -> None:
    two = GOOD + f'[[key]]\nslot = 3\nhex = "{"cd" * 32}"\n'
    assert load_keys(key_file(tmp_path, "sending_slot = 3\n" + two)).sending_slot == 3
    with pytest.raises(InputError, match="sending_slot"):
        load_keys(key_file(tmp_path, two))


@pytest.mark.parametrize("mode", [0o640, 0o604, 0o660, 0o644])
def test_a_key_that_others_can_read_is_refused(mode: int, tmp_path: Path) -> None:
    with pytest.raises(InputError, match=r"yours alone; run `chmod 600 .*keys\.toml`"):
        load_keys(key_file(tmp_path, GOOD, mode))


@pytest.mark.parametrize(
    "text",
    [
        "",
        "key = 3",
        GOOD.replace("slot = 2", "slot = 9"),
        GOOD.replace("slot = 2", 'slot = "2"'),
        GOOD.replace(HEX, HEX[:-2]),
        GOOD.replace(HEX, "zz" + HEX[2:]),
        GOOD + "more = 1\n",
        GOOD.replace('hex = "', 'hex = "\n'),
        "sending_slot = 5\n" + GOOD,
    ],
)
def test_a_bad_file_is_told_without_the_key(text: str, tmp_path: Path) -> None:
    with pytest.raises(InputError) as caught:
        load_keys(key_file(tmp_path, text))
    told = f"{caught.value!r} {caught.value.__cause__!r}"
    assert "keys.toml" in told
    assert HEX[:16] not in told


def test_a_missing_file_is_told(tmp_path: Path) -> None:
    with pytest.raises(InputError, match="No such file"):
        load_keys(tmp_path / "none.toml")


# -- openings ---------------------------------------------------------------------------------


def test_openings_only_rise(tmp_path: Path) -> None:
    store = OpeningStore(tmp_path / "state" / "opening")
    assert store.last() == 0
    store.remember(100)
    store.remember(70)
    assert OpeningStore(tmp_path / "state" / "opening").last() == 100
    store.remember(101)
    assert store.last() == 101
    assert os.listdir(tmp_path / "state") == ["opening"]


def test_a_damaged_store_is_told_and_not_guessed(tmp_path: Path) -> None:
    path = tmp_path / "opening"
    path.write_text("soon")
    with pytest.raises(InputError, match="greater than every session's epoch"):
        OpeningStore(path).last()


def test_a_failure_in_the_middle_leaves_the_old_number(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    store = OpeningStore(tmp_path / "opening")
    store.remember(100)

    def fail(*args: object) -> None:
        raise OSError("power went")

    monkeypatch.setattr(os, "replace", fail)
    with pytest.raises(InputError, match="power went"):
        store.remember(200)
    assert store.last() == 100
    assert os.listdir(tmp_path) == ["opening"]
