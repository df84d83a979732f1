"""Run sheets: what they may hold, what is said of the rest, and the plan that follows."""

import hashlib
from collections import Counter
from dataclasses import replace
from fractions import Fraction
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from console.errors import InputError
from console.paths import SHEETS
from console.sheet import Course, Sheet, Trial, TrialOrder, draw, load_sheet, parse_sheet, plan
from protocol.codes import Setting

GOOD = """\
title = "Two speeds"
modules = ["birch", "elm", "cedar"]
motion = "pivot"
setting = "floor"
speeds_rpm = [4400, 4800]
repeats = [2, 3]
order = "shuffled"
seed = 11
direction = "turnabout"
at_once = 2
pause_s = 0.5
"""
LINES = {line.split(" ")[0]: count for count, line in enumerate(GOOD.splitlines(), start=1)}


def changed(key: str, line: str) -> str:
    """The good sheet with one line in place of that of a key."""
    return "\n".join(line if LINES[key] == n else old for n, old in enumerate(GOOD.split("\n"), 1))


def sheet(**changes: object) -> Sheet:
    return replace(parse_sheet(GOOD, "good.toml"), **changes)  # type: ignore[arg-type]


def test_a_whole_sheet() -> None:
    assert parse_sheet(GOOD, "good.toml") == Sheet(
        title="Two speeds",
        modules=("birch", "elm", "cedar"),
        motion="pivot",
        setting=Setting.FLOOR,
        speeds_rpm=(4400, 4800),
        repeats=(2, 3),
        order=TrialOrder.SHUFFLED,
        seed=11,
        direction=Course.TURNABOUT,
        return_speed_rpm=None,
        at_once=2,
        pause_s=0.5,
        text=GOOD,
    )


def test_the_least_sheet_and_what_it_leaves_to_defaults() -> None:
    text = 'title = "T"\nmodules = ["elm"]\nmotion = "pivot"\nspeeds_rpm = [4400]\nrepeats = 4'
    least = parse_sheet(text, "least.toml")
    assert (least.setting, least.order, least.seed) == (Setting.FLOOR, TrialOrder.AS_WRITTEN, 0)
    assert (least.direction, least.return_speed_rpm) == (Course.TURNABOUT, None)
    assert (least.at_once, least.pause_s, least.repeats) == (1, 0.0, (4,))


def test_one_number_of_repeats_holds_for_each_speed() -> None:
    assert parse_sheet(changed("repeats", "repeats = 5"), "x").repeats == (5, 5)


@pytest.mark.parametrize("way", ["forward", "back"])
def test_one_way_sheets_carry_a_return_speed(way: str) -> None:
    line = f'direction = "{way}"\nreturn_speed_rpm = 5200'
    one_way = parse_sheet(changed("direction", line), "x")
    assert (one_way.direction, one_way.return_speed_rpm) == (Course(way), 5200)


# Key whose line is changed, its new line, essential words after "bad.toml, line N: key: ".
BAD = [
    ("title", "title = 3", "a title of one line, in quotation marks, not 3"),
    ("title", 'title = " "', "a title of one line"),
    ("title", 'title = "a\\nb"', "a title of one line"),
    ("modules", 'modules = "birch"', 'a list of module names, such as .*, not "birch"'),
    ("modules", "modules = []", "a list of module names, .* not a list of 0"),
    ("modules", 'modules = ["birch", 7]', "a list of module names, .* not 7"),
    ("modules", 'modules = ["birch", ""]', "a list of module names"),
    ("modules", 'modules = ["elm", "birch", "elm"]', 'each module once, not "elm twice"'),
    ("motion", 'motion = "pivto"', 'expected "pivot", not "pivto"; did you mean \'pivot\''),
    ("motion", 'motion = "hop"', "expected pivot; hop is not in this version"),
    ("motion", 'motion = "spin"', 'expected "pivot", not "spin"'),
    ("motion", "motion = 1", 'expected "pivot", not 1'),
    ("setting", 'setting = "flor"', "did you mean 'floor'"),
    ("speeds_rpm", "speeds_rpm = 4400", "a list of whole speeds in rpm, .* not 4400"),
    ("speeds_rpm", "speeds_rpm = [4400, 4800.5]", "whole speeds in rpm, .* not 4800.5"),
    ("speeds_rpm", "speeds_rpm = [4400, 0]", "whole speeds in rpm, .* not 0"),
    ("speeds_rpm", "speeds_rpm = [4400, 70000]", "whole speeds in rpm, .* not 70000"),
    ("speeds_rpm", "speeds_rpm = [4400, 4400]", 'each once, .* not "4400 twice"'),
    ("speeds_rpm", "speeds_rpm = [4400, true]", "whole speeds in rpm, .* not true"),
    ("repeats", "repeats = [2]", "a list of 2, one beside each speed, not a list of 1"),
    ("repeats", "repeats = [2, 0]", "one whole number from 1, .* not 0"),
    ("repeats", "repeats = 0", "one whole number from 1, .* not 0"),
    ("repeats", "repeats = 2.0", "one whole number from 1, .* not 2.0"),
    ("repeats", "repeats = 20000", "at most 100000 trials in all, .*40000 for each of 3 modules"),
    ("order", 'order = "random"', 'expected "shuffled" or "as written", not "random"'),
    ("order", 'order = "as writen"', "did you mean 'as written'"),
    ("seed", "seed = -1", "a whole number from 0; .* not -1"),
    ("seed", "seed = 9223372036854775808", "a whole number from 0"),
    ("seed", 'seed = "11"', 'a whole number from 0; .* not "11"'),
    ("direction", 'direction = "turn about"', "did you mean 'turnabout'"),
    ("at_once", "at_once = 4", "a whole number from 1 to 3, the number of modules, not 4"),
    ("at_once", "at_once = 0", "a whole number from 1 to 3, .* not 0"),
    ("pause_s", "pause_s = -0.1", "a number of seconds from 0 to 3600, not -0.1"),
    ("pause_s", "pause_s = nan", "a number of seconds from 0 to 3600, not nan"),
    ("pause_s", 'pause_s = "1"', 'a number of seconds from 0 to 3600, not "1"'),
]


@pytest.mark.parametrize(("key", "line", "words"), BAD, ids=[line for _, line, _ in BAD])
def test_bad_values_name_file_line_and_key(key: str, line: str, words: str) -> None:
    with pytest.raises(InputError, match=rf"^bad\.toml, line {LINES[key]}: {key}: .*{words}"):
        parse_sheet(changed(key, line), "bad.toml")


@pytest.mark.parametrize("key", ["title", "modules", "motion", "speeds_rpm", "repeats", "seed"])
def test_missing_keys_are_named(key: str) -> None:
    with pytest.raises(InputError, match=rf"^bad\.toml: no key {key}: expected "):
        parse_sheet(changed(key, ""), "bad.toml")


@pytest.mark.parametrize(
    ("line", "words"),
    [
        ("pauses_s = 1.0", "pauses_s: unknown key; did you mean 'pause_s'"),
        ("wobble = 3", "wobble: unknown key; there are title, modules"),
        ("[pause]\nx = 1", "pause: unknown key"),
    ],
)
def test_unknown_keys_are_errors(line: str, words: str) -> None:
    with pytest.raises(InputError, match=rf"^bad\.toml, line {LINES['pause_s']}: {words}"):
        parse_sheet(changed("pause_s", line), "bad.toml")


def test_a_one_way_sheet_needs_its_return_speed_and_a_turnabout_must_not_have_one() -> None:
    with pytest.raises(InputError, match=r"no key return_speed_rpm: .* direction is \"forward\""):
        parse_sheet(changed("direction", 'direction = "forward"'), "bad.toml")
    with pytest.raises(InputError, match=r"line 9: return_speed_rpm: .*turnabout"):
        parse_sheet(changed("direction", "return_speed_rpm = 5200"), "bad.toml")


def test_what_is_not_toml_is_placed_by_line() -> None:
    with pytest.raises(InputError, match=rf"^bad\.toml, line {LINES['seed']}: not TOML: "):
        parse_sheet(changed("seed", "seed = = 3"), "bad.toml")


def test_a_sheet_that_is_not_there() -> None:
    with pytest.raises(InputError, match=r"nowhere\.toml: cannot be read"):
        load_sheet(Path("nowhere.toml"))


def written(view: Sheet) -> list[tuple[str, int]]:
    """The trials as written, put together by counting up."""
    found = []
    for speed_rpm, repeats in zip(view.speeds_rpm, view.repeats, strict=True):
        found += [(module, speed_rpm) for module in view.modules] * repeats
    return found


def independent_plan(items: list[tuple[str, int]], seed: int) -> list[tuple[str, int]]:
    """The shuffle once more, from its description: fill the places from the last to the first,
    each from what is left, and put the last of what is left into the gap."""
    left, placed = list(items), []
    while left:
        last = len(left) - 1
        pick = independent_draw(seed, last, last + 1) if last else 0
        placed.append(left[pick])
        left[pick] = left[last]
        left.pop()
    return placed[::-1]


def independent_draw(seed: int, count: int, below: int) -> int:
    digest = hashlib.new("blake2b", digest_size=16)
    digest.update(str(seed).encode() + b" " + str(count).encode())
    number = sum(byte * 256**place for place, byte in enumerate(digest.digest()))
    return int(Fraction(number, 2**128) * below)


def test_as_written_goes_speed_by_speed_and_round_by_round() -> None:
    view = sheet(modules=("birch", "elm"), repeats=(2, 1), order=TrialOrder.AS_WRITTEN)
    assert plan(view) == (
        Trial(1, "birch", 4400),
        Trial(2, "elm", 4400),
        Trial(3, "birch", 4400),
        Trial(4, "elm", 4400),
        Trial(5, "birch", 4800),
        Trial(6, "elm", 4800),
    )


@pytest.mark.parametrize("seed", [0, 7, 11, 2**63 - 1])
def test_a_shuffled_plan_is_the_one_that_its_description_gives(seed: int) -> None:
    view = sheet(seed=seed)
    assert [(each.module, each.speed_rpm) for each in plan(view)] == independent_plan(
        written(view), seed
    )


_REPEATS = st.lists(st.integers(1, 6), min_size=1, max_size=4)


@given(_REPEATS, st.integers(0, 2**63 - 1), st.sampled_from(TrialOrder))
def test_a_plan_holds_each_trial_once_and_counts_from_one(
    repeats: list[int], seed: int, order: TrialOrder
) -> None:
    speeds_rpm = tuple(4000 + 100 * count for count in range(len(repeats)))
    view = sheet(speeds_rpm=speeds_rpm, repeats=tuple(repeats), seed=seed, order=order)
    trials = plan(view)
    assert [each.trial for each in trials] == list(range(1, 3 * sum(repeats) + 1))
    assert Counter((each.module, each.speed_rpm) for each in trials) == Counter(written(view))
    assert trials == plan(view)


def test_seeds_give_different_plans() -> None:
    assert len({plan(sheet(seed=seed)) for seed in range(50)}) == 50


def test_each_place_of_a_shuffle_is_as_likely_as_another() -> None:
    """Chi-square of where one trial of six lands, over 3,000 seeds: 5 degrees of freedom, 0.1 %
    critical value 20.515 (handbook tables, such as NIST/SEMATECH section 1.3.6.7.4)."""
    view = sheet(modules=("a", "b", "c", "d", "e", "f"), speeds_rpm=(4400,), repeats=(1,))
    places = Counter(
        next(each.trial for each in plan(replace(view, seed=seed)) if each.module == "c")
        for seed in range(3000)
    )
    assert sum((places[place] - 500) ** 2 / 500 for place in range(1, 7)) < 20.515


@given(st.integers(0, 2**63 - 1), st.integers(0, 10**6), st.integers(1, 10**6))
def test_draws_stay_in_bounds_and_follow_their_description(
    seed: int, count: int, below: int
) -> None:
    assert draw(seed, count, below) == independent_draw(seed, count, below)
    assert 0 <= draw(seed, count, below) < below


def test_the_shipped_sheet() -> None:
    shipped = load_sheet(SHEETS / "speeds.toml")
    trials = plan(shipped)
    assert len(trials) == 60
    assert shipped.modules == ("alder", "birch", "cedar", "elm", "hazel", "larch")
    assert Counter(each.speed_rpm for each in trials) == {4000: 18, 4350: 24, 4700: 18}
    assert set(Counter(each.module for each in trials).values()) == {10}
    assert (shipped.motion, shipped.setting) == ("pivot", Setting.FLOOR)
    assert (shipped.direction, shipped.at_once) == (Course.TURNABOUT, 6)
