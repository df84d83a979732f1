"""The schedule of faults: order, merging, and who is told what."""

from collections.abc import Callable

import pytest
from hypothesis import given
from hypothesis import strategies as st

from sim_link.fault_kinds import BRIDGE, FAULT_RULES, Fault, FaultKind, fault_from_text
from sim_link.schedule import Step, enter, steps

S = 1_000_000_000
LASTING = [kind for kind, rule in FAULT_RULES.items() if rule.lasts and rule.module]


def faults(text: str) -> list[Fault]:
    return [fault_from_text(part) for part in text.split(",")]


def told(text: str) -> list[str]:
    """The steps of some faults, one word each: +silent:birch@5."""
    return [
        f"{'+' if step.begins else '-'}{step.kind}:{step.module}@{step.t_ns / S:g}"
        for step in steps(faults(text))
    ]


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("silent:birch", []),
        ("silent:birch@5s", ["+silent:birch@5"]),
        ("silent:birch@5s-7s", ["+silent:birch@5", "-silent:birch@7"]),
        ("restart:elm@2s,restart:elm@1s", ["+restart:elm@1", "+restart:elm@2"]),
        ("restart:elm@1s,restart:elm@1s", ["+restart:elm@1", "+restart:elm@1"]),
        # Overlap: one fault. Touching: one fault.
        ("silent:elm@1s-5s,silent:elm@3s-8s", ["+silent:elm@1", "-silent:elm@8"]),
        ("silent:elm@3s-5s,silent:elm@1s-3s", ["+silent:elm@1", "-silent:elm@5"]),
        ("silent:elm@1s-9s,silent:elm@3s-4s", ["+silent:elm@1", "-silent:elm@9"]),
        ("silent:elm@1s,silent:elm@3s-4s", ["+silent:elm@1"]),
        ("silent:elm,silent:elm@3s-4s", []),
        # Others' faults, and other faults, do not join.
        ("silent:elm@1s-5s,silent:oak@3s-8s", [
            "+silent:elm@1", "+silent:oak@3", "-silent:elm@5", "-silent:oak@8",
        ]),
        ("silent:elm@1s-5s,charging:elm@3s-8s", [
            "+silent:elm@1", "+charging:elm@3", "-silent:elm@5", "-charging:elm@8",
        ]),
        # Of one time, the end comes first.
        ("silent:elm@5s-6s,charging:elm@1s-5s", [
            "+charging:elm@1", "-charging:elm@5", "+silent:elm@5", "-silent:elm@6",
        ]),
    ],
)  # fmt: skip
def test_what_happens_in_which_order(text: str, expected: list[str]) -> None:
    assert told(text) == expected


def test_a_fault_from_the_start_that_ends_has_its_end_only() -> None:
    assert steps([Fault(FaultKind.SILENT, "elm", None, 4 * S)]) == (
        Step(4 * S, False, FaultKind.SILENT, "elm"),
    )
    joined = [Fault(FaultKind.SILENT, "elm", None, 4 * S), *faults("silent:elm@2s-9s")]
    assert steps(joined) == (Step(9 * S, False, FaultKind.SILENT, "elm"),)


SPANS = st.lists(st.tuples(st.integers(0, 30), st.integers(1, 12)), max_size=6)


@given(SPANS, st.sampled_from(LASTING))
def test_a_fault_holds_exactly_while_some_span_of_it_does(
    spans: list[tuple[int, int]], kind: FaultKind
) -> None:
    asked = [Fault(kind, "elm", at * S, (at + long) * S) for at, long in spans]
    holds, changes = False, {step.t_ns: step.begins for step in steps(asked)}
    for second in range(45):
        holds = changes.get(second * S, holds)
        assert holds == any(at <= second < at + long for at, long in spans)


@given(st.permutations(faults("silent:elm@1s-5s,restart:elm@2s,silent:oak@1s,restart:bridge@2s")))
def test_the_order_in_which_they_are_asked_for_makes_no_difference(asked: list[Fault]) -> None:
    assert steps(asked) == steps(reversed(asked))
    assert list(steps(asked)) == sorted(steps(asked))


class NotedHall:
    """A hall that notes what it is told, and does what is due as time passes."""

    def __init__(self) -> None:
        self.due: list[tuple[int, Callable[[], None]]] = []
        self.heard: list[object] = []

    def at(self, t_ns: int, action: Callable[[], None]) -> None:
        self.due.append((t_ns, action))

    def strike(self, module: str, kind: FaultKind, begins: bool) -> None:
        self.heard.append((module, str(kind), begins))

    def reset_bridge(self) -> None:
        self.heard.append("reset")

    def silence_bridge(self, silent: bool) -> None:
        self.heard.append(("silent", silent))

    def unplug(self, unplugged: bool) -> None:
        self.heard.append(("unplugged", unplugged))


def test_each_is_told_to_whom_it_concerns() -> None:
    hall = NotedHall()
    text = "restart:bridge@1s,silent:bridge@2s-3s,unplugged:bridge@4s-5s,silent:elm@6s-7s"
    enter(faults(text), hall)
    assert hall.heard == []
    assert [t_ns // S for t_ns, _ in hall.due] == [1, 2, 3, 4, 5, 6, 7]
    for _, action in hall.due:
        action()
    assert hall.heard == [
        "reset",
        ("silent", True),
        ("silent", False),
        ("unplugged", True),
        ("unplugged", False),
        ("elm", "silent", True),
        ("elm", "silent", False),
    ]


def test_every_kind_that_can_strike_the_bridge_reaches_it() -> None:
    for kind, rule in FAULT_RULES.items():
        if rule.bridge:
            hall = NotedHall()
            enter([Fault(kind, BRIDGE, S)], hall)
            hall.due[0][1]()
            assert len(hall.heard) == 1
