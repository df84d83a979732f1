"""When a simulated module's telemetry is due; vectors.json has whole histories of slots."""

from protocol.message import Probe, Release, RollCall, Slot
from sim_link.box import Boot
from sim_link.module_time import ModuleTime
from sim_link.report_times import ReportTimes

MS = 1_000_000
IDENTITY = 0x8000_0000_0000_2211
CONSOLE = 0xC0C0
SETTING_MS = 500


def boot_with(
    period_ms: int = 400, phase_ms: int = 150, offset_ms: int = 0, drift_ppm: float = 0.0
) -> Boot:
    """A boot that follows a console, was told its clock, and given a slot unless 0."""
    boot = Boot(7, IDENTITY, ModuleTime(0, drift_ppm))
    assert boot.allegiance.roll_call(9, CONSOLE, 0)
    boot.allegiance.hear_probe(Probe(CONSOLE, 7, 1, 0x2211, offset_ms % 2**32, 5), 0)
    if period_ms:
        boot.allegiance.hear_slot(Slot(CONSOLE, 7, period_ms, 0x2211, phase_ms))
    return boot


def times_ms(times: ReportTimes, boot: Boot, count: int) -> list[float]:
    """When the next so many reports are due, in milliseconds of fleet time, to 10 us."""
    found = []
    for _ in range(count):
        found.append(round(times.due_ns / MS, 2))
        times.reported(boot, SETTING_MS)
    return found


def test_without_a_slot_it_keeps_its_own_phase_and_counts_in_fleet_time() -> None:
    times = ReportTimes(123 * MS, SETTING_MS)
    assert times_ms(times, boot_with(0, drift_ppm=40.0), 4) == [123, 623, 1123, 1623]


def test_a_slot_is_kept_to_the_millisecond_of_its_own_clock() -> None:
    """At 40 parts in a million fast, a module time of 1,000,150 ms is reached 40 ms early."""
    times = ReportTimes(1_000 * MS, SETTING_MS)
    boot = boot_with(drift_ppm=40.0)
    times.look(boot, SETTING_MS, 900 * MS)
    shown = []
    for _ in range(2_499):
        due_ns = times.due_ns
        shown.append(boot.time.ms(due_ns))
        assert boot.time.ms(due_ns - 2_000) == shown[-1] - 1
        times.reported(boot, SETTING_MS)
    assert shown == list(range(950, 1_000_151, 400))
    assert abs(due_ns / MS - (1_000_150 - 40)) < 0.01


def test_what_is_overdue_by_a_slot_is_due_now() -> None:
    """A module that reports once a minute gets a slot long after its last report."""
    times = ReportTimes(61_000 * MS, 60_000)
    boot = boot_with()
    times.look(boot, 60_000, 20_000 * MS)
    assert times_ms(times, boot, 3) == [20_000, 20_550, 20_950]


def test_a_shorter_setting_holds_at_once_but_for_who_has_a_slot() -> None:
    times = ReportTimes(900 * MS, 1_000)
    times.shorten(100, 50 * MS)
    assert times.due_ns == 150 * MS
    boot = boot_with(period_ms=0)
    times.look(boot, SETTING_MS, 60 * MS)  # nothing has changed for it
    assert times.due_ns == 150 * MS
    boot.allegiance.hear_slot(Slot(CONSOLE, 7, 400, 0x2211, 390))
    times.look(boot, SETTING_MS, 70 * MS)
    due_ns = times.due_ns
    times.shorten(20, 80 * MS)
    assert times.due_ns == due_ns


def test_after_the_slot_it_goes_on_from_its_last_report() -> None:
    times = ReportTimes(1_000 * MS, SETTING_MS)
    boot = boot_with()
    times.look(boot, SETTING_MS, 900 * MS)
    assert times_ms(times, boot, 2) == [950, 1350]
    boot.allegiance.release(Release(CONSOLE).console)
    times.look(boot, SETTING_MS, 1_400 * MS)
    assert times_ms(times, boot, 3) == [1850, 2350, 2850]


def test_a_restart_ends_the_slot_and_keeps_what_is_due_next() -> None:
    times = ReportTimes(1_000 * MS, SETTING_MS)
    boot = boot_with()
    times.look(boot, SETTING_MS, 900 * MS)
    times.restart()
    fresh = Boot(8, IDENTITY, ModuleTime(910 * MS))
    fresh.allegiance.roll_call(*RollCall(10, CONSOLE), 0)
    times.look(fresh, SETTING_MS, 920 * MS)
    assert times_ms(times, fresh, 3) == [950, 1450, 1950]
