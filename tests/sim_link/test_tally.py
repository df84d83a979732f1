"""The tally: its line, on the disk at once, and one clear line where it cannot be."""

import json
from pathlib import Path

import pytest

from sim_link.errors import SimInputError
from sim_link.tally import TallyEntry, TallyFile

ENTRY = TallyEntry((1 << 63) | 0xABC, 77, 3, 1_500_000_000, "birch", "pivot")


def test_an_entry_is_one_json_line_with_plain_names() -> None:
    text = ENTRY.as_json()
    assert "\n" not in text
    assert json.loads(text) == {
        "identity": "8000000000000abc",
        "boot": 77,
        "number": 3,
        "time_ns": 1_500_000_000,
        "name": "birch",
        "motion": "pivot",
    }


def test_each_line_can_be_read_before_the_file_is_closed(tmp_path: Path) -> None:
    path = tmp_path / "tally.jsonl"
    with TallyFile(path) as tally:
        for count in (1, 2):
            tally(ENTRY)
            assert len(path.read_text().splitlines()) == count


def test_lines_are_flushed_to_the_disk(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    synced: list[int] = []
    monkeypatch.setattr("os.fsync", synced.append)
    with TallyFile(tmp_path / "t") as tally:
        tally(ENTRY)
        tally(ENTRY)
    assert len(synced) == 2


def test_a_new_run_starts_a_new_tally(tmp_path: Path) -> None:
    path = tmp_path / "t"
    for _ in range(2):
        with TallyFile(path) as tally:
            tally(ENTRY)
    assert len(path.read_text().splitlines()) == 1


def test_a_place_that_cannot_be_written_is_named(tmp_path: Path) -> None:
    with pytest.raises(SimInputError, match=r"^tally: .*nowhere.*cannot be written: \w") as caught:
        TallyFile(tmp_path / "nowhere" / "t")
    assert "\n" not in str(caught.value)


def test_a_full_disk_is_told(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def full(_: int) -> None:
        raise OSError(28, "No space left on device")

    with TallyFile(tmp_path / "t") as tally:
        monkeypatch.setattr("os.fsync", full)
        with pytest.raises(SimInputError, match="No space left"):
            tally(ENTRY)
