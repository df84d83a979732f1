"""Writes protocol/vectors.json: `python -m tests.support.make_vectors > protocol/vectors.json`.

Payloads are laid out by hand from WIRE.md's tables (wire_by_hand.py), scripts from its rules
(vectors_*.py); check, stuffing and tags come from independent.py. Nothing of protocol/ is
imported, so that an error there cannot agree with itself.
"""

import json
import sys

from tests.support.vectors_allegiance import allegiance_vectors
from tests.support.vectors_frames import frame_vectors, message_vectors, payload_vectors
from tests.support.vectors_memory import memory_vectors, stop_vectors
from tests.support.vectors_module import module_vectors
from tests.support.vectors_seal import gate_vectors, seal_vectors
from tests.support.vectors_slots import slot_vectors
from tests.support.wire_by_hand import KEY

FORMAT = {
    "check": "crc32c of data, as a number in hexadecimal",
    "frame": "bytes fed to a fresh decoder give these pieces, each a payload or a reason of drop",
    "message": "payload decodes to the named message with these fields (text and data fields in"
    " hexadecimal, text without its padding), and encodes from them; frame is its frame",
    "no message": "a payload whose check is good, and that must be dropped",
    "memory": "a fresh command memory of this boot and identity; each step is a payload that comes"
    " in, whether a console owns the module then, whether it is fresh, and the payload that goes"
    " out (null: nothing is looked at). A RollCall's epoch is adopted if it is newer. What is"
    " fresh is finished at once: Answer FINISHED is remembered and goes out. 8 replies are kept",
    "stop": "a module that knows no stop; after each step, its newest number and its latch",
    "allegiance": "a module just started, that follows nobody. Each step: at at_ms of module time"
    " (32 bits) it hears payload, a RollCall, Probe, Permit or Release (empty: nothing); then it"
    " follows this epoch and console, is owned for so long from then on (as Presence would say),"
    " and may turn its wheel for so long; 0: not at all",
    "module": "a whole module of this identity, address and boot, started at 0 ms of its own time,"
    " and its clock exact: face 1 up, settled, battery full, no fault, wheel limit 9,000 rpm as"
    " delivered, in no group, and of motions it can do pivots on the floor alone. Each step: at"
    " at_ms, after all that was due up to then, it hears the payload in (empty: nothing); since"
    " the step before it then sent the payloads out, in any order. Presence, Nameplate, Telemetry,"
    " FaultNotice and SettingValue are not listed: what it sends of these is left out. Echo has"
    " received_us = 1000 at_ms and held_us 0. Four characters **** at the end of an Answer stand"
    " for the two bytes of expect_ms, whatever they are",
    "telemetry": "a whole module as of the kind module, woken each millisecond, at rest, its"
    " setting TELEMETRY_PERIOD_MS 500. Each step: at at_ms, after all that was due up to then, it"
    " hears the payload in (empty: nothing); times are those of the Telemetry, by its own time_ms,"
    " that it sent by then since the step before (null: not looked at)",
    "seal": "payload sealed under key, slot 0, with this opening: the first, then the second time",
    "open": "payload opened by a receiver that has key in slot 0 only",
    "gate": "the gate of a sealed module just started with this boot number. Each step: it follows"
    " this epoch (0: nobody; a change means that it has adopted another), hears in, and does what"
    " verdict says",
}


def main() -> None:
    """Print the document."""
    vectors = [
        *frame_vectors(),
        *payload_vectors(),
        *message_vectors(),
        *memory_vectors(),
        *stop_vectors(),
        *allegiance_vectors(),
        *module_vectors(),
        *slot_vectors(),
        *seal_vectors(),
        *gate_vectors(),
    ]
    document = {"wire_version": 1, "key": KEY.hex(), "format": FORMAT, "vectors": vectors}
    json.dump(document, sys.stdout, indent=1)
    print()


if __name__ == "__main__":
    main()
