"""`exchange_goodput_vs_bound`: what the exchange makes of a link that loses.

One module, one command in hand, independent loss of 30 % each way, in virtual time. A command
here is finished by its first answer, as a rest of a wheel that stands still is. With stop and
wait, an attempt succeeds with (1 - p)^2; if each attempt took just one round trip, (1 - p)^2 /
round trip commands would be finished a second: the bound. What is lost against it is the time
by which the timeout is longer than the round trip.

The round trip is 60 ms, twice the timeout's floor, so that the estimator and not the floor is
measured; it varies by up to a tenth, as a radio's does.
"""

import hashlib
from heapq import heappop, heappush

from protocol.codes import AnswerState
from protocol.exchange import CommandExchange, Ended, Ending, Send
from protocol.message import Answer, Query, Rest
from tests.bench.measure import Figure

LOSS = 0.3
ROUND_TRIP_NS = 60_000_000
SPREAD = 0.1
COMMANDS = 20_000
ADDRESS = 0x10
BOOT, EPOCH = 5, 1_700_000_000


class Luck:
    """Draws that no library's release changes."""

    def __init__(self, seed: int) -> None:
        self._seed = seed
        self._count = 0

    def draw(self) -> float:
        """A number from 0 to 1."""
        self._count += 1
        key = f"{self._seed}:{self._count}".encode()
        return int.from_bytes(hashlib.blake2b(key, digest_size=8).digest(), "big") / 2**64


class LossyPath:
    """The module and the air in one: an answer comes a round trip later, if both ways hold.

    ``done`` remembers what the module finished, so that a query is answered as it should be.
    """

    def __init__(self, luck: Luck) -> None:
        self._luck = luck
        self._answers: list[tuple[int, int, Answer]] = []
        self._count = 0
        self._done: set[int] = set()

    def send(self, step: Send, t_ns: int) -> None:
        """Carry one message there and its answer back."""
        there = self._luck.draw() >= LOSS
        back = self._luck.draw() >= LOSS
        trip_ns = round(ROUND_TRIP_NS * (1 + SPREAD * self._luck.draw()))
        message = step.message
        if not there or not isinstance(message, Rest | Query):
            return
        if isinstance(message, Rest):
            self._done.add(message.number)
        known = message.number in self._done
        state = AnswerState.FINISHED if known else AnswerState.UNKNOWN
        if back:
            self._count += 1
            answer = Answer(EPOCH, BOOT, message.number, state, 0, 0)
            heappush(self._answers, (t_ns + trip_ns, self._count, answer))

    @property
    def next_ns(self) -> int | None:
        """When the next answer arrives."""
        return self._answers[0][0] if self._answers else None

    def arrived(self, t_ns: int) -> list[Answer]:
        """Answers that have arrived by now."""
        answers = []
        while self._answers and self._answers[0][0] <= t_ns:
            answers.append(heappop(self._answers)[2])
        return answers


def finished_per_second(seed: int, commands: int = COMMANDS) -> tuple[float, float]:
    """Commands finished in a second of virtual time, and the part that ended unseen."""
    exchange, path = CommandExchange(), LossyPath(Luck(seed))
    t_ns, finished, unseen = 0, 0, 0
    for command in range(1, commands + 1):
        number = (command - 1) % 65_535 + 1
        steps: list[Send | Ended] = list(
            exchange.submit(command, ADDRESS, Rest(EPOCH, BOOT, number, 0), t_ns)
        )
        while True:
            ended = [step for step in steps if isinstance(step, Ended)]
            for step in steps:
                if isinstance(step, Send):
                    path.send(step, t_ns)
            if ended:
                finished += ended[0].how is Ending.FINISHED
                unseen += ended[0].how is Ending.UNSEEN
                break
            times = [each for each in (exchange.next_wake_ns, path.next_ns) if each is not None]
            t_ns = max(t_ns, min(times))
            steps = []
            for answer in path.arrived(t_ns):
                steps += exchange.receive(ADDRESS, answer, t_ns)
            steps += exchange.wake(t_ns)
    return finished / (t_ns / 1e9), unseen / commands


def exchange_goodput_vs_bound() -> Figure:
    """Measure; virtual time, so one seed gives one figure."""
    rate, _ = finished_per_second(seed=1)
    mean_trip_s = ROUND_TRIP_NS * (1 + SPREAD / 2) / 1e9
    bound = (1 - LOSS) ** 2 / mean_trip_s
    return Figure(rate / bound, rate, bound, COMMANDS)
