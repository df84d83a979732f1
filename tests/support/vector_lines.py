"""vectors.json as lines that a C program can read without a parser for JSON.

`python -m tests.support.vector_lines` prints one step a line; protocol/kit/test/check.c says what
each word means. Messages' fields are left out: the kit works on payloads.

A ``-`` stands for nothing. Where a step expects several payloads, they may come in any order, and
an asterisk stands for any digit.
"""

import json
from collections.abc import Iterator
from pathlib import Path
from typing import Any, Final

from protocol.codes import Code

VECTORS = Path(__file__).parents[2] / "protocol/vectors.json"

VERDICTS: Final = {
    "opened": "obeyed",
    "obeyed": "obeyed",
    "unsealed": "unsealed",
    "too short for a seal": "too_short",
    "no key for its slot": "unknown_slot",
    "forged or altered": "forged",
    "repeated": "repeated",
    "too old": "too_old",
    "not fresh": "not_fresh",
    "of another console": "other_opening",
}


_FROM_MODULE: Final = 0x80
_PAYLOAD_CODE: Final = slice(2, 4)


def _frame(vector: dict[str, Any]) -> Iterator[str]:
    pieces = [
        piece.get("payload") or piece["dropped"].replace(" ", "_") for piece in vector["pieces"]
    ]
    yield " ".join(("frame", vector["bytes"], *pieces))


def _message(vector: dict[str, Any]) -> Iterator[str]:
    """Its frame, both ways; and a module takes for a request what a console sends to one."""
    payload = vector["payload"]
    code = int(payload[_PAYLOAD_CODE], 16)
    yield f"write {payload} {vector['frame']}"
    yield f"frame {vector['frame']} {payload}"
    yield f"request {payload} {int(code < _FROM_MODULE and code != Code.BRIDGE_ASK)}"


def _no_message(vector: dict[str, Any]) -> Iterator[str]:
    yield f"request {vector['payload'] or '-'} 0"


def _memory(vector: dict[str, Any]) -> Iterator[str]:
    yield f"memory {vector['boot']} {vector['identity_bits']}"
    for step in vector["steps"]:
        owned, fresh = int(step.get("owned", False)), int(step["fresh"])
        yield f"judges {step['in']} {owned} {fresh} {step['out'] or '-'}"


def _stop(vector: dict[str, Any]) -> Iterator[str]:
    yield "module 8000000000000010 1 16"
    for step in vector["steps"]:
        yield f"stops {step['in']} {step['stop_number']} {int(step['latched'])}"


def _allegiance(vector: dict[str, Any]) -> Iterator[str]:
    yield "allegiance"
    for step in vector["steps"]:
        expected = step["expect"]
        yield (
            f"follows {step['at_ms']} {step['payload'] or '-'} {expected['epoch']}"
            f" {expected['console']} {expected['owner_left_ms']} {expected['permit_left_ms']}"
        )


def _module(vector: dict[str, Any]) -> Iterator[str]:
    yield f"module {vector['identity']:016x} {vector['boot']} {vector['address']}"
    for step in vector["steps"]:
        yield " ".join(("hears", str(step["at_ms"]), step["in"] or "-", *step["out"]))


def _telemetry(vector: dict[str, Any]) -> Iterator[str]:
    yield f"module {vector['identity']:016x} {vector['boot']} {vector['address']}"
    for step in vector["steps"]:
        times = ["any"] if step["times"] is None else map(str, step["times"])
        yield " ".join(("reports", str(step["at_ms"]), step["in"] or "-", *times))


def _seal(vector: dict[str, Any]) -> Iterator[str]:
    yield " ".join(("seal", str(vector["opening"]), vector["payload"], *vector["sealed"]))


def _gate(vector: dict[str, Any]) -> Iterator[str]:
    yield f"gate {vector['boot']}"
    for step in vector["steps"]:
        yield f"admit {step['follows']} {step['in']} {VERDICTS[step['verdict']]}"


WRITERS: Final = {
    "check": lambda vector: iter([f"crc {vector['data']} {vector['crc32c']}"]),
    "frame": _frame,
    "message": _message,
    "no message": _no_message,
    "memory": _memory,
    "stop": _stop,
    "allegiance": _allegiance,
    "module": _module,
    "telemetry": _telemetry,
    "seal": _seal,
    "open": lambda vector: iter([f"open {vector['payload']} {VERDICTS[vector['verdict']]}"]),
    "gate": _gate,
}


def lines() -> Iterator[str]:
    """All steps, in the file's order. Raises KeyError for a kind that nobody runs."""
    document = json.loads(VECTORS.read_text())
    yield f"key {document['key']}"
    for vector in document["vectors"]:
        yield from WRITERS[vector["kind"]](vector)


if __name__ == "__main__":
    for line in lines():
        print(line)
