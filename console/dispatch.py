"""Carrying out a run sheet: which trial goes to which module next, and when.

Owns the state of a running sheet. Orders go through the engine like any other; their ends come
back over a queue, so that this code runs on the caller's thread. Knows no screens; a
``progress`` function is told of each trial that ended.
"""

import queue
import time
from collections import Counter, deque
from collections.abc import Callable
from dataclasses import dataclass, field
from typing import Final, Protocol

from console.core import OnEnd
from console.errors import InputError
from console.orders import Order
from console.sheet import Sheet, Trial
from console.view import CommandView, FleetView, ModuleView, Outcome
from protocol.codes import Direction, Setting
from storage.records import OrderGiven

APPEAR_WAIT_NS: Final = 10_000_000_000
"""How long a sheet waits for all its modules to answer the roll."""
BLOCKED_WAIT_NS: Final = 15_000_000_000
"""How long a trial waits for an interlock to open before it ends as refused."""
LOG_WAIT_NS: Final = 10_000_000_000
"""How long a sheet waits for a log that does not write before it ends."""
RETRY_NS: Final = 200_000_000
CONFIRM_WAIT_NS: Final = 5_000_000_000


class Conductor(Protocol):
    """What a sheet needs of the engine."""

    def view(self) -> FleetView: ...
    def now_ns(self) -> int: ...
    def real_s(self, fleet_ns: int) -> float: ...
    def link_open(self) -> bool: ...
    def log_trouble(self) -> str: ...
    def beat(self) -> None: ...
    def give(
        self, order: Order, source: str, trial: int = 0, on_end: OnEnd | None = None
    ) -> OrderGiven: ...


@dataclass(slots=True)
class Lane:
    """One module of the sheet: its trials in order, and where it stands."""

    name: str
    trials: deque[Trial]
    home_face: int = 0
    away: int = 0
    in_hand: Trial | None = None
    returning: bool = False
    ready_ns: int = 0
    blocked_since_ns: int | None = None
    returns_left: int = 0

    @property
    def moving(self) -> bool:
        """Whether a trial or a return motion is under way."""
        return self.in_hand is not None or self.returning

    @property
    def unfinished(self) -> bool:
        """Whether anything is under way or still to be done."""
        return self.moving or bool(self.trials) or self.returns_left > 0


@dataclass(slots=True)
class Tally:
    """What became of a sheet so far; ``run --json`` prints it. ``stopped`` says why it ended
    early, ``lost`` that it was for want of the link or the log."""

    planned: int
    started: int = 0
    ended: Counter[str] = field(default_factory=Counter)
    commands: int = 0
    resends: int = 0
    repeats_ignored: int = 0
    stopped: str | None = None
    lost: bool = False

    def count(self, view: CommandView) -> None:
        """Add one ended command."""
        self.commands += 1
        self.resends += max(0, view.sends - 1)
        self.repeats_ignored += view.repeats_ignored


@dataclass(frozen=True, slots=True)
class TrialEnd:
    """One trial that ended: what the progress display is told."""

    trial: Trial
    outcome: Outcome
    reason: str


def faces_away(home_face: int, face_up: int) -> int:
    """Faces by which a module stands forward of home, -1 to 2; 0 where a face is unknown."""
    if not (1 <= home_face <= 4 and 1 <= face_up <= 4):
        return 0
    return (face_up - home_face + 1) % 4 - 1


class SheetRun:
    """Runs ``trials`` of ``sheet`` through ``engine``; call ``run`` once.

    Each module takes its own trials in the planned order, so that outcomes in simulation hang
    on the seed alone and not on how the modules' trials interleave.
    """

    def __init__(
        self,
        engine: Conductor,
        sheet: Sheet,
        trials: tuple[Trial, ...],
        progress: Callable[[TrialEnd], None],
    ) -> None:
        self._engine = engine
        self._sheet = sheet
        self._progress = progress
        self._ends: queue.SimpleQueue[tuple[CommandView, ModuleView]] = queue.SimpleQueue()
        self._lanes = {name: Lane(name, deque()) for name in sheet.modules}
        for trial in trials:
            self._lanes[trial.module].trials.append(trial)
        self._by_command: dict[int, Lane] = {}
        self._log_bad_since_ns: int | None = None
        self.tally = Tally(planned=len(trials))

    def run(self) -> Tally:
        """Run to the end, or until all-stop, a lost link or a lost log ends it.

        Raises InputError where a module of the sheet does not answer.
        """
        self._await_modules()
        while self._unfinished() and self.tally.stopped is None:
            wait_s = self._engine.real_s(self._start_what_can())
            self._take_ends(wait_s)
            self._watch()
        self._finish_in_hand()
        return self.tally

    def _unfinished(self) -> bool:
        return any(lane.unfinished for lane in self._lanes.values())

    # -- before ----------------------------------------------------------------------------

    def _await_modules(self) -> None:
        deadline_ns = self._engine.now_ns() + APPEAR_WAIT_NS
        while missing := [name for name in self._lanes if not self._answers(name)]:
            self._engine.beat()
            if self._engine.now_ns() > deadline_ns:
                here = ", ".join(each.name for each in self._engine.view().modules) or "nobody"
                raise InputError(
                    f"{', '.join(missing)} did not answer the roll; {here} did. "
                    "Check the sheet's modules and the link"
                )
            time.sleep(self._engine.real_s(RETRY_NS))
        for name, lane in self._lanes.items():
            lane.home_face = self._module(name).face_up

    def _answers(self, name: str) -> bool:
        return any(
            module.name == name and module.heard_t_ns is not None
            for module in self._engine.view().modules
        )

    def _module(self, name: str) -> ModuleView:
        for module in self._engine.view().modules:
            if module.name == name:
                return module
        raise InputError(f"{name} is no longer known")

    # -- during ----------------------------------------------------------------------------

    def _start_what_can(self) -> int:
        """Start trials where a module is free; return fleet ns until it is worth looking again."""
        self._engine.beat()
        now_ns = self._engine.now_ns()
        wait_ns = RETRY_NS
        for lane in self._lanes.values():
            if sum(each.moving for each in self._lanes.values()) >= self._sheet.at_once:
                break
            if lane.moving or not lane.unfinished:
                continue
            if lane.ready_ns > now_ns:
                wait_ns = min(wait_ns, lane.ready_ns - now_ns)
            else:
                self._start(lane, now_ns)
        return wait_ns

    def _start(self, lane: Lane, now_ns: int) -> None:
        trial = None if lane.returns_left else lane.trials[0]
        speed_rpm = trial.speed_rpm if trial else self._sheet.return_speed_rpm or 0
        order = Order(
            subjects=(lane.name,),
            motion=self._sheet.motion,
            setting=Setting(self._sheet.setting),
            direction=self._direction(lane, trial),
            speed_rpm=speed_rpm,
            duration_ms=0,
        )
        try:
            number = trial.trial if trial else 0
            given = self._engine.give(order, "sheet", number, self._note_end)
        except InputError as error:
            self._blocked(lane, trial, now_ns, str(error))
            return
        lane.blocked_since_ns = None
        lane.in_hand = lane.trials.popleft() if trial else None
        lane.returning = trial is None
        self.tally.started += trial is not None
        self._by_command.update((each.command, lane) for each in given.commands)

    def _direction(self, lane: Lane, trial: Trial | None) -> Direction:
        if trial is not None and self._sheet.direction != "turnabout":
            return Direction.FORWARD if self._sheet.direction == "forward" else Direction.BACK
        return Direction.BACK if lane.away > 0 else Direction.FORWARD

    def _blocked(self, lane: Lane, trial: Trial | None, now_ns: int, why: str) -> None:
        """An interlock stands in the way: try again for a while, then end the trial."""
        lane.ready_ns = now_ns + RETRY_NS
        if self._engine.log_trouble():
            lane.blocked_since_ns = None  # the whole sheet waits for the log, or ends (_watch)
            return
        if lane.blocked_since_ns is None:
            lane.blocked_since_ns = now_ns
        if now_ns - lane.blocked_since_ns < BLOCKED_WAIT_NS:
            return
        lane.blocked_since_ns = None
        if trial is None:
            self.tally.stopped = f"a return motion was refused: {why}"
            return
        lane.trials.popleft()
        self._count_end(TrialEnd(trial, Outcome.REFUSED, why))

    def _note_end(self, view: CommandView, module: ModuleView) -> None:
        """Called on the engine's thread."""
        self._ends.put((view, module))

    def _take_ends(self, wait_s: float) -> None:
        try:
            self._ended(*self._ends.get(timeout=wait_s))
            while True:
                self._ended(*self._ends.get_nowait())
        except queue.Empty:
            return

    def _ended(self, view: CommandView, module: ModuleView) -> None:
        lane = self._by_command.pop(view.command)
        lane.away = faces_away(lane.home_face, module.face_up)
        self.tally.count(view)
        lane.ready_ns = self._engine.now_ns() + round(self._sheet.pause_s * 1e9)
        if lane.returning:
            self._returned(lane, view)
            return
        trial, lane.in_hand = lane.in_hand, None
        if trial is None:
            raise InputError(f"command {view.command} ended, but {lane.name} had none in hand")
        self._count_end(TrialEnd(trial, view.outcome or Outcome.UNSEEN, view.reason))
        if self._sheet.direction != "turnabout":
            lane.returns_left = abs(lane.away)

    def _returned(self, lane: Lane, view: CommandView) -> None:
        lane.returning = False
        lane.returns_left = abs(lane.away)
        if view.outcome is not Outcome.LANDED:
            self.tally.stopped = (
                f"{lane.name} did not come back: its return motion ended {view.outcome}"
            )

    def _count_end(self, end: TrialEnd) -> None:
        self.tally.ended[end.outcome.value] += 1
        self._progress(end)

    def _watch(self) -> None:
        view = self._engine.view()
        if view.stop.in_force:
            self.tally.stopped = f"all-stop {view.stop.stop_number}"
        elif not self._engine.link_open():
            self.tally.stopped, self.tally.lost = "link lost", True
        elif trouble := self._lasting_log_trouble():
            self.tally.stopped, self.tally.lost = f"log lost: {trouble}", True

    def _lasting_log_trouble(self) -> str:
        """Why the log has not written for so long that the sheet must end, or an empty text."""
        trouble = self._engine.log_trouble()
        now_ns = self._engine.now_ns()
        if not trouble or self._log_bad_since_ns is None:
            self._log_bad_since_ns = now_ns if trouble else None
            return ""
        return trouble if now_ns - self._log_bad_since_ns >= LOG_WAIT_NS else ""

    # -- after -----------------------------------------------------------------------------

    def _finish_in_hand(self) -> None:
        """After a stop, wait a little for the ends of what was under way."""
        deadline_ns = self._engine.now_ns() + CONFIRM_WAIT_NS
        while self._by_command and self._engine.now_ns() < deadline_ns:
            self._take_ends(self._engine.real_s(RETRY_NS))
