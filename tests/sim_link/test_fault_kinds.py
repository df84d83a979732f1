"""Faults as they are written: forms, times exact to the nanosecond, and who may have which."""

import pytest
from hypothesis import given
from hypothesis import strategies as st

from sim_link.errors import SimInputError
from sim_link.fault_kinds import (
    BRIDGE,
    FAULT_RULES,
    LATEST_S,
    Fault,
    FaultKind,
    check_fault,
    fault_from_text,
)

S = 1_000_000_000
TIMES = st.integers(0, LATEST_S * S - 1)


@pytest.mark.parametrize(
    ("text", "fault"),
    [
        ("silent:birch", Fault(FaultKind.SILENT, "birch")),
        (" silent:mod-009 ", Fault(FaultKind.SILENT, "mod-009")),
        ("stuck_wheel:elm@0s", Fault(FaultKind.STUCK_WHEEL, "elm", 0)),
        ("restart:elm@12.5s", Fault(FaultKind.RESTART, "elm", 12_500_000_000)),
        ("silent:bridge@3s-4.25s", Fault(FaultKind.SILENT, BRIDGE, 3 * S, 4_250_000_000)),
        ("restart:elm@0.000000001s", Fault(FaultKind.RESTART, "elm", 1)),
        ("restart:elm@1000000s", Fault(FaultKind.RESTART, "elm", LATEST_S * S)),
    ],
)
def test_every_form_is_read_and_written_again(text: str, fault: Fault) -> None:
    assert fault_from_text(text) == fault
    assert fault_from_text(str(fault)) == fault


@given(st.sampled_from(FaultKind), st.sampled_from(["birch", BRIDGE]), TIMES, TIMES)
def test_any_fault_survives_its_text(kind: FaultKind, module: str, one: int, other: int) -> None:
    first, last = min(one, other), max(one, other)
    for fault in (
        Fault(kind, module),
        Fault(kind, module, one),
        Fault(kind, module, first, last + 1),
    ):
        assert fault_from_text(str(fault)) == fault


@pytest.mark.parametrize(
    "text",
    [
        "",
        "silent",
        "silent:",
        ":birch",
        "lazy:birch",
        "Silent:birch",
        "silent:birch@",
        "silent:birch@12",
        "silent:birch@12ms",
        "silent:birch@-1s",
        "silent:birch@1e3s",
        "silent:birch@1.s",
        "silent:birch@1s-",
        "silent:birch@1s-1s",
        "silent:birch@2s-1s",
        "silent:birch@0s-0s",
        "silent:birch@1s-2s-3s",
        "silent:birch@1s@2s",
        "silent:birch@1.0000000001s",
        "silent:birch@1000000.1s",
        "silent:birch@99999999s",
    ],
)
def test_other_forms_are_none(text: str) -> None:
    with pytest.raises(ValueError):
        fault_from_text(text)


def test_each_kind_is_told_whom_it_strikes_and_what_it_does() -> None:
    assert list(FAULT_RULES) == list(FaultKind)
    for rule in FAULT_RULES.values():
        assert rule.says
        assert rule.module or rule.bridge
        assert rule.start or rule.timed
        assert rule.timed or not rule.lasts


@pytest.mark.parametrize(
    ("text", "said"),
    [
        ("weak_brake:bridge@1s", "weak_brake: strikes modules, not the bridge"),
        ("unplugged:birch@1s", "unplugged: strikes the bridge only, as in unplugged:bridge@12.5s"),
        ("restart:birch", "restart: needs a time, as in restart:birch@12.5s"),
        ("lifted:elm", "lifted: needs a time, as in lifted:elm@12.5s"),
        ("silent:bridge", "silent: needs a time, as in silent:bridge@12.5s"),
        ("swapped_cell:elm", "swapped_cell: needs a time, as in swapped_cell:elm@12.5s"),
        ("same_address:elm@1s", "same_address: holds from the start on and takes no time"),
        ("restart:elm@1s-2s", "restart: happens at one time and has no end"),
        ("swapped_cell:elm@1s-2s", "swapped_cell: happens at one time and has no end"),
    ],
)
def test_what_a_kind_cannot_is_refused_with_its_name(text: str, said: str) -> None:
    with pytest.raises(SimInputError) as caught:
        check_fault(fault_from_text(text), "hall.toml: fault 2")
    assert str(caught.value) == f"hall.toml: fault 2: {said}"


@pytest.mark.parametrize(
    "text",
    [
        "silent:elm",
        "silent:elm@1s-2s",
        "silent:bridge@1s-2s",
        "unplugged:bridge@1s",
        "charging:elm",
    ],
)
def test_what_a_kind_can_is_not(text: str) -> None:
    check_fault(fault_from_text(text), "here")
