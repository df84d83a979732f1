"""Fleet keys as text: how a key file is written, and how it becomes a key ring.

Owns the format only. Whoever has the file reads it, and sees that nobody else can.

    sending_slot = 0        # may be left out where there is one key
    [[key]]
    slot = 0
    hex = "64 hexadecimal digits"
"""

import tomllib
from typing import Any, Final

from protocol.errors import LocalProtocolError
from protocol.seal import KEY_BYTES, KeyRing

_FORM: Final = f'[[key]] slot = 0, hex = "{KEY_BYTES * 2} hexadecimal digits"'


def read_keys(text: str) -> KeyRing:
    """Read a key file's text. Raises LocalProtocolError saying what is wrong, and never what the
    key is: not even the line of it is shown."""
    try:
        table = tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        raise LocalProtocolError("not TOML; expected " + _FORM) from error.with_traceback(None)
    keys = dict(_key(entry) for entry in _entries(table))
    sending_slot = table.get("sending_slot", next(iter(keys)) if len(keys) == 1 else None)
    if type(sending_slot) is not int:
        raise LocalProtocolError("sending_slot is needed where there is more than one key")
    return KeyRing(keys, sending_slot)


def _entries(table: dict[str, Any]) -> list[dict[str, Any]]:
    entries = table.get("key")
    if not isinstance(entries, list) or not entries or set(table) - {"key", "sending_slot"}:
        raise LocalProtocolError("expected " + _FORM)
    return entries


def _key(entry: Any) -> tuple[int, bytes]:
    if not isinstance(entry, dict) or set(entry) != {"slot", "hex"}:
        raise LocalProtocolError("expected slot and hex, and nothing else, in each [[key]]")
    slot, digits = entry["slot"], entry["hex"]
    if type(slot) is not int or not isinstance(digits, str):
        raise LocalProtocolError("expected " + _FORM)
    try:
        return slot, bytes.fromhex(digits)
    except ValueError:
        raise LocalProtocolError(f"the key of slot {slot} is not hexadecimal") from None
