"""Wheel, brake and cell under one table of activities: what a module's firmware drives.

Owns the transitions between activities and their timing. Knows no messages and no command
numbers (module.py), and measures only what the box could measure. Event-driven: between two
transitions nothing is computed, and where somebody looks, speed and voltage follow from time.

The motor never pulls harder than half of what would tip the body in its posture: spinning up
pushes the body against the wheel's sense, slowing down pushes it in the wheel's sense.
"""

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Final

from protocol.codes import Activity
from sim_link import mechanics
from sim_link.activities import NEXT_ACTIVITY, Cue
from sim_link.battery import COPPER_W, MOTOR_EFFICIENCY, Supply, cell_of
from sim_link.deed import Deed
from sim_link.errors import SimStateError
from sim_link.fleet_file import ModuleSpec
from sim_link.heat import Part, Warmth
from sim_link.kinds import edge_inertia_kg_m2
from sim_link.mechanics import MotionResult
from sim_link.options import FaultKind
from sim_link.posture import VirtualBody
from sim_link.randomness import Draws
from sim_link.wear import Wear, Wearing
from sim_link.wheel import RPM_A_RAD_S, Wheel

STEADY_NS: Final = 60_000_000
"""Time at the wanted speed before the brake, for the speed controller to settle."""
QUIET_NS: Final = 150_000_000
"""The body must have been quiet so long before the firmware calls a motion over."""

STALLED_NS: Final = 250_000_000
"""The firmware gives up a wheel that has not moved for so long while the motor pulled."""

_EXPECTED_SETTLE_NS: Final = 1_500_000_000
_WINDAGE_W: Final = 0.5
"""Power that holds the wheel at its highest speed; in proportion to the speed squared."""
_FLASH_W: Final = 0.4
_CELL_V: Final = 3.8
"""Of a cell that is half full, about."""
_CHARGE_H: Final = 2.0
"""Half of its capacity an hour, as is usual for small cells (common practice of the trade)."""
_LOW_CHARGE: Final = 0.02
_SHORTEST_BRAKE_S: Final = 1e-4
_BEARING_SCATTER: Final = 0.01
"""A sound bearing takes up to this part of the motor's torque, otherwise at each spin-up."""
_FACES: Final = (1, 2, 3, 4, 5, 6)


@dataclass(slots=True)
class Motion:
    """One use of the wheel, as the box notes it. ``deed``: what the brake will be applied for;
    None for a spin, which is not braked."""

    count: int
    deed: Deed | None
    wheel_rad_s: float
    hold_ns: int
    face_before: int
    turned_before_rad: float
    start_ns: int
    spun_up_ns: int | None = None
    wheel_at_brake_rad_s: float = 0.0
    sag_V: float = 0.0
    result: MotionResult | None = None
    stalled: bool = False
    """The wheel did not turn as it was driven, and was given up."""

    @property
    def direction(self) -> int:
        """The ordered sense: that of the wheel."""
        return 1 if self.wheel_rad_s > 0 else -1


class Drive:
    """One module's wheel, brake, body and cell, and what is being done with them."""

    def __init__(self, spec: ModuleSpec, draws: Draws) -> None:
        charge = _LOW_CHARGE if FaultKind.LOW_BATTERY in spec.faults else spec.charge
        self.activity = Activity.STILL
        self.due_ns: int | None = None
        """When the present activity ends by itself; None: it does not."""
        self.motion: Motion | None = None
        """The motion under way or the last one; its result is there once the brake held."""
        self.stuck = FaultKind.STUCK_WHEEL in spec.faults
        """Whether something keeps the wheel from turning."""
        self.wear = Wear.of(spec.faults)
        """How brake, magnets, bearing and cell wear."""
        self.wheel = Wheel()
        self.body = VirtualBody(spec, draws)
        self.supply = Supply(
            cell_of(spec.kind, charge), Warmth(2.0 * draws.uniform(0, "warmth"), 0)
        )
        self._kind = spec.kind
        self._draws = draws
        if FaultKind.CHARGING in spec.faults:
            self.start_charging(0)
        self._motions = 0
        self._flash_ns = 0
        self._enter: Mapping[Activity, Callable[[int], None]] = {
            Activity.STILL: self._enter_still,
            Activity.SPINNING_UP: self._enter_spinning_up,
            Activity.HOLDING: self._enter_holding,
            Activity.RESTING: self._enter_resting,
            Activity.BRAKING: self._enter_braking,
            Activity.SETTLING: self._enter_settling,
            Activity.FLASHING: self._enter_flashing,
        }

    @property
    def wheel_max_rpm(self) -> float:
        """Speed limit of the wheel, as its kind states it."""
        return self._kind.wheel_max_rpm

    def start_motion(
        self, direction: int, speed_rpm: float, t_ns: int, deed: Deed = Deed.FLOOR
    ) -> int:
        """Start spinning up for a motion; return the nanoseconds until it should be over."""
        self._begin(deed, direction * speed_rpm, 0, t_ns)
        return self._left_ns(t_ns) + _EXPECTED_SETTLE_NS + QUIET_NS

    def start_spin(self, speed_rpm: float, hold_ns: int, t_ns: int) -> int:
        """Start a spin; return the nanoseconds until the wheel should be at rest again."""
        self._begin(None, speed_rpm, hold_ns, t_ns)
        torque_N_m = self.gentle_torque_N_m(1 if speed_rpm > 0 else -1, t_ns)
        rest_s = self._kind.wheel_inertia_kg_m2 * abs(speed_rpm) / RPM_A_RAD_S / torque_N_m
        return self._left_ns(t_ns) + hold_ns + int(rest_s * 1e9)

    def start_flash(self, duration_ns: int, t_ns: int) -> int:
        """Light and beep; return the nanoseconds until it is over."""
        self._flash_ns = duration_ns
        self._cue(Cue.FLASH, t_ns)
        return duration_ns

    def rest(self, t_ns: int) -> bool:
        """Bring the wheel gently to a stop, if it turns; return whether that starts now."""
        return self._cue(Cue.REST, t_ns)

    def set_charge(self, charge: float | None, t_ns: int) -> None:
        """Let the cell be so charged from now on; None: almost empty."""
        self.supply.set_charge(_LOW_CHARGE if charge is None else charge, t_ns)

    def swap_cell(self, t_ns: int, charge: float = 1.0) -> None:
        """A fresh cell, so charged, is in it from now on; it has not aged."""
        self.supply.swap(charge, t_ns)
        self.wear = self.wear.renew(Wearing.CELL, self._motions)

    def start_charging(self, t_ns: int, current_A: float | None = None) -> None:
        """It is on a charger from now on, which gives about this current; None: one that would
        fill an empty cell in some two hours."""
        usual_A = self._kind.cell_capacity_mAh / 1_000.0 / _CHARGE_H
        self.supply.charge(_CELL_V * (usual_A if current_A is None else current_A), t_ns)

    def stop_charging(self, t_ns: int) -> None:
        """It is off the charger."""
        self.supply.charge(0.0, t_ns)

    def wear_out(self, part: Wearing, begins: bool, t_ns: int) -> None:
        """Let a part wear with use from now on; or no longer, and be as new."""
        self.wear = self.wear.begin(part, self._motions) if begins else self.wear.end(part)
        self._age_cell(t_ns)

    def renew(self, part: Wearing, t_ns: int) -> None:
        """A person has changed a part for a new one: its wear counts from nothing again."""
        if part is Wearing.CELL:
            self.swap_cell(t_ns)
        self.wear = self.wear.renew(part, self._motions)

    def step(self) -> Activity:
        """Make the change that is due at ``due_ns`` and return the activity entered.

        Raises SimStateError where nothing is due.
        """
        t_ns = self.due_ns
        if t_ns is None:
            raise SimStateError("nothing is due: the drive is still")
        if self.activity is Activity.SPINNING_UP and self.motion is not None:
            self.motion.stalled = self.stuck
            at_speed = Cue.BRAKE_DUE if self.motion.deed else Cue.HOLD_DUE
            self._cue(Cue.REST if self.stuck else at_speed, t_ns)
        else:
            self._cue(Cue.DUE, t_ns)
        return self.activity

    def recover(self, t_ns: int) -> None:
        """Go on after the controller restarted: a wheel that turns is brought to rest.

        A brake that holds goes on holding, and a body in motion goes on moving.
        """
        if self.activity is Activity.FLASHING:
            self._cue(Cue.DUE, t_ns)
        self._cue(Cue.REST, t_ns)

    def left_ns(self, t_ns: int) -> int:
        """Return the nanoseconds until a module that was told to rest should be still."""
        braking = self.activity in {Activity.BRAKING, Activity.SETTLING}
        return self._left_ns(t_ns) + (_EXPECTED_SETTLE_NS if braking else 0)

    def gentle_torque_N_m(self, sense: int, t_ns: int) -> float:
        """Return the firmware's motor torque where the reaction pushes the body in ``sense``.

        A module that lies on no face takes the smallest of all.
        """
        face_up = self.body.posture(t_ns).face_up
        faces = (face_up,) if face_up in _FACES else _FACES
        return min(mechanics.rest_torque_N_m(self._kind, face, sense) for face in faces)

    def _cue(self, cue: Cue, t_ns: int) -> bool:
        after = NEXT_ACTIVITY.get((self.activity, cue))
        if after is None:
            return False
        self.activity = after
        self._enter[after](t_ns)
        return True

    def _begin(self, deed: Deed | None, speed_rpm: float, hold_ns: int, t_ns: int) -> None:
        self._motions += 1
        if self.wear.rates[Wearing.CELL]:
            self._age_cell(t_ns)
        self.motion = Motion(
            count=self._motions,
            deed=deed,
            wheel_rad_s=speed_rpm / RPM_A_RAD_S,
            hold_ns=hold_ns,
            face_before=self.body.posture(t_ns).face_up,
            turned_before_rad=self.body.turned_rad,
            start_ns=t_ns,
        )
        self._cue(Cue.DRIVE, t_ns)

    def _left_ns(self, t_ns: int) -> int:
        return max(0, (self.due_ns or t_ns) - t_ns)

    def _enter_still(self, t_ns: int) -> None:
        self.due_ns = None
        self.supply.draw(0.0, 0.0, t_ns, t_ns)

    def _enter_spinning_up(self, t_ns: int) -> None:
        motion = self._in_hand()
        if self.stuck:
            self._pull_in_vain(motion, t_ns)
            return
        top_rad_s = abs(motion.wheel_rad_s)
        affordable_N_m = MOTOR_EFFICIENCY * self.supply.battery.drive_W / top_rad_s
        torque_N_m = min(self.gentle_torque_N_m(-motion.direction, t_ns), affordable_N_m)
        turning_N_m = torque_N_m * (1.0 - self._dragged(motion.count))
        reached_ns = self._pull(motion.wheel_rad_s, turning_N_m, -motion.direction, t_ns)
        peak_W = COPPER_W + torque_N_m * top_rad_s / MOTOR_EFFICIENCY
        self.supply.draw(COPPER_W, peak_W, t_ns, reached_ns)
        motion.sag_V = self.supply.battery.sag_V(peak_W)
        # The heat of the whole spin-up at its start: a second or two early, for lumps of minutes.
        wheel_J = 0.5 * self.body.kind.wheel_inertia_kg_m2 * top_rad_s**2
        self.supply.warm_motor(wheel_J, (reached_ns - t_ns) * 1e-9, t_ns)
        self.due_ns = reached_ns + STEADY_NS

    def _enter_holding(self, t_ns: int) -> None:
        motion = self._in_hand()
        motion.spun_up_ns = t_ns - STEADY_NS
        part = motion.wheel_rad_s * RPM_A_RAD_S / self._kind.wheel_max_rpm
        self.supply.draw(_WINDAGE_W * part**2, _WINDAGE_W * part**2, t_ns, t_ns)
        self.due_ns = t_ns + motion.hold_ns

    def _enter_resting(self, t_ns: int) -> None:
        """Law of the gentle rest: the motor alone slows the wheel, and the body stays put."""
        sense = 1 if self.wheel.speed_rad_s(t_ns) >= 0.0 else -1
        torque_N_m = self.gentle_torque_N_m(sense, t_ns)
        self.due_ns = self._pull(0.0, torque_N_m, sense, t_ns)
        self.supply.draw(COPPER_W, COPPER_W, t_ns, self.due_ns)
        self.supply.warm_motor(0.0, (self.due_ns - t_ns) * 1e-9, t_ns)

    def _enter_braking(self, t_ns: int) -> None:
        motion = self._in_hand()
        motion.spun_up_ns = t_ns - STEADY_NS
        speed_rad_s = self.wheel.speed_rad_s(t_ns)
        motion.wheel_at_brake_rad_s = speed_rad_s
        deed = motion.deed or Deed.FLOOR
        sound = self.body.kind
        brake_C = self.supply.warmth.part_C(Part.BRAKE, t_ns)
        self.body.kind = self.wear.worn_kind(sound, motion.count, brake_C)
        motion.result = self.body.brake(speed_rad_s, motion.direction, motion.count, t_ns, deed)
        self.body.kind = sound
        brake_s = max(motion.result.brake_s, _SHORTEST_BRAKE_S)
        self.due_ns = self.wheel.ramp(0.0, abs(speed_rad_s) / brake_s, t_ns)
        self.supply.draw(0.0, 0.0, t_ns, t_ns)
        self.supply.warm_brake(self._brake_heat_J(speed_rad_s), t_ns)

    def _dragged(self, count: int) -> float:
        """What part of the motor's torque the bearing takes at this spin-up."""
        sound = _BEARING_SCATTER * self._draws.uniform(count, "bearing")
        return sound + self.wear.drag_part(count)

    def _age_cell(self, t_ns: int) -> None:
        """Let the cell be as old as its motions make it."""
        self.supply.age(
            self.wear.cell_ohm(self._motions), self.wear.cell_capacity(self._motions), t_ns
        )

    def _brake_heat_J(self, speed_rad_s: float) -> float:
        """What of the wheel's energy does not go into the body: all but the part Iw/Ie."""
        kind = self.body.kind
        part = kind.wheel_inertia_kg_m2 / edge_inertia_kg_m2(kind)
        return 0.5 * kind.wheel_inertia_kg_m2 * speed_rad_s**2 * (1.0 - part)

    def _enter_settling(self, t_ns: int) -> None:
        result = self._in_hand().result
        left_s = result.settle_s - result.brake_s if result else 0.0
        self.due_ns = t_ns + max(0, int(left_s * 1e9)) + QUIET_NS

    def _enter_flashing(self, t_ns: int) -> None:
        self.due_ns = t_ns + self._flash_ns
        self.supply.draw(_FLASH_W, _FLASH_W, t_ns, self.due_ns)

    def _pull(self, target_rad_s: float, torque_N_m: float, sense: int, t_ns: int) -> int:
        """Let the motor change the wheel's speed; its reaction pushes the body in ``sense``."""
        rate_rad_s2 = torque_N_m / self.body.kind.wheel_inertia_kg_m2
        end_ns = self.wheel.ramp(target_rad_s, rate_rad_s2, t_ns)
        self.body.push(torque_N_m, sense, t_ns, end_ns)
        return end_ns

    def _pull_in_vain(self, motion: Motion, t_ns: int) -> None:
        """Motor against a wheel that is jammed in the body: nothing moves, the windings warm."""
        self.supply.draw(COPPER_W, COPPER_W, t_ns, t_ns)
        motion.sag_V = self.supply.battery.sag_V(COPPER_W)
        self.due_ns = t_ns + STALLED_NS

    def _in_hand(self) -> Motion:
        if self.motion is None:
            raise SimStateError("the drive was started without a motion")
        return self.motion
