"""The order line: what it understands, what it says of the rest, what it offers next."""

import re
from dataclasses import replace

import pytest
from hypothesis import assume, given
from hypothesis import strategies as st

from console.errors import InputError
from console.orders import ITEMS, Order, complete, parse_order, render
from protocol.codes import Direction, Setting, SettingId
from protocol.message import field_text, text_field

NAMES = ("alder", "birch", "cedar", "elm")
FORWARD, BACK = Direction.FORWARD, Direction.BACK


def pivot(*subjects: str, direction: Direction = FORWARD, speed_rpm: int = 4400) -> Order:
    return Order(subjects, "pivot", Setting.FLOOR, direction, speed_rpm, 0)


def spin(*subjects: str, direction: Direction = FORWARD, duration_ms: int = 5000) -> Order:
    return Order(subjects, "spin", None, direction, 3000, duration_ms)


def rest(*subjects: str) -> Order:
    return Order(subjects, "rest", None, None, 0, 0)


def flash(*subjects: str, duration_ms: int = 2000) -> Order:
    return Order(subjects, "flash", None, None, 0, duration_ms)


GOOD = [
    ("birch pivot forward at 5200", pivot("birch", speed_rpm=5200)),
    ("birch, elm pivot back at 4400 on floor", pivot("birch", "elm", direction=BACK)),
    ("birch,elm pivot back at 4400", pivot("birch", "elm", direction=BACK)),
    ("elm , birch pivot back at 4400 rpm on floor", pivot("elm", "birch", direction=BACK)),
    ("all pivot forward at 4350", pivot(speed_rpm=4350)),
    ("birch hop at 7000", Order(("birch",), "hop", None, FORWARD, 7000, 0)),
    (
        "birch, elm twist back at 4000 together",
        Order(("birch", "elm"), "twist", None, BACK, 4000, 0, together=True),
    ),
    ("elm lock by Ada", Order(("elm",), "lock", None, None, 0, 0, person="Ada")),
    ('elm unlock by "Ada B"', Order(("elm",), "unlock", None, None, 0, 0, person="Ada B")),
    (
        "elm lock by Bartholomew-the-Elder",
        Order(("elm",), "lock", None, None, 0, 0, person="Bartholomew-"),
    ),
    (
        "elm set battery-low to 3600",
        Order(("elm",), "set", None, None, 0, 0, item=SettingId.BATTERY_LOW_MV, value=3600),
    ),
    ("all rest", rest()),
    ("  ALL   Rest ", rest()),
    ("Birch REST", rest("birch")),
    ("cedar flash", flash("cedar")),
    ("cedar flash for 3 s", flash("cedar", duration_ms=3000)),
    ("cedar flash for 0.25 s", flash("cedar", duration_ms=250)),
    ("cedar flash for 60s", flash("cedar", duration_ms=60_000)),
    ("elm spin at 3000", spin("elm")),
    ("elm spin at 3000 for 5 s", spin("elm")),
    ("elm spin forward at 3000 for 7.125 S", spin("elm", duration_ms=7125)),
    ("elm spin back at 3000 for 5 s", spin("elm", direction=BACK)),
    ("elm pivot forward at 65535", pivot("elm", speed_rpm=65_535)),
    ("elm pivot forward at 004400", pivot("elm")),
    ('"birch" rest', rest("birch")),
]


@pytest.mark.parametrize(("text", "order"), GOOD, ids=[text for text, _ in GOOD])
def test_good_orders(text: str, order: Order) -> None:
    assert parse_order(text, NAMES) == order


# Each error by its essential words, in sequence.
BAD = [
    ("", ["empty order", "'all rest'"]),
    ("   ", ["empty order"]),
    (
        "birch",
        [
            "expected a motion",
            "pivot, hop, twist, spin, rest, flash, lock, unlock, set",
            "after 'birch'",
        ],
    ),
    ("birch,", ["expected another module name", "after ','"]),
    (",", ["expected a module name or 'all'", "first", "','"]),
    ("birch,, elm rest", ["expected another module name", "after ','", "column 7"]),
    ("birch elm rest", ["expected a comma", "after 'birch'", "'birch, elm'", "column 7"]),
    ("birch, all rest", ["names or 'all'", "not both", "column 8"]),
    ("all, birch rest", ["expected a motion", "after 'all'", "','", "column 4"]),
    ("birch, elm, birch rest", ["'birch' stands twice", "column 13"]),
    ("birch, BIRCH rest", ["'birch' stands twice"]),
    ("birhc rest", ["no module is called 'birhc'", "column 1", "did you mean 'birch'"]),
    ("birch, ceder rest", ["no module is called 'ceder'", "column 8", "'cedar'"]),
    ("alll rest", ["no module is called 'alll'", "did you mean 'all'"]),
    ("quartz rest", ["no module is called 'quartz'"]),
    ("rest", ["expected a module name or 'all'", "such as 'all rest'", "not 'rest'"]),
    ("pivot forward at 4400", ["expected a module name or 'all'", "not 'pivot'"]),
    ("birch pivott forward", ["expected a motion", "'pivott'", "did you mean 'pivot'"]),
    ("birch pivot", ["expected a direction (forward or back)", "after 'pivot'"]),
    ("birch pivot at 4400", ["expected a direction", "not 'at'", "column 13"]),
    ("birch pivot forwards at 1", ["expected a direction", "did you mean 'forward'"]),
    ("birch pivot forward", ["expected 'at' and a speed after 'forward', such as 'at 4400'"]),
    ("birch pivot forward 4400", ["expected 'at'", "not '4400'", "column 21"]),
    ("birch pivot forward at", ["expected a speed after 'at', such as 'at 4400'"]),
    ("birch pivot forward at fast", ["expected a speed after 'at'", "not 'fast'", "column 24"]),
    ("birch pivot forward at -4400", ["expected a speed after 'at'", "'-4400'"]),
    ("birch pivot forward at 44.5", ["expected a speed after 'at'", "'44.5'"]),
    ("birch pivot forward at \u0664", ["expected a speed after 'at'"]),
    ("birch pivot forward at 4,400", ["the end of the order", "after '4'", "not ','"]),
    ("birch pivot forward at 0", ["from 1 to 65535 rpm", "not '0'"]),
    ("birch pivot forward at 65536", ["from 1 to 65535 rpm"]),
    ("birch pivot forward at " + "9" * 6000, ["from 1 to 65535 rpm"]),
    ("birch spin at 32768", ["from 1 to 32767 rpm"]),
    (
        "birch pivot forward at 4400 on",
        ["expected a setting (floor, wall, crest, flat)", "after 'on'"],
    ),
    ("birch pivot forward at 4400 on flor", ["expected a setting", "did you mean 'floor'"]),
    (
        "birch pivot forward at 4400 onn floor",
        ["'on' or 'together' or the end of the order", "mean 'on'"],
    ),
    ("birch pivot forward at 4400 for 3 s", ["the end of the order", "not 'for'"]),
    ("birch rest now", ["expected the end of the order after 'rest'", "not 'now'"]),
    ("all rest at 3000", ["expected the end of the order after 'rest'"]),
    ("elm spin at 3000 for", ["expected a time in seconds after 'for', such as 'for 3 s'"]),
    ("elm spin at 3000 for 5", ["expected 's' for seconds after '5'"]),
    ("elm spin at 3000 for 5 min", ["expected 's' for seconds after '5'", "not 'min'"]),
    ("elm spin at 3000 for 5 s s", ["expected the end of the order after 's'"]),
    ("elm spin at 3000 for 60.001 s", ["from 0.001 to 60 seconds"]),
    ("elm lock", ["expected 'by' and a person's name after 'lock'"]),
    ("elm unlock by", ["expected a person's name after 'by'"]),
    ("elm lock by ,", ["expected a person's name after 'by'", "not ','"]),
    ("elm set", ["expected a setting (wheel-limit"]),
    ("elm set groups 3", ["expected 'to' and a number after 'groups'"]),
    ("elm set groups to many", ["expected a whole number after 'to'"]),
    ("elm set groups to 2147483648", ["expected a whole number after 'to'"]),
    ("all rest together", ["expected the end of the order after 'rest'"]),
    ("elm flash for 0 s", ["from 0.001 to 60 seconds", "not '0'"]),
    ("elm flash for 0.0001 s", ["expected a time in seconds", "'0.0001'"]),
    ("elm flash for 1e3 s", ["expected a time in seconds"]),
    ('"birch rest', ["closing quotation mark", "column 1"]),
    ('"" rest', ["no module is called ''"]),
    ('birch "rest"', ["expected a motion", "not 'rest'"]),
    ('"all" rest', ["no module is called 'all'"]),
]


@pytest.mark.parametrize(("text", "words"), BAD, ids=[text[:40] for text, _ in BAD])
def test_bad_orders_say_what_was_expected_and_where(text: str, words: list[str]) -> None:
    with pytest.raises(InputError) as caught:
        parse_order(text, NAMES)
    message = str(caught.value)
    assert re.search(".*".join(map(re.escape, words)), message), message
    assert "\n" not in message
    assert len(message) < 160


@pytest.mark.parametrize("setting", list(Setting))
def test_a_pivot_in_each_setting(setting: Setting) -> None:
    text = f"birch pivot back at 4400 on {setting.name.title()}"
    order = parse_order(text, NAMES)
    assert order.setting is setting
    assert render(order) == text.lower()


LATER = [
    ("group north pivot back at 4000", "group"),
    ("birch, group north rest", "group"),
]


@pytest.mark.parametrize(("text", "word"), LATER)
def test_words_of_later_versions_are_named(text: str, word: str) -> None:
    with pytest.raises(InputError, match=rf"'{word}' \(column \d+\) is not in this version"):
        parse_order(text, NAMES)


def test_a_module_that_bears_a_later_word_is_still_reached() -> None:
    assert parse_order("group, flat rest", ["group", "flat"]) == rest("group", "flat")


def test_modules_named_like_motions_are_reached() -> None:
    names = ["rest", "pivot", "at"]
    assert parse_order("rest rest", names) == rest("rest")
    assert parse_order("pivot, at pivot back at 4400", names) == pivot(
        "pivot", "at", direction=BACK
    )


def test_without_any_module_a_name_cannot_be_checked_but_everyone_can_rest() -> None:
    with pytest.raises(InputError, match=r"no module has been heard.*'birch'"):
        parse_order("birch rest", [])
    assert parse_order("all rest", []) == rest()


def test_two_modules_of_one_name_cannot_be_told_apart() -> None:
    with pytest.raises(InputError, match="more than one module is called 'elm'"):
        parse_order("elm rest", ["elm", "birch", "elm"])


def test_letter_case_decides_only_where_it_must() -> None:
    names = ["Elm", "elm", "OAK"]
    assert parse_order("Elm rest", names) == rest("Elm")
    assert parse_order("elm rest", names) == rest("elm")
    assert parse_order("oak rest", names) == rest("OAK")
    with pytest.raises(InputError, match="no module is called 'ELM'"):
        parse_order("ELM rest", names)


def test_a_module_called_all_is_never_taken_for_everyone() -> None:
    names = ["all", "birch"]
    assert parse_order("all rest", names) == rest()
    assert parse_order('"all" rest', names) == rest("all")
    assert render(rest("all")) == '"all" rest'


@pytest.mark.parametrize(
    ("order", "text"),
    [
        (pivot("birch", speed_rpm=5200), "birch pivot forward at 5200 on floor"),
        (pivot("birch", "elm", direction=BACK), "birch, elm pivot back at 4400 on floor"),
        (spin("elm", duration_ms=12_345), "elm spin forward at 3000 for 12.345 s"),
        (flash(), "all flash for 2 s"),
        (rest('my "old" box', "a,b"), '"my ""old"" box", "a,b" rest'),
    ],
)
def test_canonical_text(order: Order, text: str) -> None:
    assert render(order) == text


_SUBJECTS = st.lists(st.text(min_size=1, max_size=12), unique=True, max_size=4).map(tuple)
_SENSES = st.sampled_from(Direction)
_TIMES_MS = st.integers(1, 60_000)


_PEOPLE = st.text('AbcÉ \u00e4,"x', min_size=1, max_size=12).map(
    lambda name: field_text(text_field(name.strip()))
)
_BY_MOTION: dict[str, st.SearchStrategy[dict[str, object]]] = {
    "pivot": st.fixed_dictionaries(
        {
            "setting": st.just(Setting.FLOOR),
            "direction": _SENSES,
            "speed_rpm": st.integers(1, 65_535),
            "together": st.booleans(),
        }
    ),
    "hop": st.fixed_dictionaries(
        {
            "direction": _SENSES,
            "speed_rpm": st.integers(1, 65_535),
            "together": st.booleans(),
        }
    ),
    "twist": st.fixed_dictionaries(
        {
            "direction": _SENSES,
            "speed_rpm": st.integers(1, 65_535),
            "together": st.booleans(),
        }
    ),
    "spin": st.fixed_dictionaries(
        {
            "direction": _SENSES,
            "speed_rpm": st.integers(1, 32_767),
            "duration_ms": _TIMES_MS,
        }
    ),
    "rest": st.just({}),
    "flash": st.fixed_dictionaries({"duration_ms": _TIMES_MS}),
    "lock": st.fixed_dictionaries({"person": _PEOPLE.filter(lambda name: name.strip() == name)}),
    "unlock": st.fixed_dictionaries({"person": _PEOPLE.filter(lambda name: name.strip() == name)}),
    "set": st.fixed_dictionaries(
        {
            "item": st.sampled_from(sorted(ITEMS.values())).map(int),
            "value": st.integers(-(2**31) + 1, 2**31 - 1),
        }
    ),
}


@st.composite
def orders(draw: st.DrawFn) -> Order:
    subjects = draw(_SUBJECTS)
    motion = draw(st.sampled_from(sorted(_BY_MOTION)))
    blank = Order(subjects, motion, None, None, 0, 0)
    order = replace(blank, **draw(_BY_MOTION[motion]))  # type: ignore[arg-type]
    assume(order.person or motion not in {"lock", "unlock"})
    return order


@given(orders())
def test_canonical_text_reads_back(order: Order) -> None:
    assert parse_order(render(order), [*order.subjects, "another"]) == order


@given(st.text(alphabet=st.sampled_from('abehilr,." \tat40s'), max_size=40))
def test_any_text_is_an_order_or_one_clear_line(text: str) -> None:
    try:
        order = parse_order(text, NAMES)
    except InputError as error:
        message = str(error)
    else:
        message = render(order)
        assert parse_order(message, NAMES) == order
    assert len(message.splitlines()) == 1


COMPLETIONS = [
    ("", ["all", "alder", "birch", "cedar", "elm"]),
    ("a", ["all", "alder"]),
    ("AL", ["all", "alder"]),
    ("x", []),
    ("birch ", ["pivot", "hop", "twist", "spin", "rest", "flash", "lock", "unlock", "set"]),
    ("birch,", ["alder", "cedar", "elm"]),
    ("birch, a", ["alder"]),
    ("birch, elm ", ["pivot", "hop", "twist", "spin", "rest", "flash", "lock", "unlock", "set"]),
    ("all ", ["pivot", "hop", "twist", "spin", "rest", "flash", "lock", "unlock", "set"]),
    ("birch p", ["pivot"]),
    ("birch pivot ", ["forward", "back"]),
    ("birch pivot b", ["back"]),
    ("birch spin ", ["forward", "back", "at"]),
    ("birch spin back ", ["at"]),
    ("birch pivot forward at ", []),
    ("birch pivot forward at 44", []),
    ("birch pivot forward at 4400 ", ["on", "together"]),
    ("birch pivot forward at 4400 rpm ", ["on", "together"]),
    ("birch pivot forward at 4400 on ", ["floor", "wall", "crest", "flat"]),
    ("birch pivot forward at 4400 on floor ", ["together"]),
    ("birch spin at 3000 ", ["for"]),
    ("birch spin at 3000 for ", []),
    ("birch spin at 3000 for 3 ", ["s"]),
    ("birch rest ", []),
    ("birch hop ", ["forward", "back", "at"]),
    ("birch twist ", ["forward", "back"]),
    ("birch lock ", ["by"]),
    ("birch lock by ", []),
    ("birch set ", ["wheel-limit", "telemetry-period", "battery-low", "groups"]),
    ("birch set groups ", ["to"]),
    ("birhc p", []),
    ("birch pivot forward at fast ", []),
]


@pytest.mark.parametrize(("text", "words"), COMPLETIONS)
def test_completions(text: str, words: list[str]) -> None:
    assert complete(text, NAMES) == words


def test_completions_put_odd_names_in_quotation_marks() -> None:
    names = ["my box", "birch"]
    assert complete("m", names) == ['"my box"']
    assert complete('"my', names) == ['"my box"']
    assert complete('"my ', names) == ['"my box"']
    assert complete('birch, "my b', names) == ['"my box"']
    assert parse_order('"my box" rest', names) == rest("my box")


@given(orders())
def test_each_word_of_a_canonical_text_is_offered_in_its_place(order: Order) -> None:
    """Words of the grammar only: figures and people are never offered, names are tested above."""
    motion_on = render(Order((), *[getattr(order, field) for field in Order.__slots__[1:]]))
    words = motion_on.split()
    for count, word in enumerate(words):
        if word[0].isdigit() or word[0] == "-":
            continue
        if count and words[count - 1] == "by":
            break  # a person's name is theirs to write
        assert word in complete(" ".join(words[:count]) + " " * bool(count), NAMES)
