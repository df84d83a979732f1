"""The console's side of "at most once": each phase, each way to an end, each timer."""

from collections.abc import Callable

import pytest

from protocol.codes import EVERYONE_ADDRESS, AnswerState, Reason
from protocol.command_phases import TRANSITIONS, Act, Event, Phase, event_of
from protocol.errors import LocalProtocolError
from protocol.exchange import CommandExchange, Ended, Ending, Send
from protocol.message import (
    Answer,
    Command,
    Facts,
    LockOut,
    Message,
    Pivot,
    Presence,
    Query,
    Rest,
    SettingWrite,
    Spin,
    Stop,
    Stopped,
    Telemetry,
    Unlock,
)
from protocol.resend import ResendPolicy

MS = 1_000_000
BIRCH, ELM = 0x10, 0x11
EPOCH, BOOT, BITS = 1000, 77, 0xBEEF
POLICY = ResendPolicy(tries=4)


def pivot(number: int, boot: int = BOOT) -> Pivot:
    return Pivot(EPOCH, boot, number, BITS, 9000, 0, 1, 1, 4700)


def rest(number: int) -> Rest:
    return Rest(EPOCH, BOOT, number, BITS)


def lock_out(number: int) -> LockOut:
    return LockOut(EPOCH, BOOT, number, BITS, b"Ada")


def unlock(number: int) -> Unlock:
    return Unlock(EPOCH, BOOT, number, BITS, b"Ada")


def setting_write(number: int) -> SettingWrite:
    return SettingWrite(EPOCH, BOOT, number, BITS, 1, 7000)


AT_ONCE = (lock_out, unlock, setting_write)


def answer(
    number: int, state: AnswerState, reason: Reason = Reason.NONE, expect_ms: int = 0
) -> Answer:
    return Answer(EPOCH, BOOT, number, state, reason, expect_ms)


def facts(number: int, reason: Reason = Reason.NONE) -> Facts:
    measured = (1, 2, 1, 900, 950, 300, 4000, 9000, 800, 400, 90, 60_000)
    return Facts(EPOCH, BOOT, number, reason, *measured)


def telemetry(boot: int, bits: int = BITS) -> Telemetry:
    return Telemetry(boot, 1, 2, 0, 0, 1, 0, 3700, 2500, 0, bits)


ACCEPTED = answer(1, AnswerState.ACCEPTED, expect_ms=500)
UNKNOWN = answer(1, AnswerState.UNKNOWN)
QUERY = Query(EPOCH, BOOT, 1)


class Desk:
    """An exchange and a hand on the clock."""

    def __init__(self, policy: ResendPolicy = POLICY) -> None:
        self.exchange = CommandExchange(policy)
        self.t_ns = 0

    def submit(self, command: int, message: Command, to: int = BIRCH) -> list[Send | Ended]:
        return self.exchange.submit(command, to, message, self.t_ns)

    def hear(self, message: Message, after_ms: int = 0, source: int = BIRCH) -> list[Send | Ended]:
        self.t_ns += after_ms * MS
        return self.exchange.receive(source, message, self.t_ns)

    def wake(self) -> list[Send | Ended]:
        """Let time pass to the next timer."""
        assert self.exchange.next_wake_ns is not None
        assert self.exchange.next_wake_ns > self.t_ns
        self.t_ns = self.exchange.next_wake_ns
        return self.exchange.wake(self.t_ns)

    def until_quiet(self) -> list[Send | Ended]:
        steps: list[Send | Ended] = []
        while self.exchange.next_wake_ns is not None:
            steps += self.wake()
        return steps


def calling() -> Desk:
    desk = Desk()
    desk.submit(0, pivot(1))
    return desk


def running() -> Desk:
    desk = calling()
    desk.hear(ACCEPTED, after_ms=20)
    return desk


def asking() -> Desk:
    desk = running()
    desk.wake()
    return desk


def recalled() -> Desk:
    desk = calling()
    assert desk.exchange.withdraw(BIRCH) == []
    return desk


IN_HAND = {"calling": calling, "running": running, "asking": asking, "recalled": recalled}


# The straight way.


def test_a_command_is_sent_at_once() -> None:
    desk = Desk()
    assert desk.submit(0, pivot(1)) == [Send(0, BIRCH, pivot(1), 1)]
    assert desk.exchange.busy(BIRCH)
    assert not desk.exchange.busy(ELM)
    assert desk.exchange.next_wake_ns == 250 * MS


def test_accepted_then_facts_is_finished() -> None:
    desk = calling()
    assert desk.hear(ACCEPTED, after_ms=20) == []
    assert desk.exchange.next_wake_ns == (20 + 500 + 300) * MS
    assert desk.hear(facts(1), after_ms=480) == [Ended(0, Ending.FINISHED)]
    assert not desk.exchange.busy(BIRCH)
    assert desk.exchange.next_wake_ns is None


# Each way to an end, by phase. None: ignored.

ENDS: list[tuple[str, Message, Ending | None]] = [
    ("calling", facts(1), Ending.FINISHED),
    ("calling", facts(1, Reason.STOPPED), Ending.CUT),
    ("calling", facts(1, Reason.RESTED), Ending.CUT),
    ("calling", answer(1, AnswerState.FINISHED), Ending.FINISHED),
    ("calling", answer(1, AnswerState.CUT, Reason.STOPPED), Ending.CUT),
    ("calling", answer(1, AnswerState.REFUSED, Reason.BUSY), Ending.REFUSED),
    ("calling", answer(1, AnswerState.REFUSED, Reason.OTHER_IDENTITY), Ending.REFUSED),
    ("calling", answer(1, AnswerState.REFUSED, Reason.NUMBER_PASSED), Ending.REFUSED),
    ("calling", answer(1, AnswerState.REFUSED, Reason.OTHER_BOOT), Ending.REFUSED),
    ("calling", answer(1, AnswerState.REFUSED, Reason.OTHER_EPOCH), Ending.UNSEEN),
    ("calling", answer(1, AnswerState.REFUSED, Reason.OWNED), Ending.UNSEEN),
    ("calling", UNKNOWN, None),
    ("running", facts(1), Ending.FINISHED),
    ("running", facts(1, Reason.RESTED), Ending.CUT),
    ("running", answer(1, AnswerState.FINISHED), Ending.FINISHED),
    ("running", answer(1, AnswerState.CUT, Reason.RESTED), Ending.CUT),
    ("running", answer(1, AnswerState.REFUSED, Reason.OTHER_BOOT), Ending.UNSEEN),
    ("running", answer(1, AnswerState.REFUSED, Reason.OTHER_EPOCH), Ending.UNSEEN),
    ("running", answer(1, AnswerState.REFUSED, Reason.OWNED), Ending.UNSEEN),
    ("running", answer(1, AnswerState.REFUSED, Reason.NUMBER_PASSED), Ending.UNSEEN),
    # Another box with the same address; ours has accepted.
    ("running", answer(1, AnswerState.REFUSED, Reason.OTHER_IDENTITY), None),
    ("running", UNKNOWN, None),
    ("asking", facts(1), Ending.FINISHED),
    ("asking", facts(1, Reason.STOPPED), Ending.CUT),
    ("asking", answer(1, AnswerState.FINISHED), Ending.FINISHED),
    ("asking", UNKNOWN, Ending.UNSEEN),
    ("asking", answer(1, AnswerState.UNKNOWN, Reason.OTHER_BOOT), Ending.UNSEEN),
    ("asking", answer(1, AnswerState.REFUSED, Reason.OWNED), Ending.UNSEEN),
    ("asking", answer(1, AnswerState.REFUSED, Reason.NUMBER_PASSED), Ending.UNSEEN),
    ("recalled", UNKNOWN, Ending.CUT),
    ("recalled", answer(1, AnswerState.UNKNOWN, Reason.OTHER_BOOT), Ending.UNSEEN),
    ("recalled", answer(1, AnswerState.REFUSED, Reason.OWNED), Ending.UNSEEN),
    ("recalled", answer(1, AnswerState.REFUSED, Reason.NUMBER_PASSED), Ending.REFUSED),
    ("recalled", facts(1), Ending.FINISHED),
    ("recalled", facts(1, Reason.STOPPED), Ending.CUT),
    ("recalled", answer(1, AnswerState.REFUSED, Reason.STOP_IN_FORCE), Ending.REFUSED),
]


@pytest.mark.parametrize(("phase", "message", "how"), ENDS)
def test_ends(phase: str, message: Message, how: Ending | None) -> None:
    desk = IN_HAND[phase]()
    expected = [] if how is None else [Ended(0, how)]
    assert desk.hear(message, after_ms=5) == expected
    assert desk.exchange.busy(BIRCH) is (how is None)


@pytest.mark.parametrize(("phase", "message", "how"), [end for end in ENDS if end[2]])
def test_nothing_is_said_of_a_command_after_its_end(
    phase: str, message: Message, how: Ending
) -> None:
    desk = IN_HAND[phase]()
    desk.hear(message)
    late: list[Message] = [message, ACCEPTED, facts(1), UNKNOWN, telemetry(78)]
    for each in late:
        assert desk.hear(each, after_ms=5) == []
    assert desk.exchange.withdraw(BIRCH) == []
    assert desk.exchange.next_wake_ns is None


@pytest.mark.parametrize("phase", IN_HAND)
@pytest.mark.parametrize(
    "stray",
    [
        answer(2, AnswerState.FINISHED),
        Answer(EPOCH - 1, BOOT, 1, AnswerState.FINISHED, 0, 0),
        Answer(EPOCH, BOOT - 1, 1, AnswerState.FINISHED, 0, 0),
        Answer(EPOCH, BOOT, 1, 99, 0, 0),
        facts(1)._replace(boot=BOOT + 1),
        Stopped(1, 1, 0, 0, BOOT, BITS),
        Stop(1),
        telemetry(BOOT),
    ],
)
def test_strays_are_ignored(phase: str, stray: Message) -> None:
    desk = IN_HAND[phase]()
    assert desk.hear(stray) == []
    assert desk.hear(facts(1), source=ELM) == []
    assert desk.hear(facts(1)) == [Ended(0, Ending.FINISHED)]


# Resending and asking.


def test_sends_again_at_each_timeout_and_then_ends_unseen() -> None:
    desk = calling()
    assert desk.until_quiet() == [
        *(Send(0, BIRCH, pivot(1), attempt) for attempt in (2, 3, 4)),
        Ended(0, Ending.UNSEEN),
    ]
    assert desk.t_ns == 4 * 250 * MS  # no doubling


def test_wake_before_its_time_does_nothing() -> None:
    desk = calling()
    assert desk.exchange.wake(250 * MS - 1) == []
    assert len(desk.exchange.wake(250 * MS)) == 1


def test_an_overdue_command_is_asked_about_and_then_ends_unseen() -> None:
    desk = running()
    steps = desk.until_quiet()
    assert steps == [
        *(Send(0, BIRCH, QUERY, attempt) for attempt in (2, 3, 4, 5)),
        Ended(0, Ending.UNSEEN),
    ]


def test_still_running_when_asked_waits_again_but_not_for_ever() -> None:
    desk = asking()
    for _ in range(3):
        assert desk.hear(ACCEPTED, after_ms=10) == []
        assert desk.exchange.next_wake_ns == desk.t_ns + 800 * MS
        assert [type(step) for step in desk.wake()] == [Send]
    assert desk.hear(ACCEPTED, after_ms=10) == [Ended(0, Ending.UNSEEN)]


def test_a_repeated_acceptance_does_not_move_the_timer() -> None:
    desk = running()
    due_ns = desk.exchange.next_wake_ns
    desk.hear(ACCEPTED, after_ms=100)
    assert desk.exchange.next_wake_ns == due_ns


def test_a_refusal_for_another_boot_after_a_resend_leaves_it_unseen() -> None:
    """The boot before may have taken the first copy, and told so in an answer that was lost."""
    for reason in (Reason.OTHER_BOOT, Reason.OTHER_EPOCH, Reason.OWNED):
        desk = calling()
        desk.wake()
        assert desk.hear(answer(1, AnswerState.REFUSED, reason)) == [Ended(0, Ending.UNSEEN)]


# The timeout.


def exchange_one(desk: Desk, number: int, rtt_ms: int) -> None:
    desk.submit(number, pivot(number))
    desk.hear(answer(number, AnswerState.ACCEPTED), after_ms=rtt_ms)
    desk.hear(facts(number), after_ms=500)


def timeout_ms(desk: Desk, number: int, to: int = BIRCH) -> float:
    """The timeout that the next command meets."""
    desk.submit(number, pivot(number), to)
    assert desk.exchange.next_wake_ns is not None
    return (desk.exchange.next_wake_ns - desk.t_ns) / MS


def test_the_timeout_follows_the_round_trip_of_each_module() -> None:
    desk = Desk()
    exchange_one(desk, 1, 40)
    # RFC 6298 section 2.2: R + 4 R/2.
    assert timeout_ms(desk, 2) == 120
    desk.hear(facts(2))
    assert timeout_ms(desk, 3, ELM) == 250


def test_the_timeout_has_a_minimum() -> None:
    desk = Desk()
    exchange_one(desk, 1, 1)
    assert timeout_ms(desk, 2) == 30


def test_a_refusal_measures_too() -> None:
    desk = Desk()
    desk.submit(1, pivot(1))
    desk.hear(answer(1, AnswerState.REFUSED, Reason.BUSY), after_ms=40)
    assert timeout_ms(desk, 2) == 120


def test_karns_rule_no_sample_from_a_command_sent_twice() -> None:
    desk = Desk()
    exchange_one(desk, 1, 40)
    desk.submit(2, pivot(2))
    desk.wake()
    desk.hear(answer(2, AnswerState.ACCEPTED), after_ms=100)
    desk.hear(facts(2))
    assert timeout_ms(desk, 3) == 120


def test_facts_in_place_of_a_lost_acceptance_measure_nothing() -> None:
    desk = Desk()
    exchange_one(desk, 1, 40)
    desk.submit(2, pivot(2))
    desk.hear(facts(2), after_ms=100)
    assert timeout_ms(desk, 3) == 120


def test_six_sends_in_vain_put_the_estimate_in_doubt() -> None:
    """Or a link that has become slower than the timeout would never be measured again."""
    desk = Desk(ResendPolicy(tries=10))
    exchange_one(desk, 1, 10)
    desk.submit(2, pivot(2))
    waits_ms = []
    for _ in range(8):
        before_ns = desk.t_ns
        desk.wake()
        waits_ms.append((desk.t_ns - before_ns) // MS)
    assert waits_ms == [30, 30, 30, 30, 30, 30, 250, 250]


@pytest.mark.parametrize("make", [*AT_ONCE, rest])
def test_what_is_finished_at_once_measures_the_round_trip(make: Callable[[int], Command]) -> None:
    desk = Desk()
    exchange_one(desk, 1, 40)
    desk.submit(2, make(2))
    desk.hear(answer(2, AnswerState.FINISHED), after_ms=40)
    # By hand, RFC 6298 section 2.3: RTTVAR 20 -> 15, SRTT 40; timeout 40 + 4 * 15.
    assert timeout_ms(desk, 3) == 100


# One in hand for each module.


def test_the_second_waits_for_the_first_to_end() -> None:
    desk = calling()
    assert desk.submit(1, pivot(2)) == []
    assert desk.hear(facts(1)) == [Ended(0, Ending.FINISHED), Send(1, BIRCH, pivot(2), 1)]


def test_the_next_one_is_sent_after_giving_up_too() -> None:
    desk = calling()
    desk.submit(1, pivot(2))
    steps = [desk.wake() for _ in range(4)]
    assert steps[-1] == [Ended(0, Ending.UNSEEN), Send(1, BIRCH, pivot(2), 1)]


def test_modules_do_not_wait_for_one_another() -> None:
    desk = calling()
    assert desk.submit(1, pivot(1), ELM) == [Send(1, ELM, pivot(1), 1)]


def test_those_that_wait_keep_their_order() -> None:
    desk = calling()
    for number in (2, 3, 4):
        desk.submit(number, pivot(number))
    order = []
    for number in (1, 2, 3, 4):
        order += [step.command for step in desk.hear(facts(number)) if isinstance(step, Send)]
    assert order == [2, 3, 4]


@pytest.mark.parametrize("make", [rest, lock_out])
def test_rest_and_lock_out_wait_for_nothing(make: Callable[[int], Command]) -> None:
    desk = calling()
    desk.submit(1, pivot(2))
    assert desk.submit(2, make(3)) == [Send(2, BIRCH, make(3), 1)]
    assert desk.submit(3, make(4)) == [Send(3, BIRCH, make(4), 1)]


@pytest.mark.parametrize("make", [unlock, setting_write, pivot])
def test_whatever_takes_no_danger_away_waits(make: Callable[[int], Command]) -> None:
    desk = calling()
    assert desk.submit(1, make(2)) == []
    assert desk.hear(facts(1))[1:] == [Send(1, BIRCH, make(2), 1)]


def test_a_spin_that_is_finished_in_place_of_a_lost_acceptance_measures_nothing() -> None:
    """It is told when the spin ends, not when the command arrives."""
    desk = Desk()
    exchange_one(desk, 1, 40)
    desk.submit(2, Spin(EPOCH, BOOT, 2, BITS, 9000, 3000, 500))
    desk.hear(answer(2, AnswerState.FINISHED), after_ms=100)
    assert timeout_ms(desk, 3) == 120


def test_what_waits_comes_after_the_rest_as_well() -> None:
    desk = calling()
    desk.submit(1, rest(2))
    desk.submit(2, pivot(3))
    assert desk.hear(facts(1, Reason.RESTED)) == [Ended(0, Ending.CUT)]
    finished = answer(2, AnswerState.FINISHED)
    assert desk.hear(finished) == [Ended(1, Ending.FINISHED), Send(2, BIRCH, pivot(3), 1)]


def test_timers_run_in_the_order_in_which_they_are_due() -> None:
    desk = Desk()
    desk.submit(0, pivot(1), ELM)
    desk.t_ns = 10 * MS
    desk.submit(1, pivot(1), BIRCH)
    steps = desk.exchange.wake(1000 * MS)
    assert [step.command for step in steps] == [0, 1]


# Withdrawing.


def test_withdraw_cuts_what_waits_and_asks_about_what_was_sent() -> None:
    desk = calling()
    desk.submit(1, pivot(2))
    desk.submit(2, pivot(3))
    assert desk.exchange.withdraw(BIRCH) == [Ended(1, Ending.CUT), Ended(2, Ending.CUT)]
    steps = desk.until_quiet()
    assert steps == [
        *(Send(0, BIRCH, QUERY, attempt) for attempt in (2, 3, 4, 5)),
        Ended(0, Ending.UNSEEN),
    ]


def test_a_withdrawn_command_that_was_accepted_runs_on_to_its_report() -> None:
    desk = recalled()
    assert desk.hear(ACCEPTED) == []
    assert desk.exchange.next_wake_ns == 800 * MS
    assert desk.wake() == [Send(0, BIRCH, QUERY, 2)]
    assert desk.hear(facts(1, Reason.STOPPED)) == [Ended(0, Ending.CUT)]


@pytest.mark.parametrize("phase", ["running", "asking"])
def test_withdraw_leaves_what_was_accepted(phase: str) -> None:
    desk = IN_HAND[phase]()
    due_ns = desk.exchange.next_wake_ns
    assert desk.exchange.withdraw(BIRCH) == []
    assert desk.exchange.next_wake_ns == due_ns
    assert desk.hear(UNKNOWN) in ([], [Ended(0, Ending.UNSEEN)])


def test_withdraw_concerns_one_module() -> None:
    desk = calling()
    desk.submit(1, pivot(1), ELM)
    desk.exchange.withdraw(ELM)
    assert desk.exchange.withdraw(0x55) == []
    queries = [step for step in desk.wake() if isinstance(step, Send)]
    assert {step.destination: type(step.message) for step in queries} == {BIRCH: Pivot, ELM: Query}


def test_after_withdrawing_new_commands_are_taken() -> None:
    desk = recalled()
    desk.submit(1, pivot(2))
    assert desk.hear(UNKNOWN) == [Ended(0, Ending.CUT), Send(1, BIRCH, pivot(2), 1)]


# Restarts.


@pytest.mark.parametrize("phase", IN_HAND)
@pytest.mark.parametrize(
    "word",
    [telemetry(78), Presence(0x8000_0000_0012_BEEF, 78, 0, 0, 0, 1, 0, 0, 1)],
    ids=["telemetry", "presence"],
)
def test_another_boot_ends_what_was_meant_for_the_old_one(phase: str, word: Message) -> None:
    desk = IN_HAND[phase]()
    desk.submit(1, pivot(2))
    assert desk.hear(word) == [Ended(0, Ending.UNSEEN), Ended(1, Ending.UNSEEN)]
    assert desk.submit(2, pivot(3, boot=78)) == [Send(2, BIRCH, pivot(3, boot=78), 1)]


def test_a_restart_keeps_what_is_meant_for_the_new_boot() -> None:
    desk = calling()
    desk.submit(1, pivot(2, boot=78))
    assert desk.hear(telemetry(78)) == [
        Ended(0, Ending.UNSEEN),
        Send(1, BIRCH, pivot(2, boot=78), 1),
    ]


def test_a_late_word_from_the_boot_before_ends_nothing() -> None:
    desk = Desk()
    desk.hear(telemetry(77))
    desk.hear(telemetry(78))
    desk.submit(0, pivot(1, boot=78))
    assert desk.hear(telemetry(77)) == []
    assert desk.exchange.busy(BIRCH)


def test_another_box_with_the_same_address_ends_nothing() -> None:
    desk = calling()
    assert desk.hear(telemetry(78, bits=0x1234)) == []
    assert desk.exchange.busy(BIRCH)


# Misuse.


@pytest.mark.parametrize("address", [0, 1, 2, 0x0F, 0xF000, EVERYONE_ADDRESS])
def test_a_command_goes_to_one_module(address: int) -> None:
    with pytest.raises(LocalProtocolError, match="goes to one module"):
        Desk().submit(0, pivot(1), address)


def test_names_and_numbers_in_use_are_not_free() -> None:
    desk = calling()
    with pytest.raises(LocalProtocolError, match="command 0 has not ended"):
        desk.submit(0, pivot(2))
    with pytest.raises(LocalProtocolError, match="number 1 is not free"):
        desk.submit(1, rest(1))
    with pytest.raises(LocalProtocolError, match="number 0 is not free"):
        desk.submit(1, pivot(0))
    assert desk.submit(1, pivot(1), ELM) != []


@pytest.mark.parametrize(
    "bad", [{"tries": 0}, {"initial_ns": 0}, {"minimum_ns": 3 * 10**9}, {"finish_margin_ns": -1}]
)
def test_impossible_policies_are_misuse(bad: dict[str, int]) -> None:
    with pytest.raises(LocalProtocolError):
        ResendPolicy(**bad)


# The table itself.


def test_every_phase_but_waiting_can_end_by_its_timers_alone() -> None:
    for phase in set(Phase) - {Phase.WAITING}:
        assert TRANSITIONS[phase, Event.DUE] in (Act.TRY_AGAIN, Act.ASK)


def test_only_calling_ever_sends_the_command_again() -> None:
    for (phase, event), act in TRANSITIONS.items():
        assert (act is Act.CALL) == ((phase, event) == (Phase.WAITING, Event.TURN))


def test_a_restart_ends_every_phase() -> None:
    assert all(TRANSITIONS[phase, Event.RESTARTED] is Act.END_UNSEEN for phase in Phase)


@pytest.mark.parametrize("reason", Reason)
def test_every_refusal_and_every_report_means_something(reason: Reason) -> None:
    refused = event_of(answer(1, AnswerState.REFUSED, reason))
    assert refused in (Event.REFUSED, Event.PASSED, Event.DISOWNED, Event.OUTLIVED)
    cut = event_of(facts(1, reason))
    assert cut is (Event.FINISHED if reason is Reason.NONE else Event.CUT)
