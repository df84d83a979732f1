"""Law 1 for the whole console core, in random scripts; a small part of the long proof.

That a missing check of the boot number is found is tested where copies come late enough for it,
in tests/protocol/test_at_most_once.py.
"""

from concurrent.futures import ProcessPoolExecutor
from multiprocessing import get_context

import pytest

from protocol.command_memory import CommandMemory, Fresh, Reply
from protocol.message import Command
from tests.support.console_scripts import Outcome, run_script

SCRIPTS = ((1, 0.1), (2, 0.25), (3, 0.4))


@pytest.fixture(scope="module")
def outcomes() -> list[Outcome]:
    """What three scripts came to, two at a time."""
    seeds, losses = zip(*SCRIPTS, strict=True)
    with ProcessPoolExecutor(max_workers=2, mp_context=get_context("spawn")) as pool:
        return list(pool.map(run_script, seeds, [170] * len(seeds), losses))


@pytest.mark.parametrize("script", range(len(SCRIPTS)))
def test_no_breach_in_a_random_script(outcomes: list[Outcome], script: int) -> None:
    outcome = outcomes[script]
    assert outcome.breaches == []
    # The script is worth something only if all of it happened.
    assert outcome.commands >= 170
    assert outcome.carried_out > 120
    assert outcome.module_restarts > 0
    assert outcome.console_restarts > 1
    assert outcome.stops > 0


class ForgetsTheNewest(CommandMemory):
    """A fault: the newest number is remembered one too low, so that it is fresh once more."""

    def judge(self, command: Command, owned: bool = False) -> Fresh | Reply:
        verdict = super().judge(command, owned)
        if isinstance(verdict, Fresh) and self._newest is not None:
            self._newest = (self._newest - 1) % 65_536
        return verdict

    def remember(self, number: int, reply: object) -> None:
        """And nothing is remembered, as with a memory that is one reply too small for one."""


def test_the_script_finds_a_memory_one_too_small(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("sim_link.box.CommandMemory", ForgetsTheNewest)
    assert any(run_script(seed, 150, 0.3).breaches for seed in range(8))
