"""What modules keep: settings read, written and verified; traces fetched chunk by chunk."""

import random
import struct
from typing import Any

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from console.fleet_kept import GIVE_UP_AFTER
from protocol.codes import SIMULATED_BIT, AnswerState, SettingId, identity_bits
from protocol.message import Message, SettingValue, SettingWrite, TraceAsk, TraceChunk
from protocol.trace import TraceHead, TraceSample, pack_trace
from storage.records import CommandExpired
from storage.rows import SettingRow, TraceRow
from tests.support.wire_script import (
    BOOT,
    EPOCH,
    IDENTITY,
    Fold,
    Script,
    answer,
    facts,
    nameplate,
    pivot,
    planned,
    presence,
)

BITS = identity_bits(IDENTITY)
ELM = 0x11
ELM_IDENTITY = SIMULATED_BIT | 0x2222
LIMIT = int(SettingId.WHEEL_LIMIT_RPM)


def met() -> Script:
    """Birch is known."""
    return Script().open().heard(presence(), nameplate())


# -- settings ----------------------------------------------------------------------------


def value(setting: int, now: int, low: int = 0, high: int = 10_000, **changes: Any) -> SettingValue:
    """What birch says of one of its three settings."""
    return SettingValue(BOOT, BITS, setting, 3, now, low, high)._replace(**changes)


def test_the_first_is_asked_for_first_and_then_each_that_it_has() -> None:
    script = met()
    fold = Fold(script)
    assert fold.reducer.settings_wanted() == ((1, 1),)
    for setting, next_wanted in ((1, ((1, 2),)), (2, ((1, 3),)), (3, ())):
        script.heard(value(setting, 100 * setting))
        fold.on()
        assert fold.reducer.settings_wanted() == next_wanted
    view = fold.view.modules[0]
    assert view.settings == ((1, 100), (2, 200), (3, 300))
    assert view.settings_total == 3


def test_one_setting_a_module_is_wanted_at_a_time() -> None:
    script = met().heard(presence(identity=ELM_IDENTITY), address=ELM).heard(value(1, 5))
    assert Fold(script).reducer.settings_wanted() == ((1, 2), (2, 1))


def test_answers_out_of_turn_are_taken() -> None:
    fold = Fold(met().heard(value(3, 30)).heard(value(1, 10)))
    assert fold.reducer.settings_wanted() == ((1, 2),)
    assert fold.view.modules[0].settings == ((1, 10), (3, 30))


def test_one_beyond_the_count_takes_no_other_s_place() -> None:
    fold = Fold(met().heard(value(1, 5)).heard(value(77, 1), value(78, 1)))
    assert fold.reducer.settings_wanted() == ((1, 2),)


def test_a_module_without_settings_is_asked_once() -> None:
    none = value(1, 0, low=1, high=0, settings=0)
    fold = Fold(met().heard(none))
    assert fold.reducer.settings_wanted() == ()
    assert fold.view.modules[0].settings == ()
    assert fold.table("settings") == []


def test_a_row_for_the_first_reading_and_for_each_change() -> None:
    script = met().heard(value(LIMIT, 9000))
    first = script.t_ns
    script.heard(value(LIMIT, 9000)).heard(value(LIMIT, 5000))
    assert Fold(script).table("settings") == [
        SettingRow(1, "wheel_limit_rpm", 4, 0, first, 9000, 0, 10_000),
        SettingRow(1, "wheel_limit_rpm", 6, 0, script.t_ns, 5000, 0, 10_000),
    ]


def test_a_setting_without_a_name_goes_by_its_number() -> None:
    (row,) = Fold(met().heard(value(77, 1))).table("settings")
    assert row.setting == "setting 77"


def test_groups_are_bits_without_a_sign() -> None:
    assert Fold(met()).view.modules[0].groups == 0
    fold = Fold(met().heard(value(SettingId.GROUPS, -(2**31) + 5)))
    assert fold.view.modules[0].groups == 1 << 31 | 0b101


@pytest.mark.parametrize("changes", [{"boot": BOOT + 1}, {"identity_bits": BITS ^ 1}])
def test_a_stranger_s_setting_is_not_taken(changes: dict[str, int]) -> None:
    fold = Fold(met().heard(value(1, 5, **changes)))
    assert fold.table("settings") == []
    assert fold.reducer.settings_wanted() == ((1, 1),)


# -- after a write -----------------------------------------------------------------------


def written(to: int = 6000) -> Script:
    """All three were read, and the limit is then ordered to be something else."""
    script = met().heard(value(1, 9000), value(2, 500), value(3, 3500))
    order = planned(motion="set", setting=LIMIT, direction=0, speed_rpm=0, value=to)
    return script.order(order).sent(SettingWrite(EPOCH, BOOT, 1, BITS, LIMIT, to))


def test_a_setting_that_was_written_is_read_again() -> None:
    script = written()
    fold = Fold(script)
    assert fold.reducer.settings_wanted() == ()
    script.heard(answer(1, AnswerState.FINISHED))
    fold.on()
    assert fold.reducer.settings_wanted() == ((1, LIMIT),)
    script.heard(value(LIMIT, 6000))
    fold.on()
    assert fold.reducer.settings_wanted() == ()
    assert fold.alarms == []
    assert fold.view.modules[0].settings[0] == (LIMIT, 6000)


def test_a_write_that_did_not_hold_is_told_after_the_second_look() -> None:
    """The first may have been on its way since before the write."""
    script = written().heard(answer(1, AnswerState.FINISHED)).heard(value(LIMIT, 9000))
    fold = Fold(script)
    assert fold.alarms == []
    assert fold.reducer.settings_wanted() == ((1, LIMIT),)
    script.heard(value(LIMIT, 9000))
    fold.on()
    assert fold.reducer.settings_wanted() == ()
    (alarm,) = fold.table("alarms")
    assert (alarm.alarm, alarm.module) == ("setting differs", 1)
    assert alarm.detail == "birch: wheel_limit_rpm is 9000, and was set to 6000"


def test_an_old_word_and_then_the_new_one_is_no_difference() -> None:
    script = written().heard(answer(1, AnswerState.FINISHED)).heard(value(LIMIT, 9000))
    fold = Fold(script.heard(value(LIMIT, 6000)))
    assert fold.alarms == []
    assert fold.reducer.settings_wanted() == ()


def test_a_refused_write_needs_no_reading() -> None:
    fold = Fold(written().heard(answer(1, AnswerState.REFUSED)))
    assert fold.reducer.settings_wanted() == ()


def test_a_write_without_a_report_is_read_and_either_value_is_right() -> None:
    script = written()
    script.add(CommandExpired, 1)
    fold = Fold(script)
    assert fold.reducer.settings_wanted() == ((1, LIMIT),)
    script.heard(value(LIMIT, 9000))
    fold.on()
    assert (fold.reducer.settings_wanted(), fold.alarms) == ((), [])


def test_the_command_s_row_and_words_say_what_is_set() -> None:
    fold = Fold(written())
    (row,) = fold.table("commands")
    assert (row.motion, row.setting, row.value) == ("set", "wheel_limit_rpm", 6000)
    assert fold.view.modules[0].doing == "set wheel limit to 6000 rpm"
    assert fold.table("motions") == []


# -- traces ------------------------------------------------------------------------------

SAMPLES = tuple(TraceSample(100 * at, -at, 9 * at, 4000 - at) for at in range(28))
HEAD = TraceHead(2500, len(SAMPLES), 20, 20_500)


def chunks(number: int = 1, head: TraceHead = HEAD, **changes: Any) -> list[TraceChunk]:
    """A whole trace: 28 samples at three a chunk are ten chunks, and the head."""
    datas = pack_trace(head, SAMPLES[: head.samples])
    made = [TraceChunk(BOOT, number, BITS, at, len(datas), data) for at, data in enumerate(datas)]
    return [each._replace(**changes) for each in made]


def ended(*numbers: int) -> Script:
    """Birch has pivoted, and its facts have come."""
    script = met()
    for number in numbers or (1,):
        script.order(planned(number)).sent(pivot(number)).heard(facts(number))
    return script


def ask(number: int = 1, first: int = 0, wanted: int = 1) -> TraceAsk:
    """A question about its trace."""
    return TraceAsk(EPOCH, BOOT, number, BITS, first, wanted)


def traces(fold: Fold) -> list[str]:
    """What the commands' lives say of traces."""
    return [row.detail for row in fold.table("command_events") if row.event == "trace"]


def test_a_trace_is_wanted_once_facts_came_its_head_first() -> None:
    script = met().order(planned(1)).sent(pivot(1))
    fold = Fold(script)
    assert fold.reducer.trace_wanted() == ()
    script.heard(facts(1))
    fold.on()
    assert fold.reducer.trace_wanted() == ((1, EPOCH, BOOT, 1, IDENTITY, 0, 1),)


def test_chunks_are_asked_for_eight_at_a_time_and_only_those_lacking() -> None:
    whole = chunks()
    assert len(whole) == 11
    script = ended().heard(whole[0])
    fold = Fold(script)
    assert fold.reducer.trace_wanted()[0][-2:] == (1, 0b1111_1111)
    script.heard(whole[1], whole[2], whole[5])
    fold.on()
    assert fold.reducer.trace_wanted()[0][-2:] == (3, 0b1111_1011)


def test_a_whole_trace_is_one_row() -> None:
    """The row's bytes are the samples as Python's struct lays them out, without the filling."""
    script = ended().heard(*chunks())
    fold = Fold(script)
    data = b"".join(struct.pack("<hhhH", *each) for each in SAMPLES)
    assert fold.table("traces") == [TraceRow(1, 2500, 28, 20, 20_500, data)]
    assert fold.reducer.trace_wanted() == ()
    assert traces(fold) == ["28 samples"]
    script.heard(*chunks())
    assert fold.on() == []


def test_an_empty_trace_is_a_trace() -> None:
    fold = Fold(ended().heard(*chunks(head=TraceHead(2500, 0, 0, 7))))
    assert fold.table("traces") == [TraceRow(1, 2500, 0, 0, 7, b"")]


@settings(max_examples=60, deadline=None)
@given(st.integers(0, 10**6))
def test_in_any_order_and_repeated_the_trace_is_the_same(seed: int) -> None:
    draw = random.Random(seed)
    words = chunks() * 2
    draw.shuffle(words)
    script = ended()
    for word in words:
        script.heard(word)
    assert Fold(script).table("traces") == Fold(ended().heard(*chunks())).table("traces")


def test_a_module_that_keeps_none_is_asked_no_more() -> None:
    none = TraceChunk(BOOT, 1, BITS, 0, 0, bytes(24))
    fold = Fold(ended().heard(none))
    assert fold.reducer.trace_wanted() == ()
    assert traces(fold) == ["none was kept"]
    assert fold.table("traces") == []


def test_ten_questions_in_a_row_for_nothing_are_the_last() -> None:
    """WIRE.md, "Traces"."""
    assert GIVE_UP_AFTER == 10
    script = ended()
    fold = Fold(script)
    for count in range(10):
        assert len(fold.reducer.trace_wanted()) == 1, count
        script.sent(ask())
        fold.on()
    assert fold.reducer.trace_wanted() == ()
    assert traces(fold) == ["no chunk came to 10 questions"]


def test_an_answer_begins_the_count_anew_and_a_repeat_does_not() -> None:
    whole = chunks()
    script = ended().heard(whole[0])
    for chunk in (whole[1], whole[2]):
        for _ in range(9):
            script.sent(ask())
        script.heard(chunk)
    for _ in range(9):
        script.sent(ask()).heard(whole[2])
    fold = Fold(script)
    assert len(fold.reducer.trace_wanted()) == 1
    script.sent(ask())
    fold.on()
    assert fold.reducer.trace_wanted() == ()
    script.heard(whole[3])  # late, and better than never
    fold.on()
    assert len(fold.reducer.trace_wanted()) == 1


def test_the_next_motion_s_trace_takes_the_place_of_the_last() -> None:
    """A module keeps only its last motion's."""
    script = ended(1, 2)
    fold = Fold(script)
    assert [each[3] for each in fold.reducer.trace_wanted()] == [2]
    script.heard(*chunks(1))
    fold.on()
    assert fold.table("traces") == []
    script.heard(*chunks(2))
    fold.on()
    assert [row.command for row in fold.table("traces")] == [2]


def test_late_facts_of_an_older_motion_do_not_take_its_place() -> None:
    script = met().order(planned(1)).sent(pivot(1))
    script.add(CommandExpired, 1)
    script.order(planned(2)).sent(pivot(2)).heard(facts(2)).heard(facts(1))
    assert [each[3] for each in Fold(script).reducer.trace_wanted()] == [2]


@pytest.mark.parametrize(
    "stray",
    [
        chunks(2)[0],
        chunks(boot=BOOT + 1)[0],
        chunks(identity_bits=BITS ^ 1)[0],
    ],
)
def test_a_chunk_of_another_trace_is_passed_over(stray: Message) -> None:
    script = ended()
    fold = Fold(script)
    wanted = fold.reducer.trace_wanted()
    script.heard(stray)
    assert fold.on() == []
    assert fold.reducer.trace_wanted() == wanted


def test_a_chunk_that_contradicts_the_others_is_told_once() -> None:
    whole = chunks()
    bad = whole[3]._replace(chunks=99)
    fold = Fold(ended().heard(whole[0], bad, bad, *whole[1:]))
    assert traces(fold) == ["chunk 3 of 99 fits no trace here", "28 samples"]
    assert len(fold.table("traces")) == 1


def test_chunks_that_make_no_trace_are_given_up_with_the_reason() -> None:
    """A head that promises more samples than there are chunks for."""
    whole = chunks()
    lying = pack_trace(HEAD._replace(samples=3), SAMPLES[:3])[0]
    fold = Fold(ended().heard(whole[0]._replace(data=lying), *whole[1:]))
    assert traces(fold) == ["11 chunks cannot hold 3 samples"]
    assert fold.table("traces") == []
    assert fold.reducer.trace_wanted() == ()


def test_a_cut_motion_s_trace_is_wanted_too() -> None:
    """What went wrong is best seen there."""
    script = met().order(planned(1)).sent(pivot(1)).heard(facts(1, reason=12, brake_us=0))
    assert len(Fold(script).reducer.trace_wanted()) == 1
