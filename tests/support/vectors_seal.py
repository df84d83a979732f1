"""Vectors of the seal: sealing, opening, and what a module's gate obeys."""

from tests.support.independent import sealed
from tests.support.wire_by_hand import (
    ANNA,
    BERT,
    BITS,
    BOOT,
    EPOCH,
    KEY,
    Vector,
    named,
    query,
    vector,
)


def seal_vectors() -> list[Vector]:
    """Sealing and opening."""
    stop = named("Stop", (3,))
    good = sealed(stop, KEY, 0, 9, 1)
    counter_up = good[:-16] + bytes((good[-16] + 1,)) + good[-15:]
    origin = "by hand: HMAC from the standard library"
    rows = [
        ("honest", good, "opened"),
        ("other-key", sealed(stop, bytes(32), 0, 9, 1), "forged or altered"),
        ("altered-body", good[:7] + bytes((good[7] ^ 1,)) + good[8:], "forged or altered"),
        ("altered-counter", counter_up, "forged or altered"),
        ("truncated", good[:-1], "forged or altered"),
        ("too-short", good[:20], "too short for a seal"),
        ("other-slot", sealed(stop, KEY, 3, 9, 1), "no key for its slot"),
        ("unsealed", stop, "unsealed"),
    ]
    found = [
        vector(f"seal-{name}", "Seal", "open", origin, payload=data.hex(), verdict=verdict)
        for name, data, verdict in rows
    ]
    found.append(
        vector(
            "seal-layout",
            "Seal",
            "seal",
            origin,
            payload=stop.hex(),
            opening=9,
            sealed=[good.hex(), sealed(stop, KEY, 0, 9, 2).hex()],
        )
    )
    return found


OURS, THEIRS = EPOCH, EPOCH + 7
"""Epochs of two consoles, which are their openings."""


def at(count: int, plain: bytes, opening: int = OURS) -> str:
    """A payload under this counter."""
    return sealed(plain, KEY, 0, opening, count).hex()


def gate_scripts() -> list[tuple[str, list[tuple[str, str]]]]:
    """What a module that follows OURS hears of it, and what it does."""
    stop, clear = named("Stop", (3,)), named("Clear", (3,))
    ask = bytes.fromhex(query(0))
    obeyed, old, unproven = "obeyed", "too old", "not fresh"
    call = named("RollCall", (OURS, ANNA))
    permit = named("Permit", (ANNA, 5000))
    probe = named("Probe", (ANNA, BOOT, 1, BITS, 0, 5))
    other_boot = named("Probe", (ANNA, BOOT + 1, 1, BITS, 0, 5))
    trace = named("TraceAsk", (OURS, BOOT, 7, BITS, 0, 1))
    rest = named("Rest", (OURS, BOOT, 7, BITS))
    return [
        (
            "before-proof",
            [
                (at(1, stop), obeyed),
                (at(2, call), obeyed),
                (at(3, clear), unproven),
                (at(4, permit), unproven),
                (at(5, ask), obeyed),
                (at(6, clear), obeyed),
                (at(7, permit), obeyed),
            ],
        ),
        *(
            (f"{name}-is-proof", [(at(1, proof), obeyed), (at(2, clear), obeyed)])
            for name, proof in (("probe", probe), ("trace-ask", trace), ("command", rest))
        ),
        ("another-boot-is-no-proof", [(at(1, other_boot), unproven), (at(2, clear), unproven)]),
        ("older-than-the-proof", [(at(9, ask), obeyed), (at(8, clear), "repeated")]),
        (
            "repeated-clear",
            [(at(1, ask), obeyed), (at(2, clear), obeyed), (at(2, clear), "repeated")],
        ),
        ("repeated-stop", [(at(1, ask), obeyed), (at(2, stop), obeyed), (at(2, stop), obeyed)]),
        (
            "repeated-permit",
            [(at(1, ask), obeyed), (at(2, permit), obeyed), (at(2, permit), "repeated")],
        ),
        (
            "late-within-the-window",
            [
                (at(1, ask), obeyed),
                (at(65, clear), obeyed),
                (at(2, clear), obeyed),
                (at(2, clear), "repeated"),
            ],
        ),
        (
            "left-of-the-window",
            [(at(1, ask), obeyed), (at(66, clear), obeyed), (at(2, clear), old)],
        ),
    ]


def opening_scripts() -> list[tuple[str, list[tuple[str, str, int]]]]:
    """Two consoles; each step with the epoch that the module follows when it hears it."""
    clear, stop = named("Clear", (3,)), named("Stop", (3,))
    ask, their_ask = bytes.fromhex(query(0)), bytes.fromhex(query(0, epoch=THEIRS))
    their_call = named("RollCall", (THEIRS, BERT))
    their_rest = named("Rest", (THEIRS, BOOT, 1, BITS))
    our_rest = named("Rest", (OURS, BOOT, 1, BITS))
    their_permit = named("Permit", (BERT, 5000))
    their_probe = named("Probe", (BERT, BOOT, 1, BITS, 0, 5))
    obeyed, other = "obeyed", "of another console"
    return [
        (
            "another-consoles-frames",
            [
                (at(1, ask), obeyed, OURS),
                (at(1, clear, THEIRS), other, OURS),
                (at(2, their_permit, THEIRS), other, OURS),
                (at(3, their_probe, THEIRS), other, OURS),
                (at(4, our_rest, THEIRS), other, OURS),
                (at(5, ask, THEIRS), other, OURS),
                (at(6, stop, THEIRS), obeyed, OURS),
                (at(7, their_rest, THEIRS), obeyed, OURS),
                (at(8, their_ask, THEIRS), obeyed, OURS),
                (at(2, clear), obeyed, OURS),
            ],
        ),
        (
            "its-roll-call-does-not-move-the-window",
            [
                (at(1, ask), obeyed, OURS),
                (at(1, their_call, THEIRS), obeyed, OURS),
                (at(900, their_call, THEIRS), obeyed, OURS),
                (at(900, their_call, THEIRS), obeyed, OURS),
                (at(2, clear), obeyed, OURS),
                (at(2, clear), "repeated", OURS),
            ],
        ),
        (
            "adoption-begins-anew",
            [
                (at(5, ask), obeyed, OURS),
                (at(1, their_call, THEIRS), obeyed, OURS),
                (at(2, clear, THEIRS), "not fresh", THEIRS),
                (at(3, their_ask, THEIRS), obeyed, THEIRS),
                (at(4, clear, THEIRS), obeyed, THEIRS),
                (at(6, clear), other, THEIRS),
                (at(7, our_rest), obeyed, THEIRS),
                (at(8, stop), obeyed, THEIRS),
            ],
        ),
        (
            "nobody-followed-yet",
            [
                (at(1, stop), obeyed, 0),
                (at(2, clear), other, 0),
                (at(3, named("RollCall", (OURS, ANNA))), obeyed, 0),
                (at(4, ask), obeyed, 0),
                (at(5, clear), "not fresh", OURS),
                (at(6, ask), obeyed, OURS),
                (at(7, clear), obeyed, OURS),
            ],
        ),
    ]


def gate_vectors() -> list[Vector]:
    """What a module's gate obeys."""
    scripts = [
        *((name, [(*step, OURS) for step in steps]) for name, steps in gate_scripts()),
        *opening_scripts(),
    ]
    return [
        vector(
            f"gate-{name}",
            "Seal",
            "gate",
            "by hand: HMAC from the standard library",
            boot=BOOT,
            steps=[
                {"follows": follows, "in": data, "verdict": verdict}
                for data, verdict, follows in steps
            ],
        )
        for name, steps in scripts
    ]
