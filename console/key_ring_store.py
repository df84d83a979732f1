"""Fleet keys from the system's keyring, where there is one.

Owns the one question to the library ``keyring`` (the extra of that name) and what is said where it
cannot answer. The text kept there is that of a key file. A key is in no error text.
"""

from typing import Final

from console.errors import InputError

SERVICE: Final = "tumblewire"
PREFIX: Final = "keyring:"


def keyring_text(name: str) -> str:
    """Fetch the text stored under ``name``. Raises InputError, one line with what to do, where
    the library, a backend or the entry is missing, or the keyring is locked."""
    if not name:
        raise InputError(f"{PREFIX} needs a name behind it, such as {PREFIX}hall")
    try:
        import keyring
        from keyring.errors import KeyringError, NoKeyringError
    except ImportError as error:
        raise InputError(
            "the system's keyring needs an extra: pip install 'tumblewire[keyring]'"
        ) from error
    try:
        text = keyring.get_password(SERVICE, name)
    except NoKeyringError as error:
        raise InputError("this computer has no keyring that can be used; use a key file") from error
    except KeyringError as error:
        reason = " ".join(str(error).split()) or type(error).__name__
        raise InputError(f"the keyring cannot be read: {reason}; unlock it, or use a file") from (
            error
        )
    if text is None:
        raise InputError(
            f"the keyring has nothing for {SERVICE} under {name!r}; store the text of a key file "
            f"with `keyring set {SERVICE} {name} < FILE`"
        )
    return text
