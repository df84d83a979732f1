"""One virtual module: the firmware side of the protocol, without any input or output.

Owns what a module answers to everything that is no command: roll call, questions, permits, the
all-stop latch; and its telemetry and restarts. Commands are works.py's. Packets in, packets out;
time is an argument.

What a Box holds outlasts a restart, as in a module that keeps it in non-volatile memory: a
restart must lift neither an all-stop nor a person's lock.
"""

from collections.abc import Callable, Mapping
from typing import Any, Final, get_args

from protocol.codes import (
    CONSOLE_ADDRESS,
    Fault,
    Reason,
    SettingId,
    concerns,
    identity_bits,
)
from protocol.message import (
    Clear,
    Command,
    Echo,
    FaultNotice,
    Go,
    Message,
    Nameplate,
    Packet,
    Permit,
    Presence,
    Probe,
    Query,
    Release,
    RollCall,
    SettingAsk,
    SettingWrite,
    Slot,
    Stop,
    Stopped,
    TraceAsk,
)
from sim_link.box import Boot, Box
from sim_link.drive import Drive
from sim_link.fleet_file import ModuleSpec
from sim_link.measure import Reporter, wheel_rpm
from sim_link.mishaps import Mishaps, Restart
from sim_link.module_time import DRIFT_LIMIT_PPM, ModuleTime
from sim_link.options import FaultKind
from sim_link.randomness import Draws
from sim_link.report_times import ReportTimes
from sim_link.settings import Settings
from sim_link.tally import TallyEntry
from sim_link.works import Works

_FORGETS_EVERY_NS: Final = 60_000_000_000
"""Far within the twelve days by which it must be done."""
_TO_ANYBODY: Final = (RollCall, Permit, Release, Go, Stop, Clear)
"""What may be sent to a group or to everyone; anything else sent so is dropped."""
_SHIFTS_SLOT: Final = frozenset({RollCall, Probe, Release, Slot})
"""What may give a telemetry slot, move it or end it."""
_NS_PER_MS: Final = 1_000_000


class VirtualModule:
    """One module of the simulated fleet. ``tally`` is called as commands are carried out;
    ``boot`` and ``drift_ppm`` None: drawn from the seed."""

    def __init__(
        self,
        spec: ModuleSpec,
        seed: int,
        tally: Callable[[TallyEntry], None] | None = None,
        *,
        boot: int | None = None,
        drift_ppm: float | None = None,
    ) -> None:
        draws = Draws(seed, spec.identity)
        number = 1 + draws.word(0, "boot") % 0x7FFF_FFFF if boot is None else boot
        drawn_ppm = DRIFT_LIMIT_PPM * (2.0 * draws.uniform(0, "drift") - 1.0)
        self._drift_ppm = drawn_ppm if drift_ppm is None else drift_ppm
        first = Boot(number, spec.identity, ModuleTime(0, self._drift_ppm))
        self.spec = spec
        self.box = Box(spec, Drive(spec, draws), Settings(spec), first)
        self._mishaps = Mishaps(self.box)
        self.works = Works(self.box, draws, self._mishaps, self._telemetry, tally)
        self._reporter = Reporter(spec.identity, draws)
        first_ns = int(self._period_ms * _NS_PER_MS * draws.uniform(0, "report phase"))
        self._reports = ReportTimes(first_ns, self._period_ms)
        self._called = False
        self._forget_ns = 0

    @property
    def drive(self) -> Drive:
        """Wheel, brake, body and cell."""
        return self.box.drive

    @property
    def boot(self) -> int:
        """Number of the present boot."""
        return self.box.boot.number

    @property
    def epoch(self) -> int:
        """The console epoch that it follows, 0 for none."""
        return self.box.boot.allegiance.epoch

    @property
    def latched(self) -> bool:
        """Whether an all-stop is in force."""
        return self.box.latched

    @property
    def stop_number(self) -> int:
        """Newest all-stop it knows, 0 for none."""
        return self.box.stop_number

    @property
    def next_wake_ns(self) -> int:
        """When ``wake`` is next needed, if nothing is received before."""
        # Asked for several times with each event of a fleet, so: no tuple, no generator.
        due_ns = self._reports.due_ns
        drive_ns, works_ns = self.box.drive.due_ns, self.works.due_ns
        if drive_ns is not None and drive_ns < due_ns:
            due_ns = drive_ns
        return works_ns if works_ns is not None and works_ns < due_ns else due_ns

    @property
    def _period_ms(self) -> int:
        return self.box.settings.value(SettingId.TELEMETRY_PERIOD_MS)

    def receive(self, packet: Packet, t_ns: int) -> list[Packet]:
        """Take one packet at ``t_ns``; return what is sent, after what was due before."""
        sent = self.wake(t_ns) if self.next_wake_ns <= t_ns else []
        message = packet.message
        if not concerns(packet.destination, self.spec.address, self.box.settings.groups):
            return sent
        handler = _HANDLERS.get(type(message))
        alone = packet.destination == self.spec.address
        if handler is None or not (alone or isinstance(message, _TO_ANYBODY)):
            return sent
        sent += self._out(handler(self, message, t_ns))
        if type(message) in _SHIFTS_SLOT:
            self._reports.look(self.box.boot, self._period_ms, t_ns)
        return sent

    def wake(self, t_ns: int) -> list[Packet]:
        """Do all that is due by ``t_ns``, each at its own time; return what is sent."""
        said: list[Message] = []
        while (now_ns := self.next_wake_ns) <= t_ns:
            if self.box.drive.due_ns == now_ns:
                said += self._step(now_ns)
            elif self.works.due_ns == now_ns:
                said += self.works.wake(now_ns)
            else:
                boot = self.box.boot
                if now_ns >= self._forget_ns:
                    self._forget_ns = now_ns + _FORGETS_EVERY_NS
                    boot.allegiance.forget_old(boot.time.ms(now_ns))
                self._reports.reported(boot, self._period_ms)
                said.append(self._telemetry(now_ns))
                if self.box.faults:
                    said += self._no_more(self._mishaps.cooled(now_ns), now_ns)
        return self._out(said)

    def _step(self, now_ns: int) -> list[Message]:
        """Let the drive take its next step, if nothing goes wrong before or at it."""
        restart = self._mishaps.before_step()
        if restart is not None:
            return self._restarted(restart, now_ns)
        activity = self.box.drive.step()
        said = self.works.entered(activity, now_ns)
        restart = self._mishaps.after_step(activity)
        if restart is not None:
            return self._restarted(restart, now_ns)
        return said + self._no_more(self._mishaps.at_rest(activity), now_ns)

    def begin(self, kind: FaultKind, t_ns: int) -> list[Packet]:
        """Let a fault begin at ``t_ns``; return what is sent."""
        sent = self.wake(t_ns)
        self._called = self._called or kind is FaultKind.SILENT
        return sent + self.restart(t_ns) if self._mishaps.begin(kind, t_ns) else sent

    def end(self, kind: FaultKind, t_ns: int) -> list[Packet]:
        """Let a fault end at ``t_ns``; return what is sent."""
        sent = self.wake(t_ns)
        return sent + self._out(self._no_more(self._mishaps.end(kind, t_ns), t_ns))

    def _no_more(self, fault: Fault | None, t_ns: int) -> list[Message]:
        """Say that a fault no longer stands."""
        if fault is None:
            return []
        bits, now_ms = identity_bits(self.spec.identity), self.box.boot.time.ms(t_ns)
        return [FaultNotice(self.boot, bits, fault, 0, now_ms, 0), self._telemetry(t_ns)]

    def _restarted(self, why: Restart, t_ns: int) -> list[Message]:
        """Restart by itself, unsaid what was about to be said, and tell why."""
        self._reboot(t_ns)
        bits = identity_bits(self.spec.identity)
        notice = FaultNotice(self.boot, bits, why.fault, 0, 0, why.detail)
        return [self._telemetry(t_ns), notice, *self.box.fault_notices()]

    def restart(self, t_ns: int) -> list[Packet]:
        """Switch it off and on: a new boot number, an empty memory, the wheel to rest."""
        sent = self.wake(t_ns)
        self._reboot(t_ns)
        return sent + self._out([self._telemetry(t_ns), *self.box.fault_notices()])

    def _reboot(self, t_ns: int) -> None:
        time = ModuleTime(t_ns, self._drift_ppm)
        self.box.boot = Boot(self.boot + 1, self.spec.identity, time)
        self.box.faults.restart()
        self.works.restart()
        self._reporter.restart()
        self._reports.restart()
        self.box.drive.recover(t_ns)

    def _out(self, said: list[Message]) -> list[Packet]:
        if not said or (self._called and self._mishaps.silent):
            return []
        address = self.spec.address
        if not self._called:
            self._called = any(type(each) is Nameplate for each in said)
        return [Packet(CONSOLE_ADDRESS, address, each) for each in said]

    def _telemetry(self, t_ns: int) -> Message:
        return self._reporter.telemetry(self.box, self.works.activity, t_ns)

    # Messages that are no commands

    def _roll_call(self, call: RollCall, t_ns: int) -> list[Message]:
        box, boot = self.box, self.box.boot
        changed: list[Message] = []
        if boot.allegiance.roll_call(call.epoch, call.console, boot.time.ms(t_ns)):
            boot.memory.adopt(call.epoch)
            changed = self.works.adopted(t_ns)
        said: list[Message] = [self._presence(t_ns), box.nameplate()]
        if box.person:
            said.append(box.lock_state())
        return [*said, *box.fault_notices(), *changed]

    def _presence(self, t_ns: int) -> Presence:
        box, follows = self.box, self.box.boot.allegiance
        now_ms = box.boot.time.ms(t_ns)
        return Presence(
            identity=self.spec.identity,
            boot=self.boot,
            epoch=follows.epoch,
            console=follows.console,
            stop_number=box.stop_number,
            time_ms=now_ms,
            owner_left_ms=min(follows.owner_left_ms(now_ms), 0xFFFF),
            flags=box.flags(t_ns),
            face_up=box.drive.body.posture(t_ns).face_up,
        )

    def _query(self, query: Query, t_ns: int) -> list[Message]:
        return [self.box.boot.memory.query(query)]

    def _probe(self, probe: Probe, t_ns: int) -> list[Message]:
        """Answer with the times; take what the followed console makes of this clock."""
        boot, bits = self.box.boot, identity_bits(self.spec.identity)
        if (probe.boot, probe.identity_bits) != (boot.number, bits):
            return []
        boot.allegiance.hear_probe(probe, boot.time.ms(t_ns))
        echo = Echo(boot.number, probe.sequence, bits, boot.time.us(t_ns), 0)
        return [echo, *self.works.look_at_permit(t_ns)]

    def _permit(self, permit: Permit, t_ns: int) -> list[Message]:
        self.box.boot.allegiance.hear_permit(permit, self.box.boot.time.ms(t_ns))
        return self.works.look_at_permit(t_ns)

    def _release(self, release: Release, t_ns: int) -> list[Message]:
        self.box.boot.allegiance.release(release.console)
        return self.works.look_at_permit(t_ns)

    def _slot(self, slot: Slot, t_ns: int) -> list[Message]:
        """Take a telemetry slot that is meant for this boot of this box; say nothing."""
        if (slot.boot, slot.identity_bits) == (self.boot, identity_bits(self.spec.identity)):
            self.box.boot.allegiance.hear_slot(slot)
        return []

    def _go(self, go: Go, t_ns: int) -> list[Message]:
        return self.works.go(go, t_ns)

    def _setting_ask(self, ask: SettingAsk, t_ns: int) -> list[Message]:
        return [self.box.settings.told(ask.setting, self.boot)]

    def _trace_ask(self, ask: TraceAsk, t_ns: int) -> list[Message]:
        bits = identity_bits(self.spec.identity)
        if (ask.boot, ask.identity_bits) != (self.boot, bits):
            return []
        return list(self.works.traces.answer(ask, self.spec.identity))

    def _stop(self, stop: Stop, t_ns: int) -> list[Message]:
        """Latch and rest. An older number than the newest known is obeyed, and not kept."""
        self.box.latched = True
        self.box.stop_number = max(self.box.stop_number, stop.stop_number)
        changed = self.works.rest_wheel(Reason.STOPPED, t_ns)
        return [self._stopped(t_ns), *changed]

    def _clear(self, clear: Clear, t_ns: int) -> list[Message]:
        """Lift the latch, but only for the newest stop this module knows."""
        if clear.stop_number == self.box.stop_number:
            self.box.latched = False
        return [self._stopped(t_ns)]

    def _stopped(self, t_ns: int) -> Stopped:
        return Stopped(
            stop_number=self.box.stop_number,
            latched=self.box.latched,
            activity=self.box.drive.activity,
            wheel_rpm=wheel_rpm(self.box.drive, t_ns),
            boot=self.boot,
            identity_bits=identity_bits(self.spec.identity),
        )

    def _command(self, command: Command, t_ns: int) -> list[Message]:
        said = self.works.order(command, t_ns)
        if isinstance(command, SettingWrite):  # a shorter period holds from now on
            self._reports.shorten(self._period_ms, t_ns)
        return said


_HANDLERS: Final[Mapping[type[Any], Callable[[VirtualModule, Any, int], list[Message]]]] = {
    RollCall: VirtualModule._roll_call,
    Query: VirtualModule._query,
    Probe: VirtualModule._probe,
    Permit: VirtualModule._permit,
    Release: VirtualModule._release,
    Go: VirtualModule._go,
    SettingAsk: VirtualModule._setting_ask,
    Slot: VirtualModule._slot,
    TraceAsk: VirtualModule._trace_ask,
    Stop: VirtualModule._stop,
    Clear: VirtualModule._clear,
    **dict.fromkeys(get_args(Command), VirtualModule._command),
}
