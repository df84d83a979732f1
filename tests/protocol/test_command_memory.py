"""The module's side of "at most once": what is fresh, what is a repeat, what is refused."""

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from protocol.codes import AnswerState, Reason
from protocol.command_memory import (
    REMEMBERED_REPLIES,
    CommandMemory,
    Fresh,
    Reply,
    is_newer,
    next_number,
)
from protocol.errors import LocalProtocolError
from protocol.message import (
    Answer,
    Command,
    Facts,
    Flash,
    Hop,
    LockOut,
    Pivot,
    Query,
    Rest,
    SettingWrite,
    Spin,
    Twist,
    Unlock,
)

STEADY = settings(derandomize=True, deadline=None)
"""The same examples each time, and no deadline on a busy machine."""

BOOT, EPOCH, IDENTITY = 77, 1000, 0x8000_0000_0012_BEEF
BITS = 0xBEEF


def memory(capacity: int = 16) -> CommandMemory:
    made = CommandMemory(BOOT, IDENTITY, capacity)
    assert made.adopt(EPOCH)
    return made


def rest(number: int, epoch: int = EPOCH, boot: int = BOOT, bits: int = BITS) -> Rest:
    return Rest(epoch, boot, number, bits)


def query(number: int, epoch: int = EPOCH, boot: int = BOOT) -> Query:
    return Query(epoch, boot, number)


def facts(number: int, epoch: int = EPOCH) -> Facts:
    measured = (1, 2, 1, 900, 950, 300, 4000, 9000, 800, 400, 90, 60_000)
    return Facts(epoch, BOOT, number, Reason.NONE, *measured)


def carry_out(at: CommandMemory, number: int) -> Answer:
    """As a module does with a fresh command: judge, then remember."""
    assert at.judge(rest(number)) == Fresh()
    reply = at.answer(number, AnswerState.ACCEPTED, expect_ms=40)
    at.remember(number, reply)
    return reply


def refusal(reason: Reason, number: int, epoch: int = EPOCH, boot: int = BOOT) -> Reply:
    return Reply(Answer(epoch, boot, number, AnswerState.REFUSED, reason, 0), repeat=False)


# RFC 1982 section 5.2 for 8 bits, from memory: pairs of which the first is the greater. Times
# 256 they are the same statements for 16 bits.
RFC_1982_GREATER = [
    *((1, 0), (44, 0), (100, 0), (100, 44), (200, 100)),
    *((255, 200), (0, 255), (100, 255), (0, 200), (44, 200)),
]


@pytest.mark.parametrize(("greater", "less"), RFC_1982_GREATER)
def test_serial_arithmetic_of_rfc_1982(greater: int, less: int) -> None:
    assert is_newer(greater * 256, than=less * 256)
    assert not is_newer(less * 256, than=greater * 256)


def test_serial_arithmetic_at_its_borders() -> None:
    assert is_newer(1, than=65_535)
    assert is_newer(32_767, than=0)
    assert not is_newer(5, than=5)
    # RFC 1982 section 3.2 leaves exactly half the space undefined; here neither is newer.
    assert not is_newer(32_768, than=0)
    assert not is_newer(0, than=32_768)


@STEADY
@given(st.integers(0, 65_535), st.integers(0, 65_535))
def test_of_two_numbers_at_most_one_is_newer(one: int, other: int) -> None:
    assert is_newer(one, other) + is_newer(other, one) == (
        one != other and (one - other) % 65_536 != 32_768
    )


def test_numbers_go_round_without_zero() -> None:
    assert [next_number(n) for n in (0, 1, 65_534, 65_535)] == [1, 2, 65_535, 1]


def test_a_first_command_is_fresh_whatever_its_number() -> None:
    for number in (1, 9, 40_000, 65_535):
        assert memory().judge(rest(number)) == Fresh()


@pytest.mark.parametrize(
    "command",
    [
        Pivot(EPOCH, BOOT, 3, BITS, 9000, 0, 1, -1, 4700),
        Hop(EPOCH, BOOT, 3, BITS, 9000, 2, -1, 4700),
        Twist(EPOCH, BOOT, 3, BITS, 9000, 0, 1, 4700),
        Spin(EPOCH, BOOT, 3, BITS, 9000, -2000, 500),
        Rest(EPOCH, BOOT, 3, BITS),
        Flash(EPOCH, BOOT, 3, BITS, 1000),
        LockOut(EPOCH, BOOT, 3, BITS, b"Ada"),
        Unlock(EPOCH, BOOT, 3, BITS, b"Ada"),
        SettingWrite(EPOCH, BOOT, 3, BITS, 1, 7000),
    ],
)
def test_all_commands_are_judged_alike(command: Command) -> None:
    at = memory()
    assert at.judge(command) == Fresh()
    reply = at.answer(3, AnswerState.ACCEPTED, expect_ms=900)
    at.remember(3, reply)
    assert at.judge(command) == Reply(reply, repeat=True)


def test_a_repeat_gets_the_same_reply_again() -> None:
    at = memory()
    reply = carry_out(at, 5)
    assert [at.judge(rest(5)) for _ in range(3)] == [Reply(reply, repeat=True)] * 3


def test_a_later_reply_takes_the_place_of_the_first() -> None:
    at = memory()
    carry_out(at, 5)
    at.remember(5, facts(5))
    assert at.judge(rest(5)) == Reply(facts(5), repeat=True)
    assert at.query(query(5)) == facts(5)


def test_a_refusal_is_remembered_too() -> None:
    at = memory()
    assert at.judge(rest(5)) == Fresh()
    busy = at.answer(5, AnswerState.REFUSED, Reason.BUSY)
    at.remember(5, busy)
    assert at.judge(rest(5)) == Reply(busy, repeat=True)


@pytest.mark.parametrize(
    ("command", "expected"),
    [
        (rest(5, bits=0xBEEE), refusal(Reason.OTHER_IDENTITY, 5)),
        (rest(5, boot=76), refusal(Reason.OTHER_BOOT, 5, boot=76)),
        (rest(5, epoch=999), refusal(Reason.OTHER_EPOCH, 5, epoch=999)),
        (rest(5, epoch=1001), refusal(Reason.OTHER_EPOCH, 5, epoch=1001)),
        (rest(0), refusal(Reason.BAD_FIELD, 0)),
        (rest(5, 999, 76, 0), refusal(Reason.OTHER_IDENTITY, 5, 999, 76)),
        (rest(5, 999, 76), refusal(Reason.OTHER_BOOT, 5, 999, 76)),
    ],
)
def test_refuses_by_the_envelope_in_the_commands_own_words(command: Rest, expected: Reply) -> None:
    at = memory()
    assert at.judge(command) == expected
    # ... and it has taken no number by that.
    assert at.judge(rest(4)) == Fresh()


def test_an_older_number_not_remembered_has_passed() -> None:
    at = memory()
    carry_out(at, 7)
    assert at.judge(rest(6)) == refusal(Reason.NUMBER_PASSED, 6)
    assert at.judge(rest(8)) == Fresh()


def test_a_number_is_taken_by_the_judgement_itself() -> None:
    """Even where nothing was remembered of it, it is not fresh twice."""
    at = memory()
    assert at.judge(rest(7)) == Fresh()
    assert at.judge(rest(7)) == refusal(Reason.NUMBER_PASSED, 7)


OWNED_CASES = [
    # Only what would be OTHER_EPOCH becomes OWNED; what is wrong before it is told as ever.
    (rest(5, epoch=999), refusal(Reason.OWNED, 5, epoch=999)),
    (rest(5, epoch=1001), refusal(Reason.OWNED, 5, epoch=1001)),
    (rest(0, epoch=999), refusal(Reason.OWNED, 0, epoch=999)),
    (rest(5, 999, 76), refusal(Reason.OTHER_BOOT, 5, 999, 76)),
    (rest(5, 999, 77, 0), refusal(Reason.OTHER_IDENTITY, 5, 999)),
    (rest(0), refusal(Reason.BAD_FIELD, 0)),
]


@pytest.mark.parametrize(("command", "expected"), OWNED_CASES)
def test_an_owned_module_says_so_to_another_epoch(command: Rest, expected: Reply) -> None:
    at = memory()
    assert at.judge(command, owned=True) == expected
    assert at.judge(rest(4), owned=True) == Fresh()


def test_its_owner_is_served_as_if_it_were_alone() -> None:
    at = memory()
    assert at.judge(rest(5), owned=True) == Fresh()
    reply = at.answer(5, AnswerState.FINISHED)
    at.remember(5, reply)
    assert at.judge(rest(5), owned=True) == Reply(reply, repeat=True)
    assert at.judge(rest(4), owned=True) == refusal(Reason.NUMBER_PASSED, 4)


def test_eight_replies_are_kept_where_nothing_else_is_said() -> None:
    assert REMEMBERED_REPLIES == 8
    at = CommandMemory(BOOT, IDENTITY)
    at.adopt(EPOCH)
    replies = [carry_out(at, number) for number in range(1, 10)]
    assert at.judge(rest(1)) == refusal(Reason.NUMBER_PASSED, 1)
    assert [at.judge(rest(n)) for n in range(2, 10)] == [Reply(r, True) for r in replies[1:]]


@pytest.mark.parametrize("capacity", [1, 2, 16])
def test_evicting_a_reply_never_makes_its_number_fresh(capacity: int) -> None:
    at = memory(capacity)
    for number in range(1, 60):
        carry_out(at, number)
        for old in range(1, number):
            verdict = at.judge(rest(old))
            assert isinstance(verdict, Reply)
            assert verdict.repeat is (old > number - capacity)
            passed = verdict.message.reason == Reason.NUMBER_PASSED
            assert passed is (old <= number - capacity)


def test_facts_of_an_evicted_number_are_kept_again() -> None:
    at = memory(2)
    for number in (1, 2, 3):
        carry_out(at, number)
    at.remember(1, facts(1))
    assert at.query(query(1)) == facts(1)


def test_a_query_gives_the_remembered_reply() -> None:
    at = memory()
    reply = carry_out(at, 5)
    assert at.query(query(5)) == reply


@pytest.mark.parametrize(
    ("asked", "reason"),
    [
        (query(9), Reason.NONE),
        (query(3), Reason.NONE),
        (query(0), Reason.NONE),
        (query(5, boot=76), Reason.OTHER_BOOT),
        (query(5, epoch=999), Reason.OTHER_EPOCH),
    ],
)
def test_a_query_about_anything_else_is_unknown(asked: Query, reason: Reason) -> None:
    at = memory()
    carry_out(at, 5)
    expected = Answer(asked.epoch, asked.boot, asked.number, AnswerState.UNKNOWN, reason, 0)
    assert at.query(asked) == expected
    assert at.query(asked) == expected


def test_unknown_is_final() -> None:
    """A copy that arrives after the console was told "unknown" must not be carried out."""
    at = memory()
    carry_out(at, 5)
    at.query(query(6))
    assert at.judge(rest(6)) == refusal(Reason.NUMBER_PASSED, 6)
    assert at.judge(rest(7)) == Fresh()


def test_before_any_epoch_nothing_is_taken_of_epoch_zero_either() -> None:
    at = CommandMemory(BOOT, IDENTITY)
    assert at.judge(rest(5, epoch=0)) == refusal(Reason.OTHER_EPOCH, 5, epoch=0)
    unknown = Answer(0, BOOT, 5, AnswerState.UNKNOWN, Reason.OTHER_EPOCH, 0)
    assert at.query(query(5, epoch=0)) == unknown
    at.adopt(EPOCH)
    assert at.judge(rest(5)) == Fresh()


def test_a_query_for_another_boot_or_epoch_or_number_zero_takes_no_number() -> None:
    at = memory()
    for asked in (query(9, boot=76), query(9, epoch=999), query(0)):
        at.query(asked)
    assert at.judge(rest(1)) == Fresh()


def test_only_a_newer_epoch_is_adopted_and_empties_the_memory() -> None:
    at = memory()
    carry_out(at, 5)
    assert [at.adopt(epoch) for epoch in (EPOCH, EPOCH - 1, 0)] == [False] * 3
    assert isinstance(at.judge(rest(5)), Reply)
    assert at.adopt(EPOCH + 1)
    assert at.epoch == EPOCH + 1
    assert at.judge(rest(5, EPOCH + 1)) == Fresh()
    assert at.judge(rest(5)) == refusal(Reason.OTHER_EPOCH, 5)


def test_facts_of_the_epoch_before_do_not_pass_for_a_reply_in_the_new_one() -> None:
    at = memory()
    carry_out(at, 5)
    at.adopt(EPOCH + 1)
    at.remember(5, facts(5))
    at.remember(5, facts(5, EPOCH + 1))  # never taken in this epoch
    assert at.judge(rest(5, EPOCH + 1)) == Fresh()


def test_remember_refuses_a_reply_to_another_number() -> None:
    at = memory()
    at.judge(rest(5))
    with pytest.raises(LocalProtocolError, match="reply to 6 offered as one to 5"):
        at.remember(5, facts(6))


def test_a_memory_for_nothing_is_misuse() -> None:
    with pytest.raises(LocalProtocolError, match="0 replies"):
        CommandMemory(BOOT, IDENTITY, 0)


def test_answer_fills_in_epoch_and_boot() -> None:
    assert memory().answer(5, AnswerState.REFUSED, Reason.BUSY) == (
        Answer(EPOCH, BOOT, 5, AnswerState.REFUSED, Reason.BUSY, 0)
    )


@STEADY
@given(
    capacity=st.integers(1, 5),
    steps=st.lists(st.tuples(st.integers(-40, 20_000), st.booleans()), max_size=80),
)
def test_against_counting_without_a_wrap(capacity: int, steps: list[tuple[int, bool]]) -> None:
    """Model: true counts that never wrap. A step names a command by its distance from the
    newest, back (a late copy) or forward (the console goes on), as command or as query."""
    at = memory(capacity)
    newest = 1
    at.judge(rest(newest))
    taken = {newest}
    for distance, ask in steps:
        true_number = newest + distance
        wire = (true_number - 1) % 65_535 + 1  # 0 left out, as next_number does
        if true_number < 1:
            continue
        if ask:
            at.query(query(wire))
        else:
            verdict = at.judge(rest(wire))
            assert isinstance(verdict, Fresh) is (true_number > newest)
            if isinstance(verdict, Fresh):
                at.remember(wire, at.answer(wire, AnswerState.ACCEPTED))
                assert true_number not in taken
                taken.add(true_number)
            elif verdict.repeat:
                assert true_number in taken
        newest = max(newest, true_number)
