"""What a module's sensors make of the truth: noise, units, and the widths of wire fields.

Owns the step from the physical state (drive.py, posture.py) to the fields of Telemetry and
Facts. Decides nothing: verdicts on a motion are the console's. Noise is keyed by the module's
count of motions, or of reports, so that looking does not change what is seen later.
"""

import math
from collections.abc import Callable
from typing import Final

from protocol.codes import Activity, Reason, identity_bits
from protocol.message import Facts, Motion, Telemetry
from sim_link.box import Box
from sim_link.drive import Drive
from sim_link.errors import SimStateError
from sim_link.mechanics import MotionResult
from sim_link.randomness import Draws
from sim_link.wheel import RPM_A_RAD_S

_U16: Final = (0, 0xFFFF)
_U32: Final = (0, 0xFFFF_FFFF)
_I16: Final = (-0x8000, 0x7FFF)

_ANGLE_NOISE_DDEG: Final = 5.0
"""Half a degree: an integrated gyroscope over one motion."""
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


def facts(command: Motion, reason: Reason, box: Box, draws: Draws, t_ns: int) -> Facts:
    """Make the facts of the drive's last motion, which ``command`` asked for.

    A motion cut short before its brake has no brake time, and shows what the body did
    nevertheless: nothing, if the rest was as gentle as it should be.
    """
    drive, motion = box.drive, box.drive.motion
    if motion is None:
        raise SimStateError("facts were asked for before any motion")
    posture = drive.body.posture(t_ns)
    spun_up_ns = t_ns if motion.spun_up_ns is None else motion.spun_up_ns
    turned_rad = motion.direction * (drive.body.turned_rad - motion.turned_before_rad)

    def noise(what: str) -> float:
        return draws.normal(motion.count, "measured " + what)

    measured = Facts(
        epoch=command.epoch,
        boot=command.boot,
        number=command.number,
        reason=reason,
        face_before=motion.face_before,
        face_after=posture.face_up,
        settled=posture.settled,
        turned_ddeg=_field(_ddeg(turned_rad) + _ANGLE_NOISE_DDEG * noise("angle"), _I16),
        peak_tilt_ddeg=_field(_ddeg(turned_rad) + _ANGLE_NOISE_DDEG * noise("tilt"), _I16),
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
    return _with_brake(measured, motion.result, motion.wheel_at_brake_rad_s, noise)


def _with_brake(
    cut: Facts, result: MotionResult, wheel_rad_s: float, noise: Callable[[str], float]
) -> Facts:
    """Fill in what only a motion has whose brake was applied."""
    peak_ddeg = _ddeg(result.peak_tilt_rad) + _ANGLE_NOISE_DDEG * noise("tilt")
    rate_dps = math.degrees(result.peak_rate_rad_s) * (1.0 + _RATE_NOISE * noise("rate"))
    wheel_rpm = abs(wheel_rad_s) * RPM_A_RAD_S + _WHEEL_NOISE_RPM * noise("wheel")
    brake_us = result.brake_s * 1e6 * (1.0 + _BRAKE_NOISE * noise("brake"))
    settle_ms = result.settle_s * 1e3 + _SETTLE_NOISE_MS * noise("settling")
    return cut._replace(
        peak_tilt_ddeg=_field(peak_ddeg, _I16),
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
        drive = box.drive
        drive.supply.account(t_ns)
        posture = drive.body.posture(t_ns)
        self._sequence = (self._sequence + 1) & _U16[1]
        self._reports += 1
        battery_mV = drive.supply.terminal_V(t_ns) * 1e3
        temperature_cC = drive.supply.warmth.temperature_C(t_ns) * 100.0
        return Telemetry(
            boot=box.boot.number,
            sequence=self._sequence,
            time_ms=box.boot.time.ms(t_ns),
            activity=activity,
            flags=box.flags(t_ns),
            face_up=posture.face_up,
            wheel_rpm=wheel_rpm(drive, t_ns),
            battery_mV=_field(battery_mV + _BATTERY_NOISE_MV * self._noise("battery"), _U16),
            temperature_cC=_field(
                temperature_cC + _TEMPERATURE_NOISE_cC * self._noise("temperature"), _I16
            ),
            tilt_ddeg=_field(_ddeg(posture.tilt_rad) + _TILT_NOISE_DDEG * self._noise("lie"), _I16),
            identity_bits=self._bits,
        )

    def _noise(self, what: str) -> float:
        return self._draws.normal(self._reports, "reported " + what)


def _ddeg(angle_rad: float) -> float:
    return math.degrees(angle_rad) * 10.0


def _field(value: float, span: tuple[int, int]) -> int:
    """Round to the field's unit and keep within its width: a sensor at its stop stays there."""
    return min(max(round(value), span[0]), span[1])
