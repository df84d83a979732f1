"""A sealed fleet through the real program: with the key all is as ever, without it nothing is."""

from pathlib import Path

import pytest

from tests.support.programs import PACE, RADIO, ask, run, run_json, served

SHEET = """
title = "sealed"
modules = ["alder", "birch"]
motion = "pivot"
speeds_rpm = [4700]
repeats = 2
at_once = 2
"""


@pytest.fixture
def keys(tmp_path: Path) -> Path:
    path = tmp_path / "keys.toml"
    path.write_text(f'[[key]]\nslot = 0\nhex = "{"5a" * 32}"\n')
    path.chmod(0o600)
    return path


@pytest.fixture(autouse=True)
def own_state(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """Openings are remembered in the person's state folder: have one of the test's own."""
    monkeypatch.setenv("XDG_STATE_HOME", str(tmp_path / "state"))
    return tmp_path / "state"


def test_with_the_key(tmp_path: Path, keys: Path, own_state: Path) -> None:
    sheet, log = tmp_path / "sheet.toml", tmp_path / "log.db"
    sheet.write_text(SHEET)
    with served(tmp_path, "--keys", str(keys), *RADIO) as fleet:
        words = ("run", str(sheet), "--link", fleet.link, "--pace", str(PACE), "--log", str(log))
        for _ in range(2):  # the second session's counters are above the first one's
            document = run_json(*words, "--keys", str(keys))
            assert document["ended"]["landed"] == 4
        without = run(*words)
        assert without.returncode == 2
        assert "did not answer the roll" in without.stderr
        assert len(fleet.carried_out()) == 8
    epochs = [epoch for (epoch,) in ask(log, "SELECT epoch FROM sessions ORDER BY session")]
    assert epochs[0] < epochs[1]
    assert int((own_state / "tumblewire" / "opening").read_text()) == epochs[1]
    dump = log.read_bytes()
    assert b"\x5a" * 32 not in dump
    assert b"5a5a5a5a5a5a" not in dump


def test_a_key_file_for_all_to_read_is_refused(tmp_path: Path, keys: Path) -> None:
    keys.chmod(0o644)
    log = tmp_path / "log.db"
    result = run("run", "speeds", "--keys", str(keys), "--log", str(log))
    assert result.returncode == 2
    assert "chmod 600" in result.stderr
    assert not log.exists()
