"""FLEETS.md names every key and every kind of fault as the code has them, and its example works."""

import re
import tomllib
from pathlib import Path

import pytest

from sim_link import kinds
from sim_link.fault_kinds import FAULT_RULES, FaultKind, FaultRule
from sim_link.fleet_file import FLEET_KEYS, PRACTICE_FLEET, SHIPPED, load_fleet
from sim_link.options import MAX_MODULES

TEXT = (PRACTICE_FLEET.parent / "FLEETS.md").read_text(encoding="utf-8")


def section(title: str) -> str:
    """The text under one heading."""
    found = re.search(rf"^## `?{re.escape(title)}`?$(.*?)(?=^## |\Z)", TEXT, re.M | re.S | re.I)
    assert found is not None, title
    return found[1]


def rows(title: str) -> list[list[str]]:
    """The rows of the table under one heading, cell by cell, without its head."""
    lines = [line for line in section(title).splitlines() if line.startswith("| `")]
    return [[cell.strip() for cell in line.strip("|").split(" | ")] for line in lines]


@pytest.mark.parametrize("table", FLEET_KEYS)
def test_every_key_has_its_row_and_no_row_is_of_another(table: str) -> None:
    expected = [[f"`{key}`", meaning] for key, meaning in FLEET_KEYS[table].items()]
    assert rows(table) == expected


def test_every_key_of_a_kind_is_explained() -> None:
    assert {cells[0].strip("`") for cells in rows("[kind.NAME]")} == set(kinds._KEYS)


def when(rule: FaultRule) -> str:
    if not rule.timed:
        return "from the start"
    start = "from the start, " if rule.start else ""
    return start + ("at a time, from a time to another" if rule.lasts else "at a time")


def test_every_kind_of_fault_has_its_row() -> None:
    assert set(FAULT_RULES) == set(FaultKind)
    expected = []
    for kind, rule in FAULT_RULES.items():
        who = [word for word, can in (("module", rule.module), ("bridge", rule.bridge)) if can]
        expected.append([f"`{kind}`", ", ".join(who), when(rule), rule.says])
    assert rows("Faults") == expected


def test_the_shipped_fleets_are_told_with_their_sizes() -> None:
    for name in SHIPPED:
        count = f"{len(load_fleet(Path(name)).modules):,}"
        assert re.search(rf"\| `{name}` \| {count}, in ", TEXT)
    assert {path.stem for path in PRACTICE_FLEET.parent.glob("*.toml")} == set(SHIPPED)


def test_the_most_modules_are_told() -> None:
    assert f"together at most {MAX_MODULES:,}." in TEXT


def test_the_example_of_a_block_is_read(tmp_path: Path) -> None:
    found = re.search(r"```toml\n(.*?)```", section("[[block]]"), re.S)
    assert found is not None
    practice = PRACTICE_FLEET.read_text(encoding="utf-8")
    path = tmp_path / "hall.toml"
    path.write_text('groups = ["north"]\n' + practice + found[1], encoding="utf-8")
    fleet = load_fleet(path)
    (example,) = tomllib.loads(found[1])["block"]
    assert example.keys() == FLEET_KEYS["[[block]]"].keys()
    last = fleet.modules[-1]
    assert len(fleet.modules) == 8 + example["count"]
    assert (last.name, last.address, last.face_up, last.groups) == ("tray-12", 0x4B, 3, 1)
    assert last.place_m == (3.5, 2.5)
