"""vectors.json as lines that a C program can read without a parser for JSON.

`python -m tests.support.vector_lines` prints one step a line; protocol/kit/test/check.c says what
each word means. Messages' fields are left out: the kit works on payloads.
"""

import json
from collections.abc import Iterator
from pathlib import Path
from typing import Any

VECTORS = Path(__file__).parents[2] / "protocol/vectors.json"

VERDICTS = {
    "opened": "obeyed",
    "obeyed": "obeyed",
    "unsealed": "unsealed",
    "too short for a seal": "too_short",
    "no key for its slot": "unknown_slot",
    "forged or altered": "forged",
    "repeated": "repeated",
    "too old": "too_old",
    "not fresh": "not_fresh",
}


def _frame(vector: dict[str, Any]) -> Iterator[str]:
    pieces = [
        piece.get("payload") or piece["dropped"].replace(" ", "_") for piece in vector["pieces"]
    ]
    yield " ".join(("frame", vector["bytes"], *pieces))


def _message(vector: dict[str, Any]) -> Iterator[str]:
    yield f"write {vector['payload']} {vector['frame']}"
    yield f"frame {vector['frame']} {vector['payload']}"


def _memory(vector: dict[str, Any]) -> Iterator[str]:
    yield f"memory {vector['boot']} {vector['identity_bits']}"
    for step in vector["steps"]:
        yield f"hears {step['in']} {int(step['fresh'])} {step['out'] or '-'}"


def _seal(vector: dict[str, Any]) -> Iterator[str]:
    yield " ".join(("seal", str(vector["opening"]), vector["payload"], *vector["sealed"]))


def _gate(vector: dict[str, Any]) -> Iterator[str]:
    yield f"gate {vector['boot']}"
    for step in vector["steps"]:
        yield f"admit {step['in']} {VERDICTS[step['verdict']]}"


WRITERS = {
    "check": lambda vector: iter([f"crc {vector['data']} {vector['crc32c']}"]),
    "frame": _frame,
    "message": _message,
    "memory": _memory,
    "seal": _seal,
    "open": lambda vector: iter([f"open {vector['payload']} {VERDICTS[vector['verdict']]}"]),
    "gate": _gate,
}
NOT_IN_THE_KIT = frozenset({"no message", "stop"})
"""The kit has no message decoder and no stop latch yet."""


def lines() -> Iterator[str]:
    """All steps, in the file's order."""
    document = json.loads(VECTORS.read_text())
    yield f"key {document['key']}"
    for vector in document["vectors"]:
        if vector["kind"] not in NOT_IN_THE_KIT:
            yield from WRITERS[vector["kind"]](vector)


if __name__ == "__main__":
    for line in lines():
        print(line)
