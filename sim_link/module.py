"""One virtual module: the firmware side of the protocol, without any input or output.

Owns what a module answers: roll call, commands with their interlocks, the all-stop latch,
telemetry, and a restart. What is done with the wheel is drive.py's; that a number is carried
out at most once is the command memory's. Packets in, packets out; time is an argument.

The all-stop latch, its number and the boot number outlast a restart, as in a module that keeps
them in non-volatile memory: a restart must not lift an all-stop.
"""

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Any, Final

from protocol.codes import (
    CONSOLE_ADDRESS,
    EVERYONE_ADDRESS,
    Activity,
    AnswerState,
    Reason,
    identity_bits,
)
from protocol.command_memory import CommandMemory, Reply
from protocol.message import (
    Answer,
    Clear,
    Command,
    Flash,
    Message,
    Nameplate,
    Packet,
    Pivot,
    Presence,
    Query,
    Rest,
    RollCall,
    Spin,
    Stop,
    Stopped,
    text_field,
)
from sim_link.drive import Drive
from sim_link.fleet_file import ModuleSpec
from sim_link.measure import Reporter, facts, uptime_ms, wheel_rpm
from sim_link.options import FaultKind
from sim_link.randomness import Draws
from sim_link.refusals import refusal
from sim_link.tally import TallyEntry

FIRMWARE: Final = 0x0100
"""Version of this virtual firmware: 1.0."""

_MAX_EXPECT_MS: Final = 0xFFFF
_MOTIONS: Final[Mapping[type[Any], str]] = {
    Pivot: "pivot",
    Spin: "spin",
    Rest: "rest",
    Flash: "flash",
}
_AT_REST: Final = frozenset({Activity.STILL, Activity.FLASHING})
_TO_ANYBODY: Final = (RollCall, Stop, Clear)
"""What may be sent to everyone; a command to everyone is ignored."""


@dataclass(slots=True)
class _Owed:
    """A command that was accepted and whose end is still to be reported."""

    command: Command
    cut: Reason = Reason.NONE


class VirtualModule:
    """One module of the simulated fleet. ``tally`` is called as commands are carried out."""

    def __init__(
        self, spec: ModuleSpec, seed: int, tally: Callable[[TallyEntry], None] | None = None
    ) -> None:
        draws = Draws(seed, spec.identity)
        self.spec = spec
        self.drive = Drive(spec, draws)
        self.latched = False
        self.stop_number = 0
        self.boot = 1 + draws.word(0, "boot") % 0x7FFF_FFFF
        self.boot_ns = 0
        self._draws = draws
        self._tally = tally
        self._memory = CommandMemory(self.boot, spec.identity)
        self._reporter = Reporter(spec.identity, draws)
        self._owed: list[_Owed] = []
        self._period_ns = int(1e9 / spec.telemetry_hz)
        self._report_ns = int(self._period_ns * draws.uniform(0, "report phase"))
        self._faults = set(spec.faults)
        self._called = False

    @property
    def next_wake_ns(self) -> int:
        """When ``wake`` is next needed, if nothing is received before."""
        due_ns = self.drive.due_ns
        return self._report_ns if due_ns is None else min(due_ns, self._report_ns)

    def receive(self, packet: Packet, t_ns: int) -> list[Packet]:
        """Take one packet at ``t_ns``; return what is sent, after what was due before."""
        sent = self.wake(t_ns)
        message = packet.message
        to_all = packet.destination == EVERYONE_ADDRESS and isinstance(message, _TO_ANYBODY)
        if not to_all and packet.destination != self.spec.address:
            return sent
        handler = _HANDLERS.get(type(message))
        return sent if handler is None else sent + self._out(handler(self, message, t_ns))

    def wake(self, t_ns: int) -> list[Packet]:
        """Do all that is due by ``t_ns``, each at its own time; return what is sent."""
        said: list[Message] = []
        while self.next_wake_ns <= t_ns:
            now_ns = self.next_wake_ns
            if self.drive.due_ns == now_ns:
                said += self._entered(self.drive.step(), now_ns)
            else:
                self._report_ns += self._period_ns
                said.append(self._telemetry(now_ns))
        return self._out(said)

    def restart(self, t_ns: int) -> list[Packet]:
        """Restart the controller: a new boot number, an empty memory, the wheel to rest."""
        sent = self.wake(t_ns)
        self._reboot(t_ns)
        return sent + self._out([self._telemetry(t_ns)])

    def _out(self, said: list[Message]) -> list[Packet]:
        if FaultKind.SILENT in self._faults and self._called:
            return []
        self._called = self._called or any(type(each) is Nameplate for each in said)
        return [Packet(CONSOLE_ADDRESS, self.spec.address, each) for each in said]

    def _telemetry(self, t_ns: int) -> Message:
        return self._reporter.telemetry(self.drive, self.latched, self.boot, self.boot_ns, t_ns)

    # Messages that are no commands

    def _roll_call(self, call: RollCall, t_ns: int) -> list[Message]:
        self._memory.roll_call(call.epoch)
        spec, kind = self.spec, self.spec.kind
        face_up = self.drive.body.posture(t_ns).face_up
        uptime = uptime_ms(self.boot_ns, t_ns)
        epoch, latched = self._memory.epoch, int(self.latched)
        name, kind_name = text_field(spec.name), text_field(kind.name)
        return [
            Presence(spec.identity, self.boot, epoch, self.stop_number, latched, face_up, uptime),
            Nameplate(spec.identity, int(kind.wheel_max_rpm), FIRMWARE, name, kind_name),
        ]

    def _query(self, query: Query, t_ns: int) -> list[Message]:
        return [self._memory.query(query)]

    def _stop(self, stop: Stop, t_ns: int) -> list[Message]:
        """Latch and rest. An older number than the newest known is obeyed, and not kept."""
        self.latched = True
        self.stop_number = max(self.stop_number, stop.stop_number)
        changed = self._rest_wheel(Reason.STOPPED, t_ns)
        return [self._stopped(t_ns), *changed]

    def _clear(self, clear: Clear, t_ns: int) -> list[Message]:
        """Lift the latch, but only for the newest stop this module knows."""
        if clear.stop_number == self.stop_number:
            self.latched = False
        return [self._stopped(t_ns)]

    def _stopped(self, t_ns: int) -> Stopped:
        return Stopped(
            stop_number=self.stop_number,
            latched=self.latched,
            activity=self.drive.activity,
            wheel_rpm=wheel_rpm(self.drive, t_ns),
            boot=self.boot,
            identity_bits=identity_bits(self.spec.identity),
        )

    # Commands

    def _command(self, command: Command, t_ns: int) -> list[Message]:
        judged = self._memory.judge(command)
        if isinstance(judged, Reply):
            return [judged.message]
        reason = refusal(command, self.drive, self.latched, t_ns)
        if reason is not Reason.NONE:
            return [self._answer(command, AnswerState.REFUSED, reason)]
        return _STARTS[type(command)](self, command, t_ns)

    def _start_pivot(self, pivot: Pivot, t_ns: int) -> list[Message]:
        left_ns = self.drive.start_pivot(pivot.direction, pivot.speed_rpm, t_ns)
        return self._accepted(pivot, left_ns, t_ns)

    def _start_spin(self, spin: Spin, t_ns: int) -> list[Message]:
        left_ns = self.drive.start_spin(spin.speed_rpm, spin.hold_ms * 1_000_000, t_ns)
        self._count(spin, t_ns)
        return self._accepted(spin, left_ns, t_ns)

    def _start_flash(self, flash: Flash, t_ns: int) -> list[Message]:
        left_ns = self.drive.start_flash(flash.duration_ms * 1_000_000, t_ns)
        self._count(flash, t_ns)
        return self._accepted(flash, left_ns, t_ns)

    def _start_rest(self, rest: Rest, t_ns: int) -> list[Message]:
        """Rest the wheel; where it is at rest already, the command is finished at once."""
        self._count(rest, t_ns)
        changed = self._rest_wheel(Reason.RESTED, t_ns)
        if self.drive.activity in _AT_REST:
            return [self._answer(rest, AnswerState.FINISHED)]
        self._owed.append(_Owed(rest))
        left_ns = self.drive.left_ns(t_ns)
        return [self._answer(rest, AnswerState.ACCEPTED, left_ns=left_ns), *changed]

    def _accepted(self, command: Command, left_ns: int, t_ns: int) -> list[Message]:
        self._owed.append(_Owed(command))
        answer = self._answer(command, AnswerState.ACCEPTED, left_ns=left_ns)
        return [answer, self._telemetry(t_ns)]

    def _rest_wheel(self, reason: Reason, t_ns: int) -> list[Message]:
        """Start a gentle rest, if there is anything to rest; note what it cuts short."""
        if not self.drive.rest(t_ns):
            return []
        for owed in self._owed:
            owed.cut = reason
        return [self._telemetry(t_ns)]

    def _entered(self, activity: Activity, t_ns: int) -> list[Message]:
        """React to an activity that began by itself: report it, and report what is over."""
        said: list[Message] = []
        if activity is Activity.BRAKING:
            self._count_pivot(t_ns)
            if FaultKind.RESTART_ON_BRAKE in self._faults:
                self._faults.discard(FaultKind.RESTART_ON_BRAKE)
                self._reboot(t_ns)
        elif activity is Activity.STILL:
            said += [self._ending(owed, t_ns) for owed in self._owed]
            self._owed.clear()
        return [*said, self._telemetry(t_ns)]

    def _ending(self, owed: _Owed, t_ns: int) -> Message:
        command = owed.command
        if isinstance(command, Pivot):
            measured = facts(command, owed.cut, self.drive, self._draws, t_ns)
            self._memory.remember(command.number, measured)
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
        answer = Answer(command.epoch, self.boot, command.number, state, reason, expect_ms)
        self._memory.remember(command.number, answer)
        return answer

    def _count(self, command: Command, t_ns: int) -> None:
        """Enter a command in the tally, at the moment at which it is carried out."""
        if self._tally is not None:
            spec, motion = self.spec, _MOTIONS[type(command)]
            entry = TallyEntry(spec.identity, self.boot, command.number, t_ns, spec.name, motion)
            self._tally(entry)

    def _count_pivot(self, t_ns: int) -> None:
        for owed in self._owed:
            if isinstance(owed.command, Pivot):
                self._count(owed.command, t_ns)

    def _reboot(self, t_ns: int) -> None:
        self.boot += 1
        self.boot_ns = t_ns
        self._memory = CommandMemory(self.boot, self.spec.identity)
        self._owed.clear()
        self._reporter.restart()
        self.drive.recover(t_ns)


_HANDLERS: Final[Mapping[type[Any], Callable[[VirtualModule, Any, int], list[Message]]]] = {
    RollCall: VirtualModule._roll_call,
    Query: VirtualModule._query,
    Stop: VirtualModule._stop,
    Clear: VirtualModule._clear,
    Pivot: VirtualModule._command,
    Spin: VirtualModule._command,
    Rest: VirtualModule._command,
    Flash: VirtualModule._command,
}

_STARTS: Final[Mapping[type[Any], Callable[[VirtualModule, Any, int], list[Message]]]] = {
    Pivot: VirtualModule._start_pivot,
    Spin: VirtualModule._start_spin,
    Rest: VirtualModule._start_rest,
    Flash: VirtualModule._start_flash,
}
