"""A virtual module's end of the seal: what it sends sealed, what it hears judged.

Owns one gate and one sealer for each boot of the module; a restart forgets both, as firmware
does. Its opening is the boot number, which a real module counts in memory that keeps; here it is
drawn from the seed, so that two runs of one seed use the same counters: good for rehearsal only.
"""

from pathlib import Path

from protocol.errors import LocalProtocolError
from protocol.key_text import read_keys
from protocol.message import Packet
from protocol.seal import KeyRing, Refused, Sealer
from protocol.seal_gate import ModuleGate
from sim_link.errors import SimInputError


def load_keys(path: Path) -> KeyRing:
    """Read the key file of a simulated fleet. Raises SimInputError. Who else may read it is not
    looked at: what is secret is looked after by the console's own reading of it."""
    try:
        return read_keys(path.read_text())
    except (OSError, UnicodeDecodeError) as error:
        raise SimInputError(str(path), "keys", "a key file that can be read is needed") from error
    except LocalProtocolError as error:
        raise SimInputError(str(path), "keys", str(error)) from error


class ModuleSeal:
    """The seal of one module, whatever boot it is in."""

    def __init__(self, keys: KeyRing) -> None:
        self._keys = keys
        self._boot = 0
        self._gate = ModuleGate(keys, 0)
        self._sealer = Sealer(keys, 1)

    def seal(self, payload: bytes, boot: int) -> bytes:
        """Seal what the module sends in this boot."""
        self._follow(boot)
        return self._sealer.seal(payload)

    def admit(self, payload: bytes, boot: int, epoch: int) -> Packet | None:
        """Open what it heard while it follows ``epoch``; None where it does not obey. Raises
        RemoteProtocolError."""
        self._follow(boot)
        self._gate.follow(epoch)
        verdict = self._gate.admit(payload)
        return None if isinstance(verdict, Refused) else verdict

    def _follow(self, boot: int) -> None:
        if boot != self._boot:
            self._boot = boot
            self._gate = ModuleGate(self._keys, boot)
            self._sealer = Sealer(self._keys, boot)
