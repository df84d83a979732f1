"""The module side in C against the same vectors, and against ours on random and damaged frames."""

import json
import random
import shutil
import subprocess
import sys
from collections.abc import Iterable
from pathlib import Path

import pytest

from protocol.frame import Dropped, FrameDecoder, frame
from protocol.message import LAYOUTS, Packet, encode
from protocol.seal import KeyRing, Sealer
from tests.support.mutations import MUTATIONS, corpus
from tests.support.vector_lines import NOT_IN_THE_KIT, VECTORS, WRITERS, lines

ROOT = Path(__file__).parents[2]
KIT = ROOT / "protocol/kit"
KEY = bytes(range(32))


@pytest.fixture(scope="module")
def check(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """The kit's checking program, built aside under the sanitizers."""
    if shutil.which("cc") is None or shutil.which("make") is None:
        pytest.skip("needs a C compiler and make")
    folder = tmp_path_factory.mktemp("kit") / "kit"
    shutil.copytree(KIT, folder, ignore=shutil.ignore_patterns("build"))
    built = subprocess.run(
        ["make", "-C", str(folder), "build/check"], capture_output=True, text=True, check=False
    )
    assert built.returncode == 0, built.stderr
    return folder / "build/check"


def run(check: Path, steps: Iterable[str]) -> tuple[int, str, str]:
    text = "".join(f"{step}\n" for step in steps)
    done = subprocess.run([check], input=text, capture_output=True, text=True, check=False)
    return done.returncode, done.stdout.strip(), done.stderr


def test_all_vectors_pass_under_the_sanitizers(check: Path) -> None:
    steps = list(lines())
    status, told, errors = run(check, steps)
    assert (status, told, errors) == (0, f"{len(steps)} passed, 0 failed", "")
    assert len(steps) > 150


def test_every_kind_is_written_or_named_as_not_there() -> None:
    kinds = set(json.loads(VECTORS.read_text())["format"])
    assert set(WRITERS) | NOT_IN_THE_KIT == kinds


@pytest.mark.parametrize(
    "wrong",
    [
        "crc 313233343536373839 e3069284",
        "frame 0600 check_failed",
        "write 0120ffff010003000000 00",
        "open 01 forged",
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
    for _ in range(500):
        opening = rng.randrange(1, 1 << 32)
        sealer = Sealer(KeyRing({0: KEY}, 0), opening)
        payload = b"\x01" + rng.randbytes(rng.randrange(5, 42))
        sealed = [sealer.seal(payload).hex() for _ in range(3)]
        steps.append(" ".join(("seal", str(opening), payload.hex(), *sealed)))
        steps += [f"open {each} obeyed" for each in sealed]
    assert run(check, steps)[:2] == (0, "2001 passed, 0 failed")


def test_the_makefile_runs_the_vectors_by_itself(check: Path) -> None:
    done = subprocess.run(
        ["make", "-C", str(KIT), "check", f"PYTHON={sys.executable}"],
        capture_output=True,
        text=True,
        check=False,
    )
    assert done.returncode == 0, done.stderr
    assert "passed, 0 failed" in done.stdout
