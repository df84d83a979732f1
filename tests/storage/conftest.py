"""Logs of these tests lie in memory where the system offers that: a disk's fsync takes most of
their time otherwise, and none of them pulls the plug."""

import tempfile
from collections.abc import Iterator
from pathlib import Path

import pytest

from tests.support.log_samples import FAST_FOLDER


@pytest.fixture
def tmp_path() -> Iterator[Path]:
    """A folder for one test, gone afterwards."""
    with tempfile.TemporaryDirectory(dir=FAST_FOLDER) as folder:
        yield Path(folder).resolve()
