"""What a module does about numbered commands: from the envelope to the last word on each.

Owns the commands that were accepted, the permit's timer, and the table from command to deed. What
is done with the wheel is drive.py's, what waits for its Go is staging.py's; that a number is
carried out at most once is the command memory's; why one is refused stands in refusals.py. Time
is an argument.
"""

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Any, Final

from protocol.allegiance import DRIFT_SHIFT
from protocol.codes import Activity, AnswerState, Fault, Reason, SettingId
from protocol.command_memory import Reply
from protocol.message import (
    Answer,
    Command,
    Flash,
    Go,
    Hop,
    LockOut,
    Message,
    Motion,
    Pivot,
    Rest,
    SettingWrite,
    Spin,
    Twist,
    Unlock,
)
from sim_link.box import DRIVEN, Box
from sim_link.deed import deed_of
from sim_link.measure import facts
from sim_link.mishaps import Mishaps
from sim_link.randomness import Draws
from sim_link.refusals import Look, refusal
from sim_link.staging import Stage
from sim_link.tally import TallyEntry
from sim_link.tracing import TraceStore

_MAX_EXPECT_MS: Final = 0xFFFF
_STAGED_MOTION_MS: Final = 4_000
"""What a staged motion is expected to take once it starts: its own figure is known only then."""
_WORDS: Final[Mapping[type[Any], str]] = {
    Pivot: "pivot",
    Hop: "hop",
    Twist: "twist",
    Spin: "spin",
    Rest: "rest",
    Flash: "flash",
    LockOut: "lock",
    Unlock: "unlock",
    SettingWrite: "set",
}
_AT_REST: Final = frozenset({Activity.STILL, Activity.FLASHING})


@dataclass(slots=True)
class _Owed:
    """A command that was accepted and whose end is still to be reported."""

    command: Command
    cut: Reason = Reason.NONE


class Works:
    """The commands of one module. ``telemetry``: makes its reports; ``tally``: told of each
    command as it is carried out."""

    def __init__(
        self,
        box: Box,
        draws: Draws,
        mishaps: Mishaps,
        telemetry: Callable[[int], Message],
        tally: Callable[[TallyEntry], None] | None,
    ) -> None:
        self.traces = TraceStore()
        self._box = box
        self._draws = draws
        self._mishaps = mishaps
        self._telemetry = telemetry
        self._tally = tally
        self._owed: list[_Owed] = []
        self._stage = Stage()
        self._permit_ns: int | None = None

    @property
    def activity(self) -> Activity:
        """What the module does, a staged motion included."""
        still = self._box.drive.activity is Activity.STILL
        return Activity.STAGED if still and self._stage.waits else self._box.drive.activity

    @property
    def due_ns(self) -> int | None:
        """When ``wake`` is next needed: a stage's start or end, or a look at the permit."""
        stage_ns, permit_ns = self._stage.due_ns, self._permit_ns
        if stage_ns is None:
            return permit_ns
        return stage_ns if permit_ns is None or stage_ns < permit_ns else permit_ns

    def wake(self, t_ns: int) -> list[Message]:
        """Do what is due at ``t_ns``."""
        said: list[Message] = []
        if self._permit_ns is not None and self._permit_ns <= t_ns:
            said += self.look_at_permit(t_ns)
        return said + self._stage_due(t_ns)

    def restart(self) -> None:
        """A new boot: nothing is owed, nothing staged, nothing kept."""
        self._owed.clear()
        self._stage.erase()
        self._permit_ns = None
        self.traces.clear()

    def adopted(self, t_ns: int) -> list[Message]:
        """Another epoch is followed: what was staged under the last one is forgotten."""
        self.traces.clear()
        erased = self._stage.erase()
        changed = [] if erased is None else [self._telemetry(t_ns)]
        return changed + self.look_at_permit(t_ns)

    # -- permit --------------------------------------------------------------------------

    def look_at_permit(self, t_ns: int) -> list[Message]:
        """Rest the wheel where the motor drives it without a permit; else look again in time."""
        self._permit_ns = None
        if self._box.drive.activity not in DRIVEN:
            return []
        time, allegiance = self._box.boot.time, self._box.boot.allegiance
        left_ms = allegiance.permit_left_ms(time.ms(t_ns))
        if left_ms == 0:
            return self.rest_wheel(Reason.PERMIT_LAPSED, t_ns)
        # The bound of what was told grows until then, and the permit's end comes earlier by that.
        early_ms = (left_ms >> DRIFT_SHIFT) + 1
        self._permit_ns = time.after_ns(t_ns, max(1, left_ms - early_ms))
        return []

    # -- commands ------------------------------------------------------------------------

    def order(self, command: Command, t_ns: int) -> list[Message]:
        """Take a command that came in."""
        boot = self._box.boot
        judged = boot.memory.judge(command, boot.owned(t_ns))
        if isinstance(judged, Reply):
            return [judged.message]
        engaged = bool(self._owed) or self._stage.waits
        reason = refusal(Look(command, self._box, engaged, t_ns))
        if reason is not Reason.NONE:
            return [self._answer(command, AnswerState.REFUSED, reason)]
        if isinstance(command, Motion) and command.stage:
            return self._put_on_stage(command, t_ns)
        return _DEEDS[type(command)](self, command, t_ns)

    def _motion(self, motion: Motion, t_ns: int) -> list[Message]:
        deed = deed_of(motion)
        left_ns = self._box.drive.start_motion(motion.direction, motion.speed_rpm, t_ns, deed)
        return self._accepted(motion, left_ns, t_ns)

    def _spin(self, spin: Spin, t_ns: int) -> list[Message]:
        left_ns = self._box.drive.start_spin(spin.speed_rpm, spin.hold_ms * 1_000_000, t_ns)
        self._count(spin, t_ns)
        return self._accepted(spin, left_ns, t_ns)

    def _flash(self, flash: Flash, t_ns: int) -> list[Message]:
        left_ns = self._box.drive.start_flash(flash.duration_ms * 1_000_000, t_ns)
        self._count(flash, t_ns)
        return self._accepted(flash, left_ns, t_ns)

    def _rest(self, rest: Rest, t_ns: int) -> list[Message]:
        """Rest the wheel; where it is at rest already, the command is finished at once."""
        self._count(rest, t_ns)
        changed = self.rest_wheel(Reason.RESTED, t_ns)
        if self._box.drive.activity in _AT_REST:
            return [self._answer(rest, AnswerState.FINISHED), *changed]
        self._owed.append(_Owed(rest))
        left_ns = self._box.drive.left_ns(t_ns)
        return [self._answer(rest, AnswerState.ACCEPTED, left_ns=left_ns), *changed]

    def _lock_out(self, lock: LockOut, t_ns: int) -> list[Message]:
        self._count(lock, t_ns)
        self._box.person = lock.person.rstrip(b"\0")
        changed = self.rest_wheel(Reason.LOCKED_OUT, t_ns)
        return [self._answer(lock, AnswerState.FINISHED), self._box.lock_state(), *changed]

    def _unlock(self, unlock: Unlock, t_ns: int) -> list[Message]:
        self._count(unlock, t_ns)
        self._box.person = b""
        return [self._answer(unlock, AnswerState.FINISHED), self._box.lock_state()]

    def _write(self, write: SettingWrite, t_ns: int) -> list[Message]:
        self._count(write, t_ns)
        self._box.settings.write(write.setting, write.value)
        said: list[Message] = [self._answer(write, AnswerState.FINISHED)]
        if write.setting == SettingId.WHEEL_LIMIT_RPM:
            said.append(self._box.nameplate())
        return said

    def _accepted(self, command: Command, left_ns: int, t_ns: int) -> list[Message]:
        self._owed.append(_Owed(command))
        answer = self._answer(command, AnswerState.ACCEPTED, left_ns=left_ns)
        return [answer, self._telemetry(t_ns), *self.look_at_permit(t_ns)]

    # -- staged motions ------------------------------------------------------------------

    def _put_on_stage(self, command: Motion, t_ns: int) -> list[Message]:
        left_ms = self._stage.put(command, self._box.boot, t_ns) + _STAGED_MOTION_MS
        answer = self._answer(command, AnswerState.ACCEPTED, left_ns=left_ms * 1_000_000)
        return [answer, self._telemetry(t_ns)]

    def go(self, go: Go, t_ns: int) -> list[Message]:
        """Hear when a stage starts."""
        self._stage.hear(go, self._box.boot, t_ns)
        return []

    def _stage_due(self, t_ns: int) -> list[Message]:
        """Start what is staged, after a second look at every interlock; or give it up."""
        due = self._stage.take(t_ns)
        if due is None:
            return []
        reason = Reason.TOO_LATE
        if due.called:
            reason = refusal(Look(due.command, self._box, bool(self._owed), t_ns))
        if reason is not Reason.NONE:
            return [self._answer(due.command, AnswerState.CUT, reason), self._telemetry(t_ns)]
        begun = _DEEDS[type(due.command)](self, due.command, t_ns)
        return [each for each in begun if not isinstance(each, Answer)]

    # -- ends ----------------------------------------------------------------------------

    def rest_wheel(self, reason: Reason, t_ns: int) -> list[Message]:
        """Erase what is staged, and start a gentle rest where there is anything to rest; note
        what it cuts short."""
        said: list[Message] = []
        erased = self._stage.erase()
        if erased is not None:
            said.append(self._answer(erased, AnswerState.CUT, reason))
            said.append(self._telemetry(t_ns))
        if self._box.drive.rest(t_ns):
            self._permit_ns = None
            self._cut(reason)
            said.append(self._telemetry(t_ns))
        return said

    def entered(self, activity: Activity, t_ns: int) -> list[Message]:
        """React to an activity that began by itself: report it, and report what is over."""
        said: list[Message] = []
        if activity is Activity.BRAKING:
            self._count_motion(t_ns)
        elif activity is Activity.STILL:
            said += [self._ending(owed, t_ns) for owed in self._owed]
            self._owed.clear()
        said += self._noticed(activity, t_ns)
        return [*said, self._telemetry(t_ns), *self.look_at_permit(t_ns)]

    def _noticed(self, activity: Activity, t_ns: int) -> list[Message]:
        """Say what the firmware now notices to be wrong; what is rested for it is cut short."""
        fault = self._mishaps.noticed(activity, t_ns)
        if fault is None:
            return []
        if activity is Activity.RESTING:
            self._cut(Reason.FAULT)
        return [self._box.notice(fault, t_ns, self._detail(fault, t_ns))]

    def _detail(self, fault: Fault, t_ns: int) -> int:
        """The figure of a fault: of a heat, tenths of a degree."""
        if fault is not Fault.OVERHEATED:
            return 0
        return round(self._box.drive.supply.warmth.hottest_C(t_ns) * 10.0)

    def _cut(self, reason: Reason) -> None:
        """Note why what is under way ends early."""
        for owed in self._owed:
            owed.cut = reason

    def _ending(self, owed: _Owed, t_ns: int) -> Message:
        command = owed.command
        if isinstance(command, Motion):
            measured = facts(command, owed.cut, self._box, self._draws, t_ns)
            self._box.boot.memory.remember(command.number, measured)
            if owed.cut is Reason.NONE:
                self.traces.keep(command, self._box)
            return measured
        cut = owed.cut is not Reason.NONE
        state = AnswerState.CUT if cut else AnswerState.FINISHED
        return self._answer(command, state, owed.cut)

    def _answer(
        self,
        command: Command,
        state: AnswerState,
        reason: Reason = Reason.NONE,
        left_ns: int = 0,
    ) -> Answer:
        """Make and remember an answer, in the epoch of the command: it may outlast its own."""
        expect_ms = min(-(-left_ns // 1_000_000), _MAX_EXPECT_MS)
        boot = self._box.boot
        answer = Answer(command.epoch, boot.number, command.number, state, reason, expect_ms)
        boot.memory.remember(command.number, answer)
        return answer

    def _count(self, command: Command, t_ns: int) -> None:
        """Enter a command in the tally, at the moment at which it is carried out."""
        if self._tally is not None:
            spec, word = self._box.spec, _WORDS[type(command)]
            boot, number = self._box.boot.number, command.number
            self._tally(TallyEntry(spec.identity, boot, number, t_ns, spec.name, word))

    def _count_motion(self, t_ns: int) -> None:
        for owed in self._owed:
            if isinstance(owed.command, Motion):
                self._count(owed.command, t_ns)


_DEEDS: Final[Mapping[type[Any], Callable[[Works, Any, int], list[Message]]]] = {
    Pivot: Works._motion,
    Hop: Works._motion,
    Twist: Works._motion,
    Spin: Works._spin,
    Rest: Works._rest,
    Flash: Works._flash,
    LockOut: Works._lock_out,
    Unlock: Works._unlock,
    SettingWrite: Works._write,
}
