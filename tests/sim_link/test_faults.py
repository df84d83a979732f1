"""Faults that stand: since when, with what figure, over restarts."""

from hypothesis import given
from hypothesis import strategies as st

from protocol.codes import CONSOLE_ADDRESS, Fault
from protocol.message import FaultNotice, Packet, decode, encode
from sim_link.faults import Faults
from tests.support.boxes import BOOT, boxed
from tests.support.virtual_console import MS, S


def test_a_sound_module_has_none() -> None:
    faults = Faults()
    assert not faults
    assert list(faults) == []
    assert Fault.OVERHEATED not in faults


@given(st.lists(st.tuples(st.sampled_from(Fault), st.integers(0, 2**32 - 1))))
def test_each_stands_once_in_the_order_of_the_wire(found: list[tuple[Fault, int]]) -> None:
    faults = Faults()
    for fault, time_ms in found:
        faults.stand(fault, time_ms)
    assert list(faults) == sorted({fault for fault, _ in found})
    assert bool(faults) == bool(found)
    for fault, time_ms in dict(found).items():
        assert faults.told(fault, 9, 1) == FaultNotice(9, 1, fault, 1, time_ms, 0)


def test_its_time_is_that_at_which_it_was_noticed_however_late_one_asks() -> None:
    box = boxed()
    said = box.notice(Fault.OVERHEATED, 1_234 * MS, detail=612)
    assert (said.fault, said.standing, said.time_ms, said.detail) == (6, 1, 1_234, 612)
    assert (said.boot, said.identity_bits) == (BOOT, 0x1234)
    box.flags(9 * S)
    assert box.fault_notices() == [said]
    assert decode(encode(Packet(CONSOLE_ADDRESS, 0x10, said))).message == said


def test_a_restart_finds_it_again_at_once() -> None:
    faults = Faults()
    faults.stand(Fault.SENSOR_LOST, 777, 5)
    faults.restart()
    assert faults.told(Fault.SENSOR_LOST, 10, 1) == FaultNotice(10, 1, 3, 1, 0, 5)


def test_what_is_over_no_longer_stands_and_may_come_again() -> None:
    faults = Faults()
    faults.stand(Fault.SENSOR_LOST, 777)
    assert not faults.fall(Fault.OVERHEATED)
    assert faults.fall(Fault.SENSOR_LOST)
    assert not faults.fall(Fault.SENSOR_LOST)
    assert not faults
    faults.stand(Fault.SENSOR_LOST, 888)
    assert faults.told(Fault.SENSOR_LOST, 9, 1).time_ms == 888
