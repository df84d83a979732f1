"""The verdict: each outcome at its border, and what no facts may ever give."""

import pytest
from hypothesis import given
from hypothesis import strategies as st

from console.verdict import COUNTED, LIFT_DDEG, faces_turned, verdict
from console.view import Outcome
from protocol.codes import Reason, Setting
from protocol.message import Facts
from tests.support.wire_script import facts

STAYED = {"face_after": 1, "turned_ddeg": 0}
UNBRAKED = {"brake_us": 0, "wheel_at_brake_rpm": 0}


@pytest.mark.parametrize(
    ("expected", "changes"),
    [
        (Outcome.LANDED, {}),
        (Outcome.LANDED, {"turned_ddeg": 874}),
        (Outcome.LANDED, {"turned_ddeg": 450}),
        (Outcome.LANDED, {"turned_ddeg": 1349}),
        (Outcome.SHORT, STAYED | {"peak_tilt_ddeg": 430}),
        (Outcome.SHORT, STAYED | {"peak_tilt_ddeg": 20}),
        (Outcome.SHORT, {"turned_ddeg": 449, "face_after": 1}),
        (Outcome.STUCK, STAYED | {"peak_tilt_ddeg": 19}),
        (Outcome.STUCK, STAYED | {"peak_tilt_ddeg": 0}),
        (Outcome.STUCK, STAYED | {"peak_tilt_ddeg": -19}),
        (Outcome.OVER, {"turned_ddeg": 1800, "face_after": 3}),
        (Outcome.OVER, {"turned_ddeg": 1350, "face_after": 3}),
        (Outcome.OVER, {"turned_ddeg": 3600, "face_after": 1}),
        (Outcome.ADRIFT, {"settled": 0}),
        (Outcome.ADRIFT, {"face_after": 0}),
        (Outcome.ADRIFT, {"face_after": 0, "turned_ddeg": 1800}),
        (Outcome.ADRIFT, STAYED | {"settled": 0, "peak_tilt_ddeg": 0}),
        (Outcome.CUT, STAYED | UNBRAKED | {"reason": Reason.STOPPED, "peak_tilt_ddeg": 0}),
        (Outcome.CUT, STAYED | UNBRAKED | {"reason": Reason.RESTED, "peak_tilt_ddeg": 0}),
        (Outcome.CUT, UNBRAKED | {"reason": Reason.STOPPED, "face_after": 0, "settled": 0}),
    ],
)
def test_each_outcome_at_its_border(expected: Outcome, changes: dict[str, int]) -> None:
    """The table: 900 tenths of a degree are one face; under two degrees nothing lifted."""
    assert verdict(facts(**changes)) is expected


@pytest.mark.parametrize("reason", [Reason.STOPPED, Reason.RESTED])
def test_a_stop_after_the_brake_changes_no_verdict(reason: Reason) -> None:
    """A brake already engaged stays engaged, so such a motion is judged by where it ended."""
    assert verdict(facts(reason=reason)) is Outcome.LANDED
    assert verdict(facts(reason=reason, **STAYED, peak_tilt_ddeg=300)) is Outcome.SHORT


def test_unbraked_without_a_reason_is_no_cut() -> None:
    """A motion that ran its course is judged even if the brake's time was not measured."""
    assert verdict(facts(**UNBRAKED)) is Outcome.LANDED


def test_a_fall_onto_the_end_of_the_axis_is_adrift() -> None:
    """No motion about the wheel axis ends there, whatever the gyro has counted."""
    assert verdict(facts(face_after=5)) is Outcome.ADRIFT
    assert verdict(facts(face_before=6, face_after=2)) is Outcome.ADRIFT


def test_flat_on_the_end_of_the_axis_may_land() -> None:
    """With the axis upright all along, a quarter turn about it is one face."""
    flat = {"face_before": 5, "face_after": 5, "peak_tilt_ddeg": 0}
    assert verdict(facts(**flat)) is Outcome.LANDED
    assert verdict(facts(**flat, turned_ddeg=300)) is Outcome.SHORT
    assert verdict(facts(**flat, turned_ddeg=15)) is Outcome.STUCK


def test_a_drifting_gyro_makes_no_lift_of_a_stuck_body() -> None:
    """The angle turned is integrated and drifts; the tilt is measured against gravity."""
    stayed = {"face_after": 1, "turned_ddeg": 45, "peak_tilt_ddeg": 3}
    assert verdict(facts(**stayed)) is Outcome.STUCK


def test_backwards_is_not_landed() -> None:
    """A whole face the wrong way: it lifted, and is not where it was ordered to."""
    assert verdict(facts(turned_ddeg=-900, face_after=4)) is Outcome.SHORT


@pytest.mark.parametrize(
    ("turned_ddeg", "faces"),
    [(0, 0), (449, 0), (450, 1), (900, 1), (1349, 1), (1350, 2), (-450, 0), (-451, -1), (3600, 4)],
)
def test_faces_are_quarter_turns_rounded(turned_ddeg: int, faces: int) -> None:
    """90 degrees a face, so the border lies at 45."""
    assert faces_turned(facts(turned_ddeg=turned_ddeg)) == faces


ANY_FACTS = st.builds(
    Facts,
    epoch=st.just(1),
    boot=st.just(1),
    number=st.just(1),
    reason=st.integers(0, 255),
    face_before=st.integers(0, 255),
    face_after=st.integers(0, 255),
    settled=st.integers(0, 255),
    turned_ddeg=st.integers(-32768, 32767),
    peak_tilt_ddeg=st.integers(-32768, 32767),
    peak_rate_dps=st.integers(0, 65535),
    wheel_at_brake_rpm=st.integers(0, 65535),
    brake_us=st.integers(0, 2**32 - 1),
    spin_up_ms=st.integers(0, 65535),
    settle_ms=st.integers(0, 65535),
    sag_mV=st.integers(0, 65535),
    started_ms=st.integers(0, 2**32 - 1),
)
MOTIONS = st.sampled_from(["pivot", "hop", "twist"])


@given(ANY_FACTS, MOTIONS)
def test_any_facts_have_a_verdict(measured: Facts, motion: str) -> None:
    """Whatever a module sends gets one, and none that says that no report came."""
    outcome = verdict(measured, motion)
    assert outcome not in {Outcome.UNSEEN, Outcome.REFUSED}
    if outcome is Outcome.CUT:
        assert measured.reason != 0
    else:
        assert outcome in COUNTED


@given(ANY_FACTS, MOTIONS, st.integers(0, 65535), st.integers(0, 65535))
def test_only_what_the_verdict_looks_at_decides(
    measured: Facts, motion: str, sag: int, settle: int
) -> None:
    """Battery, times and rates are facts of wear, not of where the module lies."""
    wear = {"sag_mV": sag, "settle_ms": settle, "peak_rate_dps": 7, "spin_up_ms": 9}
    other = measured._replace(started_ms=1, **wear)
    assert verdict(other, motion) is verdict(measured, motion)


@pytest.mark.parametrize(
    ("expected", "changes"),
    [
        (Outcome.LANDED, {}),
        (Outcome.LANDED, {"turned_ddeg": 3600, "face_after": 1}),
        (Outcome.LANDED, {"turned_ddeg": -900, "face_after": 4}),
        (Outcome.LANDED, STAYED | {"peak_tilt_ddeg": 20}),
        (Outcome.LANDED, {"face_after": 5}),
        (Outcome.STUCK, STAYED | {"peak_tilt_ddeg": 19}),
        (Outcome.ADRIFT, {"settled": 0}),
        (Outcome.ADRIFT, {"face_after": 0}),
        (Outcome.CUT, STAYED | UNBRAKED | {"reason": Reason.PERMIT_LAPSED, "peak_tilt_ddeg": 0}),
    ],
)
def test_a_hop_lands_on_any_face_once_it_left_its_place(
    expected: Outcome, changes: dict[str, int]
) -> None:
    """It has neither short nor over: where on the floor it came down, facts do not say."""
    assert verdict(facts(**changes), "hop") is expected


UPRIGHT = {"face_before": 5, "face_after": 5, "peak_tilt_ddeg": 0}


@pytest.mark.parametrize(
    ("expected", "changes"),
    [
        (Outcome.LANDED, {"turned_ddeg": 450}),
        (Outcome.LANDED, {"turned_ddeg": -450}),
        (Outcome.LANDED, {"turned_ddeg": 3000}),
        (Outcome.SHORT, {"turned_ddeg": 449}),
        (Outcome.SHORT, {"turned_ddeg": -20}),
        (Outcome.STUCK, {"turned_ddeg": 19}),
        (Outcome.ADRIFT, {"settled": 0}),
        (Outcome.ADRIFT, {"face_after": 0}),
        (Outcome.ADRIFT, {"face_after": 2}),
        (Outcome.CUT, UNBRAKED | {"reason": Reason.STOPPED, "turned_ddeg": 0}),
    ],
)
def test_a_twist_lands_from_half_a_quarter_turn_on(
    expected: Outcome, changes: dict[str, int]
) -> None:
    assert verdict(facts(**UPRIGHT | changes), "twist") is expected


def test_facts_of_another_motion_are_judged_as_a_pivot_s() -> None:
    assert verdict(facts(), "roll") is verdict(facts())


def test_the_thresholds_are_what_they_are_said_to_be() -> None:
    """Two degrees, in tenths; and what counts leaves out what says nothing of the module."""
    assert LIFT_DDEG == 20
    assert {*Outcome} - COUNTED == {Outcome.REFUSED, Outcome.CUT, Outcome.UNSEEN}


@pytest.mark.parametrize(
    ("turned_ddeg", "outcome"),
    [(0, Outcome.SHORT), (900, Outcome.SHORT), (1800, Outcome.LANDED), (2700, Outcome.OVER)],
)
def test_over_a_crest_two_faces_are_asked_for(turned_ddeg: int, outcome: Outcome) -> None:
    turned = facts(turned_ddeg=turned_ddeg, peak_tilt_ddeg=max(turned_ddeg, 400))
    assert verdict(turned, "pivot", Setting.CREST) is outcome
