"""What waits for its Go: one motion, its times in the module's own clock, taken once."""

import pytest
from hypothesis import given
from hypothesis import strategies as st

from protocol.message import Go, Motion, Pivot, Probe
from sim_link.box import Boot
from sim_link.module_time import ModuleTime
from sim_link.staging import Due, Stage
from tests.support.virtual_console import CONSOLE, EPOCH, MS, S

COMMAND = Pivot(EPOCH, 7, 1, 1, 5_000, 9, 1, 1, 6_000)


def boot_of(offset_ms: int = 0) -> Boot:
    """A boot that follows the console and was told its clock, as exactly as can be."""
    boot = Boot(7, 1, ModuleTime(-offset_ms * MS))
    boot.allegiance.roll_call(EPOCH, CONSOLE, 0)
    boot.allegiance.hear_probe(Probe(CONSOLE, 7, 1, 1, offset_ms % 2**32, 0), 0)
    return boot


def staged(command: Motion = COMMAND, offset_ms: int = 0) -> tuple[Stage, Boot]:
    stage, boot = Stage(), boot_of(offset_ms)
    stage.put(command, boot, 0)
    return stage, boot


def test_nothing_waits_at_first() -> None:
    stage = Stage()
    assert (stage.waits, stage.due_ns, stage.take(S), stage.erase()) == (False, None, None, None)


def test_without_a_go_it_is_due_a_millisecond_after_its_latest_start() -> None:
    stage, boot = Stage(), boot_of()
    assert stage.put(COMMAND, boot, 2 * S) == 3_000
    assert stage.waits
    assert stage.due_ns is not None
    assert boot.time.ms(stage.due_ns) == 5_001
    assert boot.time.ms(stage.due_ns - 1_000) == 5_000
    assert stage.take(stage.due_ns - 1) is None
    assert stage.take(stage.due_ns) == Due(COMMAND, False)


def test_what_was_taken_waits_no_more() -> None:
    stage, _ = staged()
    assert stage.take(6 * S) is not None
    assert (stage.waits, stage.due_ns, stage.take(6 * S)) == (False, None, None)


def test_what_was_erased_is_given_back_and_is_gone() -> None:
    stage, boot = staged()
    stage.hear(Go(CONSOLE, 9, 1_000), boot, 0)
    assert stage.erase() is COMMAND
    assert (stage.waits, stage.due_ns, stage.take(6 * S)) == (False, None, None)


@given(st.integers(-(2**31), 2**31), st.integers(1, 5_000))
def test_a_go_starts_it_at_the_fleet_s_time(offset_ms: int, start_ms: int) -> None:
    """Whatever the module's clock says: here it runs true, only shifted."""
    command = COMMAND._replace(latest_ms=(5_000 + offset_ms) % 2**32)
    stage, boot = staged(command, offset_ms)
    stage.hear(Go(CONSOLE, 9, start_ms), boot, 0)
    assert stage.due_ns is not None
    assert 0 <= stage.due_ns - start_ms * MS < 1_000
    assert stage.take(stage.due_ns) == Due(command, True)


@pytest.mark.parametrize(
    "go",
    [
        Go(CONSOLE, 8, 3_000),
        Go(CONSOLE + 1, 9, 3_000),
        Go(0, 9, 3_000),
        Go(CONSOLE, 9, 2_000),
        Go(CONSOLE, 9, 5_001),
        Go(CONSOLE, 9, 2**31 + 2_000),
    ],
    ids=["other stage", "other console", "nobody", "now", "too late", "half the clock away"],
)
def test_a_go_that_does_not_fit_changes_nothing(go: Go) -> None:
    stage, boot = staged()
    before_ns = stage.due_ns
    stage.hear(go, boot, 2 * S)
    assert stage.due_ns == before_ns
    assert stage.take(6 * S) == Due(COMMAND, False)


def test_the_last_start_counts_that_was_heard_in_time() -> None:
    stage, boot = staged()
    for start_ms in (3_000, 4_000, 1_500, 5_001):  # the last two are past, and too late
        stage.hear(Go(CONSOLE, 9, start_ms), boot, 2 * S)
    assert stage.due_ns is not None
    assert boot.time.ms(stage.due_ns) == 4_000
    assert stage.take(6 * S) == Due(COMMAND, True)


def test_the_latest_start_itself_is_in_time() -> None:
    stage, boot = staged()
    stage.hear(Go(CONSOLE, 9, 5_000), boot, 0)
    assert stage.take(5 * S + MS) == Due(COMMAND, True)


def test_without_a_clock_no_go_is_understood() -> None:
    stage, boot = Stage(), Boot(7, 1, ModuleTime(0))
    boot.allegiance.roll_call(EPOCH, CONSOLE, 0)
    stage.put(COMMAND, boot, 0)
    stage.hear(Go(CONSOLE, 9, 3_000), boot, 0)
    assert stage.take(6 * S) == Due(COMMAND, False)
