"""Who is given a telemetry slot, when, and when again."""

from dataclasses import replace
from itertools import pairwise

import pytest

from console.airtime import Channel
from console.limits import NS_PER_MS
from console.slots import (
    LOOK_NS,
    MISSES,
    MOST_GUARD_NS,
    SETTLE_NS,
    SHARE_OF_AIR,
    NewPlan,
    SlotKeeper,
)
from console.upkeep import Saying
from console.view import ModuleView
from protocol.clock import ModuleClock
from protocol.codes import Flags, SettingId, identity_bits
from protocol.frame import FrameDecoder
from protocol.message import Slot, decode
from sim_link.options import SimOptions
from storage.records import BytesOut, SlotsPlanned
from storage.rows import TelemetryRow
from tests.support.fake_fleet import eight
from tests.support.virtual import VirtualSession

CONSOLE = 0xC0C0
S = 1_000 * NS_PER_MS
CHANNEL = Channel(115_200)
AHEAD_MS = 7_000
"""Every module's clock is seven seconds ahead of the fleet's."""


def clock(delay_ns: int = 4 * NS_PER_MS) -> ModuleClock:
    made = ModuleClock(2_000)
    heard_ns = delay_ns // 2 + AHEAD_MS * NS_PER_MS
    made.sample(0, heard_ns, heard_ns, delay_ns)
    return made


def ready(module: ModuleView, period_ms: int | None = 500, **changes: object) -> ModuleView:
    """Following this console, its clock told, its setting read."""
    settings = () if period_ms is None else ((int(SettingId.TELEMETRY_PERIOD_MS), period_ms),)
    base = replace(module, console=CONSOLE, flags=int(Flags.CLOCK_TOLD), settings=settings)
    return replace(base, **changes)  # type: ignore[arg-type]


class Fleet:
    """Modules, their clocks and last reports, and a keeper that is asked whenever it wants."""

    def __init__(self, modules: list[ModuleView], channel: Channel = CHANNEL) -> None:
        self.modules = modules
        self.keeper = SlotKeeper(channel, sealed=False)
        self.clocks = {each.module: clock() for each in modules}
        self.keeping: dict[int, int] = {}
        """By module, how far its reports are from its slot, ms; left out: nothing is heard."""
        self.slots: dict[int, Slot] = {}
        self.said: list[tuple[int, Saying]] = []
        self.t_ns = 0

    def report_ms(self, module: int) -> int | None:
        """Module time of the newest report that is in its slot, or so far off it."""
        slot = self.slots.get(module)
        if slot is None or module not in self.keeping:
            return None
        now_ms = self.t_ns // NS_PER_MS
        last_ms = now_ms - (now_ms - slot.phase_ms) % slot.period_ms
        return (last_ms + self.keeping[module] + AHEAD_MS) % 2**32

    def run(self, seconds: float) -> list[tuple[int, Saying]]:
        """What is said in so many seconds."""
        before, end_ns = len(self.said), self.t_ns + int(seconds * S)
        while self.keeper.next_ns <= end_ns:
            self.t_ns = max(self.t_ns, self.keeper.next_ns)
            for each in self.keeper.due(
                CONSOLE, self.modules, self.clocks.get, self.report_ms, self.t_ns
            ):
                self.said.append((self.t_ns, each))
                number = next(m.module for m in self.modules if m.address == each.address)
                assert isinstance(each.message, Slot)
                self.slots[number] = each.message
        self.t_ns = end_ns
        return self.said[before:]


def fleet_of_eight(**changes: object) -> Fleet:
    fleet = Fleet([ready(each, **changes) for each in eight()])  # type: ignore[arg-type]
    fleet.keeping = dict.fromkeys(range(1, 9), 0)
    return fleet


# -- the first time --------------------------------------------------------------------------


def test_each_module_gets_its_own_once_they_have_been_the_same_for_a_while() -> None:
    fleet = fleet_of_eight()
    assert fleet.run((SETTLE_NS - 1) / S) == []
    said = fleet.run(2)
    assert [each.address for _, each in said] == [each.address for each in fleet.modules]
    phases = [each.message.phase_ms for _, each in said if isinstance(each.message, Slot)]
    assert phases == sorted(set(phases))
    for module in fleet.modules:
        slot = fleet.slots[module.module]
        assert slot == Slot(
            CONSOLE, module.boot, 500, identity_bits(module.identity), slot.phase_ms
        )


def test_slots_are_given_one_at_a_time_and_take_an_eighth_of_the_channel() -> None:
    """34 bytes a Slot: 14 of body, 6 of header, 6 around it, 8 of the radio's own."""
    fleet = fleet_of_eight()
    times = [t_ns for t_ns, _ in fleet.run(6)]
    gaps = {behind - before for before, behind in pairwise(times)}
    assert gaps == {SHARE_OF_AIR * -(-34 * 8 * 10**9 // 115_200)}


def test_nobody_gets_one_before_its_clock_was_told_or_from_another_console() -> None:
    alder, birch, cedar, *_ = [ready(each) for each in eight()]
    fleet = Fleet([alder, replace(birch, flags=0), replace(cedar, console=0xBEEF)])
    fleet.keeping = {1: 0}
    assert {each.address for _, each in fleet.run(9)} == {alder.address}
    fleet.modules = [alder, birch, replace(cedar, console=0xBEEF)]
    assert {each.address for _, each in fleet.run(9)} == {birch.address}


def test_nothing_is_planned_before_a_setting_was_read() -> None:
    fleet = fleet_of_eight(period_ms=None)
    assert (fleet.run(9), fleet.keeper.plans()) == ([], [])
    fleet.modules[3] = ready(fleet.modules[3], 1_000)
    assert len(fleet.run(9)) == 8
    assert {slot.period_ms for slot in fleet.slots.values()} == {1_000}


def test_who_is_to_report_more_seldom_does() -> None:
    modules = [ready(each, 500 * (1 + place % 2)) for place, each in enumerate(eight())]
    fleet = Fleet(modules)
    fleet.run(9)
    assert [fleet.slots[each.module].period_ms for each in modules] == [500, 1_000] * 4


# -- plans -----------------------------------------------------------------------------------


def test_a_plan_is_told_of_once() -> None:
    fleet = fleet_of_eight()
    fleet.run(9)
    [told] = fleet.keeper.plans()
    assert isinstance(told, NewPlan)
    assert (told.link, told.modules, told.plan.period_ms, told.plan.slowed) == (0, 8, 500, False)
    fleet.run(60)
    assert fleet.keeper.plans() == []


def test_a_channel_that_is_too_slow_is_told_of() -> None:
    """43 bytes at 1,200 bit/s are 286.7 ms, eight of them 2.293 s, and four times that 9.173 s,
    rounded up to a millisecond."""
    fleet = Fleet([ready(each) for each in eight()], Channel(1_200))
    fleet.run(30)
    [told] = fleet.keeper.plans()
    assert told.plan.slowed
    assert told.plan.period_ms == 9_174
    assert {slot.period_ms for slot in fleet.slots.values()} == {9_174}


def test_one_more_module_means_a_new_plan_after_a_while() -> None:
    fleet = Fleet([ready(each) for each in eight()[:7]])
    fleet.run(9)
    fleet.modules.append(ready(eight()[7]))
    fleet.clocks[8] = clock()
    fleet.keeping = dict.fromkeys(range(1, 9), 0)
    said = fleet.run(9)
    assert {each.address for _, each in said} == {each.address for each in fleet.modules[1:]}
    assert len(fleet.keeper.plans()) == 2


def test_a_clock_that_is_hardly_known_widens_slots_only_so_far() -> None:
    fleet = fleet_of_eight()
    fleet.run(9)
    narrow_ms = fleet.keeper.plans()[0].plan.slot_ms
    doubtful = fleet_of_eight()
    doubtful.clocks[5] = clock(delay_ns=400 * NS_PER_MS)
    doubtful.run(9)
    wide_ms = doubtful.keeper.plans()[0].plan.slot_ms
    frame_ns = CHANNEL.frame_ns(29)
    assert narrow_ms < wide_ms == -(-(frame_ns + MOST_GUARD_NS) // NS_PER_MS)


def test_the_frames_own_time_on_the_air_is_no_doubt() -> None:
    """At 9,600 bit/s Probe and Echo are 38 and 40 bytes, 65 ms: a clock that was measured over just
    that is known as well as it can be, and the guard is the rounding's alone, 1 ms."""
    slow = Channel(9_600)
    fleet = Fleet([ready(each) for each in eight()], slow)
    exchange_ns = slow.frame_ns(24) + slow.frame_ns(26)
    fleet.clocks = {each.module: clock(exchange_ns) for each in fleet.modules}
    fleet.run(4)
    [told] = fleet.keeper.plans()
    drifted_ns = 2 * NS_PER_MS  # 120 parts in a million of three seconds, twice, and more
    assert told.plan.slot_ms * NS_PER_MS <= slow.frame_ns(29) + 2 * NS_PER_MS + drifted_ns


# -- again -----------------------------------------------------------------------------------


def test_who_keeps_its_slot_hears_no_more_of_it() -> None:
    fleet = fleet_of_eight()
    fleet.keeping = dict.fromkeys(range(1, 9), 1)
    fleet.run(9)
    assert fleet.run(600) == []


def test_who_is_off_its_slot_gets_it_again_and_more_and_more_seldom() -> None:
    fleet = fleet_of_eight()
    fleet.keeping = {**dict.fromkeys(range(1, 9), 0), 3: 100}
    fleet.run(9)
    said = fleet.run(600)
    assert {each.address for _, each in said} == {fleet.modules[2].address}
    times = [t_ns for t_ns, _ in said]
    gaps_s = [(behind - before) / S for before, behind in pairwise(times)]
    assert min(gaps_s) >= MISSES * LOOK_NS / S
    assert gaps_s == sorted(gaps_s)
    assert max(gaps_s) <= 70
    fleet.keeping[3] = 0
    fleet.run(70)
    assert fleet.run(600) == []


def test_a_report_at_a_change_of_activity_is_no_reason() -> None:
    fleet = fleet_of_eight()
    fleet.keeping = dict.fromkeys(range(1, 9), 0)
    fleet.run(9)
    for _ in range(20):
        fleet.keeping[3] = 200
        assert fleet.run(1) == []
        fleet.keeping[3] = 0
        assert fleet.run(1) == []


def test_who_is_not_heard_may_have_missed_it() -> None:
    """It is given again, at last once a minute; one that is found in its slot is left alone."""
    fleet = fleet_of_eight()
    fleet.keeping = {each: 0 for each in range(1, 9) if each != 6}
    fleet.run(9)
    said = fleet.run(600)
    assert {each.address for _, each in said} == {fleet.modules[5].address}
    assert 10 <= len(said) <= 20
    fleet.keeping[6] = 0
    fleet.run(9)
    assert fleet.run(600) == []


def test_a_restarted_module_gets_its_own_again_and_nobody_elses_moves() -> None:
    fleet = fleet_of_eight()
    fleet.keeping = dict.fromkeys(range(1, 9), 0)
    fleet.run(9)
    before = dict(fleet.slots)
    follows = fleet.modules[4]
    fleet.modules[4] = replace(follows, boot=follows.boot + 1, console=0, flags=0)
    assert fleet.run(9) == []
    fleet.modules[4] = replace(follows, boot=follows.boot + 1)
    [(_, said)] = fleet.run(9)
    assert said.message == before[5]._replace(boot=follows.boot + 1)
    assert fleet.keeper.plans()[1:] == []


@pytest.mark.parametrize("links", [1, 2])
def test_each_link_has_a_channel_of_its_own(links: int) -> None:
    modules = [ready(each, link=each.module % links) for each in eight()]
    fleet = Fleet(modules)
    fleet.run(9)
    plans = fleet.keeper.plans()
    assert sorted(each.modules for each in plans) == [8 // links] * links
    assert all(each.link == fleet.modules[0].link or links > 1 for _, each in fleet.said)


# -- a whole session -------------------------------------------------------------------------


def reports(session: VirtualSession, since_ns: int) -> dict[int, list[int]]:
    """Fleet times in ms at which each module's telemetry arrived, by module."""
    found: dict[int, list[int]] = {}
    for row in session.log.rows:
        if isinstance(row, TelemetryRow) and row.t_ns >= since_ns:
            found.setdefault(row.module, []).append(row.t_ns // NS_PER_MS)
    return found


def slots_sent(session: VirtualSession) -> list[Slot]:
    """All Slots that the console has sent."""
    decoder, found = FrameDecoder(), []
    for _, record in session.log.records:
        if isinstance(record, BytesOut):
            pieces = [each for each in decoder.feed(record.data) if isinstance(each, bytes)]
            found += [decode(each).message for each in pieces]
    return [each for each in found if isinstance(each, Slot)]


def test_a_simulated_fleet_keeps_its_slots_and_a_restarted_module_gets_its_own_again() -> None:
    session = VirtualSession(SimOptions(seed=3, delay_ms=3), channel=CHANNEL)
    session.run_for(10)
    session.world.modules[4].restart(session.now_ns)
    session.run_for(15)
    began_ns = session.now_ns
    session.run_for(20)
    sent = slots_sent(session)
    assert len(sent) == 9
    phases = {each.boot: each.phase_ms for each in sent}
    for module in session.view.modules:
        times = reports(session, began_ns)[module.module]
        assert len(times) == 40
        # Three milliseconds under way, a fifth of that more by chance, and the line.
        late = {(each - phases[module.boot]) % 500 for each in times}
        assert late <= set(range(2, 7))


def test_without_an_air_rate_all_is_as_it_was() -> None:
    session = VirtualSession(SimOptions(seed=3))
    session.run_for(10)
    assert slots_sent(session) == []


def test_a_channel_that_slows_telemetry_is_told_of_and_its_plan_recorded() -> None:
    """Eight frames of 35.8 ms in a twentieth of the time: 5.734 s."""
    session = VirtualSession(SimOptions(seed=3), channel=Channel(9_600, 5.0))
    session.run_for(40)
    plans = [each for _, each in session.log.records if isinstance(each, SlotsPlanned)]
    assert [(each.asked_ms, each.period_ms, each.modules) for each in plans] == [(500, 5_734, 8)]
    assert any("5.734 s" in text for _, text in session.view.notices)
    began_ns = session.now_ns
    session.run_for(3 * 5.734)
    assert {len(each) for each in reports(session, began_ns).values()} == {3}
