"""The overview and its two forms: the same counts as text and as a document."""

import json

import pytest
from hypothesis import given
from hypothesis import strategies as st

from console.errors import InputError
from console.review.document import review_document
from console.review.overview import overview
from console.review.rates import FIELDS, ReviewTrial
from console.review.text import review_text
from console.view import Outcome


def trials(count: int, outcome: str, **changes: object) -> list[ReviewTrial]:
    values: dict[str, object] = {
        "module": "birch",
        "kind": "paver",
        "motion": "pivot",
        "setting": "floor",
        "speed_rpm": 4350,
        "simulated": False,
        "session": 3,
        "time_utc": "",
        "brake_ms": None,
        **changes,
    }
    return [ReviewTrial(outcome=Outcome(outcome), **values)] * count  # type: ignore[arg-type]


# Ten of ten and none of twenty: Wilson's bounds are n/(n + z^2) and z^2/(n + z^2), z = 1.959964.
MIXED = [
    *trials(10, "landed"),
    *trials(20, "short", module="elm", speed_rpm=900, session=4),
    *trials(2, "refused", module="elm", speed_rpm=5000, session=4),
    *trials(7, "landed", simulated=True),
]


def test_totals_and_what_was_left_out() -> None:
    review = overview(MIXED)
    assert review.excluded_simulated == 7
    assert [(group.key, group.trials, group.refused) for group in review.modules] == [
        ((("module", "birch"),), 10, 0),
        ((("module", "elm"),), 20, 2),
    ]
    assert [(group.key, group.trials) for group in review.sessions] == [
        ((("session", 3),), 10),
        ((("session", 4),), 20),
    ]


def test_simulated_motions_when_asked_for_stand_in_groups_of_their_own() -> None:
    review = overview(MIXED, ("module",), with_simulated=True)
    assert review.excluded_simulated == 0
    assert [(group.key[0][1], group.simulated, group.trials) for group in review.groups] == [
        ("birch", False, 10),
        ("elm", False, 20),
        ("birch", True, 7),
    ]


def test_by_kind_needs_known_kinds() -> None:
    unknown = trials(1, "landed", kind="")
    with pytest.raises(InputError, match="by 'kind': no trial's kind is known"):
        overview(unknown, ("kind",))
    assert [group.key for group in overview(MIXED, ("kind",)).groups] == [(("kind", "paver"),)]
    both = overview(unknown + trials(1, "landed"), ("kind",)).groups
    assert [group.key for group in both] == [(("kind", ""),), (("kind", "paver"),)]
    assert overview([], ("kind",)).groups == ()


def test_document_of_groups() -> None:
    document = review_document(overview(MIXED))
    assert list(document) == ["groups", "modules", "sessions", "excluded_simulated"]
    groups = document["groups"]
    assert isinstance(groups, list)
    assert groups[0] == {
        "module": "birch",
        "motion": "pivot",
        "setting": "floor",
        "speed_rpm": 4350,
        "simulated": False,
        "trials": 10,
        "landed": 10,
        "rate": 1.0,
        "low": pytest.approx(10 / (10 + 1.959964**2), abs=1e-6),
        "high": 1.0,
        "short": 0,
        "over": 0,
        "stuck": 0,
        "adrift": 0,
        "refused": 0,
        "cut": 0,
        "unseen": 0,
    }
    assert (groups[2]["trials"], groups[2]["rate"], groups[2]["low"]) == (0, None, None)
    assert document["excluded_simulated"] == 7


def test_document_of_nothing() -> None:
    assert review_document(overview([])) == {
        "groups": [],
        "modules": [],
        "sessions": [],
        "excluded_simulated": 0,
    }


_TRIALS = st.lists(
    st.builds(
        lambda *values: trials(1, values[0], module=values[1], simulated=values[2])[0],
        st.sampled_from([each.value for each in Outcome]),
        st.text(st.sampled_from("ab é,\x1b\n\u3000"), max_size=12),
        st.booleans(),
    ),
    max_size=12,
)


@given(_TRIALS, st.sampled_from(FIELDS), st.booleans())
def test_document_is_strict_json_and_text_is_free_of_nan(
    found: list[ReviewTrial], by: str, with_simulated: bool
) -> None:
    review = overview(found, (by,), with_simulated=with_simulated)
    document = review_document(review)
    assert json.loads(json.dumps(document, allow_nan=False)) == document
    text = review_text(review)
    assert not {"nan", "None", "inf"} & set(text.split()) - {each.module for each in found}
    assert all(character.isprintable() for character in text.replace("\n", ""))


def table(text: str) -> list[list[str]]:
    """The cells of the first table: columns are two blanks or more apart."""
    block = text.partition("\n\n")[0].splitlines()
    return [[cell.strip() for cell in line.split("  ") if cell.strip()] for line in block]


def test_text_says_rate_interval_and_number_of_trials() -> None:
    head, birch, elm, refused = table(review_text(overview(MIXED)))
    assert head[:8] == [
        "module",
        "motion",
        "setting",
        "speed rpm",
        "trials",
        "landed",
        "rate %",
        "95 % interval",
    ]
    # 100 * 10 / 13.8415 = 72.2; 100 * 3.8415 / 23.8415 = 16.1.
    assert birch[:8] == ["birch", "pivot", "floor", "4350", "10", "10", "100.0", "72.2 to 100.0"]
    assert elm[:8] == ["elm", "pivot", "floor", "900", "20", "0", "0.0", "0.0 to 16.1"]
    assert refused[4:] == ["0", "0", "-", "-", "0", "0", "0", "0", "2", "0", "0"]


def test_text_lines_are_aligned() -> None:
    lines = review_text(overview(MIXED)).partition("\n\n")[0].splitlines()
    assert len({len(line) for line in lines}) == 1
    ends = {
        line.index(speed) + len(speed)
        for line, speed in zip(lines, ["speed rpm", "4350", "900", "5000"], strict=True)
    }
    assert len(ends) == 1


def test_text_has_totals_by_module_unless_they_are_what_was_asked_for() -> None:
    assert "Totals by module" in review_text(overview(MIXED))
    assert "Totals by module" not in review_text(overview(MIXED, ("module",)))


@pytest.mark.parametrize(
    ("found", "asked", "line"),
    [
        (MIXED, False, "7 simulated motions were left out"),
        (MIXED[:10] + MIXED[-1:], False, "1 simulated motion was left out"),
        (MIXED, True, "SIMULATED motions are counted in lines of their own"),
        (MIXED[-7:], False, "SIMULATED: all of these motions."),
    ],
)
def test_text_says_what_is_simulated(found: list[ReviewTrial], asked: bool, line: str) -> None:
    assert line in review_text(overview(found, with_simulated=asked))


def test_text_of_real_motions_does_not_speak_of_simulation() -> None:
    assert "simulated" not in review_text(overview(MIXED[:10])).lower()


def test_text_of_nothing() -> None:
    assert review_text(overview([])) == "No motions to review.\n"


def test_unprintable_names_do_not_reach_the_terminal() -> None:
    text = review_text(overview(trials(1, "landed", module="el\x1b[2Jm\n")))
    assert "el?[2Jm?" in text
    assert "\x1b" not in text
