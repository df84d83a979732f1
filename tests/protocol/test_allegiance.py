"""Whom a module follows, and until when its wheel may turn; law 4's safety as a property."""

from collections.abc import Iterator
from dataclasses import dataclass, field, replace

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from protocol.allegiance import (
    DRIFT_SHIFT,
    LONGEST_PERMIT_MS,
    OWNER_GRACE_MS,
    Allegiance,
    ms_until,
)
from protocol.clock import DRIFT_LIMIT_PPM
from protocol.message import BOUND_UNKNOWN, Permit, Probe, Slot

OURS, THEIRS = 0xA11CE, 0xB0B
EPOCH = 1_700_000_000
U32 = 1 << 32


def probe(offset_ms: int, bound_ms: int, console: int = OURS) -> Probe:
    return Probe(console, 7, 1, 0x2211, offset_ms % U32, bound_ms)


def adopted(now_ms: int = 0) -> Allegiance:
    module = Allegiance()
    assert module.roll_call(EPOCH, OURS, now_ms)
    return module


def permitted(expiry_ms: int, offset_ms: int = 0, bound_ms: int = 5, at_ms: int = 0) -> Allegiance:
    """A module that was told its clock and given a permit."""
    module = adopted(at_ms)
    module.hear_probe(probe(offset_ms, bound_ms), at_ms)
    module.hear_permit(Permit(OURS, expiry_ms % U32), at_ms)
    return module


# Times that wrap.


@pytest.mark.parametrize(
    ("then_ms", "now_ms", "left_ms"),
    [
        (10, 3, 7),
        (3, 10, -7),
        (5, 5, 0),
        (2, U32 - 3, 5),
        (U32 - 3, 2, -5),
        # By hand from WIRE.md: later from 1 to 2^31 - 1 ahead.
        (2**31 - 1, 0, 2**31 - 1),
        (2**31, 0, -(2**31)),
    ],
)
def test_how_long_until(then_ms: int, now_ms: int, left_ms: int) -> None:
    assert ms_until(then_ms, now_ms) == left_ms


@given(now=st.integers(0, U32 - 1), ahead=st.integers(-(2**31), 2**31 - 1))
def test_times_wrap_without_a_seam(now: int, ahead: int) -> None:
    assert ms_until((now + ahead) % U32, now) == ahead
    assert ms_until(now + ahead, now) == ahead


@given(one=st.integers(0, U32 - 1), other=st.integers(0, U32 - 1))
def test_of_two_times_one_is_later_or_they_are_the_same(one: int, other: int) -> None:
    there, back = ms_until(one, other), ms_until(other, one)
    assert there == -back or there == back == -(2**31)


# Whom it follows.


def test_a_module_starts_with_nobody() -> None:
    module = Allegiance()
    assert (module.epoch, module.console) == (0, 0)
    assert module.owner_left_ms(0) == module.permit_left_ms(0) == 0
    assert not module.clock_told
    assert module.module_ms(5) is None


def test_zero_is_nobodys_number() -> None:
    module = Allegiance()
    module.hear_probe(probe(0, 5, console=0), 0)
    module.hear_permit(Permit(0, 5_000), 0)
    assert not module.clock_told
    assert module.permit_left_ms(0) == 0
    assert not module.roll_call(EPOCH, 0, 0)
    assert (module.epoch, module.console) == (0, 0)
    module.release(0)
    assert module.roll_call(EPOCH, OURS, 0)
    assert not module.roll_call(EPOCH + 1, 0, OWNER_GRACE_MS)
    assert (module.epoch, module.console) == (EPOCH, OURS)


@pytest.mark.parametrize("epoch", [EPOCH, EPOCH - 1, 0])
def test_an_epoch_that_is_not_newer_is_not_adopted(epoch: int) -> None:
    module = adopted()
    for console in (OURS, THEIRS):
        assert not module.roll_call(epoch, console, OWNER_GRACE_MS)
    assert (module.epoch, module.console) == (EPOCH, OURS)


def test_another_console_waits_for_the_grace_to_end() -> None:
    module = adopted(now_ms=100)
    assert module.owner_left_ms(100) == OWNER_GRACE_MS == 3_000
    assert module.owner_left_ms(3_099) == 1
    assert not module.roll_call(EPOCH + 9, THEIRS, 3_099)
    assert module.owner_left_ms(3_100) == 0
    assert module.roll_call(EPOCH + 9, THEIRS, 3_100)
    assert (module.epoch, module.console) == (EPOCH + 9, THEIRS)
    assert module.owner_left_ms(3_100) == OWNER_GRACE_MS


def test_its_own_console_may_take_a_newer_epoch_at_any_time() -> None:
    module = adopted()
    assert module.roll_call(EPOCH + 1, OURS, 10)
    assert module.owner_left_ms(10) == OWNER_GRACE_MS


def test_it_is_owned_as_long_as_it_holds_the_permit() -> None:
    module = permitted(expiry_ms=9_000, bound_ms=0)
    # By hand: 9000 - 0 - (2999 >> 13) - 1, less the 2999 that have passed.
    assert module.owner_left_ms(2_999) == 6_000
    assert not module.roll_call(EPOCH + 9, THEIRS, 8_997)
    # 9000 - (8998 >> 13) - 1 = 8998.
    assert module.owner_left_ms(8_998) == 0
    assert module.roll_call(EPOCH + 9, THEIRS, 8_998)


def test_another_console_knows_nothing_of_clock_and_permit() -> None:
    module = permitted(expiry_ms=10_000)
    module.release(OURS)
    module.hear_permit(Permit(OURS, 10_000), 0)
    assert module.permit_left_ms(0) > 0
    module.release(OURS)
    assert module.roll_call(EPOCH + 1, THEIRS, 5)
    assert not module.clock_told
    assert module.permit_left_ms(5) == 0
    module.hear_probe(probe(0, 5, THEIRS), 5)
    assert module.permit_left_ms(5) == 0


@given(
    theirs_ms=st.integers(0, U32 - 1),
    offset_ms=st.integers(0, U32 - 1),
    bound_ms=st.integers(0, BOUND_UNKNOWN - 1),
    at_ms=st.integers(0, U32 - 1),
)
def test_a_permit_never_comes_to_life_under_another_consoles_clock(
    theirs_ms: int, offset_ms: int, bound_ms: int, at_ms: int
) -> None:
    """One console's permit was heard, and never its clock: so it did not own the module, and
    stood. Whatever the next one tells, that permit is nothing to it."""
    module = adopted(at_ms)
    module.hear_permit(Permit(OURS, theirs_ms), at_ms)
    later_ms = (at_ms + OWNER_GRACE_MS) % U32
    assert module.roll_call(EPOCH + 1, THEIRS, later_ms)
    module.hear_probe(probe(offset_ms, bound_ms, THEIRS), later_ms)
    assert module.permit_left_ms(later_ms) == 0
    # Nor does it stand in the way of the new one's, which may be earlier in its own time.
    expiry_ms = (later_ms - offset_ms + bound_ms + 1_001) % U32
    module.hear_permit(Permit(THEIRS, expiry_ms), later_ms)
    assert module.permit_left_ms(later_ms) == 1_000


def test_that_property_can_fail() -> None:
    """The same with the same console: there the permit does come to life, as it should."""
    module = adopted()
    module.hear_permit(Permit(OURS, 9_000), 0)
    assert module.roll_call(EPOCH + 1, OURS, OWNER_GRACE_MS)
    module.hear_probe(probe(0, 5), OWNER_GRACE_MS)
    assert module.permit_left_ms(OWNER_GRACE_MS) == 9_000 - 5 - 0 - 1 - 3_000


def test_a_newer_epoch_of_the_same_console_keeps_clock_and_permit() -> None:
    module = permitted(expiry_ms=10_000)
    left_ms = module.permit_left_ms(50)
    assert module.roll_call(EPOCH + 1, OURS, 50)
    assert module.permit_left_ms(50) == left_ms > 0


def test_what_another_console_says_is_not_taken() -> None:
    module = permitted(expiry_ms=4_000)
    left_ms = module.permit_left_ms(0)
    module.hear_probe(probe(-9_000, 0, THEIRS), 0)
    module.hear_permit(Permit(THEIRS, 50_000), 0)
    module.release(THEIRS)
    assert module.permit_left_ms(0) == left_ms
    assert module.owner_left_ms(0) == left_ms


def test_release_ends_permit_and_ownership_but_not_the_epoch() -> None:
    module = permitted(expiry_ms=10_000)
    module.release(OURS)
    assert module.permit_left_ms(1) == module.owner_left_ms(1) == 0
    assert (module.epoch, module.console) == (EPOCH, OURS)
    assert module.clock_told
    assert module.roll_call(EPOCH + 1, THEIRS, 1)


# The permit, in numbers worked by hand from WIRE.md's line.


@pytest.mark.parametrize(
    ("expiry_ms", "offset_ms", "bound_ms", "now_ms", "left_ms"),
    [
        (5_000, 0, 5, 0, 4_994),
        (5_000, 0, 5, 4_993, 1),
        (5_000, 0, 5, 4_994, 0),
        (5_000, 0, 0, 0, 4_999),
        (5_000, 1_000, 5, 0, 5_994),
        (5_000, -1_000, 5, 0, 3_994),
        (20_000, 0, 200, 8_191, 11_608),
        (20_000, 0, 200, 8_192, 11_606),  # a millisecond more of doubt after 2^13
        (20_000, 0, 200, 16_384, 3_413),
        (60_001, 0, 0, 0, LONGEST_PERMIT_MS),
        (60_002, 0, 0, 0, 0),  # would last too long: none
        (60_002, 0, 0, 1, LONGEST_PERMIT_MS),
        (2**31, 0, 0, 0, 0),
        (5, 0, 5, 0, 0),
        (-10, 0, 0, 0, 0),
    ],
)
def test_when_a_permit_ends(
    expiry_ms: int, offset_ms: int, bound_ms: int, now_ms: int, left_ms: int
) -> None:
    module = permitted(expiry_ms, offset_ms, bound_ms)
    assert module.permit_left_ms(now_ms) == left_ms


def test_a_permit_across_the_wrap_of_both_clocks() -> None:
    # Module time is 2^32 - 1000, fleet time 2^32 - 200: the offset is -800.
    start_ms = U32 - 1_000
    module = permitted(expiry_ms=U32 + 1_800, offset_ms=-800, bound_ms=5, at_ms=start_ms)
    assert module.permit_left_ms(start_ms) == 1_994
    assert module.permit_left_ms(U32 - 1) == 995
    assert module.permit_left_ms(993) == 1
    assert module.permit_left_ms(994) == 0
    assert module.module_ms(100) == U32 - 700


def test_without_a_clock_there_is_no_permit() -> None:
    module = adopted()
    module.hear_permit(Permit(OURS, 5_000), 0)
    assert module.permit_left_ms(0) == 0
    module.hear_probe(probe(0, BOUND_UNKNOWN), 0)
    assert module.permit_left_ms(0) == 0
    assert not module.clock_told
    module.hear_probe(probe(0, BOUND_UNKNOWN - 1), 0)
    assert module.clock_told
    assert module.permit_left_ms(0) == 0  # 65 s of doubt
    module.hear_probe(probe(0, 5), 0)
    assert module.permit_left_ms(0) == 4_994


def test_not_knowing_does_not_unmake_what_was_known() -> None:
    module = permitted(expiry_ms=5_000)
    module.hear_probe(probe(77, BOUND_UNKNOWN), 10)
    assert module.permit_left_ms(0) == 4_994


def test_an_older_permit_that_comes_late_changes_nothing() -> None:
    module = permitted(expiry_ms=5_000)
    for expiry_ms in (4_999, 1, -20):
        module.hear_permit(Permit(OURS, expiry_ms % U32), 0)
        assert module.permit_left_ms(0) == 4_994
    module.hear_permit(Permit(OURS, 5_001), 0)
    assert module.permit_left_ms(0) == 4_995


def test_a_drift_within_the_limit_is_less_than_the_shift_allows() -> None:
    # RFC 5905 would call this the frequency tolerance; the figures are ours.
    assert DRIFT_LIMIT_PPM < 1_000_000 / 2**DRIFT_SHIFT < DRIFT_LIMIT_PPM + 5


# Law 4: never longer by the module's clock than by the console's.


@dataclass
class Truth:
    """Fleet time and the module's clock, exactly: picoseconds, whole numbers."""

    fleet_ps: int
    module_ps: int
    ppm: int = 0
    newest_expiry_ms: int | None = None
    sent: list[int] = field(default_factory=list)

    def pass_ps(self, time_ps: int) -> None:
        self.fleet_ps += time_ps
        self.module_ps += time_ps + time_ps * self.ppm // 1_000_000

    @property
    def module_ms(self) -> int:
        return self.module_ps // MS_PS % U32

    def offsets_ms(self, bound_ms: int) -> tuple[int, int]:
        """The least and the greatest offset that is wrong by no more than the bound."""
        true_ps = self.module_ps - self.fleet_ps
        least = -((bound_ms * MS_PS - true_ps) // MS_PS)
        return least, (true_ps + bound_ms * MS_PS) // MS_PS


MS_PS = 10**9
DAY_PS = 86_400_000 * MS_PS
PERMIT = st.tuples(st.just("permit"), st.integers(1, 70_000))
LATE_PERMIT = st.tuples(st.just("late copy"), st.integers(0, 50))
WORST = st.one_of(st.just(1.0), st.floats(0, 1))
PROBE = st.tuples(st.just("probe"), st.integers(0, 300), WORST)
ROUNDED = st.tuples(st.just("rounded probe"), st.integers(0, 2_000_000), st.integers(0, 4_000))
TIMES_PS = st.one_of(st.integers(0, 2 * MS_PS), st.integers(0, DAY_PS // 4))
WAIT = st.tuples(st.just("wait"), TIMES_PS)
PPM = st.one_of(st.just(-DRIFT_LIMIT_PPM), st.integers(-DRIFT_LIMIT_PPM, DRIFT_LIMIT_PPM))
DRIFT = st.tuples(st.just("drift"), PPM)
TO_THE_END = st.tuples(st.just("to the end"), st.integers(-2 * MS_PS, 2 * MS_PS))


def act(truth: Truth, module: Allegiance, what: tuple[object, ...]) -> None:
    """One thing that happens, by its word."""
    match what:
        case ("permit", int(length_ms)):
            expiry_ms = truth.fleet_ps // MS_PS + length_ms
            truth.sent.append(expiry_ms)
            module.hear_permit(Permit(OURS, expiry_ms % U32), truth.module_ms)
        case ("late copy", int(back)) if truth.sent:
            expiry_ms = truth.sent[-1 - back % len(truth.sent)]
            module.hear_permit(Permit(OURS, expiry_ms % U32), truth.module_ms)
        case ("probe", int(bound_ms), float(where)):
            least, most = truth.offsets_ms(bound_ms)
            if least <= most:
                offset_ms = least + int((most - least) * where)
                module.hear_probe(probe(offset_ms, bound_ms), truth.module_ms)
        case ("rounded probe", int(bound_us), int(on_its_way_ms)):
            # WIRE.md, Clock: to the nearest, rounded up with one more; then it takes its time.
            true_ps = truth.module_ps - truth.fleet_ps
            estimate_ps = true_ps + (-1) ** on_its_way_ms * bound_us * 10**6
            told = probe(round(estimate_ps / MS_PS), -(-bound_us // 1_000) + 1)
            truth.pass_ps(on_its_way_ms * MS_PS)
            module.hear_probe(told, truth.module_ms)
        case ("wait", int(time_ps)):
            truth.pass_ps(time_ps)
        case ("drift", int(ppm)):
            truth.ppm = ppm
        case ("to the end", int(off_ps)) if truth.sent:
            truth.pass_ps(max(0, max(truth.sent) * MS_PS + off_ps - truth.fleet_ps))


@settings(max_examples=600)
@given(
    fleet_ms=st.integers(0, U32),
    offset_ps=st.integers(-(2**62), 2**62),
    steps=st.lists(
        st.one_of(PERMIT, LATE_PERMIT, PROBE, ROUNDED, WAIT, DRIFT, TO_THE_END),
        min_size=4,
        max_size=40,
    ),
)
def test_a_permit_never_outlasts_its_expiry(
    fleet_ms: int, offset_ps: int, steps: list[tuple[object, ...]]
) -> None:
    """Whatever the true offset, the told one within its bound, the drift within its limit, and
    late copies of permits: no wheel is permitted when the last expiry given has passed."""
    truth = Truth(fleet_ms * MS_PS, fleet_ms * MS_PS + offset_ps + 2**63)
    module = adopted(truth.module_ms)
    for what in steps:
        act(truth, module, what)
        for later in (truth, *at_the_end(truth)):
            if module.permit_left_ms(later.module_ms):
                assert truth.sent
                assert later.fleet_ps < max(truth.sent) * MS_PS


def at_the_end(truth: Truth) -> Iterator[Truth]:
    """What will be true when the last expiry has come, with the clock as slow as it may be."""
    for extra_ps in (0, 1, MS_PS // 2, MS_PS) if truth.sent else ():
        later = replace(truth, ppm=-DRIFT_LIMIT_PPM)
        later.pass_ps(max(0, max(truth.sent) * MS_PS + extra_ps - truth.fleet_ps))
        yield later


@given(
    ppm=st.integers(-DRIFT_LIMIT_PPM, DRIFT_LIMIT_PPM),
    age_ms=st.integers(0, 40_000_000),
    bound_ms=st.integers(0, 300),
    worst=st.booleans(),
)
def test_nor_in_the_worst_case_of_all(ppm: int, age_ms: int, bound_ms: int, worst: bool) -> None:
    """Told the worst offset once, long ago, drifting all the time; looked at as it ends."""
    truth = Truth(0, 5 * DAY_PS, -DRIFT_LIMIT_PPM if worst else ppm)
    module = adopted(truth.module_ms)
    _, most = truth.offsets_ms(bound_ms)
    module.hear_probe(probe(most, bound_ms), truth.module_ms)
    truth.pass_ps(age_ms * MS_PS)
    expiry_ms = truth.fleet_ps // MS_PS + 1_000
    module.hear_permit(Permit(OURS, expiry_ms), truth.module_ms)
    for _ in range(1_100):
        if module.permit_left_ms(truth.module_ms):
            assert truth.fleet_ps < expiry_ms * MS_PS
        truth.pass_ps(MS_PS)
    assert module.permit_left_ms(truth.module_ms) == 0


def test_the_property_notices_a_millisecond() -> None:
    """The test of the test: without the allowance for drift, a permit does outlast its expiry."""
    truth = Truth(0, 5 * DAY_PS, -DRIFT_LIMIT_PPM)
    module = adopted(truth.module_ms)
    _, most = truth.offsets_ms(10)
    module.hear_probe(probe(most, 10), truth.module_ms)
    truth.pass_ps(100_000 * MS_PS)
    # Told just now, as if no time had passed since: 12 ms of drift are forgotten.
    module.hear_probe(probe(most, 10), truth.module_ms)
    module.hear_permit(Permit(OURS, 101_000), truth.module_ms)
    truth.pass_ps(1_000 * MS_PS)
    assert module.permit_left_ms(truth.module_ms) > 0


# Ownership, against a model without a wrap.


@dataclass
class Follower:
    """The rules once more, in plain numbers that never wrap; permits by the longest expiry."""

    epoch: int = 0
    console: int = 0
    owned_until_ms: int = 0
    expiry_ms: int = 0
    told: bool = False

    def end_ms(self, now_ms: int, told_ms: int) -> int:
        permit_ms = self.expiry_ms - 5 - (now_ms - told_ms) // 8192 - 1 if self.told else 0
        permit_ms = permit_ms if permit_ms - now_ms <= 60_000 else 0
        return max(self.owned_until_ms, permit_ms)


CONSOLES = (OURS, THEIRS, 0xC0C0)
CALL = st.tuples(st.just("call"), st.sampled_from(CONSOLES), st.integers(0, 40))
GIVE = st.tuples(st.just("permit"), st.sampled_from(CONSOLES), st.integers(-2_000, 70_000))
TELL = st.tuples(st.just("probe"), st.sampled_from(CONSOLES), st.integers(0, 0))
LET_GO = st.tuples(st.just("release"), st.sampled_from(CONSOLES), st.integers(0, 0))
PASS = st.tuples(st.just("wait"), st.sampled_from(CONSOLES), st.integers(0, 4_000))


@settings(max_examples=400)
@given(
    start_ms=st.sampled_from([0, 1, U32 - 2_000, 2**31 - 5_000]),
    steps=st.lists(st.one_of(CALL, GIVE, TELL, LET_GO, PASS), max_size=60),
)
def test_never_two_owners_and_epochs_only_rise(
    start_ms: int, steps: list[tuple[str, int, int]]
) -> None:
    module, model, now_ms, told_ms = Allegiance(), Follower(), start_ms, 0
    for word, console, figure in steps:
        wire_ms, before = now_ms % U32, (module.epoch, module.console)
        owned = model.end_ms(now_ms, told_ms) > now_ms
        assert (module.owner_left_ms(wire_ms) > 0) is owned
        if word == "call":
            may = figure > model.epoch and (console == model.console or not owned)
            assert module.roll_call(figure, console, wire_ms) is may
            if may:
                if console != model.console:
                    model.told, model.expiry_ms = False, 0
                model.epoch, model.console = figure, console
                model.owned_until_ms = now_ms + 3_000
        elif word == "permit":
            expiry_ms = now_ms + figure
            module.hear_permit(Permit(console, expiry_ms % U32), wire_ms)
            if console == model.console:
                model.expiry_ms = max(model.expiry_ms, expiry_ms)
        elif word == "probe":
            module.hear_probe(probe(0, 5, console), wire_ms)
            if console == model.console:
                model.told, told_ms = True, now_ms
        elif word == "release":
            module.release(console)
            if console == model.console:
                model.owned_until_ms = model.expiry_ms = 0
        else:
            now_ms += figure
        assert (module.epoch, module.console) == (model.epoch, model.console)
        assert module.epoch >= before[0]
        if owned and word != "release" and before[1]:
            assert module.console == before[1]


# -- what has ended is forgotten -------------------------------------------------------------


def permitted_once() -> Allegiance:
    module = Allegiance()
    module.roll_call(5, 9, 0)
    module.hear_probe(Probe(9, 1, 1, 1, 0, 5), 0)
    module.hear_permit(Permit(9, 1_000), 0)
    return module


def test_an_ended_permit_does_not_come_back_when_the_milliseconds_wrap() -> None:
    """Module time has 32 bits of milliseconds: 49.7 days (2**32 / 86,400,000)."""
    careless, careful = permitted_once(), permitted_once()
    for module in (careless, careful):  # its console goes on telling it the clock
        module.hear_probe(Probe(9, 1, 1, 1, 0, 5), 1 << 30)
    careful.forget_old((1 << 30) + 2_000)
    for module in (careless, careful):
        module.hear_probe(Probe(9, 1, 1, 1, 0, 5), 0)  # and 2**32 ms have gone by
    assert careless.permit_left_ms(0) > 900
    assert careful.permit_left_ms(0) == 0
    assert careful.clock_told


def test_a_clock_told_long_ago_is_told_no_more() -> None:
    module = permitted_once()
    module.forget_old((1 << 30) - 1)
    assert module.clock_told
    module.forget_old(1 << 30)
    assert not module.clock_told


def test_the_grace_after_an_adoption_does_not_come_back_either() -> None:
    module = Allegiance()
    module.roll_call(5, 9, 0)
    module.forget_old(2_999)
    assert module.owner_left_ms(2_999) == 1
    module.forget_old(3_001)
    assert module.owner_left_ms(0) == 0


def test_nothing_that_still_holds_is_forgotten() -> None:
    module = permitted_once()
    module.forget_old(900)
    assert module.permit_left_ms(900) > 90
    early = Allegiance()
    early.roll_call(5, 9, 0)
    early.hear_permit(Permit(9, 5_000), 0)  # before its clock was told
    early.forget_old(100)
    early.hear_probe(Probe(9, 1, 1, 1, 0, 5), 200)
    assert early.permit_left_ms(200) > 4_000


# Telemetry slots; vectors.json has whole histories of them.


def slot(period_ms: int, phase_ms: int, console: int = OURS) -> Slot:
    return Slot(console, 7, period_ms, 0x2211, phase_ms)


def slotted(period_ms: int, phase_ms: int, offset_ms: int = 0) -> Allegiance:
    module = adopted()
    module.hear_probe(probe(offset_ms, 5), 0)
    assert module.hear_slot(slot(period_ms, phase_ms))
    return module


def test_a_slot_by_hand() -> None:
    module = slotted(400, 150, offset_ms=1000)
    assert module.slot_period_ms == 400
    assert [module.slot_after(at) for at in (1150, 1151, 1549, 1550)] == [1150, 1550, 1550, 1550]
    assert module.report_due_ms(1150, 500) == 1550
    assert module.report_due_ms(1349, 500) == 1550  # 1,549 is before it
    assert module.report_due_ms(1351, 500) == 1950  # 1,551 is past it


def test_no_slot_before_there_is_a_clock_and_none_of_nobodys() -> None:
    module = Allegiance()
    assert not module.hear_slot(slot(400, 150, console=0))
    module = adopted()
    assert module.hear_slot(slot(400, 150))
    assert (module.slot_period_ms, module.slot_after(0)) == (0, None)
    assert module.report_due_ms(7, 500) == 507
    module.hear_probe(probe(0, 5), 0)
    assert module.slot_after(0) == 150


@pytest.mark.parametrize(
    ("heard", "kept"),
    [
        (slot(400, 150), 400),
        (slot(400, 400), 400),
        (slot(400, 401), 400),
        (slot(1, 0, THEIRS), 400),
        (slot(0, 0, THEIRS), 400),
        (slot(0, 0), 0),
        (slot(0, 9), 0),
        (slot(1, 0), 1),
        (slot(65_535, 65_534), 65_535),
    ],
)
def test_what_changes_a_slot(heard: Slot, kept: int) -> None:
    module = slotted(400, 150)
    assert module.hear_slot(heard) == (kept != 400)
    assert module.slot_period_ms == kept


def test_a_slot_ends_with_its_console_and_not_with_its_epoch() -> None:
    module = slotted(400, 150)
    assert module.roll_call(EPOCH + 1, OURS, 5)
    assert module.slot_period_ms == 400
    module.release(THEIRS)
    assert module.slot_period_ms == 400
    module.release(OURS)
    assert module.slot_period_ms == 0
    module = slotted(400, 150)
    assert module.roll_call(EPOCH + 1, THEIRS, OWNER_GRACE_MS)
    assert module.slot_period_ms == 0
    module.hear_probe(probe(0, 5, THEIRS), OWNER_GRACE_MS)
    assert module.slot_period_ms == 0


def test_a_slot_is_not_kept_by_a_clock_told_twelve_days_ago() -> None:
    module = slotted(400, 150)
    module.forget_old((1 << 30) - 1)
    assert module.slot_period_ms == 400
    module.forget_old(1 << 30)
    assert module.slot_period_ms == 0


@given(
    st.integers(1, 65_535),
    st.integers(0, 65_534),
    st.integers(0, U32 - 1),
    st.integers(0, U32 - 1),
)
def test_the_next_slot_is_one_and_none_is_left_out(
    period_ms: int, phase_ms: int, offset_ms: int, last_ms: int
) -> None:
    """Against the definition: fleet time modulo the period is the phase. Where fleet time wraps
    on the way, the count begins anew, and a slot may come half a period early or late."""
    phase_ms %= period_ms
    module = slotted(period_ms, phase_ms, offset_ms)
    due_ms = module.report_due_ms(last_ms, 500)
    waits_ms = (due_ms - last_ms) % U32
    from_ms = (last_ms + period_ms // 2 - offset_ms) % U32
    assert period_ms // 2 <= waits_ms < period_ms // 2 + period_ms
    if from_ms + period_ms < U32:
        assert (due_ms - offset_ms) % U32 % period_ms == phase_ms
