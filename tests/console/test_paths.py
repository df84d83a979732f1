"""Where logs and sheets are found."""

from pathlib import Path

import pytest

from console.paths import SHEETS, default_log_path, find_sheet


def test_the_default_log_is_in_the_users_data_folder(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("XDG_DATA_HOME", "/somewhere/data")
    path = default_log_path()
    assert path.name == "tumblewire.db"
    assert path.parent.name == "tumblewire"


@pytest.mark.parametrize("text", ["speeds", "speeds.toml"])
def test_a_shipped_sheet_by_its_name(
    text: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.chdir(tmp_path)
    assert find_sheet(text) == SHEETS / "speeds.toml"


def test_a_file_of_the_present_folder_comes_first(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.chdir(tmp_path)
    Path("speeds.toml").write_text("")
    assert find_sheet("speeds.toml") == Path("speeds.toml")


def test_a_path_is_taken_as_it_is(tmp_path: Path) -> None:
    assert find_sheet(str(tmp_path / "speeds.toml")) == tmp_path / "speeds.toml"
