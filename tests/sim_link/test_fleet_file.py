"""Fleet files: the practice fleet, made-up modules, faults, and errors that name the place."""

import tomllib
from pathlib import Path

import pytest

from protocol.codes import FIRST_MODULE_ADDRESS, is_simulated
from sim_link import mechanics
from sim_link.errors import SimInputError
from sim_link.fleet_file import PRACTICE_FLEET, load_fleet
from sim_link.options import Fault, FaultKind

NAMES = ("alder", "birch", "cedar", "elm", "hazel", "larch", "maple", "rowan")

KIND = """
[kind.brick]
side_m = 0.08
mass_kg = 0.60
wheel_inertia_kg_m2 = 6.0e-5
wheel_max_rpm = 9000
brake_torque_N_m = 2.9
spin_up_torque_N_m = 0.02
held = true
floor_friction = 0.6
cell_capacity_mAh = 500
cell_resistance_ohm = 0.12
"""
ONE = '[[module]]\nname = "oak"\nkind = "brick"\naddress = 0x20\nidentity = 0x1234\n'


def written(tmp_path: Path, text: str) -> Path:
    path = tmp_path / "fleet.toml"
    path.write_text(text, encoding="utf-8")
    return path


def test_the_practice_fleet_has_its_eight() -> None:
    fleet = load_fleet(None)
    assert tuple(module.name for module in fleet.modules) == NAMES
    assert set(fleet.kinds) == {"paver", "pebble"}
    assert {module.kind.name for module in fleet.modules} == {"paver", "pebble"}
    assert fleet.kinds["paver"].held
    assert not fleet.kinds["pebble"].held
    assert fleet.telemetry_hz == 2.0
    assert all(is_simulated(module.identity) for module in fleet.modules)
    assert [m.address for m in fleet.modules] == list(range(0x10, 0x18))
    assert len({module.identity & 0xFFFF for module in fleet.modules}) == 8


def test_the_practice_file_says_what_it_is() -> None:
    text = PRACTICE_FLEET.read_text(encoding="utf-8")
    assert text.startswith("# The practice fleet")
    assert set(tomllib.loads(text)) == {"telemetry_hz", "kind", "module"}


@pytest.mark.parametrize("name", ["paver", "pebble"])
def test_a_sheet_of_three_speeds_straddles_both_thresholds(name: str) -> None:
    threshold = mechanics.floor_threshold(load_fleet(None).kinds[name])
    w_min_rpm = threshold.w_min_rad_s * 9.5493
    assert threshold.feasible
    assert 4100 < w_min_rpm < 4600


def test_pebbles_go_over_well_below_their_limit_and_pavers_do_not() -> None:
    kinds = load_fleet(None).kinds
    over = mechanics.floor_threshold(kinds["pebble"]).w_over_rad_s
    assert over is not None
    assert over * 9.5493 < 0.9 * kinds["pebble"].wheel_max_rpm
    top = kinds["paver"].wheel_max_rpm / 9.5493
    assert mechanics.floor_pivot(kinds["paver"], top).faces == 1


@pytest.mark.parametrize("count", [1, 3, 8])
def test_fewer_takes_the_first(count: int) -> None:
    assert tuple(m.name for m in load_fleet(None).of_size(count).modules) == NAMES[:count]


def test_more_makes_some_up_with_the_kinds_in_turn() -> None:
    fleet = load_fleet(None).of_size(1000)
    assert [m.name for m in fleet.modules[7:10]] == ["rowan", "mod-009", "mod-010"]
    assert [m.kind.name for m in fleet.modules[8:11]] == ["paver", "pebble", "paver"]
    assert len({m.name for m in fleet.modules}) == 1000
    assert len({m.address for m in fleet.modules}) == 1000
    assert len({m.identity for m in fleet.modules}) == 1000
    assert len({m.identity & 0xFFFF for m in fleet.modules}) == 1000
    assert all(is_simulated(m.identity) for m in fleet.modules)


def test_made_up_addresses_fill_what_a_file_left_free(tmp_path: Path) -> None:
    fleet = load_fleet(written(tmp_path, KIND + ONE.replace("0x20", "0x11"))).of_size(3)
    assert [m.address for m in fleet.modules] == [0x11, FIRST_MODULE_ADDRESS, 0x12]


def test_no_size_leaves_the_fleet_as_it_is() -> None:
    fleet = load_fleet(None)
    assert fleet.of_size(None) == fleet


def test_faults_go_to_their_modules() -> None:
    faults = (
        Fault(FaultKind.SILENT, "birch"),
        Fault(FaultKind.WEAK_BRAKE, "birch"),
        Fault(FaultKind.LOW_BATTERY, "elm"),
    )
    by_name = {m.name: m.faults for m in load_fleet(None).with_faults(faults).modules}
    assert by_name["birch"] == {FaultKind.SILENT, FaultKind.WEAK_BRAKE}
    assert by_name["elm"] == {FaultKind.LOW_BATTERY}
    assert by_name["alder"] == frozenset()


def test_a_fault_of_nobody_is_refused() -> None:
    with pytest.raises(SimInputError, match="bob: no such module; known are alder, birch"):
        load_fleet(None).with_faults([Fault(FaultKind.SILENT, "bob")])


def test_a_file_of_ones_own(tmp_path: Path) -> None:
    text = "telemetry_hz = 5\n" + KIND + ONE + "face_up = 3\ncharge = 0.5\n"
    fleet = load_fleet(written(tmp_path, text))
    (oak,) = fleet.modules
    assert (oak.name, oak.address, oak.face_up, oak.charge) == ("oak", 0x20, 3, 0.5)
    assert oak.identity == (1 << 63) | 0x1234
    assert oak.telemetry_hz == 5.0
    assert oak.kind.side_m == 0.08


@pytest.mark.parametrize(
    ("text", "said"),
    [
        ("telemetry_hz = 2\nkind = = 3\n", "line 2: TOML is needed"),
        (KIND + ONE + 'name = "oak"\n', "line "),
        (KIND, "module: at least one [[module]] is needed"),
        (ONE, "kind: at least one [kind.NAME] is needed"),
        ("kind = 3\n" + ONE, "kind: at least one"),
        ("colour = 1\n" + KIND + ONE, "colour: no such key; known are telemetry_hz"),
        ("telemetry_hz = 0\n" + KIND + ONE, "telemetry_hz: a number from 0.01 to 100"),
        ("telemetry_hz = true\n" + KIND + ONE, "telemetry_hz: a number"),
        (KIND + ONE.replace("brick", "stone"), "module 1: kind: one of brick is needed"),
        (KIND + ONE.replace("oak", "An Oak"), "module 1: name: a name of at most 12"),
        (KIND + ONE.replace('"oak"', "7"), "module 1: name: a name"),
        (KIND + ONE.replace("0x20", "0x01"), "module 1: address: a whole number from 0x10"),
        (KIND + ONE.replace("0x20", "true"), "module 1: address: a whole number"),
        (KIND + ONE.replace("0x1234", "0"), "module 1: identity: a whole number"),
        (KIND + ONE.replace("identity = 0x1234\n", ""), "module 1: identity: a whole number"),
        (KIND + ONE + "face_up = 7\n", "module 1: face_up: a whole number"),
        (KIND + ONE + "charge = 1.5\n", "module 1: charge: a number from 0 to 1"),
        (KIND + ONE + "colour = 1\n", "module 1: colour: no such key"),
        (KIND.replace("held = true\n", "") + ONE, "kind.brick: held"),
        (KIND.replace("0.60", "-1") + ONE, "kind.brick: mass_kg"),
        (KIND + ONE + ONE.replace("0x20", "0x21"), "name: must differ, but is the same for oak"),
        (
            KIND + ONE + ONE.replace("oak", "ash").replace("0x1234", "0x1235"),
            "address: must differ, but is the same for oak and ash",
        ),
        (
            KIND + ONE + ONE.replace("oak", "ash").replace("0x20", "0x21"),
            "identity: must differ",
        ),
        ("module = 3\n" + KIND, "module: at least one"),
        ("module = [3]\n" + KIND, "module 1: module: a table"),
        ("[kind]\nbrick = 3\n" + ONE, "kind.brick: a table"),
        ('[kind."A B"]\n' + ONE, "kind.A B: a name of at most 12"),
    ],
)
def test_a_bad_file_is_one_clear_line(tmp_path: Path, text: str, said: str) -> None:
    path = written(tmp_path, text)
    with pytest.raises(SimInputError) as caught:
        load_fleet(path)
    line = str(caught.value)
    assert line.startswith(str(path))
    assert said in line
    assert "\n" not in line


def test_files_that_are_not_there_or_no_text_are_named(tmp_path: Path) -> None:
    with pytest.raises(SimInputError, match=r"gone.toml: file: cannot be read: No such file"):
        load_fleet(tmp_path / "gone.toml")
    with pytest.raises(SimInputError, match="cannot be read"):
        load_fleet(tmp_path)
    path = tmp_path / "binary.toml"
    path.write_bytes(b"\xff\xfe\x00")
    with pytest.raises(SimInputError, match="UTF-8"):
        load_fleet(path)
