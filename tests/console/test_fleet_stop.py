"""The all-stop: pressed, confirmed, lifted, found in force, and said of by modules."""

import pytest

from protocol.codes import SIMULATED_BIT, Flags, identity_bits
from protocol.message import Stopped
from storage.records import StopLifted, StopPressed
from storage.rows import AlarmRow
from tests.support.wire_script import (
    BOOT,
    Fold,
    Script,
    nameplate,
    presence,
    stopped,
    telemetry,
)

OTHER = SIMULATED_BIT | 0x2222
ELM = 0x11


def two() -> Script:
    """Birch at 0x10 and elm at 0x11."""
    script = Script().open().heard(presence(), nameplate())
    return script.heard(presence(identity=OTHER), nameplate("elm", identity=OTHER), address=ELM)


def elm_stopped(stop_number: int, latched: int = 1) -> Stopped:
    """Elm's confirmation."""
    return stopped(stop_number, latched, identity_bits=identity_bits(OTHER))


def pressed(number: int = 1) -> Script:
    """The same two, and an all-stop."""
    script = two()
    script.add(StopPressed, number, "key")
    return script


def test_before_any_stop_there_is_none() -> None:
    fold = Fold(two())
    assert fold.reducer.newest_stop == 0
    stop = fold.view.stop
    assert (stop.stop_number, stop.in_force, stop.confirmed, stop.missing) == (0, False, (), ())


def test_a_press_is_in_force_at_once_and_everybody_is_missing() -> None:
    script = pressed()
    fold = Fold(script)
    stop = fold.view.stop
    assert (stop.stop_number, stop.in_force, stop.confirmed, stop.missing) == (1, True, (), (1, 2))
    assert fold.table("alarms") == [
        AlarmRow(len(script.records), 0, script.t_ns, None, "all-stop", "number 1, by key")
    ]
    assert fold.view.notices[-1] == (script.t_ns, "all-stop 1 by key")


def test_confirmations_are_counted_and_the_last_is_told() -> None:
    fold = Fold(pressed().heard(stopped(1)))
    assert (fold.view.stop.confirmed, fold.view.stop.missing) == ((1,), (2,))
    assert not any("confirmed" in text for _, text in fold.view.notices)
    fold.script.heard(elm_stopped(1), address=ELM).heard(stopped(1))
    fold.on()
    assert (fold.view.stop.confirmed, fold.view.stop.missing) == ((1, 2), ())
    told = [text for _, text in fold.view.notices if "confirmed" in text]
    assert told == ["all-stop 1: all 2 modules confirmed"]


def test_a_confirmation_tells_what_the_wheel_does() -> None:
    fold = Fold(pressed().heard(stopped(1, activity=3, wheel_rpm=2100)))
    module = fold.view.modules[0]
    assert (module.activity, module.wheel_rpm, module.latched, module.stop_number) == (
        3, 2100, True, 1,
    )  # fmt: skip


@pytest.mark.parametrize("word", [stopped(1, latched=0), stopped(0), stopped(0, latched=0)])
def test_no_latch_or_an_older_number_is_no_confirmation(word: object) -> None:
    assert Fold(pressed(2).heard(word)).view.stop.missing == (1, 2)


def test_a_second_press_asks_everybody_again() -> None:
    script = pressed().heard(stopped(1)).heard(elm_stopped(1), address=ELM)
    script.add(StopPressed, 2, "key")
    fold = Fold(script)
    assert (fold.view.stop.stop_number, fold.view.stop.missing) == (2, (1, 2))
    assert fold.alarms == ["all-stop", "all-stop"]


def test_a_press_with_a_number_passed_keeps_the_newest() -> None:
    script = two().heard(presence(stop_number=9))
    script.add(StopPressed, 4, "key")
    stop = Fold(script).view.stop
    assert (stop.stop_number, stop.in_force) == (9, True)


def test_only_a_clear_of_the_newest_lifts_it() -> None:
    script = pressed(2)
    script.add(StopLifted, 1, "key")
    fold = Fold(script)
    assert fold.view.stop.in_force
    script.add(StopLifted, 2, "key")
    fold.on()
    assert not fold.view.stop.in_force
    assert fold.reducer.newest_stop == 2
    assert fold.alarms == ["all-stop", "clear", "clear"]


def test_after_a_clear_whoever_still_holds_its_latch_is_missing() -> None:
    script = pressed().heard(stopped(1)).heard(elm_stopped(1), address=ELM)
    script.add(StopLifted, 1, "key")
    fold = Fold(script)
    assert (fold.view.stop.confirmed, fold.view.stop.missing) == ((), (1, 2))
    script.heard(stopped(1, latched=0))
    fold.on()
    stop = fold.view.stop
    assert (stop.in_force, stop.confirmed, stop.missing) == (False, (1,), (2,))


def test_a_console_that_starts_finds_the_latch_in_force() -> None:
    script = two().heard(presence(stop_number=6, flags=1))
    fold = Fold(script)
    stop = fold.view.stop
    assert (stop.stop_number, stop.in_force, stop.confirmed, stop.missing) == (6, True, (1,), (2,))
    assert fold.reducer.newest_stop == 6
    assert fold.alarms == ["all-stop"]
    assert fold.table("alarms")[0].module == 1
    assert "6 is in force, says birch" in fold.view.notices[-1][1]
    script.heard(presence(stop_number=6, flags=1))
    fold.on()
    assert fold.alarms == ["all-stop"]
    script.add(StopLifted, 6, "key")
    fold.on()
    assert not fold.view.stop.in_force


@pytest.mark.parametrize("latched_first", [True, False])
def test_found_in_force_whichever_module_speaks_first(latched_first: bool) -> None:
    """One module was out of reach when the last console cleared: its latch still counts."""
    script = two()
    words = [
        lambda: script.heard(presence(stop_number=3, flags=1)),
        lambda: script.heard(presence(identity=OTHER, stop_number=7), address=ELM),
    ]
    for say in words if latched_first else reversed(words):
        say()
    fold = Fold(script)
    assert (fold.view.stop.stop_number, fold.view.stop.in_force) == (7, True)
    assert fold.view.stop.missing == (1, 2)


def test_a_number_reported_without_a_latch_only_moves_the_count() -> None:
    fold = Fold(two().heard(presence(stop_number=9)))
    assert fold.reducer.newest_stop == 9
    assert not fold.view.stop.in_force
    assert fold.alarms == []


def test_a_latch_of_a_stop_lifted_here_is_not_in_force_again() -> None:
    script = pressed()
    script.add(StopLifted, 1, "key")
    fold = Fold(script.heard(presence(stop_number=1, flags=1)))
    assert not fold.view.stop.in_force
    assert fold.view.stop.missing == (1,)


def test_a_newer_stop_of_somebody_else_is_in_force_after_a_clear_here() -> None:
    script = pressed()
    script.add(StopLifted, 1, "key")
    fold = Fold(script.heard(stopped(2)))
    assert (fold.view.stop.stop_number, fold.view.stop.in_force) == (2, True)


def test_a_delayed_word_with_an_older_number_unlatches_nothing() -> None:
    script = pressed(4).heard(stopped(4)).heard(presence(stop_number=3))
    fold = Fold(script)
    assert fold.view.stop.confirmed == (1,)


def test_a_latch_in_telemetry_shows_and_calls_the_roll_where_nothing_explains_it() -> None:
    fold = Fold(two().heard(telemetry(1, flags=Flags.LATCHED)))
    assert fold.view.modules[0].latched
    assert fold.reducer.unknown_heard
    fold.script.heard(presence(stop_number=5, flags=1))
    fold.on()
    assert not fold.reducer.unknown_heard
    assert fold.view.stop.in_force


def test_a_latch_in_telemetry_under_our_own_stop_is_explained() -> None:
    fold = Fold(pressed().heard(telemetry(1, flags=Flags.LATCHED)))
    assert fold.view.modules[0].latched
    assert not fold.reducer.unknown_heard
    assert fold.view.stop.missing == (1, 2)  # it has not said of which number it knows


def test_telemetry_without_the_latch_takes_a_confirmation_back() -> None:
    fold = Fold(pressed().heard(stopped(1)).heard(telemetry(1)))
    assert fold.view.stop.missing == (1, 2)
    fold.script.heard(telemetry(2, flags=Flags.LATCHED))
    fold.on()
    assert fold.view.stop.confirmed == (1,)


def test_a_restarted_module_must_confirm_again() -> None:
    fold = Fold(pressed().heard(stopped(1)).heard(presence(boot=BOOT + 1)))
    assert fold.view.stop.missing == (1, 2)
    fold.script.heard(stopped(1, boot=BOOT + 1))
    fold.on()
    assert fold.view.stop.confirmed == (1,)


def test_a_confirmation_of_another_boot_is_not_taken() -> None:
    fold = Fold(pressed().heard(stopped(1, boot=BOOT + 1)))
    assert fold.view.stop.missing == (1, 2)
    assert fold.reducer.unknown_heard


def test_the_stop_works_with_no_module_known() -> None:
    script = Script().open()
    script.add(StopPressed, 1, "key")
    stop = Fold(script).view.stop
    assert (stop.in_force, stop.confirmed, stop.missing) == (True, (), ())


def test_a_module_that_comes_later_is_missing() -> None:
    script = Script().open()
    script.add(StopPressed, 1, "key")
    assert Fold(script.heard(presence())).view.stop.missing == (1,)
