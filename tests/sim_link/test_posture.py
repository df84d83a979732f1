"""Postures: turning of faces, own deviations, tipping, and boxes that lie on no face."""

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from sim_link import mechanics
from sim_link.kinds import Kind
from sim_link.mechanics import MotionResult
from sim_link.options import FaultKind
from sim_link.posture import RIGHTED_AFTER_NS, VirtualBody, own_kind, turned_face
from sim_link.randomness import Draws
from tests.support.virtual_console import MS, PAVER, S, spec_of

FACES = st.integers(1, 4)


def body_of(face_up: int = 1, seed: int = 1) -> VirtualBody:
    spec = spec_of(PAVER, face_up)
    return VirtualBody(spec, Draws(seed, spec.identity))


def result_of(faces: int, turned_rad: float, settled: bool = True) -> MotionResult:
    return MotionResult(
        faces=faces,
        turned_rad=turned_rad,
        peak_tilt_rad=turned_rad + 0.1,
        peak_rate_rad_s=5.0,
        brake_s=0.01,
        settle_s=0.4,
        settled=settled,
    )


@pytest.mark.parametrize(("face", "after"), [(1, 2), (2, 3), (3, 4), (4, 1)])
def test_forward_turns_the_next_face_up(face: int, after: int) -> None:
    assert turned_face(face, 1) == after
    assert turned_face(after, -1) == face


@given(FACES, st.integers(-20, 20))
def test_turning_back_undoes_and_four_faces_are_a_whole_turn(face: int, faces: int) -> None:
    assert turned_face(turned_face(face, faces), -faces) == face
    assert turned_face(face, faces + 4) == turned_face(face, faces)


@pytest.mark.parametrize("face", [5, 6])
def test_an_upright_axis_stays_upright(face: int) -> None:
    assert turned_face(face, 1) == face


def test_modules_differ_from_their_kind_by_about_one_percent() -> None:
    ratios = []
    for identity in range(400):
        own = own_kind(spec_of(), Draws(1, identity))
        assert own.side_m == PAVER.side_m
        ratios.append(own.brake_torque_N_m / PAVER.brake_torque_N_m - 1)
    spread = math.sqrt(sum(r * r for r in ratios) / len(ratios))
    # 400 draws: the standard error of a standard deviation is its 1/sqrt(800), 3.5 %.
    assert spread == pytest.approx(0.01, rel=0.15)


def test_a_module_stays_the_same_and_a_weak_brake_is_weak() -> None:
    draws = Draws(1, 5)
    assert own_kind(spec_of(), draws) == own_kind(spec_of(), draws)
    weak = own_kind(spec_of(faults=frozenset({FaultKind.WEAK_BRAKE})), draws)
    assert weak.brake_torque_N_m < 0.6 * PAVER.brake_torque_N_m


def test_a_brake_moves_the_body_by_way_of_its_tilt(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(mechanics, "pivot", lambda *_, **__: result_of(1, math.pi / 2))
    body = body_of(face_up=4)
    body.brake(500.0, 1, 1, S)
    on_the_way = body.posture(S + 200 * MS)
    assert (on_the_way.face_up, on_the_way.settled) == (0, False)
    assert on_the_way.tilt_rad == pytest.approx(math.pi / 2 + 0.1, abs=0.02)
    assert body.posture(S + 400 * MS) == (1, 0.0, True)
    assert body.turned_rad == pytest.approx(math.pi / 2)


def test_back_is_the_other_way_round(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(mechanics, "pivot", lambda *_, **__: result_of(2, math.pi))
    body = body_of(face_up=1)
    body.brake(-500.0, -1, 1, 0)
    assert body.posture(100 * MS).tilt_rad < 0
    assert body.posture(S).face_up == 3
    assert body.turned_rad == pytest.approx(-math.pi)


def test_the_brake_gets_posture_sense_and_a_speed_without_sign(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    calls: list[tuple[Kind, float, int, int]] = []

    def spy(kind: Kind, speed: float, face_up: int, sense: int, **_: object) -> MotionResult:
        calls.append((kind, speed, face_up, sense))
        return result_of(1, math.pi / 2)

    monkeypatch.setattr(mechanics, "pivot", spy)
    body = body_of(face_up=3)
    for count in range(1, 200):
        body.brake(-500.0, -1, count, count * S)
    assert calls[0][2:] == (3, -1)
    assert calls[1][2:] == (2, -1)
    speeds = [speed / 500.0 - 1.0 for _, speed, _, _ in calls]
    assert math.sqrt(sum(s * s for s in speeds) / len(speeds)) == pytest.approx(0.015, rel=0.2)


def test_luck_is_keyed_by_the_count_of_motions_and_not_by_time() -> None:
    early, late = body_of(), body_of()
    assert early.brake(480.0, 1, 5, 0) == late.brake(480.0, 1, 5, 99 * S)
    assert body_of().brake(480.0, 1, 6, 0) != body_of().brake(480.0, 1, 5, 0)


def test_a_push_below_the_tipping_torque_moves_nothing_and_above_it_tips() -> None:
    for sense in (1, -1):
        body = body_of()
        limit = mechanics.tipping_torque_N_m(body.kind, 1, sense)
        body.push(0.999 * limit, sense, 0, S)
        assert body.posture(500 * MS) == (1, 0.0, True)
        body.push(1.001 * limit, sense, S, 2 * S)
        assert not body.posture(S + 500 * MS).settled
        assert body.posture(2 * S).face_up == turned_face(1, sense)


def test_a_box_on_no_face_is_tilted_until_somebody_rights_it(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    leaning = result_of(0, 0.7, settled=False)
    monkeypatch.setattr(mechanics, "pivot", lambda *_, **__: leaning)
    body = body_of()
    body.brake(400.0, 1, 1, 0)
    lying = body.posture(10 * S)
    assert (lying.face_up, lying.settled) == (0, False)
    assert lying.tilt_rad == pytest.approx(0.7)
    assert body.posture(S + RIGHTED_AFTER_NS) == (1, 0.0, True)
