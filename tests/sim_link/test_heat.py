"""Warmth: time constants, heat that is kept account of, modules that become too hot to drive."""

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from protocol.codes import Fault, Flags, Reason
from protocol.message import Answer, FaultNotice, Telemetry
from sim_link.heat import AMBIENT_C, BOX_J_K, BOX_S, COOL_C, HOT_C, Part, Warmth
from tests.support.module_bench import Bench, of
from tests.support.virtual_console import MS, S, pivot

PARTS = st.sampled_from(list(Part))


def test_warmth_decays_by_one_over_e_in_its_time_constant() -> None:
    warmth = Warmth(10.0, 0)
    assert warmth.temperature_C(0) == pytest.approx(AMBIENT_C + 10.0)
    assert warmth.temperature_C(int(BOX_S) * S) == pytest.approx(AMBIENT_C + 10.0 / math.e)


def test_heat_adds_to_what_has_cooled_meanwhile() -> None:
    warmth = Warmth(10.0, 0)
    warmth.heat(10.0 * BOX_J_K, int(BOX_S) * S)
    assert warmth.temperature_C(int(BOX_S) * S) == pytest.approx(AMBIENT_C + 10.0 / math.e + 10.0)


def test_a_brake_is_hot_at_once_and_the_box_later() -> None:
    """24 J in 8 J/K are 3 K; after its 80 s the brake has given 63 % of it to the box, which by
    then has lost a little of that to the hall."""
    warmth = Warmth(0.0, 0)
    warmth.heat(24.0, 0, Part.BRAKE)
    assert warmth.part_C(Part.BRAKE, 0) == pytest.approx(AMBIENT_C + 3.0)
    assert warmth.temperature_C(0) == AMBIENT_C
    box_C = warmth.temperature_C(80 * S)
    assert box_C - AMBIENT_C == pytest.approx(24.0 * (1 - math.exp(-1)) / BOX_J_K, rel=0.06)
    assert warmth.part_C(Part.BRAKE, 80 * S) - box_C == pytest.approx(3.0 * math.exp(-1), rel=1e-9)
    assert warmth.hottest_C(80 * S) == warmth.part_C(Part.BRAKE, 80 * S)


heats = st.tuples(PARTS, st.floats(0.0, 50.0), st.integers(0, 400))


@given(st.lists(heats, max_size=20), st.floats(0.0, 10.0))
def test_every_joule_is_somewhere(given_: list[tuple[Part, float, int]], start_K: float) -> None:
    """In a lump or gone to the hall, to 1e-9; nothing is colder than the hall."""
    warmth, t_ns, total_J = Warmth(start_K, 0), 0, start_K * BOX_J_K
    for part, energy_J, wait_s in given_:
        t_ns += wait_s * S
        warmth.heat(energy_J, t_ns, part)
        total_J += energy_J
    assert warmth.temperature_C(t_ns + 5 * S) >= AMBIENT_C
    assert warmth.stored_J + warmth.lost_J == pytest.approx(total_J, rel=1e-9, abs=1e-9)


@given(st.lists(st.integers(1, 300), min_size=1, max_size=10))
def test_looking_more_often_changes_nothing(looks_s: list[int]) -> None:
    often, once = Warmth(5.0, 0), Warmth(5.0, 0)
    for warmth in (often, once):
        warmth.heat(600.0, 0, Part.MOTOR)
    t_ns = 0
    for look_s in looks_s:
        t_ns += look_s * S
        often.temperature_C(t_ns)
    assert often.temperature_C(t_ns) == pytest.approx(once.temperature_C(t_ns), rel=1e-9)


def worked(speed_rpm: int, every_s: float, for_s: float) -> tuple[Bench, list[object]]:
    """A module that is told to pivot to and fro, and what it said."""
    bench, said, number = Bench(), [], 0
    while bench.t_ns < for_s * S:
        number += 1
        bench.roll()
        direction = 1 if number % 2 else -1
        bench.module.drive.set_charge(0.9, bench.t_ns)  # on a charger, as it were
        said += bench.order(pivot(bench.me, number, speed_rpm, direction))
        said += bench.run(int(every_s * 1000) * MS)
    return bench, said


def test_ordinary_work_is_no_trouble() -> None:
    bench, said = worked(4700, 8.0, 400.0)
    assert not of(FaultNotice, said)
    assert bench.module.drive.supply.warmth.hottest_C(bench.t_ns) < 40.0


def test_driven_hard_a_module_becomes_too_hot_refuses_and_cools() -> None:
    bench, said = worked(9000, 6.0, 900.0)
    hot = [m for m in of(FaultNotice, said) if m.fault == Fault.OVERHEATED and m.standing]
    assert hot
    assert hot[0].detail >= HOT_C * 10
    refused = [m for m in of(Answer, said) if m.reason == Reason.FAULT]
    assert refused
    cooled = bench.run(1800 * S)
    over = [m for m in of(FaultNotice, said + cooled) if m.fault == Fault.OVERHEATED]
    assert not over[-1].standing
    last = of(Telemetry, cooled)[-1]
    assert not last.flags & Flags.FAULTY
    assert bench.module.drive.supply.warmth.hottest_C(bench.t_ns) < COOL_C
