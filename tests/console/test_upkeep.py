"""Permits, probes, bridge questions: what is said, how often, and from what it follows."""

import itertools
from dataclasses import replace

import pytest
from hypothesis import given
from hypothesis import strategies as st

from console.limits import NS_PER_MS, RENEWALS, Limits
from console.upkeep import (
    BRIDGE_PERIOD_NS,
    EXCHANGES_WANTED,
    PROBE_CALM_NS,
    PROBE_HASTE_NS,
    BridgeAsker,
    PermitKeeper,
    ProbeKeeper,
    fleet_ms,
    latest_start_ms,
    told,
)
from protocol.allegiance import Allegiance, ms_until
from protocol.clock import ModuleClock
from protocol.codes import BRIDGE_ADDRESS, EVERYONE_ADDRESS, Flags
from protocol.message import BOUND_UNKNOWN, BridgeAsk, Permit, Probe
from tests.support.fake_fleet import eight

CONSOLE = 0xC0C0
LIMITS = Limits()
SECOND_NS = 1_000 * NS_PER_MS


def clock_with(offset_ns: int, delay_ns: int = 4 * NS_PER_MS, exchanges: int = 1) -> ModuleClock:
    clock = ModuleClock(2_000)
    for count in range(exchanges):
        t1_ns = count * SECOND_NS
        t2_ns = t1_ns + delay_ns // 2 + offset_ns
        clock.sample(t1_ns, t2_ns, t2_ns, t1_ns + delay_ns)
    return clock


# -- probes on a channel that carries only so many --------------------------------------------


def test_probes_keep_a_gap_and_everybody_gets_a_turn() -> None:
    """Eight who are all to be asked four times a second, and room for ten a second."""
    keeper = ProbeKeeper(LIMITS, gap_ns=100 * NS_PER_MS)
    asked: list[tuple[int, int]] = []
    t_ns = 0
    while t_ns < 16 * SECOND_NS:
        said = keeper.due(CONSOLE, eight(), lambda at: None, t_ns)
        asked += [(t_ns, each.address) for each in said]
        assert keeper.next_ns is not None
        t_ns = max(keeper.next_ns, t_ns + NS_PER_MS)
    times = [at_ns for at_ns, _ in asked]
    assert {behind - before for before, behind in itertools.pairwise(times)} == {100 * NS_PER_MS}
    addresses = [address for _, address in asked]
    assert sorted(addresses[:8]) == sorted(each.address for each in eight())
    assert addresses[8:] == addresses[:-8]


# -- permits ---------------------------------------------------------------------------------


def test_without_a_sign_of_life_nothing_is_permitted() -> None:
    keeper = PermitKeeper(LIMITS)
    assert keeper.next_ns is None
    assert keeper.due(CONSOLE, [0], 10 * SECOND_NS) == []
    assert not keeper.alive(0)


def test_a_permit_ends_its_length_after_the_last_sign_of_life() -> None:
    keeper = PermitKeeper(LIMITS)
    keeper.beat(3 * SECOND_NS)
    [said] = keeper.due(CONSOLE, [0], 3 * SECOND_NS + 40 * NS_PER_MS)
    assert said.message == Permit(CONSOLE, 4_000)
    assert (said.address, said.urgent) == (EVERYONE_ADDRESS, True)


def test_it_is_renewed_eight_times_in_its_length_and_on_every_link() -> None:
    keeper = PermitKeeper(LIMITS)
    said = []
    for t_ns in range(0, 10 * SECOND_NS, 5 * NS_PER_MS):
        keeper.beat(t_ns)
        said += keeper.due(CONSOLE, [0, 2], t_ns)
    assert len(said) == 2 * 10 * RENEWALS
    expiries_ms = [each.message.expiry_ms for each in said]  # type: ignore[union-attr]
    assert expiries_ms == sorted(expiries_ms)


def test_a_heart_that_stops_stops_the_permits_and_one_that_goes_on_renews_them_at_once() -> None:
    keeper = PermitKeeper(LIMITS)
    keeper.beat(0)
    said = [t for t in range(0, 5 * SECOND_NS, NS_PER_MS) if keeper.due(CONSOLE, [0], t)]
    assert max(said) < LIMITS.permit_ns
    assert keeper.next_ns is None
    assert not keeper.alive(5 * SECOND_NS)
    keeper.beat(6 * SECOND_NS)
    [again] = keeper.due(CONSOLE, [0], 6 * SECOND_NS)
    assert again.message == Permit(CONSOLE, 7_000)


def test_an_older_sign_of_life_changes_nothing() -> None:
    keeper = PermitKeeper(LIMITS)
    keeper.beat(2 * SECOND_NS)
    keeper.beat(SECOND_NS)
    [said] = keeper.due(CONSOLE, [0], 2 * SECOND_NS)
    assert said.message == Permit(CONSOLE, 3_000)


# -- probes ----------------------------------------------------------------------------------


def probed(keeper: ProbeKeeper, clock: ModuleClock | None, until_ns: int, flags: int) -> list[int]:
    modules = (replace(eight()[0], flags=flags),)
    step_ns = 10 * NS_PER_MS
    return [
        t_ns
        for t_ns in range(0, until_ns, step_ns)
        if keeper.due(CONSOLE, modules, lambda _: clock, t_ns)
    ]


def gaps(times: list[int]) -> set[int]:
    return {later - earlier for earlier, later in itertools.pairwise(times)}


def test_an_unknown_clock_is_asked_for_in_haste() -> None:
    assert gaps(probed(ProbeKeeper(LIMITS), None, 3 * SECOND_NS, 0)) == {PROBE_HASTE_NS}


def test_a_known_clock_that_the_module_was_told_is_asked_for_calmly() -> None:
    clock = clock_with(55 * SECOND_NS, exchanges=EXCHANGES_WANTED)
    times = probed(ProbeKeeper(LIMITS), clock, 21 * SECOND_NS, Flags.CLOCK_TOLD)
    assert gaps(times) == {PROBE_CALM_NS}


@pytest.mark.parametrize(
    ("clock", "flags"),
    [
        (clock_with(0, exchanges=EXCHANGES_WANTED - 1), Flags.CLOCK_TOLD),
        (clock_with(0, exchanges=EXCHANGES_WANTED), 0),
        (clock_with(0, 900 * NS_PER_MS, EXCHANGES_WANTED), Flags.CLOCK_TOLD),
    ],
    ids=["few exchanges", "not told", "too vague"],
)
def test_what_is_not_settled_is_asked_in_haste(clock: ModuleClock, flags: int) -> None:
    assert gaps(probed(ProbeKeeper(LIMITS), clock, 3 * SECOND_NS, flags)) == {PROBE_HASTE_NS}


def test_a_restarted_module_is_probed_soon_under_its_new_boot() -> None:
    keeper, clock = ProbeKeeper(LIMITS), clock_with(0, exchanges=EXCHANGES_WANTED)
    before = replace(eight()[0], flags=int(Flags.CLOCK_TOLD))
    after = replace(before, boot=before.boot + 1)
    keeper.due(CONSOLE, (before,), lambda _: clock, 0)
    [said] = keeper.due(CONSOLE, (after,), lambda _: clock, PROBE_HASTE_NS)
    assert isinstance(said.message, Probe)
    assert said.message.boot == after.boot


def test_a_newcomer_is_probed_at_once() -> None:
    keeper = ProbeKeeper(LIMITS)
    keeper.due(CONSOLE, eight()[:1], lambda _: None, 0)
    [said] = keeper.due(CONSOLE, eight()[:2], lambda _: None, 1)
    assert said.address == eight()[1].address


def test_a_probe_carries_who_asks_whom_and_a_sequence_of_its_own() -> None:
    keeper = ProbeKeeper(LIMITS)
    said = keeper.due(CONSOLE, eight(), lambda _: None, 0)
    probes = [each.message for each in said if isinstance(each.message, Probe)]
    assert [each.identity_bits for each in probes] == [each.identity & 0xFFFF for each in eight()]
    assert {(each.console, each.boot, each.bound_ms) for each in probes} == {
        (CONSOLE, 7, BOUND_UNKNOWN)
    }
    assert len({each.sequence for each in probes}) == len(probes)


def test_a_bound_that_has_no_room_reads_as_unknown() -> None:
    assert told(clock_with(0, 200 * SECOND_NS), 200 * SECOND_NS)[1] == BOUND_UNKNOWN


OFFSETS_NS = st.integers(-(10**15), 10**15)
DELAYS_NS = st.integers(0, 400 * NS_PER_MS)


@given(OFFSETS_NS, DELAYS_NS, st.floats(0, 1), st.integers(0, 30 * SECOND_NS))
def test_what_a_module_is_told_is_within_the_bound_that_it_is_told(
    offset_ns: int, delay_ns: int, share: float, later_ns: int
) -> None:
    """Whatever part of the round trip each way took."""
    clock = ModuleClock(2_000)
    heard_ns = round(delay_ns * share)
    clock.sample(0, heard_ns + offset_ns, heard_ns + offset_ns, delay_ns)
    at_ns = delay_ns + later_ns
    offset_ms, bound_ms = told(clock, at_ns)
    off_ms = ms_until(offset_ms, offset_ns // NS_PER_MS % 2**32)
    assert abs(off_ms) <= bound_ms


@given(OFFSETS_NS, DELAYS_NS, st.floats(0, 1), st.integers(0, 30 * SECOND_NS))
def test_the_latest_start_is_never_later_than_was_meant(
    offset_ns: int, delay_ns: int, share: float, later_ns: int
) -> None:
    clock = ModuleClock(2_000)
    heard_ns = round(delay_ns * share)
    clock.sample(0, heard_ns + offset_ns, heard_ns + offset_ns, delay_ns)
    latest_ns = delay_ns + later_ns
    truth_ms = (latest_ns + offset_ns) // NS_PER_MS % 2**32
    assert ms_until(latest_start_ms(clock, latest_ns), truth_ms) <= 0


@given(OFFSETS_NS, DELAYS_NS, st.floats(0, 1))
def test_a_permit_never_outlasts_what_the_console_meant(
    offset_ns: int, delay_ns: int, share: float
) -> None:
    """Keeper, estimate and module together: law 4 on true clocks."""
    clock = ModuleClock(2_000)
    heard_ns = round(delay_ns * share)
    clock.sample(0, heard_ns + offset_ns, heard_ns + offset_ns, delay_ns)
    beat_ns = delay_ns + SECOND_NS
    offset_ms, bound_ms = told(clock, beat_ns)

    def module_ms(t_ns: int) -> int:
        return (t_ns + offset_ns) // NS_PER_MS % 2**32

    module = Allegiance()
    module.roll_call(5, CONSOLE, module_ms(0))
    probe = Probe(CONSOLE, 1, 1, 1, offset_ms, bound_ms)
    module.hear_probe(probe, module_ms(beat_ns))
    keeper = PermitKeeper(LIMITS)
    keeper.beat(beat_ns)
    [said] = keeper.due(CONSOLE, [0], beat_ns)
    assert isinstance(said.message, Permit)
    module.hear_permit(said.message, module_ms(beat_ns))
    assert module.permit_left_ms(module_ms(beat_ns + LIMITS.permit_ns)) == 0
    if delay_ns < 100 * NS_PER_MS:
        assert module.permit_left_ms(module_ms(beat_ns)) > 700


def test_fleet_time_wraps() -> None:
    assert fleet_ms(0) == 0
    assert fleet_ms((2**32 + 5) * NS_PER_MS) == 5


# -- bridges ---------------------------------------------------------------------------------


def test_each_link_s_bridge_is_asked_every_two_seconds() -> None:
    asker = BridgeAsker()
    said = [(t, each) for t in range(0, 6 * SECOND_NS, NS_PER_MS) for each in asker.due([0, 1], t)]
    assert len(said) == 2 * 6 * SECOND_NS // BRIDGE_PERIOD_NS
    assert {each.address for _, each in said} == {BRIDGE_ADDRESS}
    assert [each.message for _, each in said[:3]] == [BridgeAsk(1), BridgeAsk(1), BridgeAsk(2)]
