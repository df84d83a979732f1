"""vectors.json: every vector is run, and the file is what its independent writer writes."""

import json
import re
import subprocess
import sys
from collections import Counter
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest

from protocol.allegiance import Allegiance
from protocol.codes import AnswerState, Code
from protocol.command_memory import CommandMemory, Fresh
from protocol.errors import RemoteProtocolError
from protocol.frame import FrameDecoder, frame
from protocol.message import (
    LAYOUTS,
    FaultNotice,
    Nameplate,
    Packet,
    Permit,
    Presence,
    Probe,
    Query,
    Release,
    RollCall,
    SettingValue,
    Telemetry,
    decode,
    encode,
)
from protocol.seal import KeyRing, Opened, Refused, Sealer, open_seal
from protocol.seal_gate import ModuleGate
from sim_link.deed import Deed
from sim_link.fleet_file import load_fleet
from sim_link.module import VirtualModule
from tests.support.independent import crc32c, stuff

ROOT = Path(__file__).parents[2]
DOCUMENT = json.loads((ROOT / "protocol/vectors.json").read_text())
VECTORS: list[dict[str, Any]] = DOCUMENT["vectors"]
KEYS = KeyRing({0: bytes.fromhex(DOCUMENT["key"])}, 0)


def pieces(fed: list[Any]) -> list[dict[str, str]]:
    return [
        {"payload": piece.hex()} if isinstance(piece, bytes) else {"dropped": piece.reason.value}
        for piece in fed
    ]


def run_check(vector: dict[str, Any]) -> None:
    """The writer's own check, and ours: a standard's figure holds for both."""
    data = bytes.fromhex(vector["data"])
    assert f"{crc32c(data):08x}" == vector["crc32c"]
    published = int(vector["crc32c"], 16).to_bytes(4, "little")
    assert frame(data) == stuff(data + published) + b"\0"
    assert FrameDecoder().feed(stuff(data + published) + b"\0") == [data]


def run_frame(vector: dict[str, Any]) -> None:
    data = bytes.fromhex(vector["bytes"])
    assert pieces(FrameDecoder().feed(data)) == vector["pieces"]
    decoder, found = FrameDecoder(), []
    for byte in data:
        found += decoder.feed(bytes((byte,)))
    assert pieces(found) == vector["pieces"]
    behind = FrameDecoder()
    assert pieces([*behind.feed(data + b"\x07"), *behind.feed(b"")]) == vector["pieces"]


def run_message(vector: dict[str, Any]) -> None:
    payload = bytes.fromhex(vector["payload"])
    assert frame(payload).hex() == vector["frame"]
    packet = decode(payload)
    assert type(packet.message).__name__ == vector["message"]
    assert (packet.destination, packet.source) == (vector["destination"], vector["source"])
    shown = {
        name: shown_bytes(name, value) if isinstance(value, bytes) else value
        for name, value in packet.message._asdict().items()
    }
    assert shown == vector["fields"]
    assert encode(packet) == payload


def shown_bytes(name: str, value: bytes) -> str:
    return (value if name == "data" else value.rstrip(b"\0")).hex()


def run_no_message(vector: dict[str, Any]) -> None:
    with pytest.raises(RemoteProtocolError):
        decode(bytes.fromhex(vector["payload"]))


def run_memory(vector: dict[str, Any]) -> None:
    memory = CommandMemory(vector["boot"], vector["identity_bits"])
    for step in vector["steps"]:
        packet = decode(bytes.fromhex(step["in"]))
        fresh, out = remembered(memory, packet.message, step["owned"])
        assert fresh == step["fresh"], step
        if step["out"] is not None:
            assert encode(Packet(packet.source, packet.destination, out)).hex() == step["out"]


def remembered(memory: CommandMemory, message: Any, owned: bool) -> tuple[bool, Any]:
    if isinstance(message, RollCall):
        memory.adopt(message.epoch)
        return False, None
    if isinstance(message, Query):
        return False, memory.query(message)
    verdict = memory.judge(message, owned)
    if not isinstance(verdict, Fresh):
        return False, verdict.message
    answer = memory.answer(message.number, AnswerState.FINISHED)
    memory.remember(message.number, answer)
    return True, answer


def run_stop(vector: dict[str, Any]) -> None:
    module = VirtualModule(load_fleet(None).modules[0], 1)
    for t_ns, step in enumerate(vector["steps"]):
        module.receive(decode(bytes.fromhex(step["in"])), t_ns)
        assert (module.stop_number, int(module.latched)) == (step["stop_number"], step["latched"])


def run_allegiance(vector: dict[str, Any]) -> None:
    module = Allegiance()
    for step in vector["steps"]:
        now_ms = step["at_ms"]
        if step["payload"]:
            heard(module, decode(bytes.fromhex(step["payload"])).message, now_ms)
        found = {
            "epoch": module.epoch,
            "console": module.console,
            "owner_left_ms": module.owner_left_ms(now_ms),
            "permit_left_ms": module.permit_left_ms(now_ms),
        }
        assert found == step["expect"], step


def heard(module: Allegiance, message: Any, now_ms: int) -> None:
    match message:
        case RollCall():
            module.roll_call(message.epoch, message.console, now_ms)
        case Probe():
            module.hear_probe(message, now_ms)
        case Permit():
            module.hear_permit(message, now_ms)
        case Release():
            module.release(message.console)
        case _:
            raise AssertionError(f"{message} is no word of a console about itself")


NOT_LISTED = (Presence, Nameplate, Telemetry, FaultNotice, SettingValue)


def run_module(vector: dict[str, Any]) -> None:
    """The simulated module, with a clock that runs true."""
    spec = replace(
        load_fleet(None).modules[0],
        address=vector["address"],
        identity=vector["identity"],
        charge=1.0,
        able=frozenset({Deed.FLOOR}),
    )
    module = VirtualModule(spec, 1, boot=vector["boot"], drift_ppm=0.0)
    for step in vector["steps"]:
        # The last nanosecond of that microsecond: what is due in it is done.
        t_ns = step["at_ms"] * 1_000_000 + 999
        sent = module.wake(t_ns)
        if step["in"]:
            try:
                sent += module.receive(decode(bytes.fromhex(step["in"])), t_ns)
            except RemoteProtocolError:
                assert step["out"] == []
        found = [encode(each).hex() for each in sent if not isinstance(each.message, NOT_LISTED)]
        assert len(found) == len(step["out"]), (step, found)
        for one, expected in zip(sorted(found), sorted(step["out"]), strict=True):
            assert same(one, expected), (step, found)


def same(found: str, expected: str) -> bool:
    if expected.endswith("****"):
        return found[:-4] == expected[:-4]
    return found == expected


def run_telemetry(vector: dict[str, Any]) -> None:
    """When the simulated module reports, its clock running true."""
    spec = replace(
        load_fleet(None).modules[0],
        address=vector["address"],
        identity=vector["identity"],
        telemetry_hz=2.0,
    )
    module = VirtualModule(spec, 1, boot=vector["boot"], drift_ppm=0.0)
    for step in vector["steps"]:
        t_ns = step["at_ms"] * 1_000_000 + 999
        sent = module.wake(t_ns)
        if step["in"]:
            sent += module.receive(decode(bytes.fromhex(step["in"])), t_ns)
        times = [each.message.time_ms for each in sent if isinstance(each.message, Telemetry)]
        assert step["times"] in (None, times), (step, times)


def run_seal(vector: dict[str, Any]) -> None:
    sealer = Sealer(KEYS, vector["opening"])
    payload = bytes.fromhex(vector["payload"])
    assert [sealer.seal(payload).hex() for _ in vector["sealed"]] == vector["sealed"]


def run_open(vector: dict[str, Any]) -> None:
    opened = open_seal(KEYS, bytes.fromhex(vector["payload"]))
    verdict = "opened" if isinstance(opened, Opened) else opened.fault.value
    assert verdict == vector["verdict"]


def run_gate(vector: dict[str, Any]) -> None:
    gate = ModuleGate(KEYS, vector["boot"])
    for step in vector["steps"]:
        gate.follow(step["follows"])
        verdict = gate.admit(bytes.fromhex(step["in"]))
        told = verdict.fault.value if isinstance(verdict, Refused) else "obeyed"
        assert told == step["verdict"]


RUNNERS: dict[str, Callable[[dict[str, Any]], None]] = {
    "check": run_check,
    "frame": run_frame,
    "message": run_message,
    "no message": run_no_message,
    "memory": run_memory,
    "stop": run_stop,
    "allegiance": run_allegiance,
    "module": run_module,
    "telemetry": run_telemetry,
    "seal": run_seal,
    "open": run_open,
    "gate": run_gate,
}


@pytest.mark.parametrize("vector", VECTORS, ids=lambda vector: vector["id"])
def test_vector(vector: dict[str, Any]) -> None:
    RUNNERS[vector["kind"]](vector)


def test_the_file_is_what_its_writer_writes() -> None:
    written = subprocess.run(
        [sys.executable, "-m", "tests.support.make_vectors"],
        capture_output=True,
        text=True,
        check=True,
        cwd=ROOT,
    )
    assert json.loads(written.stdout) == DOCUMENT


def test_its_writer_takes_nothing_from_the_project() -> None:
    support = ROOT / "tests/support"
    writers = {"make_vectors", "independent", "wire_by_hand"}
    writers |= {path.stem for path in support.glob("vectors_*.py")}
    for name in writers:
        text = (support / f"{name}.py").read_text()
        others = set(re.findall(r"from tests\.support\.(\w+) import", text))
        assert others <= writers
        assert "from protocol" not in text
        assert "import protocol" not in text
        assert "from sim_link" not in text


def test_each_kind_is_explained_and_each_vector_says_where_it_comes_from() -> None:
    kinds = Counter(vector["kind"] for vector in VECTORS)
    assert set(kinds) == set(RUNNERS) == set(DOCUMENT["format"])
    assert all(vector["origin"].startswith(("standard", "by hand")) for vector in VECTORS)
    assert len({vector["id"] for vector in VECTORS}) == len(VECTORS)


def test_every_message_is_there_twice() -> None:
    names = Counter(vector["message"] for vector in VECTORS if vector["kind"] == "message")
    assert names == {LAYOUTS[code].message_type.__name__: 2 for code in Code}


def test_every_rule_named_is_a_heading_of_the_document() -> None:
    headings = {
        line.lstrip("# ").strip()
        for line in (ROOT / "protocol/WIRE.md").read_text().splitlines()
        if line.startswith("#")
    }
    assert {vector["rule"] for vector in VECTORS} <= headings


@pytest.mark.parametrize(
    "kind",
    ["frame", "message", "seal", "check", "module", "allegiance", "memory", "gate", "telemetry"],
)
def test_a_wrong_vector_fails(kind: str) -> None:
    """The runners can fail: one digit of what is expected is changed."""
    vector = next(each for each in VECTORS if each["kind"] == kind)
    text = json.dumps(vector)
    steps = vector.get("steps", [])
    expected = {
        "frame": vector.get("pieces", [{}])[0].get("payload"),
        "message": vector.get("frame"),
        "seal": (vector.get("sealed") or [None])[0],
        "check": vector.get("crc32c"),
        "module": next((out for step in steps for out in step.get("out") or []), None),
        "memory": next((step["out"] for step in steps if step.get("out")), None),
        "allegiance": '"epoch": 0',
        "gate": "obeyed",
        "telemetry": '"times": [3150',
    }[kind]
    assert expected
    wrong = expected[:-1] + ("0" if expected[-1] != "0" else "1")
    with pytest.raises(AssertionError):
        RUNNERS[kind](json.loads(text.replace(expected, wrong)))


def test_the_wildcard_covers_two_bytes_and_no_more() -> None:
    assert same("aabb0011", "aabb****")
    assert not same("aabc0011", "aabb****")
    assert not same("aabb0011", "aabb0012")
