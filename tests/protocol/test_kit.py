"""The module side in C against the same vectors, and against ours on random and damaged frames."""

import itertools
import json
import random
import re
import subprocess
import sys
from collections import Counter
from collections.abc import Iterable
from pathlib import Path

import pytest

from protocol.codes import Code
from protocol.frame import Dropped, FrameDecoder, frame
from protocol.message import LAYOUTS, Packet, encode
from protocol.seal import KeyRing, Sealer
from tests.support.kit_build import KIT, built
from tests.support.kit_scripts import script_lines
from tests.support.make_header import header
from tests.support.mutations import MUTATIONS, corpus
from tests.support.vector_lines import VECTORS, WRITERS, lines

ROOT = Path(__file__).parents[2]
KEY = bytes(range(32))


@pytest.fixture(scope="module")
def check(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """The kit's checking program, built aside under the sanitizers."""
    return built(tmp_path_factory, "check")


def run(check: Path, steps: Iterable[str]) -> tuple[int, str, str]:
    text = "".join(f"{step}\n" for step in steps)
    done = subprocess.run([check], input=text, capture_output=True, text=True, check=False)
    return done.returncode, done.stdout.strip(), done.stderr


def test_all_vectors_pass_under_the_sanitizers(check: Path) -> None:
    steps = list(lines())
    status, told, errors = run(check, steps)
    assert (status, told, errors) == (0, f"{len(steps)} passed, 0 failed", "")
    assert len(steps) > 800


def test_every_kind_is_written() -> None:
    assert set(WRITERS) == set(json.loads(VECTORS.read_text())["format"])


def test_the_header_is_what_the_tables_say() -> None:
    assert (KIT / "tw_wire.h").read_text() == header()


@pytest.mark.parametrize(
    "line",
    [
        "    TW_CODE_SETTING_WRITE = 0x18,",
        "    TW_AT_PIVOT_SPEED_RPM = 25,",
        "    TW_LEN_PIVOT = 27,",
        "    TW_AT_FACTS_STARTED_MS = 38,",
        "    TW_LEN_BRIDGE_STATUS = 30,",
        "    TW_REASON_FAULT = 23,",
        "    TW_FLAG_CLOCK_TOLD = 64,",
    ],
)
def test_the_header_has_the_numbers_of_the_wire_document(line: str) -> None:
    """Copied by hand from the tables of WIRE.md."""
    assert line in header().splitlines()


def test_no_offset_is_written_by_hand() -> None:
    """The kit's own files take a field's place from the header, and nowhere else."""
    for path in KIT.glob("tw_*.[ch]"):
        if path.name not in ("tw_wire.h", "tw_store.h", "tw_trace.c"):
            assert not re.search(r"\bAT_[A-Z_]+ = \d", path.read_text()), path.name


@pytest.mark.parametrize(
    "wrong",
    [
        "crc 313233343536373839 e3069284",
        "frame 0600 check_failed",
        "write 0120ffff010003000000 00",
        "open 01 forged",
        "request 0120ffff0100030000 1",
        "hears 1 0120ffff010001000000",
        "follows 0 - 1 0 0 0",
        "nonsense",
    ],
)
def test_the_checking_program_can_fail(wrong: str, check: Path) -> None:
    status, told, errors = run(check, [f"key {KEY.hex()}", wrong])
    assert status == 1
    assert told == "1 passed, 1 failed"
    assert wrong.split(maxsplit=1)[0] in errors


def test_no_steps_at_all_is_a_failure(check: Path) -> None:
    assert run(check, [])[0] == 1


def test_random_messages_are_byte_for_byte_the_same(check: Path) -> None:
    rng = random.Random(1)
    layouts = list(LAYOUTS.values())
    steps = []
    for _ in range(100_000):
        layout = rng.choice(layouts)
        message = layout.make(layout.body.unpack(rng.randbytes(layout.body.size)))
        payload = encode(Packet(rng.randrange(65_536), rng.randrange(65_536), message))
        framed = frame(payload).hex()
        steps += [f"write {payload.hex()} {framed}", f"frame {framed} {payload.hex()}"]
    assert run(check, steps)[:2] == (0, "200000 passed, 0 failed")


def test_what_is_a_request_is_agreed_on(check: Path) -> None:
    """Of all codes and lengths only what a console sends to a module, at its own length."""
    steps = []
    for code, length in itertools.product(range(256), range(60)):
        payload = bytes((1, code, 0, 0, 0, 0)).ljust(length, b"\1")[:length]
        known = code in LAYOUTS and code < 0x80 and code != Code.BRIDGE_ASK
        right = known and length == 6 + LAYOUTS[code].body.size
        steps.append(f"request {payload.hex() or '-'} {int(right)}")
    steps.append("request 02200000010003000000 0")
    assert run(check, steps)[:2] == (0, f"{len(steps)} passed, 0 failed")


def test_damaged_streams_give_the_same_pieces(check: Path) -> None:
    rng = random.Random(2)
    seeds = corpus(rng)
    steps = []
    for _ in range(5_000):
        stream = bytearray()
        for _ in range(3):
            data = bytearray(rng.choice(seeds))
            rng.choice(MUTATIONS)(rng, data, rng.choice(seeds))
            stream += data
        pieces = [
            piece.reason.value.replace(" ", "_") if isinstance(piece, Dropped) else piece.hex()
            for piece in FrameDecoder().feed(bytes(stream))
        ]
        steps.append(" ".join(("frame", stream.hex() or "-", *pieces)))
    assert run(check, steps)[:2] == (0, "5000 passed, 0 failed")


def test_random_seals_are_byte_for_byte_the_same(check: Path) -> None:
    rng = random.Random(3)
    steps = [f"key {KEY.hex()}"]
    for _ in range(1_000):
        opening = rng.randrange(1, 1 << 32)
        sealer = Sealer(KeyRing({0: KEY}, 0), opening)
        payload = b"\x01" + rng.randbytes(rng.randrange(5, 42))
        sealed = [sealer.seal(payload).hex() for _ in range(3)]
        steps.append(" ".join(("seal", str(opening), payload.hex(), *sealed)))
        steps += [f"open {each} obeyed" for each in sealed]
    assert run(check, steps)[:2] == (0, "4001 passed, 0 failed")


def test_the_makefile_runs_the_vectors_by_itself(check: Path) -> None:
    done = subprocess.run(
        ["make", "-C", str(KIT), "check", f"PYTHON={sys.executable}"],
        capture_output=True,
        text=True,
        check=False,
    )
    assert done.returncode == 0, done.stderr
    assert "passed, 0 failed" in done.stdout


def test_random_scripts_get_the_simulated_modules_answers(check: Path) -> None:
    """A whole module in C and ours, told the same things at the same times, say the same."""
    rng = random.Random(4)
    steps = [line for _ in range(150) for line in script_lines(rng, 120)]
    said = Counter(word[2:4] for line in steps for word in line.split()[3:] if len(word) > 10)
    assert {"84", "86", "87", "88", "8a"} <= set(said)
    status, told, errors = run(check, steps)
    assert (status, told) == (0, f"{len(steps)} passed, 0 failed"), errors[:2000]
