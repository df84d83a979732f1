"""`tumblewire predict`: the figures of every case computed elsewhere, and refusals that help."""

import json
import math
from pathlib import Path
from typing import Any

import pytest

from console.cli import tumblewire
from console.errors import InputError
from tests.support.motion_cases import (
    FREE,
    FREE_FRICTION,
    HINGED,
    HOP,
    HOP_FRICTION,
    HOP_RAD_S,
    HOP_RISE_M,
    Case,
)

RPM = 30.0 / math.pi


def kind_file(folder: Path, case: Case, friction: float | None = None) -> Path:
    """The case's kind as a person would write it."""
    table: dict[str, Any] = {
        name: value
        for name, value in case._asdict().items()
        if name.endswith(("_m", "_kg", "_m2", "_rad")) and name != "lock_rad" and value is not None
    }
    table |= {
        "wheel_max_rpm": 32767.0,
        "spin_up_torque_N_m": 0.002,
        "held": friction is None,
        "floor_friction": friction or 0.6,
        "cell_capacity_mAh": 300.0,
        "cell_resistance_ohm": 0.1,
    }
    path = folder / f"{case.name}.toml"
    rows = [f"{name} = {json.dumps(value)}" for name, value in table.items()]
    path.write_text("\n".join([f"[kind.{case.name}]", *rows, ""]))
    return path


def answer(capsys: pytest.CaptureFixture[str], *words: object) -> dict[str, Any]:
    status = tumblewire.main(
        ["predict", *map(str, words), "--json"], standalone_mode=False, prog_name="tumblewire"
    )
    assert status == 0
    out, err = capsys.readouterr()
    assert err == ""
    found: dict[str, Any] = json.loads(out)
    return found


@pytest.mark.parametrize("case", HINGED, ids=lambda case: case.name)
def test_hinged_cases_to_a_thousandth(
    case: Case, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    """Asked for is 0.1 %; the figures agree to 1e-5."""
    words = "--kind", kind_file(tmp_path, case), "--motion", "pivot", "--setting", case.setting
    found = answer(capsys, *words)
    assert found["w_ideal_rpm"] == pytest.approx(case.ideal_rad_s * RPM, rel=1e-6)
    assert found["feasible"] is (case.least_rad_s is not None)
    if case.least_rad_s is None:
        assert "0.950 of the hold torque" in found["reason"]
        assert found["w_min_rpm"] is None
        assert found["torque_margin"] == pytest.approx(0.95, rel=1e-6)
        for part in (1.0, 3.0, 8.0):  # MuJoCo found it stuck at these
            tried = answer(capsys, *words, "--speed", part * case.ideal_rad_s * RPM)
            assert tried["outcome"] == "stuck"
        return
    assert found["reason"] == ""
    assert found["w_min_rpm"] == pytest.approx(case.least_rad_s * RPM, rel=1e-5)
    assert found["brake_ms"] == pytest.approx(case.brake_s * 1e3, rel=1e-3)
    assert found["lock_angle_deg"] == pytest.approx(math.degrees(case.lock_rad), rel=1e-3)
    if case.over_rad_s is not None:
        assert found["w_over_rpm"] == pytest.approx(case.over_rad_s * RPM, rel=1e-3)


@pytest.mark.parametrize("case", [c for c in HINGED if c.least_rad_s], ids=lambda case: case.name)
def test_the_motion_itself_turns_at_the_threshold(
    case: Case, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    words = "--kind", kind_file(tmp_path, case), "--motion", "pivot", "--setting", case.setting
    for part, outcome in ((0.999, "short"), (1.001, "landed")):
        speed = part * case.least_rad_s * RPM
        assert answer(capsys, *words, "--speed", speed)["outcome"] == outcome


def test_the_free_case(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """Asked for is 2 % of MuJoCo's figure."""
    found = answer(capsys, "--kind", kind_file(tmp_path, FREE, FREE_FRICTION), "--motion", "pivot")
    assert found["w_min_rpm"] == pytest.approx(FREE.least_rad_s * RPM, rel=1e-4)
    assert found["lift_off_rpm"] > found["w_min_rpm"]


def test_the_hop(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """Asked for is 5 % of the rise that a rigid contact gives."""
    words = "--kind", kind_file(tmp_path, HOP, HOP_FRICTION), "--motion", "hop"
    found = answer(capsys, *words, "--speed", HOP_RAD_S * RPM)
    assert found["hop_rise_mm"] == pytest.approx(HOP_RISE_M * 1e3, rel=2e-3)
    assert found["outcome"] == "landed"
    assert found["w_min_rpm"] == found["lift_off_rpm"] < HOP_RAD_S * RPM


def test_the_keys_are_those_promised(capsys: pytest.CaptureFixture[str]) -> None:
    found = answer(capsys, "--kind", "practice:paver", "--motion", "pivot")
    assert set(found) >= {
        "feasible", "reason", "w_min_rpm", "w_ideal_rpm", "w_over_rpm", "lift_off_rpm",
        "brake_ms", "rest_ms", "lock_angle_deg", "torque_margin", "wheel_energy_J",
        "hop_rise_mm", "motions_left", "inputs",
    }  # fmt: skip
    assert found["inputs"]["kind"]["brake_torque_N_m"] == 2.9
    assert found["inputs"]["setting"] == "floor"


def test_more_speed_than_the_wheel_may_turn_is_not_possible(
    capsys: pytest.CaptureFixture[str],
) -> None:
    found = answer(capsys, "--kind", "practice:paver", "--motion", "pivot", "--setting", "crest")
    assert not found["feasible"]
    assert found["w_min_rpm"] > 9000
    assert "9,000" in found["reason"]


def test_a_twist_by_an_angle(capsys: pytest.CaptureFixture[str]) -> None:
    """Twice the angle takes the root of two of the speed, with a steady brake."""
    words = "--kind", "practice:pebble", "--motion", "twist"
    half, whole = (answer(capsys, *words, "--angle", angle) for angle in (45, 90))
    assert whole["w_min_rpm"] / half["w_min_rpm"] == pytest.approx(math.sqrt(2.0), rel=1e-6)
    assert whole["hop_rise_mm"] is None


def test_as_text(capsys: pytest.CaptureFixture[str]) -> None:
    words = ["predict", "--kind", "practice:pebble", "--motion", "pivot", "--speed", "5000"]
    assert tumblewire.main(words, standalone_mode=False) == 0
    text = capsys.readouterr().out
    assert text.startswith("pebble, pivot (floor)\n")
    assert "landed, turned by 90 degrees" in text
    assert "possible" in text


@pytest.mark.parametrize(
    ("words", "said"),
    [
        (["--kind", "practice", "--motion", "pivot"], "which of paver, pebble"),
        (["--kind", "practice:brick", "--motion", "pivot"], "no kind 'brick'"),
        (["--kind", "nowhere.toml", "--motion", "pivot"], "cannot be read"),
        (["--kind", "practice:paver", "--motion", "hop", "--setting", "floor"], "for a pivot"),
        (["--kind", "practice:paver", "--motion", "pivot", "--angle", "9"], "for a twist"),
        (["--kind", "practice:paver", "--motion", "pivot", "--speed", "-3"], "above zero"),
        (["--kind", "practice:paver", "--motion", "pivot", "--speed", "nan"], "above zero"),
    ],
)
def test_refusals(words: list[str], said: str) -> None:
    with pytest.raises(InputError, match=said):
        tumblewire.main(["predict", *words], standalone_mode=False)
