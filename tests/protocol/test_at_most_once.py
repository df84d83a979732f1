"""Law 1, searched for exceptions; the last tests put a fault into a module and expect the search
to find it. The world that is searched is tests/support/exchange_world.py.
"""

from concurrent.futures import ProcessPoolExecutor
from dataclasses import replace
from multiprocessing import get_context

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from protocol.allegiance import Allegiance
from protocol.codes import Reason
from protocol.command_memory import CommandMemory, Fresh, Reply
from protocol.exchange import Ending
from protocol.message import Answer, Command, Facts, Permit, Probe, Query
from tests.support.exchange_boxes import Key, key_of
from tests.support.exchange_world import CLEAR_SKY, FAIR, FOUL, SLOW, Weather, World


class ForgetsPassedNumbers(CommandMemory):
    """A fault: what is not remembered is taken for fresh, however old its number."""

    def judge(self, command: Command, owned: bool = False) -> Fresh | Reply:
        verdict = super().judge(command, owned)
        if isinstance(verdict, Reply) and verdict.message.reason == Reason.NUMBER_PASSED:
            return Fresh()
        return verdict


class IgnoresBoot(CommandMemory):
    """A fault: a command meant for another boot is carried out."""

    def judge(self, command: Command, owned: bool = False) -> Fresh | Reply:
        return super().judge(command._replace(boot=self.boot), owned)


class IgnoresEpoch(CommandMemory):
    """A fault: a command of another console epoch is carried out."""

    def judge(self, command: Command, owned: bool = False) -> Fresh | Reply:
        return super().judge(command._replace(epoch=self.epoch), owned)


class UnknownIsNotFinal(CommandMemory):
    """A fault: a command asked about, and answered as unknown, is carried out later."""

    def _take(self, number: int) -> None:
        if not self._asked:
            super()._take(number)

    _asked = False

    def query(self, query: Query) -> Answer | Facts:
        self._asked = True
        reply = super().query(query)
        self._asked = False
        return reply


class RepeatsTheDeed(CommandMemory):
    """A fault: nothing is remembered at all."""

    def judge(self, command: Command, owned: bool = False) -> Fresh | Reply:
        self._newest = None
        self._replies.clear()
        return super().judge(command, owned)


class AnybodysModule(Allegiance):
    """A fault: whoever calls with a newer epoch is followed, whether somebody owns it or not."""

    def roll_call(self, epoch: int, console: int, now_ms: int) -> bool:
        self.release(self.console)
        return super().roll_call(epoch, console, now_ms)


class TakesAnyEpoch(Allegiance):
    """A fault: an epoch need not be newer, so that a late roll call brings an old one back."""

    def roll_call(self, epoch: int, console: int, now_ms: int) -> bool:
        self.epoch = 0 if (epoch, console) != (self.epoch, self.console) else self.epoch
        return super().roll_call(epoch, console, now_ms)


class AnybodysPermit(Allegiance):
    """A fault: the permit of any console is taken for that of the one it follows."""

    def hear_permit(self, permit: Permit, now_ms: int) -> None:
        super().hear_permit(permit._replace(console=self.console), now_ms)


class AnybodysClock(Allegiance):
    """A fault: what any console makes of its clock is believed."""

    def hear_probe(self, probe: Probe, now_ms: int) -> None:
        super().hear_probe(probe._replace(console=self.console), now_ms)


@pytest.mark.parametrize("seed", range(4))
@pytest.mark.parametrize("weather", [FAIR, FOUL], ids=["fair", "foul"])
def test_no_breach_and_no_false_refusal(seed: int, weather: Weather) -> None:
    world = World(seed, weather).run(1000)
    assert world.breaches() == []
    assert world.false_refusals() == []
    # The search is worth something only if the air and the consoles did what they were asked to.
    assert world.deeds.restarts > 3
    assert world.deeds.repeats > 20
    assert world.deeds.takeovers > 5
    assert world.deeds.owned > 20
    assert world.deeds.without_permit > 5
    assert min(world.endings()[how] for how in Ending) > 20


def test_permits_lapse_and_consoles_restart_in_it() -> None:
    worlds = [World(seed, FOUL).run(1000) for seed in range(5)]
    assert sum(world.deeds.lapses for world in worlds) > 5
    assert sum(world.console_restarts for world in worlds) > 5
    assert sum(len(world.abandoned) for world in worlds) > 5


def wrong_of(seed: int) -> tuple[int, list[str], list[Key]]:
    world = World(seed, FOUL if seed % 2 else FAIR).run(1000)
    return seed, world.breaches(), world.false_refusals()


def test_two_hundred_thousand_commands() -> None:
    """Half a minute on two cores, over air that loses up to 40 %, of two consoles that know
    nothing of each other."""
    with ProcessPoolExecutor(max_workers=2, mp_context=get_context("spawn")) as pool:
        found = list(pool.map(wrong_of, range(1000, 1200), chunksize=10))
    assert found == [(seed, [], []) for seed in range(1000, 1200)]


@pytest.mark.parametrize("seed", range(6))
def test_no_breach_where_copies_come_seconds_late(seed: int) -> None:
    world = World(seed, SLOW).run(500)
    assert world.breaches() == []
    assert world.endings()[Ending.FINISHED] > 50


@pytest.mark.parametrize("seed", range(4))
def test_one_console_alone(seed: int) -> None:
    world = World(seed, FOUL if seed % 2 else FAIR, consoles=1).run(1000)
    assert (world.breaches(), world.false_refusals()) == ([], [])
    assert world.endings()[Ending.FINISHED] > 100


def test_three_consoles() -> None:
    world = World(3, FAIR, consoles=3).run(1000)
    assert (world.breaches(), world.false_refusals()) == ([], [])
    assert world.deeds.takeovers > 10


def test_under_a_clear_sky_one_console_leaves_nothing_unseen_that_was_done() -> None:
    """Unseen there are only commands that met a new epoch of their own console on the way."""
    world = World(1, CLEAR_SKY, consoles=1).run(1000)
    assert world.breaches() == []
    unseen = [number for number, endings in world.ended.items() if Ending.UNSEEN in endings]
    assert not any(world.deeds.carried_out[key_of(*world.sent[number])] for number in unseen)
    assert len(unseen) < 50
    assert world.endings()[Ending.FINISHED] > 400


def test_one_seed_gives_one_history() -> None:
    first, second = (World(5, FOUL).run(200) for _ in range(2))
    assert first.ended == second.ended
    assert first.deeds.carried_out == second.deeds.carried_out


@settings(max_examples=30, deadline=None, derandomize=True)
@given(
    seed=st.integers(0, 2**32),
    weather=st.builds(
        Weather,
        loss=st.floats(0, 0.4),
        repeat=st.floats(0, 0.5),
        damage=st.floats(0, 0.2),
        spread_ms=st.integers(0, 500),
        late=st.floats(0, 0.3),
        late_ms=st.integers(0, 3000),
        restart=st.floats(0, 0.2),
        deaf_ms=st.integers(0, 1000),
        capacity=st.integers(1, 8),
        console_restart=st.floats(0, 0.02),
    ),
    consoles=st.integers(1, 3),
)
def test_no_breach_in_any_weather(seed: int, weather: Weather, consoles: int) -> None:
    assert World(seed, weather, consoles=consoles).run(60).breaches() == []


@pytest.mark.parametrize(
    ("fault", "weather"),
    [
        (ForgetsPassedNumbers, SLOW),
        (IgnoresBoot, SLOW),
        (IgnoresEpoch, SLOW),
        (UnknownIsNotFinal, SLOW),
        (RepeatsTheDeed, FAIR),
    ],
)
def test_the_search_finds_a_faulty_memory(fault: type[CommandMemory], weather: Weather) -> None:
    found = [
        breach for seed in range(6) for breach in World(seed, weather, fault).run(500).breaches()
    ]
    assert found, f"six searches found nothing wrong with {fault.__name__}"


@pytest.mark.parametrize("capacity", [1, 2])
def test_the_search_finds_a_memory_of_too_few_replies(capacity: int) -> None:
    """A rest overtakes a pivot whose acceptance was lost; the pivot's next copy is then refused as
    passed, although it runs."""
    weather = replace(FOUL, capacity=capacity)
    worlds = [World(seed, weather).run(500) for seed in range(6)]
    assert sum(len(world.false_refusals()) for world in worlds) > 0


@pytest.mark.parametrize(
    ("fault", "weather", "word"),
    [
        (AnybodysModule, FAIR, "not followed"),
        (TakesAnyEpoch, SLOW, "carried out"),
        (AnybodysPermit, FAIR, "without a permit"),
        (AnybodysClock, FAIR, "without a permit"),
    ],
)
def test_the_search_finds_a_module_that_does_not_check_who_owns_it(
    fault: type[Allegiance], weather: Weather, word: str
) -> None:
    found = [
        breach
        for seed in range(6)
        for breach in World(seed, weather, allegiance_type=fault).run(500).breaches()
        if word in breach
    ]
    assert found, f"six searches found nothing wrong with {fault.__name__}"
