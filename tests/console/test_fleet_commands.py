"""A command's life: each way to its one ending, repeats, late words, and what stays shut."""

from collections.abc import Sequence
from dataclasses import replace
from typing import Any

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from console.errors import LogError
from console.fleet import FleetReducer
from console.view import Outcome
from protocol.codes import Activity, AnswerState, Flags, Reason
from protocol.exchange import CommandExchange, Ended, Ending, Send
from protocol.message import (
    Echo,
    FaultNotice,
    Flash,
    Hop,
    LockOut,
    Message,
    Rest,
    Spin,
    Twist,
    Unlock,
)
from storage.records import (
    CommandExpired,
    OrderGiven,
    OrderVoided,
    PlannedCommand,
    SessionClosed,
    StageStarted,
    StopLifted,
    StopPressed,
)
from storage.rows import CommandRow, MotionRow, OrderRow
from tests.support.wire_script import (
    ADDRESS,
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
    query,
    telemetry,
)

ACCEPTED = AnswerState.ACCEPTED
REFUSED = AnswerState.REFUSED
FINISHED = AnswerState.FINISHED
CUT = AnswerState.CUT
UNKNOWN = AnswerState.UNKNOWN


def ordered(*numbers: int) -> Script:
    """A session in which birch was ordered to pivot, and nothing is sent yet."""
    script = Script().open().heard(presence(), nameplate())
    for number in numbers or (1,):
        script.order(planned(number))
    return script


def called(*numbers: int) -> Script:
    """The same, each sent once."""
    script = ordered(*numbers)
    for number in numbers or (1,):
        script.sent(pivot(number))
    return script


def command(fold: Fold, number: int = 1) -> CommandRow:
    """The command's row as it now stands."""
    row = fold.tables["commands"][number,]
    assert isinstance(row, CommandRow)
    return row


def motion(fold: Fold, number: int = 1) -> MotionRow:
    """The motion's row as it now stands."""
    row = fold.tables["motions"][number,]
    assert isinstance(row, MotionRow)
    return row


def test_an_order_is_entered_whole_before_anything_is_sent() -> None:
    script = Script().open().heard(presence())
    script.order(planned(1), planned(2, trial=9), order=5)
    fold = Fold(script)
    assert fold.table("orders") == [
        OrderRow(5, script.t_ns, "typed", "birch pivot forward at 4400", 2)
    ]
    assert command(fold) == CommandRow(
        command=1,
        order_no=5,
        t_ns=script.t_ns,
        module=1,
        identity="80005a5a00001111",
        boot=BOOT,
        epoch=EPOCH,
        number=1,
        motion="pivot",
        setting="floor",
        direction="forward",
        speed_rpm=4400,
        duration_ms=0,
        trial=0,
        sends=0,
        repeats_ignored=0,
        ending=None,
        reason=None,
        final=0,
        ended_t_ns=None,
        latest_ms=25_000,
        stage=0,
        person="",
        value=0,
    )
    assert command(fold, 2).trial == 9
    assert fold.events() == ["ordered"]
    assert fold.table("motions") == []
    assert fold.reducer.open_commands() == [1, 2]
    assert fold.ended == []


def test_a_landed_pivot_from_order_to_facts() -> None:
    script = called().heard(answer(1, ACCEPTED, expect_ms=2400)).heard(facts(1))
    fold = Fold(script)
    assert fold.events() == ["ordered", "sent", "accepted", "finished"]
    row = command(fold)
    assert (row.sends, row.repeats_ignored) == (1, 0)
    assert (row.ending, row.reason, row.final) == ("finished", None, 1)
    assert row.ended_t_ns == script.t_ns
    assert fold.ended == [1]
    assert fold.reducer.open_commands() == []
    # Units by hand: 900 tenths are 90 degrees, 8750 us are 8.75 ms, 210 mV are 0.21 V.
    assert motion(fold) == MotionRow(
        command=1,
        module=1,
        motion="pivot",
        setting="floor",
        direction="forward",
        speed_rpm=4400,
        trial=0,
        simulated=1,
        outcome="landed",
        turned_deg=90.0,
        peak_tilt_deg=61.2,
        face_before=1,
        face_after=2,
        settled=1,
        peak_rate_dps=410,
        wheel_at_brake_rpm=4390,
        brake_ms=8.75,
        spin_up_ms=1480,
        settle_ms=640,
        sag_V=0.21,
        started_ms=20_500,
    )


def test_a_real_module_s_motion_is_not_marked_simulated() -> None:
    real = IDENTITY & ~(1 << 63)
    script = Script().open().heard(presence(identity=real)).order(planned(identity=real))
    script.sent(pivot()).heard(facts())
    fold = Fold(script)
    assert motion(fold).simulated == 0
    assert not fold.view.simulated
    assert fold.table("modules")[0].simulated == 0


def test_each_sending_is_counted_and_told_apart_from_the_first() -> None:
    fold = Fold(called().sent(pivot()).sent(pivot()))
    assert fold.events() == ["ordered", "sent", "resent", "resent"]
    assert command(fold).sends == 3


@pytest.mark.parametrize(
    "other",
    [
        pivot(2),
        pivot(1, epoch=EPOCH + 1),
        pivot(1, boot=BOOT + 1),
    ],
)
def test_a_sending_of_another_command_is_not_counted(other: Message) -> None:
    assert command(Fold(ordered().sent(other))).sends == 0


def test_a_sending_to_another_address_is_not_counted() -> None:
    assert command(Fold(ordered().sent(pivot(), address=0x0011))).sends == 0


@pytest.mark.parametrize(
    ("name", "message"),
    [
        ("spin", Spin(EPOCH, BOOT, 1, 0x1111, 25_000, 3000, 5000)),
        ("rest", Rest(EPOCH, BOOT, 1, 0x1111)),
        ("flash", Flash(EPOCH, BOOT, 1, 0x1111, 2000)),
        ("lock", LockOut(EPOCH, BOOT, 1, 0x1111, b"Ada")),
        ("unlock", Unlock(EPOCH, BOOT, 1, 0x1111, b"Ada")),
    ],
)
def test_every_kind_of_command_is_counted_and_ends_without_an_outcome(
    name: str, message: Message
) -> None:
    script = Script().open().heard(presence())
    script.order(planned(motion=name, setting=0, direction=0, speed_rpm=0))
    fold = Fold(script.sent(message).heard(answer(1, FINISHED)))
    assert fold.events() == ["ordered", "sent", "finished"]
    row = command(fold)
    assert (row.sends, row.ending, row.setting, row.direction) == (1, "finished", "", "")
    assert fold.table("motions") == []
    view = fold.reducer.command(1)
    assert view is not None
    assert view.outcome is None


@pytest.mark.parametrize(
    ("name", "message", "changes", "outcome"),
    [
        ("hop", Hop(EPOCH, BOOT, 1, 0x1111, 9, 0, 1, 7000), {"turned_ddeg": 1800}, "landed"),
        ("hop", Hop(EPOCH, BOOT, 1, 0x1111, 9, 0, 1, 7000), {"peak_tilt_ddeg": 3}, "stuck"),
        ("twist", Twist(EPOCH, BOOT, 1, 0x1111, 9, 0, -1, 4000), {"turned_ddeg": -460}, "landed"),
        ("twist", Twist(EPOCH, BOOT, 1, 0x1111, 9, 0, -1, 4000), {"turned_ddeg": 300}, "short"),
    ],
)
def test_hops_and_twists_have_outcomes_of_their_own(
    name: str, message: Message, changes: dict[str, int], outcome: str
) -> None:
    script = Script().open().heard(presence()).order(planned(motion=name, setting=0))
    fold = Fold(script.sent(message).heard(answer(1, ACCEPTED)).heard(facts(**changes)))
    assert fold.events() == ["ordered", "sent", "accepted", "finished"]
    assert (motion(fold).motion, motion(fold).setting) == (name, "")
    assert motion(fold).outcome == outcome
    assert motion(fold).started_ms == 20_500


def test_what_a_command_carries_is_in_its_row() -> None:
    script = Script().open().heard(presence())
    fold = Fold(script.order(planned(latest_ms=2**32 - 1, stage=7, person="Ada", value=-5)))
    row = command(fold)
    assert (row.latest_ms, row.stage, row.person, row.value) == (2**32 - 1, 7, "Ada", -5)


# -- together ----------------------------------------------------------------------------


def staged() -> Script:
    """Two pivots of one order were accepted, and wait for their Go."""
    script = Script().open().heard(presence(), nameplate())
    script.order(planned(1, stage=3), planned(2, stage=3), order=5).order(planned(9))
    script.sent(pivot(1, stage=3)).heard(answer(1, ACCEPTED))
    return script.sent(pivot(2, stage=3)).heard(answer(2, ACCEPTED))


def test_the_agreed_start_is_an_event_of_each_of_its_commands() -> None:
    script = staged()
    script.add(StageStarted, 5, 1234)
    fold = Fold(script)
    for number in (1, 2):
        assert fold.events(number) == ["ordered", "sent", "accepted", "go"]
    assert fold.events(9) == ["ordered"]
    gone = [row for row in fold.table("command_events") if row.event == "go"]
    assert [row.detail for row in gone] == ["at 1234 ms of fleet time"] * 2
    assert fold.view.notices == ()


def test_a_stage_that_is_given_up_is_told_and_its_commands_end_by_themselves() -> None:
    script = staged().heard(answer(1, CUT, Reason.TOO_LATE))
    script.add(StageStarted, 5, None)
    fold = Fold(script)
    assert fold.events(1) == ["ordered", "sent", "accepted", "cut"]
    assert fold.events(2)[-1] == "no go"
    assert command(fold, 2).ending is None
    assert fold.view.notices[-1][1] == "order 5 is not started: not every module accepted it"


def test_a_staged_motion_that_did_not_begin_is_cut() -> None:
    fold = Fold(staged().heard(answer(1, CUT, Reason.TOO_LATE)))
    row = command(fold)
    assert (row.ending, row.reason, row.final) == ("cut", "too_late", 1)
    assert motion(fold).outcome == "cut"
    assert motion(fold)[9:] == (None,) * 12


def test_waiting_for_its_go_shows_in_the_picture() -> None:
    fold = Fold(staged().heard(telemetry(1, activity=Activity.STAGED)))
    assert fold.view.modules[0].staged
    assert fold.view.modules[0].doing == "pivot floor forward at 4400 rpm together"
    view = fold.reducer.command(1)
    assert view is not None
    assert view.accepted


def test_a_question_is_an_event_and_no_sending() -> None:
    fold = Fold(called().sent(query()))
    assert fold.events() == ["ordered", "sent", "asked"]
    assert command(fold).sends == 1


@pytest.mark.parametrize(
    ("reason", "text"),
    [
        (Reason.BATTERY_LOW, "battery_low"),
        (Reason.STOP_IN_FORCE, "stop_in_force"),
        (99, "reason 99"),
    ],
)
def test_a_refusal_ends_with_its_reason(reason: Any, text: str) -> None:
    fold = Fold(called().heard(answer(1, REFUSED, reason)))
    row = command(fold)
    assert (row.ending, row.reason, row.final) == ("refused", text, 1)
    assert fold.events() == ["ordered", "sent", "refused"]
    made = motion(fold)
    assert made.outcome == "refused"
    assert made[9:] == (None,) * 12
    assert f"birch refused pivot floor forward at 4400 rpm: {text.replace('_', ' ')}" in [
        notice for _, notice in fold.view.notices
    ]


def test_a_cut_by_answer_has_no_facts() -> None:
    fold = Fold(called().heard(answer(1, CUT, Reason.RESTED)))
    assert (command(fold).ending, command(fold).reason) == ("cut", "rested")
    assert motion(fold).outcome == "cut"
    assert motion(fold).turned_deg is None


def test_facts_of_a_motion_stopped_before_its_brake_are_a_cut() -> None:
    measured = facts(reason=Reason.STOPPED, brake_us=0, wheel_at_brake_rpm=0, turned_ddeg=0)
    fold = Fold(called().heard(measured))
    assert (command(fold).ending, command(fold).reason) == ("cut", "stopped")
    assert motion(fold).outcome == "cut"
    assert motion(fold).spin_up_ms == 1480


def test_facts_of_a_motion_stopped_after_its_brake_keep_their_verdict() -> None:
    fold = Fold(called().heard(facts(reason=Reason.STOPPED)))
    assert command(fold).ending == "cut"
    assert motion(fold).outcome == "landed"


def test_facts_tell_how_the_module_lies_though_telemetry_of_it_is_lost() -> None:
    settling = telemetry(activity=Activity.SETTLING, face_up=0, flags=Flags.UNSETTLED)
    fold = Fold(called().heard(settling))
    assert fold.view.modules[0].activity == Activity.SETTLING
    fold.script.heard(facts(face_after=2))
    fold.on()
    module = fold.view.modules[0]
    assert (module.face_up, module.activity, module.flags) == (2, Activity.STILL, 0)


def test_facts_of_an_unsettled_end_say_so() -> None:
    module = Fold(called().heard(telemetry()).heard(facts(settled=0, face_after=0))).view.modules[0]
    assert (module.face_up, module.flags) == (0, Flags.UNSETTLED)


def test_late_facts_do_not_overrule_newer_telemetry() -> None:
    script = called()
    script.add(CommandExpired, 1)
    fold = Fold(script.heard(telemetry(face_up=3)).heard(facts(face_after=2)))
    assert fold.view.modules[0].face_up == 3


# -- repeats -----------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("first", "again"),
    [
        ([answer(1, ACCEPTED)], answer(1, ACCEPTED)),
        ([answer(1, ACCEPTED), facts()], facts()),
        ([facts()], answer(1, ACCEPTED)),
        ([answer(1, REFUSED, Reason.BUSY)], answer(1, REFUSED, Reason.BUSY)),
        ([answer(1, FINISHED)], answer(1, FINISHED)),
        ([answer(1, CUT, Reason.RESTED)], answer(1, CUT, Reason.RESTED)),
    ],
)
def test_a_repeat_is_counted_and_changes_nothing_else(first: list[Any], again: Message) -> None:
    fold = Fold(called().heard(*first))
    before, motions, ended = command(fold), fold.table("motions"), fold.ended
    fold.script.heard(again).heard(again)
    fold.on()
    assert command(fold) == before._replace(repeats_ignored=2)
    assert fold.events()[-2:] == ["repeat ignored"] * 2
    assert fold.table("motions") == motions
    assert fold.ended == ended


def test_unknown_after_the_end_is_no_repeat() -> None:
    """It answers a question that crossed with the end; no answer was taken twice."""
    fold = Fold(called().heard(facts()))
    fold.script.heard(answer(1, UNKNOWN))
    assert fold.on() == []


@pytest.mark.parametrize(
    "contrary",
    [answer(1, REFUSED, Reason.BUSY), answer(1, CUT), answer(1, UNKNOWN), facts(turned_ddeg=0)],
)
def test_a_contrary_word_after_the_end_changes_no_ending(contrary: Message) -> None:
    fold = Fold(called().heard(facts()))
    ending, outcome = command(fold)[16:], motion(fold)
    fold.script.heard(contrary)
    fold.script.add(CommandExpired, 1)
    fold.script.add(SessionClosed, "2026-03-04T10:00:00Z", "closed")
    fold.on()
    assert command(fold)[16:] == ending
    assert motion(fold) == outcome


@pytest.mark.parametrize(
    "stray",
    [
        facts(2),
        facts(1, boot=BOOT + 1),
        facts(1, epoch=EPOCH - 1),
        answer(2, REFUSED),
        answer(1, FINISHED, boot=BOOT + 1),
        answer(1, FINISHED, epoch=EPOCH - 1),
        answer(1, AnswerState.ACCEPTED)._replace(state=77),
    ],
)
def test_a_word_on_another_command_is_passed_over(stray: Message) -> None:
    fold = Fold(called())
    fold.script.heard(stray)
    assert fold.on() == []
    assert command(fold).ending is None


def test_a_word_from_another_address_is_passed_over() -> None:
    assert command(Fold(called().heard(facts(), address=0x0011))).ending is None


# -- unseen ------------------------------------------------------------------------------


def expired() -> Script:
    """A command of which no answer came."""
    script = called()
    script.add(CommandExpired, 1)
    return script


def test_an_expired_command_is_unseen_for_now() -> None:
    fold = Fold(expired())
    assert (command(fold).ending, command(fold).final) == ("unseen", 0)
    assert fold.events() == ["ordered", "sent", "unseen"]
    assert motion(fold).outcome == "unseen"
    assert fold.ended == [1]
    assert fold.reducer.open_commands() == []


@pytest.mark.parametrize(
    ("late", "ending", "outcome"),
    [
        (facts(), "finished", "landed"),
        (facts(turned_ddeg=1800, face_after=3), "finished", "over"),
        (answer(1, REFUSED, Reason.BUSY), "refused", "refused"),
        (answer(1, CUT, Reason.RESTED), "cut", "cut"),
        (answer(1, FINISHED), "finished", "unseen"),
    ],
)
def test_a_late_word_resolves_it_once(late: Message, ending: str, outcome: str) -> None:
    fold = Fold(expired().heard(late))
    assert (command(fold).ending, command(fold).final) == (ending, 1)
    assert command(fold).ended_t_ns == fold.script.t_ns
    assert motion(fold).outcome == outcome
    assert fold.view.modules[0].outcomes == (Outcome(outcome),)
    assert fold.ended == [1]
    resolved = command(fold)
    fold.script.heard(facts(turned_ddeg=0), answer(1, REFUSED, Reason.STOPPED))
    fold.on()
    assert command(fold) == resolved._replace(repeats_ignored=2)


@pytest.mark.parametrize(
    "late",
    [
        answer(1, ACCEPTED),
        answer(1, UNKNOWN),
        answer(1, REFUSED, Reason.NUMBER_PASSED),
        answer(1, REFUSED, Reason.OTHER_EPOCH),
    ],
)
def test_a_late_word_that_tells_no_end_leaves_it_open(late: Message) -> None:
    fold = Fold(expired().heard(late))
    assert (command(fold).ending, command(fold).final) == ("unseen", 0)
    fold.script.heard(facts())
    fold.on()
    assert command(fold).ending == "finished"


def test_the_close_makes_unseen_final_and_ends_what_is_open() -> None:
    script = called(1, 2)
    script.add(CommandExpired, 1)
    script.add(SessionClosed, "2026-03-04T10:00:00Z", "closed")
    script.heard(facts(1), facts(2))
    fold = Fold(script)
    for number in (1, 2):
        assert (command(fold, number).ending, command(fold, number).final) == ("unseen", 1)
        assert motion(fold, number).outcome == "unseen"
    assert fold.ended == [1, 2]
    assert fold.view.closed
    assert fold.events(1) == ["ordered", "sent", "unseen", "unseen", "repeat ignored"]


def test_an_expiry_of_an_unknown_command_is_passed_over() -> None:
    script = called()
    script.add(CommandExpired, 44)
    assert command(Fold(script)).ending is None


# -- words on the envelope ---------------------------------------------------------------


def test_unknown_ends_it_only_where_the_newest_word_was_a_question() -> None:
    fold = Fold(called().heard(answer(1, ACCEPTED), answer(1, UNKNOWN)))
    assert command(fold).ending is None
    fold.script.sent(query()).heard(answer(1, UNKNOWN))
    fold.on()
    assert (command(fold).ending, command(fold).final) == ("unseen", 0)


def test_unknown_overtaken_by_the_acceptance_ends_nothing() -> None:
    script = called().sent(query()).heard(answer(1, ACCEPTED)).heard(answer(1, UNKNOWN))
    assert command(Fold(script)).ending is None


@pytest.mark.parametrize(
    ("reason", "sends", "accepted", "ending"),
    [
        (Reason.OTHER_BOOT, 1, False, "refused"),
        (Reason.OTHER_BOOT, 2, False, "unseen"),
        (Reason.OTHER_BOOT, 1, True, "unseen"),
        (Reason.OTHER_EPOCH, 1, False, "unseen"),
        (Reason.OWNED, 1, False, "unseen"),
        (Reason.OTHER_EPOCH, 3, False, "unseen"),
        (Reason.NUMBER_PASSED, 2, False, "refused"),
        (Reason.NUMBER_PASSED, 1, True, "unseen"),
        (Reason.BUSY, 1, True, None),
    ],
)
def test_a_refusal_of_the_envelope_is_sure_only_of_a_single_copy(
    reason: Reason, sends: int, accepted: bool, ending: str | None
) -> None:
    """An earlier copy may have been carried out by the boot before: that must stay open."""
    script = ordered()
    for _ in range(sends):
        script.sent(pivot())
    if accepted:
        script.heard(answer(1, ACCEPTED))
    fold = Fold(script.heard(answer(1, REFUSED, reason)))
    assert command(fold).ending == ending
    fold.script.heard(facts())
    fold.on()
    assert command(fold).ending == ("refused" if ending == "refused" else "finished")


def test_another_box_s_refusal_leaves_open_what_ours_may_have_done() -> None:
    """Two modules at one address hear each command; the other one refuses it by identity."""
    script = Script().open().heard(presence()).heard(presence(identity=IDENTITY + 1, boot=9))
    script.order(planned()).sent(pivot()).heard(answer(1, REFUSED, Reason.OTHER_IDENTITY))
    fold = Fold(script)
    assert (command(fold).ending, command(fold).final) == ("unseen", 0)
    fold.script.heard(facts())
    fold.on()
    assert motion(fold).outcome == "landed"


def test_alone_at_its_address_a_refusal_by_identity_is_one() -> None:
    fold = Fold(called().heard(answer(1, REFUSED, Reason.OTHER_IDENTITY)))
    assert (command(fold).ending, command(fold).reason) == ("refused", "other_identity")


# -- all-stop, restart, the log ----------------------------------------------------------


def test_all_stop_cuts_what_was_never_sent_and_only_that() -> None:
    script = called(1).order(planned(2))
    script.add(StopPressed, 1, "key")
    fold = Fold(script)
    assert command(fold, 1).ending is None
    row = command(fold, 2)
    assert (row.ending, row.reason, row.final) == ("cut", "stopped", 1)
    assert motion(fold, 2).outcome == "cut"
    assert fold.ended == [2]


def test_a_withdrawn_command_that_never_arrived_is_cut() -> None:
    script = called()
    script.add(StopPressed, 1, "key")
    fold = Fold(script.sent(query()).heard(answer(1, UNKNOWN)))
    assert (command(fold).ending, command(fold).reason, command(fold).final) == (
        "cut",
        "stopped",
        1,
    )


def resting(number: int) -> Rest:
    """A rest of that number."""
    return Rest(EPOCH, BOOT, number, 0x1111)


def rest_order(number: int) -> PlannedCommand:
    """The same, planned."""
    return planned(number, motion="rest", setting=0, direction=0, speed_rpm=0)


def test_a_rest_takes_the_place_of_what_waits_and_withdraws_what_was_sent() -> None:
    script = called(1).order(planned(2)).order(rest_order(3)).sent(resting(3))
    fold = Fold(script)
    assert command(fold, 1).ending is None
    row = command(fold, 2)
    assert (row.ending, row.reason, row.final) == ("cut", "rested", 1)
    assert command(fold, 3).ending is None
    script.sent(query(1)).heard(answer(1, UNKNOWN))
    fold.on()
    assert (command(fold, 1).ending, command(fold, 1).reason) == ("cut", "rested")


def lock_order(number: int) -> PlannedCommand:
    """A lock-out, planned."""
    return replace(rest_order(number), motion="lock", person="Ada")


def test_a_lock_out_does_the_same_and_says_so() -> None:
    script = called(1).order(planned(2)).order(lock_order(3))
    fold = Fold(script)
    assert command(fold, 1).ending is None
    row = command(fold, 2)
    assert (row.ending, row.reason, row.final) == ("cut", "locked_out", 1)
    assert command(fold, 3).ending is None
    script.sent(LockOut(EPOCH, BOOT, 3, 0x1111, b"Ada")).heard(answer(1, CUT, Reason.LOCKED_OUT))
    script.heard(answer(3, FINISHED))
    fold.on()
    assert (command(fold, 1).ending, command(fold, 1).reason) == ("cut", "locked_out")
    assert (command(fold, 3).ending, command(fold, 3).person) == ("finished", "Ada")


@pytest.mark.parametrize("ahead", [rest_order(2), lock_order(2)])
@pytest.mark.parametrize("again", ["stop", "rest", "lock"])
def test_a_rest_or_lock_out_on_its_way_is_not_taken_back(ahead: Any, again: str) -> None:
    """It goes ahead of all that waits, and no stop and no other rest drops it."""
    script = ordered(1).order(ahead)
    if again == "stop":
        script.add(StopPressed, 1, "key")
    else:
        script.order(rest_order(3) if again == "rest" else lock_order(3))
    fold = Fold(script)
    assert command(fold, 2).ending is None
    script.sent(resting(2)).heard(answer(2, FINISHED))
    fold.on()
    assert (command(fold, 2).sends, command(fold, 2).ending) == (1, "finished")


def test_a_rest_of_one_module_leaves_the_others_alone() -> None:
    other = IDENTITY + 1
    script = ordered(1).heard(presence(identity=other), address=0x11)
    script.order(replace(rest_order(2), module=2, identity=other))
    assert command(Fold(script), 1).ending is None


def test_a_withdrawn_command_that_was_accepted_is_not_called_cut_on_unknown() -> None:
    script = called().heard(answer(1, ACCEPTED))
    script.add(StopPressed, 1, "key")
    fold = Fold(script.sent(query()).heard(answer(1, UNKNOWN)))
    assert (command(fold).ending, command(fold).final) == ("unseen", 0)


@pytest.mark.parametrize("state", [REFUSED, UNKNOWN])
def test_a_withdrawn_command_disowned_by_a_new_boot_stays_open(state: AnswerState) -> None:
    script = called()
    script.add(StopPressed, 1, "key")
    fold = Fold(script.sent(query()).heard(answer(1, state, Reason.OTHER_BOOT)))
    assert (command(fold).ending, command(fold).final) == ("unseen", 0)
    assert command(fold).reason == "other_boot"


def test_a_command_given_after_the_stop_was_lifted_is_not_withdrawn() -> None:
    script = called()
    script.add(StopPressed, 1, "key")
    script.add(StopLifted, 1, "key")
    script.order(planned(2)).sent(pivot(2)).sent(query(2)).heard(answer(2, UNKNOWN))
    assert command(Fold(script), 2).ending == "unseen"


def test_a_restart_ends_the_old_boot_s_commands_for_good() -> None:
    script = called(1, 2)
    script.add(CommandExpired, 1)
    fold = Fold(script.heard(presence(boot=BOOT + 1)).heard(facts(1), facts(2)))
    for number in (1, 2):
        assert (command(fold, number).ending, command(fold, number).final) == ("unseen", 1)
    assert fold.ended == [1, 2]


def test_a_command_to_the_new_boot_outlives_word_of_the_old_one() -> None:
    script = Script().open().heard(presence()).heard(presence(boot=BOOT + 1))
    script.order(planned(boot=BOOT + 1)).sent(pivot(boot=BOOT + 1))
    script.heard(presence(), telemetry())  # both under way since before the restart
    fold = Fold(script.heard(facts(boot=BOOT + 1)))
    assert command(fold).ending == "finished"


def test_a_voided_order_ends_as_refused_and_was_never_sent() -> None:
    script = ordered(1)
    script.order(planned(2))
    script.add(OrderVoided, 2, "the disk is full")
    fold = Fold(script)
    assert command(fold, 1).ending is None
    row = command(fold, 2)
    assert (row.ending, row.reason, row.final, row.sends) == ("refused", "not recorded", 1, 0)
    assert motion(fold, 2).outcome == "refused"
    assert any("the disk is full" in text for _, text in fold.view.notices)


def test_an_order_for_a_module_nobody_has_heard_of_is_an_error_in_one_line() -> None:
    reducer = FleetReducer()
    with pytest.raises(LogError, match=r"command 1 is for module 1, of which no record tells"):
        reducer.apply(1, OrderGiven(1, 1, "birch rest", "typed", (planned(),)))


def test_numbers_may_wrap_and_come_again() -> None:
    """After 65,535 commands to one module a wire number serves a second command."""
    script = called(1).heard(facts(1))
    script.order(planned(1, command=70_000)).sent(pivot(1))
    fold = Fold(script.heard(facts(1, turned_ddeg=1800)))
    assert motion(fold, 1).outcome == "landed"
    assert motion(fold, 70_000).outcome == "over"
    assert command(fold, 1).repeats_ignored == 0


# -- pictures ----------------------------------------------------------------------------


def test_the_command_in_hand_is_told_in_words() -> None:
    fold = Fold(called(1).order(planned(2, speed_rpm=4700, direction=-1, setting=2)))
    assert fold.view.modules[0].doing == "pivot floor forward at 4400 rpm"
    fold.script.heard(facts(1))
    fold.on()
    assert fold.view.modules[0].doing == "pivot wall back at 4700 rpm"
    fold.script.sent(pivot(2)).heard(facts(2))
    fold.on()
    assert fold.view.modules[0].doing == ""


@pytest.mark.parametrize(
    ("changes", "text"),
    [
        ({"motion": "hop", "setting": 0, "speed_rpm": 7000}, "hop forward at 7000 rpm"),
        ({"motion": "twist", "setting": 0, "direction": -1}, "twist back at 4400 rpm"),
        ({"motion": "lock", "person": "Ada"}, "lock-out by Ada"),
        ({"motion": "unlock", "person": "Ada"}, "unlock by Ada"),
        ({"motion": "set", "setting": 1, "value": 5000}, "set wheel limit to 5000 rpm"),
        ({"motion": "set", "setting": 2, "value": 250}, "set telemetry period to 250 ms"),
        ({"motion": "set", "setting": 3, "value": 3400}, "set battery low to 3400 mV"),
        ({"motion": "set", "setting": 4, "value": 5}, "set groups to 5"),
        ({"motion": "set", "setting": 77, "value": -1}, "set setting 77 to -1"),
    ],
)
def test_each_kind_of_command_has_its_words(changes: dict[str, Any], text: str) -> None:
    script = Script().open().heard(presence()).order(planned(**changes))
    assert Fold(script).view.modules[0].doing == text


def test_what_was_sent_is_told_before_what_waits() -> None:
    script = called(1).order(planned(2)).order(rest_order(3)).sent(resting(3))
    script.order(planned(4, speed_rpm=4700)).heard(facts(1))
    assert Fold(script).view.modules[0].doing == "rest"
    script = ordered(1).order(planned(2, motion="flash", setting=0, direction=0, speed_rpm=0))
    assert Fold(script).view.modules[0].doing == "pivot floor forward at 4400 rpm"
    script.sent(Flash(EPOCH, BOOT, 2, 0x1111, 2000))
    assert Fold(script).view.modules[0].doing == "flash"


def test_the_ribbon_holds_the_last_twenty_outcomes_in_order() -> None:
    script = called(*range(1, 26))
    for number in range(1, 26):
        landed = number % 2
        script.heard(facts(number, turned_ddeg=900 if landed else 1800))
    outcomes = Fold(script).view.modules[0].outcomes
    assert outcomes == tuple(
        Outcome.LANDED if number % 2 else Outcome.OVER for number in range(6, 26)
    )


def test_a_command_s_picture_follows_it() -> None:
    fold = Fold(called())
    view = fold.reducer.command(1)
    assert view is not None
    assert (view.sends, view.ending, view.final, view.outcome) == (1, "", False, None)
    assert not view.accepted
    assert fold.reducer.command(1) is view
    fold.script.heard(answer(1, ACCEPTED))
    fold.on()
    view = fold.reducer.command(1)
    assert view is not None
    assert view.accepted
    fold.script.heard(facts())
    fold.on()
    view = fold.reducer.command(1)
    assert view is not None
    assert (view.ending, view.reason, view.final, view.outcome) == (
        "finished",
        "",
        True,
        Outcome.LANDED,
    )
    assert fold.reducer.command(2) is None


# -- whatever comes ----------------------------------------------------------------------

WORDS = st.sampled_from(
    [
        ("heard", answer(1, ACCEPTED)),
        ("heard", answer(1, REFUSED, Reason.BUSY)),
        ("heard", answer(1, REFUSED, Reason.OTHER_BOOT)),
        ("heard", answer(1, REFUSED, Reason.NUMBER_PASSED)),
        ("heard", answer(1, FINISHED)),
        ("heard", answer(1, CUT)),
        ("heard", answer(1, UNKNOWN)),
        ("heard", facts()),
        ("heard", facts(turned_ddeg=0)),
        ("heard", presence(boot=BOOT + 1)),
        ("sent", pivot()),
        ("sent", query()),
        ("add", (CommandExpired, 1)),
        ("add", (StopPressed, 1, "key")),
        ("add", (OrderVoided, 1, "full")),
        ("add", (SessionClosed, "2026-03-04T10:00:00Z", "closed")),
    ]
)


@settings(max_examples=300, deadline=None)
@given(st.lists(WORDS, max_size=12))
def test_whatever_comes_there_is_one_ending_and_only_unseen_is_resolved(words: list[Any]) -> None:
    """Law 1. An ending that is final stays; one that is not can only be unseen."""
    fold = Fold(ordered())
    for how, what in words:
        before = command(fold)
        if how == "add":
            fold.script.add(*what)
        else:
            getattr(fold.script, how)(what)
        fold.on()
        after = command(fold)
        if before.final:
            assert after[16:] == before[16:]
        elif before.ending is not None:
            assert before.ending == "unseen"
            assert after.ending is not None
            assert after[16:] == before[16:] or after.final
        assert after.sends >= before.sends
        assert (after.ending is None) == (after.ended_t_ns is None)
    row = command(fold)
    assert fold.ended == ([] if row.ending is None else [1])
    assert len(fold.table("motions")) == len(fold.ended)
    assert fold.reducer.open_commands() == ([1] if row.ending is None else [])


REPLIES = st.sampled_from(
    [
        answer(1, ACCEPTED, expect_ms=900),
        answer(1, REFUSED, Reason.BUSY),
        answer(1, REFUSED, Reason.OTHER_BOOT),
        answer(1, REFUSED, Reason.OTHER_EPOCH),
        answer(1, REFUSED, Reason.NUMBER_PASSED),
        answer(1, REFUSED, Reason.OTHER_IDENTITY),
        answer(1, FINISHED),
        answer(1, REFUSED, Reason.OWNED),
        answer(1, CUT, Reason.RESTED),
        FaultNotice(BOOT + 1, 0x1111, 1, 0, 5, 0),
        Echo(BOOT + 1, 1, 0x1111, 5, 5),
        answer(1, UNKNOWN),
        answer(1, UNKNOWN, Reason.OTHER_BOOT),
        facts(),
        facts(reason=Reason.STOPPED),
        presence(),
        presence(boot=BOOT + 1),
        telemetry(5, boot=BOOT + 1),
    ]
)


class Console:
    """An exchange and a reducer side by side, as the console joins them: what the exchange
    sends and what it gives up become records."""

    def __init__(self) -> None:
        self.fold = Fold(ordered())
        self.exchange = CommandExchange()
        self.t_ns = 0
        self.ended: list[Ended] = []
        self.take(self.exchange.submit(1, ADDRESS, pivot(), self.t_ns))

    def take(self, effects: Sequence[Send | Ended]) -> None:
        for effect in effects:
            if isinstance(effect, Send):
                self.fold.script.sent(effect.message)
            else:
                self.ended.append(effect)
                if effect.how is Ending.UNSEEN and command(self.fold).ending is None:
                    self.fold.script.add(CommandExpired, 1)
            self.fold.on()

    def heard(self, message: Message) -> None:
        self.fold.script.heard(message)
        self.fold.on()
        self.take(self.exchange.receive(ADDRESS, message, self.t_ns))

    def stop(self) -> None:
        self.fold.script.add(StopPressed, 1, "key")
        self.fold.on()
        self.take(self.exchange.withdraw(ADDRESS))

    def wait(self) -> None:
        due_ns = self.exchange.next_wake_ns
        if due_ns is not None:
            self.t_ns = max(self.t_ns, due_ns)
            self.take(self.exchange.wake(self.t_ns))


@settings(max_examples=400, deadline=None)
@given(st.lists(st.one_of(REPLIES, st.sampled_from(["wait", "stop"])), max_size=14))
def test_the_reducer_comes_to_the_exchange_s_end_at_the_same_word(deeds: list[Any]) -> None:
    """The exchange decides live, the reducer from the records alone; nobody may wait for one of
    them for ever, and the log must hold what was decided."""
    console = Console()
    for deed in [*deeds, *["wait"] * 40]:
        if isinstance(deed, str):
            getattr(console, deed)()
        else:
            console.heard(deed)
        first = [
            row.ending for row in console.fold.rows if isinstance(row, CommandRow) and row.ending
        ]
        assert [each.how.value for each in console.ended] == first[:1]
    assert len(console.ended) == 1
