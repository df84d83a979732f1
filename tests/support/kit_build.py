"""Builds a program of the C kit aside, so that no test builds in another's folder."""

import shutil
import subprocess
from pathlib import Path
from typing import Final

import pytest

KIT: Final = Path(__file__).parents[2] / "protocol/kit"


def built(tmp_path_factory: pytest.TempPathFactory, program: str) -> Path:
    """The path of ``program``, a target below build/. Skips where there is no C compiler."""
    if shutil.which("cc") is None or shutil.which("make") is None:
        pytest.skip("needs a C compiler and make")
    folder = tmp_path_factory.mktemp("kit") / "kit"
    shutil.copytree(KIT, folder, ignore=shutil.ignore_patterns("build"))
    target = f"build/{program}"
    made = subprocess.run(
        ["make", "-C", str(folder), target], capture_output=True, text=True, check=False
    )
    assert made.returncode == 0, made.stderr
    return folder / target
