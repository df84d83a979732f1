"""Fleet files: the practice fleet, made-up modules, faults, and errors that name the place."""

import tomllib
from datetime import date
from pathlib import Path

import pytest

from protocol.codes import FIRST_MODULE_ADDRESS, SettingId, concerns, is_simulated
from protocol.message import Packet, decode, encode
from sim_link import kinds, mechanics
from sim_link.errors import SimInputError
from sim_link.fleet_file import FLEET_KEYS, PRACTICE_FLEET, fleet_path, load_fleet
from sim_link.options import MAX_MODULES, Fault, FaultKind
from sim_link.settings import Settings

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

BLOCK = '[[block]]\nname = "b####"\nkind = "brick"\ncount = 3\naddress = 0x40\nidentity = 0x900\n'
MOST = str(MAX_MODULES)
FAULT = '[[fault]]\nkind = "silent"\nmodule = "oak"\n'


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
    threshold = mechanics.pivot_threshold(load_fleet(None).kinds[name])
    w_min_rpm = threshold.w_min_rad_s * 9.5493
    assert threshold.feasible
    assert 4100 < w_min_rpm < 4600


def test_pebbles_go_over_well_below_their_limit_and_pavers_do_not() -> None:
    kinds = load_fleet(None).kinds
    over = mechanics.pivot_threshold(kinds["pebble"]).w_over_rad_s
    assert over is not None
    assert over * 9.5493 < 0.9 * kinds["pebble"].wheel_max_rpm
    top = kinds["paver"].wheel_max_rpm / 9.5493
    assert mechanics.pivot(kinds["paver"], top).faces == 1


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


def test_made_up_names_pass_over_those_of_the_file(tmp_path: Path) -> None:
    fleet = load_fleet(written(tmp_path, KIND + ONE.replace("oak", "mod-003"))).of_size(4)
    assert [m.name for m in fleet.modules] == ["mod-003", "mod-002", "mod-004", "mod-005"]


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
        (KIND + ONE.replace("oak", "bridge"), "module 1: name: 'bridge' stands for the bridge"),
        (KIND + ONE + "place_m = [1]\n", "module 1: place_m: two numbers from -1000 to 1000"),
        (KIND + ONE + 'place_m = "door"\n', "module 1: place_m: two numbers"),
        (KIND + ONE + 'groups = ["north"]\n', "module 1: groups: a list of names must be empty"),
        ('groups = ["n"]\n' + KIND + ONE + "groups = 1\n", "groups: a list of names out of n"),
        ("groups = 1\n" + KIND + ONE, "groups: a list of at most 32 different names"),
        ('groups = ["n", "n"]\n' + KIND + ONE, "groups: a list of at most 32 different names"),
        ('groups = ["The North"]\n' + KIND + ONE, "groups: a list of at most 32"),
        (f"groups = {[f'g{n}' for n in range(33)]}\n" + KIND + ONE, "groups: a list of at most 32"),
        (KIND + ONE + BLOCK.replace("brick", "stone"), "block 1: kind: one of brick is needed"),
        (KIND + ONE + BLOCK + "colour = 1\n", "block 1: colour: no such key"),
        ("block = 3\n" + KIND + ONE, "block: at least one table is needed, written [[block]]"),
        (KIND + ONE + BLOCK.replace("0x40", "0x1f"), "address: must differ"),
        (KIND + BLOCK.replace("3", MOST) + ONE, f"block: at most {MOST} modules in all, not"),
        (KIND + ONE + FAULT.replace("silent", "lazy"), "fault 1: kind: one of silent, weak_brake"),
        (KIND + ONE + FAULT.replace("oak", "ash"), "fault 1: ash: no such module; known are oak"),
        (KIND + ONE + FAULT.replace('"oak"', "7"), "fault 1: module: a module's name is needed"),
        (KIND + ONE + FAULT.replace('module = "oak"\n', ""), "fault 1: module: a module's name"),
        (KIND + ONE + FAULT + "at_s = -1\n", "fault 1: at_s: a number from 0 to 1e+06 is needed"),
        (KIND + ONE + FAULT + "at_s = true\n", "fault 1: at_s: a number"),
        (KIND + ONE + FAULT + "for_s = 0\n", "fault 1: for_s: a number from 0.001 to 1e+06"),
        (KIND + ONE + FAULT + 'for_s = "1 h"\n', "fault 1: for_s: a number"),
        (KIND + ONE + FAULT + "colour = 1\n", "fault 1: colour: no such key; known are kind"),
        (KIND + ONE + FAULT.replace("silent", "restart"), "fault 1: restart: needs a time"),
        ("fault = [3]\n" + KIND + ONE, "fault 1: fault: a table [[fault]] is needed"),
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


def test_groups_are_numbered_by_their_place_and_set_as_delivered(tmp_path: Path) -> None:
    names = [f"g{number}" for number in range(32)]
    text = f"groups = {names}\n" + KIND + ONE + 'groups = ["g31", "g0", "g0"]\n' + BLOCK
    oak, *others = load_fleet(written(tmp_path, text)).modules
    assert oak.groups == 1 << 31 | 1
    assert [other.groups for other in others] == [0, 0, 0]
    settings = Settings(oak)
    assert settings.groups == 1 << 31 | 1
    told = settings.told(SettingId.GROUPS, 5)
    assert decode(encode(Packet(1, 0x10, told))).message == told
    assert concerns(0xF01F, 0x20, settings.groups)
    assert not concerns(0xF001, 0x20, settings.groups)


def test_blocks_come_after_modules_and_faults_keep_their_times(tmp_path: Path) -> None:
    later = 'at_s = 12.5\n[[fault]]\nkind = "silent"\nmodule = "bridge"\nat_s = 3\nfor_s = 1.5\n'
    text = KIND + BLOCK + ONE + "place_m = [1.5, -2]\n" + FAULT + later
    fleet = load_fleet(written(tmp_path, text))
    assert [module.name for module in fleet.modules] == ["oak", "b0001", "b0002", "b0003"]
    assert fleet.modules[0].place_m == (1.5, -2.0)
    assert [str(fault) for fault in fleet.faults] == ["silent:oak@12.5s", "silent:bridge@3s-4.5s"]
    more = fleet.with_faults([Fault(FaultKind.WEAK_BRAKE, "b0002")])
    assert [module.faults for module in more.modules] == [set(), set(), {"weak_brake"}, set()]
    assert [fault.module for fault in more.faults] == ["oak", "bridge", "b0002"]


def test_faults_of_the_file_hold_and_go_with_their_module(tmp_path: Path) -> None:
    text = KIND + ONE + BLOCK + FAULT + FAULT.replace("oak", "b0003")
    fleet = load_fleet(written(tmp_path, text))
    assert [bool(module.faults) for module in fleet.with_faults(()).modules] == [1, 0, 0, 1]
    assert [fault.module for fault in fleet.of_size(2).faults] == ["oak"]
    assert [fault.module for fault in fleet.of_size(9).faults] == ["oak", "b0003"]


@pytest.mark.parametrize(
    ("name", "count", "kinds", "groups"),
    [("practice", 8, 2, 0), ("orangery", 50, 3, 4), ("depot", 1000, 3, 10)],
)
def test_the_shipped_fleets(name: str, count: int, kinds: int, groups: int) -> None:
    fleet = load_fleet(Path(name))
    assert len(fleet.modules) == count
    assert len(fleet.kinds) == len({module.kind.name for module in fleet.modules}) == kinds
    assert len(fleet.groups) == groups
    for key in ("name", "address", "identity", "place_m"):
        assert len({getattr(module, key) for module in fleet.modules}) == count
    assert len({module.identity & 0xFFFF for module in fleet.modules}) == count
    assert all(is_simulated(module.identity) for module in fleet.modules)
    in_use = {bit for module in fleet.modules for bit in range(32) if module.groups >> bit & 1}
    assert in_use == set(range(groups))
    assert len(fleet_path(Path(name)).read_text(encoding="utf-8").splitlines()) < 200


@pytest.mark.parametrize("name", ["practice", "orangery", "depot"])
def test_every_shipped_kind_turns_one_face_at_six_tenths_of_its_limit_and_none_at_a_third(
    name: str,
) -> None:
    for kind in load_fleet(Path(name)).kinds.values():
        top_rad_s = kind.wheel_max_rpm / 9.5493
        assert mechanics.pivot(kind, 0.6 * top_rad_s).faces == 1
        assert mechanics.pivot(kind, top_rad_s / 3).faces == 0


def test_a_shipped_fleet_gives_way_to_a_file_of_its_name(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.chdir(tmp_path)
    assert fleet_path(None) == fleet_path(Path("practice")) == PRACTICE_FLEET
    assert fleet_path(Path("hall/practice")) == Path("hall/practice")
    assert fleet_path(Path("practice.toml")) == Path("practice.toml")
    (tmp_path / "depot").write_text(KIND + ONE, encoding="utf-8")
    assert [module.name for module in load_fleet(Path("depot")).modules] == ["oak"]


def test_a_bare_name_of_none_names_the_shipped_ones() -> None:
    with pytest.raises(SimInputError, match="shipped fleets are practice, orangery, depot"):
        load_fleet(Path("orangerie"))


TABLES = {"[[module]]": "module", "[[block]]": "block", "[[fault]]": "fault"}
EVERY_KEY = [(table, key) for table, keys in FLEET_KEYS.items() for key in keys]


@pytest.mark.parametrize(("table", "key"), [*EVERY_KEY, *(("kind", key) for key in kinds._KEYS)])
def test_a_value_of_the_wrong_sort_is_refused_with_its_key(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, table: str, key: str
) -> None:
    """No key takes a date, which TOML has and which nobody means here."""
    file = tomllib.loads(KIND + ONE + BLOCK + FAULT)
    if table == "kind":
        place = file["kind"]["brick"]
    else:
        place = file[TABLES[table]][0] if table in TABLES else file
    place[key] = date(2031, 5, 4)
    monkeypatch.setattr("sim_link.fleet_file._load_table", lambda path: file)
    with pytest.raises(SimInputError) as caught:
        load_fleet(tmp_path / "hall.toml")
    assert caught.value.key == key
    assert str(tmp_path / "hall.toml") in caught.value.where


def test_files_that_are_not_there_or_no_text_are_named(tmp_path: Path) -> None:
    with pytest.raises(SimInputError, match=r"gone.toml: file: cannot be read: No such file"):
        load_fleet(tmp_path / "gone.toml")
    with pytest.raises(SimInputError, match="cannot be read"):
        load_fleet(tmp_path)
    path = tmp_path / "binary.toml"
    path.write_bytes(b"\xff\xfe\x00")
    with pytest.raises(SimInputError, match="UTF-8"):
        load_fleet(path)
