"""What a module's sensors make of the truth: noise, units, and the widths of wire fields.

Owns the step from the physical state (drive.py, posture.py) to the fields of Telemetry and
Facts. Decides nothing: verdicts on a motion are the console's. Noise is keyed by the module's
count of motions, or of reports, so that looking does not change what is seen later.

The inertial unit has two halves. Its accelerometer knows which face is up, and whether the body
lies still. Its gyroscope gives the rate, and by adding up from the brake's command on the angle;
its bias, each module's own and a little different when it is warm, adds up with it. Where the
gyroscope is lost, the facts hold what the accelerometer still says: the angle is that of whole
faces from the one before to the one after, the peak tilt no more than that, the peak rate zero.
"""

import math
from collections.abc import Callable
from typing import Final, NamedTuple

from protocol.codes import Activity, Fault, Reason, identity_bits
from protocol.message import Facts, Telemetry
from protocol.message import Motion as MotionCommand
from sim_link.box import Box
from sim_link.drive import STEADY_NS, Drive, Motion
from sim_link.errors import SimStateError
from sim_link.mechanics import MotionResult
from sim_link.randomness import Draws, four_normals
from sim_link.wheel import RPM_A_RAD_S

_U16: Final = (0, 0xFFFF)
_U32: Final = (0, 0xFFFF_FFFF)
_I16: Final = (-0x8000, 0x7FFF)

_WALK_DDEG_ROOT_S: Final = 5.5
"""How far noise takes an angle that is added up for a second; it grows with the root of time. The
jolt of the brake is in it, or it would be a tenth of that."""
_BIAS_DPS: Final = 0.3
"""Standard deviation of what modules' gyroscopes read at rest, after their calibration."""
_BIAS_DPS_K: Final = 0.02
"""Standard deviation of its change with each kelvin from where they were calibrated."""
_CALIBRATED_C: Final = 21.0
_FACE_DDEG: Final = 900.0
_TILT_NOISE_DDEG: Final = 2.0
_RATE_NOISE: Final = 0.01
_WHEEL_NOISE_RPM: Final = 6.0
_BRAKE_NOISE: Final = 0.01
_SETTLE_NOISE_MS: Final = 4.0
_SAG_NOISE_MV: Final = 4.0
_BATTERY_NOISE_MV: Final = 3.0
_TEMPERATURE_NOISE_cC: Final = 8.0
_TURNING_RPM: Final = 1.0
"""Below this the wheel's sensor sees no pulses and reports exactly zero."""


def facts(command: MotionCommand, reason: Reason, box: Box, draws: Draws, t_ns: int) -> Facts:
    """Make the facts of the drive's last motion, which ``command`` asked for.

    A motion cut short before its brake has no brake time, and shows what the body did
    nevertheless: nothing, if the rest was as gentle as it should be.
    """
    drive, motion = box.drive, box.drive.motion
    if motion is None:
        raise SimStateError("facts were asked for before any motion")
    posture = drive.body.posture(t_ns)
    spun_up_ns = t_ns if motion.spun_up_ns is None else motion.spun_up_ns

    def noise(what: str) -> float:
        return draws.normal(motion.count, "measured " + what)

    turned = _turned(box, motion, draws, noise, t_ns)
    measured = Facts(
        epoch=command.epoch,
        boot=command.boot,
        number=command.number,
        reason=reason,
        face_before=motion.face_before,
        face_after=posture.face_up,
        settled=posture.settled,
        turned_ddeg=_field(turned.end_ddeg, _I16),
        peak_tilt_ddeg=_field(turned.peak_ddeg, _I16),
        peak_rate_dps=0,
        wheel_at_brake_rpm=0,
        brake_us=0,
        spin_up_ms=_field((spun_up_ns - motion.start_ns) / 1e6, _U16),
        settle_ms=0,
        sag_mV=_field(motion.sag_V * 1e3 + _SAG_NOISE_MV * noise("sag"), _U16),
        started_ms=box.boot.time.ms(motion.start_ns),
    )
    if motion.result is None:
        return measured
    return _with_brake(measured, motion.result, motion.wheel_at_brake_rad_s, turned.rate_dps, noise)


class _Turned(NamedTuple):
    """What the inertial unit makes of a turn: angle at the end and at its peak, largest rate."""

    end_ddeg: float
    peak_ddeg: float
    rate_dps: float


def _turned(
    box: Box, motion: Motion, draws: Draws, noise: Callable[[str], float], t_ns: int
) -> _Turned:
    """Add up the rate from the brake's command until now; where there was none, from the start.

    The peak is taken to come half-way, for what noise and bias have made of the angle by then.
    """
    body = box.drive.body
    if Fault.SENSOR_LOST in box.faults:
        faces = _faces(motion.face_before, body.posture(t_ns).face_up) * motion.direction
        end_ddeg = _FACE_DDEG * (2 if abs(faces) == 2 else faces)
        return _Turned(end_ddeg, end_ddeg, 0.0)
    result = motion.result
    since_ns = motion.start_ns
    if result is not None and motion.spun_up_ns is not None:
        since_ns = motion.spun_up_ns + STEADY_NS
    s = (t_ns - since_ns) * 1e-9
    bias_ddeg_s = 10.0 * bias_dps(draws, box.drive.supply.warmth.temperature_C(t_ns))
    true_ddeg = _ddeg(motion.direction * (body.turned_rad - motion.turned_before_rad))
    end_ddeg = true_ddeg + bias_ddeg_s * s + _WALK_DDEG_ROOT_S * math.sqrt(s) * noise("angle")
    if result is None:
        return _Turned(end_ddeg, end_ddeg, 0.0)
    walk_ddeg = _WALK_DDEG_ROOT_S * math.sqrt(s / 2) * noise("tilt")
    peak_ddeg = _ddeg(result.peak_tilt_rad) + bias_ddeg_s * s / 2 + walk_ddeg
    rate_dps = math.degrees(result.peak_rate_rad_s) * (1.0 + _RATE_NOISE * noise("rate"))
    return _Turned(end_ddeg, peak_ddeg, rate_dps)


def bias_dps(draws: Draws, temperature_C: float) -> float:
    """Return what a module's gyroscope reads at rest, in degrees a second; ``draws``: its own."""
    warm_K = temperature_C - _CALIBRATED_C
    own, a_K = draws.normal(0, "gyroscope bias"), draws.normal(0, "gyroscope bias a kelvin")
    return _BIAS_DPS * own + _BIAS_DPS_K * a_K * warm_K


def _faces(before: int, after: int) -> int:
    """Whole faces forward from one face to another by the shorter way, as gravity tells; two
    could be either way. Nothing is known where one of them is an end, or no face is up."""
    if not (1 <= before <= 4 and 1 <= after <= 4):
        return 0
    return (after - before + 1) % 4 - 1


def _with_brake(
    cut: Facts,
    result: MotionResult,
    wheel_rad_s: float,
    rate_dps: float,
    noise: Callable[[str], float],
) -> Facts:
    """Fill in what only a motion has whose brake was applied."""
    wheel_rpm = abs(wheel_rad_s) * RPM_A_RAD_S + _WHEEL_NOISE_RPM * noise("wheel")
    brake_us = result.brake_s * 1e6 * (1.0 + _BRAKE_NOISE * noise("brake"))
    settle_ms = result.settle_s * 1e3 + _SETTLE_NOISE_MS * noise("settling")
    return cut._replace(
        peak_rate_dps=_field(rate_dps, _U16),
        wheel_at_brake_rpm=_field(wheel_rpm, _U16),
        brake_us=_field(brake_us, _U32),
        settle_ms=_field(settle_ms, _U16),
    )


def wheel_rpm(drive: Drive, t_ns: int) -> int:
    """Return the wheel's signed speed as its sensor reports it."""
    rpm = drive.wheel.rpm(t_ns)
    return _field(rpm, _I16) if abs(rpm) >= _TURNING_RPM else 0


class Reporter:
    """Makes the telemetry of one module, numbered from its boot on."""

    def __init__(self, identity: int, draws: Draws) -> None:
        self._bits = identity_bits(identity)
        self._draws = draws
        self._sequence = 0
        self._reports = 0

    def restart(self) -> None:
        """Number reports from the start again, as a fresh boot does."""
        self._sequence = 0

    def telemetry(self, box: Box, activity: Activity, t_ns: int) -> Telemetry:
        """Make the next report, as measured at ``t_ns``."""
        drive, boot = box.drive, box.boot
        terminal_V, temperature_C = drive.supply.look(t_ns)
        face_up, tilt_rad, settled = drive.body.posture(t_ns)
        self._sequence = (self._sequence + 1) & _U16[1]
        self._reports += 1
        noise = four_normals(self._draws.seed, self._draws.who, self._reports, "reported")
        now_ms = boot.time.ms(t_ns)
        # By place and not by name: this is the busiest line of a large fleet.
        return Telemetry(
            boot.number,
            self._sequence,
            now_ms,
            activity,
            box.flags(t_ns, settled, now_ms),
            face_up,
            wheel_rpm(drive, t_ns),
            _field(terminal_V * 1e3 + _BATTERY_NOISE_MV * noise[0], _U16),
            _field(temperature_C * 100.0 + _TEMPERATURE_NOISE_cC * noise[1], _I16),
            _field(_ddeg(tilt_rad) + _TILT_NOISE_DDEG * noise[2], _I16),
            self._bits,
        )


def _ddeg(angle_rad: float) -> float:
    return math.degrees(angle_rad) * 10.0


def _field(value: float, span: tuple[int, int]) -> int:
    """Round to the field's unit and keep within its width: a sensor at its stop stays there."""
    rounded = round(value)
    if span[0] <= rounded <= span[1]:
        return rounded
    return span[0] if rounded < span[0] else span[1]
