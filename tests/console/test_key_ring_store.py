"""Keys from the system's keyring: a backend of the library's own interface, in memory."""

import builtins
from collections.abc import Iterator
from pathlib import Path

import keyring
import keyring.backend
import keyring.errors
import pytest

from console.errors import InputError
from console.key_file import load_keys_from
from console.key_ring_store import SERVICE, keyring_text

KEY = bytes(range(32)).hex()
TEXT = f"[[key]]\nslot = 2\nhex = '{KEY}'\n"


class MemoryRing(keyring.backend.KeyringBackend):
    """Holds what a test puts in; ``error`` is raised instead of an answer."""

    priority = 1  # type: ignore[assignment]

    def __init__(self) -> None:
        super().__init__()
        self.kept: dict[tuple[str, str], str] = {}
        self.error: Exception | None = None

    def get_password(self, service: str, username: str) -> str | None:
        if self.error is not None:
            raise self.error
        return self.kept.get((service, username))

    def set_password(self, service: str, username: str, password: str) -> None:
        self.kept[service, username] = password


@pytest.fixture
def ring() -> Iterator[MemoryRing]:
    before = keyring.get_keyring()
    made = MemoryRing()
    keyring.set_keyring(made)
    yield made
    keyring.set_keyring(before)


def test_what_is_stored_there_is_read_as_a_key_file_is(ring: MemoryRing) -> None:
    keyring.set_password(SERVICE, "hall", TEXT)
    keys = load_keys_from("keyring:hall")
    assert keys.key(2) == bytes(range(32))
    assert keys.sending_slot == 2


def test_a_path_is_still_a_path(tmp_path: Path, ring: MemoryRing) -> None:
    path = tmp_path / "keys.toml"
    path.write_text(TEXT)
    path.chmod(0o600)
    assert load_keys_from(str(path)).sending_slot == 2


@pytest.mark.parametrize(
    ("error", "words"),
    [
        (None, "nothing for tumblewire under 'hall'"),
        (keyring.errors.NoKeyringError(), "no keyring that can be used"),
        (keyring.errors.KeyringLocked("locked\nup"), "locked up; unlock it"),
        (keyring.errors.InitError(), "InitError"),
    ],
)
def test_what_it_cannot_give_is_said_in_one_line(
    ring: MemoryRing, error: Exception | None, words: str
) -> None:
    ring.error = error
    with pytest.raises(InputError) as caught:
        load_keys_from("keyring:hall")
    assert words in str(caught.value)
    assert "\n" not in str(caught.value)


def test_a_name_is_needed() -> None:
    with pytest.raises(InputError, match="keyring:hall"):
        keyring_text("")


def test_without_the_library_the_extra_is_named(monkeypatch: pytest.MonkeyPatch) -> None:
    real = builtins.__import__

    def without(name: str, *rest: object, **more: object) -> object:
        if name.split(".", maxsplit=1)[0] == "keyring":
            raise ImportError(name)
        return real(name, *rest, **more)  # type: ignore[arg-type]

    monkeypatch.setattr(builtins, "__import__", without)
    with pytest.raises(InputError, match=r"tumblewire\[keyring\]"):
        keyring_text("hall")


def test_a_bad_text_names_its_place_and_no_key(ring: MemoryRing) -> None:
    keyring.set_password(SERVICE, "hall", TEXT.replace(KEY, KEY[:-2]))
    with pytest.raises(InputError, match="keyring:hall") as caught:
        load_keys_from("keyring:hall")
    assert KEY[:16] not in str(caught.value)
