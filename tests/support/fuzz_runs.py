"""The coverage-guided fuzzers in processes of their own, for the long proofs.

Owns their seeds and how they are started and read; what they try is tests/fuzz/decoder.py's and
protocol/kit/test/fuzz.c's.
"""

import importlib.util
import json
import re
import shutil
import subprocess
import sys
import tempfile
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from tests.fuzz import FRAMES_A_RUN
from tests.support.kit_seeds import write_seeds

ROOT = Path(__file__).parents[2]
KIT = ROOT / "protocol" / "kit"
VECTORS = ROOT / "protocol" / "vectors.json"
_HEX = re.compile(r"(?:[0-9a-f]{2}){3,64}")
_DONE = re.compile(r"Done (\d+) runs")


class CannotFuzzError(Exception):
    """Something that the fuzzer needs is not there; the text says how to install it."""


@dataclass(frozen=True)
class Fuzzed:
    """What a run came to. ``report``: the end of what it said where it found something."""

    frames: int
    report: str = ""


def fuzz_decoder(seed: int, frames: int) -> Fuzzed:
    """Try about so many frames on the Python side."""
    if importlib.util.find_spec("atheris") is None:
        raise CannotFuzzError("atheris is missing: pip install '.[fuzz]'")
    with tempfile.TemporaryDirectory() as folder:
        for place, data in enumerate(_vector_bytes()):
            (Path(folder) / f"seed-{place}").write_bytes(data)
        words = [sys.executable, "-m", "tests.fuzz.decoder", folder]
        runs = -(-frames // FRAMES_A_RUN)
        return _run(words, Path(folder), seed, runs, FRAMES_A_RUN)


def fuzz_kit(seed: int, frames: int) -> Fuzzed:
    """Try about so many inputs on the C module; each counts as one frame, though it holds more."""
    if shutil.which("clang") is None:
        raise CannotFuzzError("clang is missing: install it, with its fuzzer library (compiler-rt)")
    subprocess.run(["make", "-s", "-C", str(KIT), "fuzz"], check=True, capture_output=True)
    with tempfile.TemporaryDirectory() as folder:
        write_seeds(Path(folder))
        words = [str(KIT / "build" / "fuzz"), folder]
        return _run(words, Path(folder), seed, frames, 1)


def _run(words: list[str], folder: Path, seed: int, runs: int, frames_a_run: int) -> Fuzzed:
    options = [f"-runs={runs}", f"-seed={seed}", "-max_len=200", f"-artifact_prefix={folder}/"]
    done = subprocess.run([*words, *options], capture_output=True, text=True, check=False, cwd=ROOT)
    told = _DONE.search(done.stderr)
    if done.returncode or told is None:
        return Fuzzed(0, done.stderr[-2000:])
    return Fuzzed(int(told[1]) * frames_a_run)


def _vector_bytes() -> Iterator[bytes]:
    """Every frame and payload that stands in the vectors."""
    for text in sorted(set(_texts(json.loads(VECTORS.read_text())["vectors"]))):
        if _HEX.fullmatch(text):
            yield bytes.fromhex(text)


def _texts(value: Any) -> Iterator[str]:
    if isinstance(value, str):
        yield value
    elif isinstance(value, dict):
        for each in value.values():
            yield from _texts(each)
    elif isinstance(value, list):
        for each in value:
            yield from _texts(each)
