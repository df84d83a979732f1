"""Questions in the gaps: who is asked, how often, and when it is left."""

import itertools

from console.fetching import ANSWER_BYTES, ASK_AGAIN_NS, GIVE_UP_AFTER, SHARE_OF_LINE, Fetcher
from protocol.message import SettingAsk, TraceAsk
from tests.support.fake_fleet import eight

MODULES = {each.module: each for each in eight()}
ANSWER_NS = 5_600_000
TRACE = (2, 900, 7, 31, 0xABCD_0000_1234, 4, 0b1011)


def fetcher(*busy: int) -> Fetcher:
    return Fetcher(lambda module: module.module in busy, ANSWER_NS)


def test_a_setting_is_asked_of_its_module_at_its_address() -> None:
    [said] = fetcher().due(MODULES, [(3, 2)], [], 0)
    assert (said.link, said.address, said.message) == (0, MODULES[3].address, SettingAsk(2))
    assert not said.urgent


def test_a_trace_is_asked_by_what_it_belongs_to() -> None:
    [said] = fetcher().due(MODULES, [], [TRACE], 0)
    assert said.message == TraceAsk(900, 7, 31, 0x1234, 4, 0b1011)
    assert said.address == MODULES[2].address


def test_who_has_a_command_in_hand_is_left_alone() -> None:
    assert fetcher(2, 3).due(MODULES, [(3, 1)], [TRACE], 0) == []


def test_a_module_that_is_gone_is_not_asked() -> None:
    assert fetcher().due({}, [(3, 1)], [TRACE], 0) == []


def test_one_is_asked_at_a_time_and_settings_come_first() -> None:
    asks = fetcher()
    wanted = [(module, 1) for module in MODULES]
    said = [asks.due(MODULES, wanted, [TRACE], count) for count in range(10)]
    assert [len(each) for each in said] == [1] * 9 + [0]
    kinds = [type(each[0].message) for each in said[:9]]
    assert kinds == [SettingAsk] * 8 + [TraceAsk]
    assert len({each[0].address for each in said[:8]}) == 8


def test_answers_fill_a_quarter_of_the_line_at_most() -> None:
    asks, t_ns, questions = fetcher(), 0, 0
    while t_ns < 10**9:
        further = (*TRACE[:5], questions, 1)
        questions += len(asks.due(MODULES, [], [further], t_ns))
        t_ns = asks.next_ns
    assert questions * ANSWER_NS * SHARE_OF_LINE <= 10**9 + ANSWER_NS * SHARE_OF_LINE
    assert questions > 40
    assert ANSWER_BYTES == 512


def test_a_question_is_repeated_and_then_given_up() -> None:
    asks = fetcher()
    times = [t_ns for t_ns in range(0, 60 * ASK_AGAIN_NS, ASK_AGAIN_NS // 3)
             if asks.due(MODULES, [], [TRACE], t_ns)]  # fmt: skip
    assert len(times) == GIVE_UP_AFTER
    assert all(later - earlier == ASK_AGAIN_NS for earlier, later in itertools.pairwise(times))


def test_an_answer_that_changed_the_question_begins_anew_at_once() -> None:
    asks = fetcher()
    assert asks.due(MODULES, [], [TRACE], 0)
    further = (*TRACE[:5], 7, 0b1)
    assert asks.due(MODULES, [], [further], 1)
    assert not asks.due(MODULES, [], [further], 2)


def test_what_is_no_longer_wanted_is_forgotten() -> None:
    asks = fetcher()
    for number in range(500):
        asks.due(MODULES, [], [(2, 900, 7, number, 5, 0, 1)], number * ASK_AGAIN_NS)
    assert len(asks._traces) == 1
