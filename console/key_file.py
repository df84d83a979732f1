"""Fleet keys and the console's openings on this computer: two files that matter.

Owns reading the key file, with who else can read it, and the file that remembers the last
opening. A key is in no error text. What a key is for is protocol/seal.py's.
"""

import os
import stat
import tempfile
from pathlib import Path
from typing import Final

from console.errors import InputError
from console.key_ring_store import PREFIX, keyring_text
from protocol.errors import LocalProtocolError
from protocol.key_text import read_keys
from protocol.seal import KeyRing

_OTHERS: Final = stat.S_IRWXG | stat.S_IRWXO


def load_keys(path: Path) -> KeyRing:
    """Read a key file. Raises InputError where it cannot be read, is not yours alone, or holds no
    keys; the text says what to do."""
    try:
        status = path.stat()
        text = path.read_text()
    except (OSError, UnicodeDecodeError) as error:
        reason = error.strerror if isinstance(error, OSError) else "it is not text"
        raise InputError(f"{path}: cannot be read: {reason}") from error
    if os.name == "posix" and (status.st_mode & _OTHERS or status.st_uid != os.geteuid()):
        raise InputError(f"{path}: a key file must be yours alone; run `chmod 600 {path}`")
    try:
        return read_keys(text)
    except LocalProtocolError as error:
        raise InputError(f"{path}: {error}") from error


def load_keys_from(source: str) -> KeyRing:
    """Read keys from a file, or from the system's keyring where ``source`` is ``keyring:NAME``.
    Raises InputError as either does."""
    if not source.startswith(PREFIX):
        return load_keys(Path(source))
    text = keyring_text(source.removeprefix(PREFIX))
    try:
        return read_keys(text)
    except LocalProtocolError as error:
        raise InputError(f"{source}: {error}") from error


def default_opening_path() -> Path:
    """Where the last opening is remembered: with the program's state, by the platform's rules."""
    from platformdirs import user_state_path

    return user_state_path("tumblewire", appauthor=False) / "opening"


class OpeningStore:
    """Remembers the greatest opening that this computer ever used."""

    def __init__(self, path: Path) -> None:
        self._path = path

    def last(self) -> int:
        """The last opening, 0 where there was none. Raises InputError where the file is damaged:
        to guess could use a counter twice."""
        try:
            return int(self._path.read_text())
        except FileNotFoundError:
            return 0
        except (OSError, ValueError) as error:
            raise InputError(
                f"{self._path}: the last opening cannot be read; write a number into it that is "
                "greater than every session's epoch in your logs"
            ) from error

    def remember(self, opening: int) -> None:
        """Store an opening durably, before it is used; a smaller one than stored changes nothing.
        Raises InputError where that fails.

        Written aside, synced, then renamed: a power loss leaves the old number or the new one.
        """
        if opening <= self.last():
            return
        try:
            self._path.parent.mkdir(parents=True, exist_ok=True)
            descriptor, aside = tempfile.mkstemp(dir=self._path.parent)
            try:
                _write_synced(descriptor, f"{opening}\n")
                os.replace(aside, self._path)
            except OSError:
                os.unlink(aside)
                raise
            _sync_folder(self._path.parent)
        except OSError as error:
            raise InputError(
                f"{self._path}: the opening cannot be stored ({error.strerror or error}), and "
                "without that nothing may be sealed"
            ) from error


def _write_synced(descriptor: int, text: str) -> None:
    with os.fdopen(descriptor, "w") as file:
        file.write(text)
        file.flush()
        os.fsync(file.fileno())


def _sync_folder(folder: Path) -> None:
    """Make a rename durable, where a folder can be opened (POSIX)."""
    if os.name != "posix":
        return
    descriptor = os.open(folder, os.O_RDONLY)
    try:
        os.fsync(descriptor)
    finally:
        os.close(descriptor)
