"""Lock-outs and faults: told once, by whichever source comes first, and ended by either."""

from typing import Any

import pytest

from protocol.codes import Fault, Flags, identity_bits
from protocol.message import FaultNotice, LockState
from tests.support.wire_script import (
    BOOT,
    IDENTITY,
    Fold,
    Script,
    nameplate,
    presence,
    stopped,
    telemetry,
)

BITS = identity_bits(IDENTITY)
LOCKED = int(Flags.LOCKED_OUT)
FAULTY = int(Flags.FAULTY)


def met() -> Script:
    """Birch is known."""
    return Script().open().heard(presence(), nameplate())


def lock(person: str = "Ada", locked: int = 1, **changes: Any) -> LockState:
    """Who has locked birch out."""
    return LockState(BOOT, BITS, locked, person.encode())._replace(**changes)


def fault(which: int, standing: int, time_ms: int, detail: int = 0, **changes: Any) -> FaultNotice:
    """A fault's beginning or end."""
    return FaultNotice(BOOT, BITS, which, standing, time_ms, detail)._replace(**changes)


def details(fold: Fold) -> list[str]:
    """Alarms as a person reads them."""
    return [row.detail for row in fold.table("alarms")]


# -- lock-out ----------------------------------------------------------------------------


def test_nobody_has_locked_a_module_of_whom_nothing_is_said() -> None:
    fold = Fold(met())
    assert fold.view.modules[0].locked_by is None
    assert fold.table("modules")[0].locked_by is None


def test_a_lock_is_shown_and_told_with_its_person() -> None:
    script = met().heard(lock())
    fold = Fold(script)
    assert fold.view.modules[0].locked_by == "Ada"
    assert fold.table("modules")[0].locked_by == "Ada"
    (alarm,) = fold.table("alarms")
    assert (alarm.alarm, alarm.module) == ("locked out", 1)
    assert alarm.detail == "birch is locked out by Ada"
    assert fold.view.notices == ((script.t_ns, "birch is locked out by Ada"),)


def test_saying_it_again_tells_nothing_again() -> None:
    fold = Fold(met().heard(lock()).heard(lock(), telemetry(1, flags=LOCKED)))
    assert fold.alarms == ["locked out"]
    assert not fold.reducer.unknown_heard


def test_unlocked_by_its_own_word_or_by_a_flag() -> None:
    for word in (lock("", 0), telemetry(1)):
        fold = Fold(met().heard(lock()).heard(word))
        assert fold.view.modules[0].locked_by is None
        assert fold.table("modules")[0].locked_by is None
        assert fold.alarms == ["locked out", "unlocked"]


def test_a_flag_alone_says_locked_and_calls_the_roll_for_the_name() -> None:
    fold = Fold(met().heard(telemetry(1, flags=LOCKED)))
    assert fold.view.modules[0].locked_by == ""
    assert fold.reducer.unknown_heard
    assert details(fold) == ["birch is locked out"]
    fold.script.heard(presence(flags=LOCKED), lock())
    fold.on()
    assert fold.view.modules[0].locked_by == "Ada"
    assert not fold.reducer.unknown_heard
    assert details(fold)[1:] == ["birch is locked out by Ada"]


def test_a_presence_with_the_flag_does_not_call_the_roll_it_answers() -> None:
    fold = Fold(Script().open().heard(presence(flags=LOCKED)))
    assert fold.view.modules[0].locked_by == ""
    assert not fold.reducer.unknown_heard


def test_another_person_s_lock_is_told() -> None:
    fold = Fold(met().heard(lock()).heard(lock("Mira")))
    assert fold.view.modules[0].locked_by == "Mira"
    assert fold.alarms == ["locked out", "locked out"]


def test_a_lock_outlives_a_restart() -> None:
    """Kept by the module, so that only it can say that it is gone."""
    fold = Fold(met().heard(lock()).heard(presence(boot=BOOT + 1, flags=LOCKED)))
    assert fold.view.modules[0].locked_by == "Ada"
    assert fold.alarms == ["locked out", "restart"]


@pytest.mark.parametrize("changes", [{"boot": BOOT + 1}, {"identity_bits": BITS ^ 1}])
def test_a_stranger_s_lock_calls_the_roll_and_locks_nobody(changes: dict[str, int]) -> None:
    fold = Fold(met().heard(lock(**changes)))
    assert fold.reducer.unknown_heard
    assert fold.view.modules[0].locked_by is None


def test_latch_and_lock_are_told_apart() -> None:
    fold = Fold(met().heard(stopped(1)).heard(telemetry(1, flags=LOCKED | int(Flags.LATCHED))))
    module = fold.view.modules[0]
    assert (module.latched, module.locked_by) == (True, "")
    fold.script.heard(telemetry(2, flags=LOCKED))
    fold.on()
    module = fold.view.modules[0]
    assert (module.latched, module.locked_by) == (False, "")


# -- faults ------------------------------------------------------------------------------


def test_a_fault_is_shown_while_it_stands() -> None:
    script = met().heard(fault(Fault.OVERHEATED, 1, 500, 612))
    fold = Fold(script)
    assert fold.view.modules[0].faults == ("overheated",)
    (alarm,) = fold.table("alarms")
    assert (alarm.alarm, alarm.module, alarm.detail) == ("fault", 1, "overheated, 61.2 °C")
    script.heard(fault(Fault.SENSOR_LOST, 1, 600))
    fold.on()
    assert fold.view.modules[0].faults == ("sensor_lost", "overheated")
    script.heard(fault(Fault.OVERHEATED, 0, 900))
    fold.on()
    assert fold.view.modules[0].faults == ("sensor_lost",)
    assert details(fold)[1:] == ["sensor_lost", "overheated is over"]
    assert fold.view.notices[-2][1] == "birch: sensor lost"


@pytest.mark.parametrize(
    ("which", "detail", "text"),
    [
        (Fault.BROWN_OUT, 2950, "brown_out, 2950 mV"),
        (Fault.BRAKE_WEAK, 41, "brake_weak, 41 ms"),
        (Fault.OVERHEATED, 600, "overheated, 60 °C"),
        (Fault.WHEEL_STUCK, 0, "wheel_stuck"),
        (99, 3, "fault 99"),
    ],
)
def test_a_figure_comes_with_its_unit(which: int, detail: int, text: str) -> None:
    """Units as in WIRE.md, "Faults"; one that is not known shows by its number."""
    assert details(Fold(met().heard(fault(which, 1, 1, detail)))) == [text]


def test_the_same_notice_again_tells_nothing_again() -> None:
    """It is repeated in answer to each roll call, and by the channel."""
    standing = fault(Fault.STORAGE_BAD, 1, 500)
    fold = Fold(met().heard(standing, standing).heard(presence(flags=FAULTY), standing))
    assert fold.alarms == ["fault"]
    over = fault(Fault.STORAGE_BAD, 0, 800)
    fold.script.heard(over, over)
    fold.on()
    assert fold.alarms == ["fault", "fault"]


def test_a_notice_that_was_overtaken_is_passed_over() -> None:
    script = met().heard(fault(Fault.WHEEL_STUCK, 1, 500), fault(Fault.WHEEL_STUCK, 0, 700))
    fold = Fold(script.heard(fault(Fault.WHEEL_STUCK, 1, 500)))
    assert fold.view.modules[0].faults == ()
    script.heard(fault(Fault.WHEEL_STUCK, 1, 900))
    fold.on()
    assert fold.view.modules[0].faults == ("wheel_stuck",)


def test_times_are_compared_over_the_wrap() -> None:
    """WIRE.md, "Times": modulo 2^32."""
    script = met().heard(fault(Fault.WHEEL_STUCK, 1, 2**32 - 5), fault(Fault.WHEEL_STUCK, 0, 3))
    assert Fold(script).view.modules[0].faults == ()


def test_a_moment_is_told_and_does_not_stand() -> None:
    word = fault(Fault.WATCHDOG, 0, 12)
    fold = Fold(met().heard(word, word))
    assert fold.view.modules[0].faults == ()
    assert details(fold) == ["watchdog, a moment"]


def test_why_it_restarted_may_come_before_its_presence() -> None:
    word = fault(Fault.BROWN_OUT, 0, 3, 2900, boot=BOOT + 1)
    fold = Fold(met().heard(word, word))
    assert fold.reducer.unknown_heard
    assert fold.view.modules[0].boot == BOOT
    assert details(fold) == ["brown_out, 2900 mV, a moment"]
    fold.script.heard(presence(boot=BOOT + 1))
    fold.on()
    assert fold.alarms == ["fault", "restart"]


def test_a_word_from_a_boot_that_is_over_says_nothing() -> None:
    script = met().heard(presence(boot=BOOT + 1))
    fold = Fold(script.heard(fault(Fault.WATCHDOG, 0, 3), fault(Fault.WHEEL_STUCK, 1, 3)))
    assert fold.alarms == ["restart"]
    assert fold.view.modules[0].faults == ()
    assert not fold.reducer.unknown_heard


def test_a_restart_forgets_what_stood_until_it_is_told_anew() -> None:
    script = met().heard(fault(Fault.SENSOR_LOST, 1, 500_000))
    fold = Fold(script.heard(presence(boot=BOOT + 1)))
    assert fold.view.modules[0].faults == ()
    script.heard(fault(Fault.SENSOR_LOST, 1, 20, boot=BOOT + 1))
    fold.on()
    assert fold.view.modules[0].faults == ("sensor_lost",)
    assert fold.alarms == ["fault", "restart", "fault"]


def test_a_flag_alone_shows_a_fault_without_its_name_and_calls_the_roll() -> None:
    fold = Fold(met().heard(telemetry(1, flags=FAULTY)))
    assert fold.view.modules[0].faults == ("unnamed",)
    assert fold.reducer.unknown_heard
    fold.script.heard(presence(flags=FAULTY), fault(Fault.SENSOR_LOST, 1, 20))
    fold.on()
    assert fold.view.modules[0].faults == ("sensor_lost",)
    assert not fold.reducer.unknown_heard


def test_a_flag_that_is_gone_ends_what_stood() -> None:
    """The notice of its end may be lost; the flag comes again and again."""
    script = met().heard(fault(Fault.SENSOR_LOST, 1, 20)).heard(telemetry(1, flags=FAULTY))
    fold = Fold(script)
    assert fold.view.modules[0].faults == ("sensor_lost",)
    script.heard(telemetry(2))
    fold.on()
    assert fold.view.modules[0].faults == ()
    assert details(fold) == ["sensor_lost", "sensor_lost is over"]


def test_old_telemetry_ends_nothing() -> None:
    script = met().heard(telemetry(5)).heard(fault(Fault.SENSOR_LOST, 1, 20))
    script.heard(telemetry(6, flags=FAULTY)).heard(telemetry(4))
    assert Fold(script).view.modules[0].faults == ("sensor_lost",)
