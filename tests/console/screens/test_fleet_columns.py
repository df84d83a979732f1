"""Columns: every line as wide as its header, dropped in the stated order, texts cut to fit."""

from hypothesis import given
from hypothesis import strategies as st
from rich.cells import cell_len

from console.view import Outcome
from console.widgets.fleet_columns import COLUMNS, SteadyBattery, plan_columns
from console.widgets.words import Line
from protocol.codes import Flags
from tests.support.fake_fleet import SECOND_NS, busy_view, module

NOW = 3600 * SECOND_NS
# The order that the module's docstring promises.
DROPPED_FIRST_TO_LAST = (
    "kind",
    "signal",
    "of limit",
    "doing",
    "outcomes",
    "heard",
    "posture",
    "battery",
)


def text_of(line: Line) -> str:
    return "".join(text for text, _ in line)


def titles(width: int) -> list[str]:
    return [column.title for column, _ in plan_columns(width).columns]


def test_columns_go_in_the_stated_order_as_the_screen_narrows() -> None:
    gone: list[str] = []
    for width in range(200, 20, -1):
        shown = titles(width)
        gone += [c.title for c in COLUMNS if c.title not in shown and c.title not in gone]
    assert tuple(gone) == DROPPED_FIRST_TO_LAST


def test_at_80_columns_all_but_kind_signal_bar_and_doing_are_there() -> None:
    assert titles(79) == [
        "name",
        "state",
        "activity",
        "rpm/limit",
        "battery",
        "posture",
        "heard",
        "outcomes",
    ]


def test_at_160_columns_everything_is_there_and_the_room_is_used() -> None:
    plan = plan_columns(159)
    assert len(plan.columns) == len(COLUMNS)
    assert sum(cells + 1 for _, cells in plan.columns) == 159


@given(st.integers(46, 250), st.sampled_from(busy_view().modules), st.booleans())
def test_a_row_is_as_wide_as_the_header(width: int, one: object, cursor: bool) -> None:
    plan = plan_columns(width)
    row = plan.row(one, NOW, cursor)  # type: ignore[arg-type]
    assert cell_len(text_of(row)) == cell_len(text_of(plan.header())) <= width


@given(
    st.text(max_size=12),
    st.text(max_size=40),
    st.integers(-32_768, 32_767),
    st.integers(0, 65_535),
    st.lists(st.sampled_from(list(Outcome)), max_size=60),
)
def test_whatever_a_module_says_the_columns_stay(
    name: str, doing: str, speed: int, limit: int, outcomes: list[Outcome]
) -> None:
    plan = plan_columns(140, [name], ["paver"])
    odd = module(
        1,
        name,
        doing=doing,
        wheel_rpm=speed,
        wheel_max_rpm=limit,
        outcomes=tuple(outcomes),
        activity=250,
    )
    text = text_of(plan.row(odd, NOW, under_cursor=False))
    assert cell_len(text) == cell_len(text_of(plan.header()))
    assert text.isprintable()


def test_the_newest_outcomes_are_shown_with_the_newest_at_the_right() -> None:
    many = (Outcome.STUCK,) * 40 + (Outcome.LANDED, Outcome.SHORT)
    row = text_of(plan_columns(79).row(module(1, "alder", outcomes=many), NOW, under_cursor=False))
    assert row.rstrip().endswith("_+<")


def test_a_low_battery_is_marked_beside_its_voltage() -> None:
    low = module(1, "alder", battery_V=3.307, flags=int(Flags.BATTERY_LOW), latched=True)
    row = text_of(plan_columns(79).row(low, NOW, under_cursor=False))
    assert "3.31 V!" in row
    assert "# stopped" in row


@given(st.lists(st.integers(-9, 9), min_size=1, max_size=40))
def test_a_flickering_voltage_stays_and_is_never_far_off(flicker: list[int]) -> None:
    steady = SteadyBattery()
    first = 3.9 + flicker[0] / 1000
    for thousandths in flicker:
        now = module(1, "alder", battery_V=3.9 + thousandths / 1000)
        shown = steady.steadied(now)
        assert abs(shown.battery_V - now.battery_V) <= 0.015 + 1e-9
        if max(flicker) - min(flicker) <= 14:
            assert shown.battery_V == first


def test_a_falling_voltage_is_followed_module_by_module() -> None:
    steady = SteadyBattery()
    for milli in range(4000, 3500, -5):
        fallen = steady.steadied(module(1, "alder", battery_V=milli / 1000))
        assert steady.steadied(module(2, "birch", battery_V=4.1)).battery_V == 4.1
    assert fallen.battery_V < 3.53


def test_a_module_never_heard_shows_no_measured_value() -> None:
    row = text_of(
        plan_columns(159).row(module(1, "alder", heard_t_ns=None), NOW, under_cursor=False)
    )
    assert "unheard" in row
    assert "never" in row
    assert "4.02" not in row
    assert "100%" not in row


def test_name_and_kind_take_the_longest_name_up_to_what_the_wire_carries() -> None:
    cells = {
        column.title: cells
        for column, cells in plan_columns(200, ["x" * 30, "elm"], ["paver"]).columns
    }
    assert cells["name"] == 12
    assert cells["kind"] == 6


def test_a_cut_text_says_so() -> None:
    long = module(1, "a name of more", doing="")
    row = text_of(plan_columns(79).row(long, NOW, under_cursor=False))
    assert row[1:7] == "a nam~"


def test_wide_characters_keep_the_columns() -> None:
    # Four ideographs: 12 bytes in UTF-8, two cells each (Unicode Standard Annex 11).
    plan = plan_columns(100, ["白樺白樺"])
    rows = (plan.row(module(1, name), NOW, under_cursor=False) for name in ("白樺白樺", "elm"))
    assert {cell_len(text_of(row)) for row in rows} == {cell_len(text_of(plan.header()))}
