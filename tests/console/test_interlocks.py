"""Interlocks: each stands before what it should, with its figures, and before nothing else."""

from dataclasses import replace

import pytest

from console.interlocks import BATTERY_LOW_V, INTERLOCKS, Block, Case, Enforcer, blocking
from console.limits import Limits
from console.orders import Order, parse_order
from console.view import FleetView, LinkView, ModuleView, StopView
from protocol.codes import Activity, Flags, Setting

SECOND_NS = 1_000_000_000
NOW_NS = 100 * SECOND_NS

MODULE = ModuleView(
    module=1,
    identity=0xB1,
    simulated=False,
    address=0x11,
    link=0,
    name="birch",
    kind="paver",
    boot=9,
    epoch=1_772_438_400,
    wheel_max_rpm=9000,
    wheel_rpm=0,
    battery_V=3.92,
    temperature_C=21.0,
    face_up=1,
    activity=Activity.STILL,
    flags=0,
    latched=False,
    stop_number=0,
    heard_t_ns=NOW_NS - SECOND_NS // 2,
    signal=1.0,
    outcomes=(),
    doing="",
    console=0xC0C0,
    clock_bound_ms=12.0,
    permitted=True,
)
LINK = LinkView(0, "/dev/ttyUSB0", "open", 0, 0, 0, 0, 0)
NO_STOP = StopView(0, False, (), ())
FLEET = FleetView(
    t_ns=NOW_NS,
    opened_utc="2026-03-02T08:00:00Z",
    operator="Mira",
    epoch=1_772_438_400,
    simulated=False,
    modules=(MODULE,),
    links=(LINK,),
    stop=NO_STOP,
    notices=(),
    closed=False,
    console=0xC0C0,
)
LIMITS = Limits()


def order(text: str) -> Order:
    return parse_order(f"birch {text}", ["birch"])


def blocks_of(
    view: ModuleView, wanted: Order, whole: FleetView, trouble: str = "", alive: bool = True
) -> list[Block]:
    return blocking(Case(view, wanted, whole, trouble, LIMITS, alive))


PIVOT = order("pivot forward at 4400")
SPIN = order("spin back at 4400")
FLASH = order("flash")
REST = order("rest")
HOP = order("hop at 4400")
TWIST = order("twist back at 4400")


def module(**changes: object) -> ModuleView:
    return replace(MODULE, **changes)  # type: ignore[arg-type]


def fleet(**changes: object) -> FleetView:
    return replace(FLEET, **changes)  # type: ignore[arg-type]


def names(blocks: list[Block]) -> list[str]:
    return [block.name for block in blocks]


STOPPED = fleet(stop=StopView(3, True, (), (1,)))
LOST = fleet(links=(replace(LINK, state="lost"),))
# name, module, fleet, log trouble, essential words of the text, blocked: pivot, spin, flash
CASES = [
    ("link not open", MODULE, LOST, "", ["/dev/ttyUSB0", "lost"], "psf"),
    ("link not open", module(link=2), FLEET, "", ["no link 2"], "psf"),
    ("log not writing", MODULE, FLEET, "disk full", ["disk full"], "psf"),
    ("all-stop in force", MODULE, STOPPED, "", ["all-stop 3"], "ps"),
    ("all-stop in force", module(latched=True, stop_number=5), FLEET, "", ["all-stop 5"], "ps"),
    ("restarted", module(epoch=0, console=0), FLEET, "", ["restarted and was not called"], "psf"),
    ("restarted", module(epoch=1_772_438_401), FLEET, "", ["does not follow this console"], "psf"),
    ("restarted", module(console=0xD0D0), FLEET, "", ["does not follow this console"], "psf"),
    ("locked out", module(locked_by="Ada"), FLEET, "", ["locked out by Ada", "only"], "ps"),
    ("locked out", module(locked_by=""), FLEET, "", ["locked out by somebody"], "ps"),
    ("fault standing", module(faults=("wheel_stuck",)), FLEET, "", ["wheel stuck"], "ps"),
    ("clock unknown", module(clock_bound_ms=None), FLEET, "", ["not known yet"], "ps"),
    ("clock unknown", module(clock_bound_ms=200.6), FLEET, "", ["201 ms", "200 ms"], "ps"),
    ("permit refused", module(permitted=False), FLEET, "", ["no drive permit yet"], "ps"),
    ("address shared", module(shares_address=True), FLEET, "", ["another box", "0x0011"], "ps"),
    ("telemetry too old", module(heard_t_ns=NOW_NS - 7 * SECOND_NS), FLEET, "", ["7.0 s"], "ps"),
    ("telemetry too old", module(heard_t_ns=None), FLEET, "", ["nothing was heard"], "ps"),
    ("over the speed limit", module(wheel_max_rpm=4399), FLEET, "", ["4400 rpm", "4399"], "ps"),
    ("over the speed limit", module(wheel_max_rpm=0), FLEET, "", ["nameplate"], "ps"),
    ("battery low", module(battery_V=3.41), FLEET, "", ["3.41 V", "3.50 V"], "ps"),
    ("battery low", module(battery_V=0.0), FLEET, "", ["not heard yet"], "ps"),
    ("battery low", module(flags=Flags.BATTERY_LOW), FLEET, "", ["calls", "3.92 V"], "ps"),
    ("wheel axis wrong", module(face_up=5), FLEET, "", ["upright", "face 5"], "p"),
    ("wheel axis wrong", module(face_up=6), FLEET, "", ["upright", "face 6"], "p"),
    ("not settled", module(face_up=0), FLEET, "", ["no face"], "ps"),
    ("not settled", module(flags=Flags.UNSETTLED), FLEET, "", ["still moves"], "ps"),
    ("not settled", module(activity=Activity.FLASHING), FLEET, "", ["flashing"], "ps"),
    (
        "not settled",
        module(activity=Activity.SPINNING_UP, wheel_rpm=2100),
        FLEET,
        "",
        ["spinning up", "2100 rpm"],
        "ps",
    ),
    ("not settled", module(activity=99), FLEET, "", ["activity 99"], "ps"),
]


@pytest.mark.parametrize("case", CASES, ids=[f"{case[0]}: {case[4][0]}" for case in CASES])
def test_each_interlock(case: tuple[str, ModuleView, FleetView, str, list[str], str]) -> None:
    name, view, whole, trouble, words, stands_before = case
    blocks = blocks_of(view, PIVOT, whole, trouble)
    assert names(blocks) == [name]
    assert all(word in blocks[0].text for word in words), blocks[0].text
    assert "\n" not in blocks[0].text
    for each, letter in ((PIVOT, "p"), (SPIN, "s"), (FLASH, "f")):
        expected = [name] if letter in stands_before else []
        assert names(blocks_of(view, each, whole, trouble)) == expected


@pytest.mark.parametrize("wanted", [PIVOT, SPIN, FLASH, REST])
def test_a_module_at_rest_is_not_blocked(wanted: Order) -> None:
    assert blocks_of(MODULE, wanted, FLEET, "") == []


@pytest.mark.parametrize(
    "view",
    [
        module(wheel_max_rpm=4400),
        module(battery_V=BATTERY_LOW_V),
        module(heard_t_ns=NOW_NS - 3 * SECOND_NS),
        module(face_up=4),
        module(stop_number=3),
        module(temperature_C=-5.0),
    ],
)
def test_figures_at_their_limit_do_not_block(view: ModuleView) -> None:
    assert blocks_of(view, PIVOT, FLEET, "") == []


def test_an_age_just_over_the_limit_never_reads_as_the_limit() -> None:
    view = module(heard_t_ns=NOW_NS - 3 * SECOND_NS - 1)
    assert "3.1 s ago" in blocks_of(view, PIVOT, FLEET, "")[0].text


def test_all_that_stands_in_the_way_is_told_at_once() -> None:
    broken = module(
        epoch=1, heard_t_ns=None, wheel_max_rpm=0, battery_V=0.0, face_up=0, latched=True,
        locked_by="Ada", faults=("storage_bad", "overheated"), clock_bound_ms=None,
        permitted=False,
    )  # fmt: skip
    assert names(blocks_of(broken, PIVOT, replace(LOST, stop=STOPPED.stop), "disk full")) == [
        "link not open",
        "log not writing",
        "all-stop in force",
        "locked out",
        "restarted",
        "telemetry too old",
        "fault standing",
        "clock unknown",
        "permit refused",
        "over the speed limit",
        "battery low",
        "not settled",
    ]


def test_another_console_s_module_is_left_to_it() -> None:
    heard_ns = NOW_NS - SECOND_NS
    theirs = module(console=0xD0D0, owner_left_ms=2500, owner_heard_ns=heard_ns)
    owned, follows = blocks_of(theirs, PIVOT, FLEET)
    assert (owned.name, follows.name) == ("owned by another console", "restarted")
    assert "1.5 s" in owned.text
    lapsed = module(console=0xD0D0, owner_left_ms=900, owner_heard_ns=heard_ns)
    assert names(blocks_of(lapsed, PIVOT, FLEET)) == ["restarted"]
    assert names(blocks_of(theirs, FLASH, FLEET)) == ["owned by another console", "restarted"]


def test_no_wheel_turns_for_a_screen_that_does_not_move() -> None:
    for wanted in (PIVOT, SPIN, HOP):
        [block] = blocks_of(MODULE, wanted, FLEET, alive=False)
        assert (block.name, "sign of life" in block.text) == ("permit refused", True)
    assert blocks_of(MODULE, FLASH, FLEET, alive=False) == []


def test_a_flat_pivot_needs_the_axis_upright() -> None:
    upright, level = module(face_up=5), module(face_up=2)
    flat = replace(PIVOT, setting=Setting.FLAT)
    assert blocks_of(upright, flat, FLEET) == []
    (block,) = blocks_of(level, flat, FLEET)
    assert block.text == "its wheel axis is level (face 2 up); a flat pivot needs it upright"


def test_each_motion_needs_its_axis() -> None:
    level, upright, tilted = module(face_up=2), module(face_up=5), module(face_up=0)
    assert blocks_of(level, HOP, FLEET) == []
    assert blocks_of(upright, TWIST, FLEET) == []
    assert names(blocks_of(upright, HOP, FLEET)) == ["wheel axis wrong"]
    [block] = blocks_of(level, TWIST, FLEET)
    assert block.text == "its wheel axis is level (face 2 up); a twist needs it upright"
    assert names(blocks_of(tilted, TWIST, FLEET)) == ["not settled"]


@pytest.mark.parametrize("wanted", ["lock by Ada", "rest"])
def test_what_takes_a_danger_away_is_never_blocked(wanted: str) -> None:
    for _, view, whole, trouble, _, _ in CASES:
        assert blocks_of(view, order(wanted), whole, trouble, alive=False) == []


@pytest.mark.parametrize("wanted", ["unlock by Ada", "set groups to 3"])
def test_other_commands_need_a_link_a_log_and_a_module_that_follows(wanted: str) -> None:
    for name, view, whole, trouble, _, stands_before in CASES:
        expected = [name] if "f" in stands_before else []
        assert names(blocks_of(view, order(wanted), whole, trouble)) == expected


def test_rest_is_never_blocked() -> None:
    for _, view, whole, trouble, _, _ in CASES:
        assert blocks_of(view, REST, whole, trouble) == []
    assert not any("rest" in row.motions for row in INTERLOCKS)


def test_every_row_is_tried_here_named_once_and_not_overridable() -> None:
    rows = [row.name for row in INTERLOCKS]
    assert len(set(rows)) == len(rows)
    assert {case[0] for case in CASES} | {"owned by another console"} == set(rows)
    assert not any(row.overridable for row in INTERLOCKS)


def test_what_only_the_console_can_know_is_enforced_by_the_console() -> None:
    console = {row.name for row in INTERLOCKS if row.enforced_by is Enforcer.CONSOLE}
    assert console == {
        "link not open",
        "log not writing",
        "address shared",
        "telemetry too old",
    }
