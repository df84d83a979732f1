"""Law 1, searched for exceptions; the last tests put a fault into the memory and expect the
search to find it. The world that is searched is tests/support/exchange_world.py.
"""

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from protocol.codes import Reason
from protocol.command_memory import CommandMemory, Fresh, Reply
from protocol.exchange import Ending
from protocol.message import Answer, Command, Facts, Query
from tests.support.exchange_world import CLEAR_SKY, FAIR, FOUL, SLOW, Weather, World


class ForgetsPassedNumbers(CommandMemory):
    """A fault: what is not remembered is taken for fresh, however old its number."""

    def judge(self, command: Command) -> Fresh | Reply:
        verdict = super().judge(command)
        if isinstance(verdict, Reply) and verdict.message.reason == Reason.NUMBER_PASSED:
            return Fresh()
        return verdict


class IgnoresBoot(CommandMemory):
    """A fault: a command meant for another boot is carried out."""

    def judge(self, command: Command) -> Fresh | Reply:
        return super().judge(command._replace(boot=self.boot))


class IgnoresEpoch(CommandMemory):
    """A fault: a command of another console epoch is carried out."""

    def judge(self, command: Command) -> Fresh | Reply:
        return super().judge(command._replace(epoch=self.epoch))


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

    def judge(self, command: Command) -> Fresh | Reply:
        self._newest = None
        self._replies.clear()
        return super().judge(command)


@pytest.mark.parametrize("seed", range(4))
@pytest.mark.parametrize("weather", [FAIR, FOUL], ids=["fair", "foul"])
def test_no_breach_and_no_false_refusal(seed: int, weather: Weather) -> None:
    world = World(seed, weather).run(1000)
    assert world.breaches() == []
    assert world.false_refusals() == []
    # The search is worth something only if the air did what it was asked to.
    assert world.deeds.restarts > 3
    assert world.deeds.repeats > 20
    assert min(world.endings()[how] for how in Ending) > 20


@pytest.mark.parametrize("share", range(8))
def test_two_hundred_thousand_commands(share: int) -> None:
    """Some twenty seconds in all, over air that loses up to 40 %."""
    for seed in range(1000 + 25 * share, 1025 + 25 * share):
        world = World(seed, FOUL if seed % 2 else FAIR).run(1000)
        assert (seed, world.breaches(), world.false_refusals()) == (seed, [], [])


@pytest.mark.parametrize("seed", range(6))
def test_no_breach_where_copies_come_seconds_late(seed: int) -> None:
    world = World(seed, SLOW).run(500)
    assert world.breaches() == []
    assert world.endings()[Ending.FINISHED] > 50


def test_under_a_clear_sky_nothing_stays_unseen() -> None:
    world = World(1, CLEAR_SKY).run(1000)
    assert world.breaches() == []
    assert world.endings()[Ending.UNSEEN] == 0
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
        capacity=st.integers(1, 16),
    ),
)
def test_no_breach_in_any_weather(seed: int, weather: Weather) -> None:
    assert World(seed, weather).run(60).breaches() == []


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
