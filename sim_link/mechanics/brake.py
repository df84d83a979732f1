"""The brake: a torque that starts after an onset delay and may fade while it holds.

Owns the torque as a function of the time since onset, and its integrals in closed form:
tau(s) = tau0 (kept + (1 - kept) e^(-s/decay)). With ``kept`` 1 it is the constant torque of
the textbook, to the last bit, whatever others are computed beside it. Knows no body. SI units.
"""

from dataclasses import dataclass
from typing import Final

from sim_link.mechanics.arrays import Floats, Ops

_NEWTON_STEPS: Final = 40


@dataclass(frozen=True, slots=True)
class Brakes:
    """One brake an element. ``onset_s``: from its command to the torque; ``kept``: the part of
    the torque that lasts, ``decay_s`` the time constant with which the rest goes."""

    torque_N_m: Floats
    onset_s: Floats
    kept: Floats
    decay_s: Floats
    ops: Ops
    steady: bool
    """Whether none of them fades; then the exponentials are left out."""


def torque_N_m(brakes: Brakes, since_s: Floats) -> Floats:
    """Torque at a time since onset."""
    if brakes.steady:
        return brakes.torque_N_m
    fading = (1.0 - brakes.kept) * brakes.ops.exp(-since_s / brakes.decay_s)
    return brakes.torque_N_m * (brakes.kept + fading)


def impulse_N_m_s(brakes: Brakes, since_s: Floats) -> Floats:
    """Integral of the torque from onset on."""
    if brakes.steady:
        return brakes.torque_N_m * since_s
    gone = -brakes.ops.expm1(-since_s / brakes.decay_s) * brakes.decay_s
    return brakes.torque_N_m * (brakes.kept * since_s + (1.0 - brakes.kept) * gone)


def impulse_integral_N_m_s2(brakes: Brakes, since_s: Floats) -> Floats:
    """Integral of the impulse from onset on: what turns a body in flight, over its inertia."""
    if brakes.steady:
        return brakes.torque_N_m * (0.5 * since_s * since_s)
    gone = -brakes.ops.expm1(-since_s / brakes.decay_s) * brakes.decay_s
    fading = (1.0 - brakes.kept) * brakes.decay_s * (since_s - gone)
    return brakes.torque_N_m * (brakes.kept * (0.5 * since_s * since_s) + fading)


def stopping_s(brakes: Brakes, momentum_N_m_s: Floats) -> Floats:
    """Time since onset at which the impulse reaches a wheel's angular momentum.

    Newton's method from the time that a torque which has faded would take: the impulse is concave
    in time, so from there it falls to the root without passing it.
    """
    steady = momentum_N_m_s / brakes.torque_N_m
    if brakes.steady:
        return steady
    since = steady / brakes.kept
    for _ in range(_NEWTON_STEPS):
        missing = impulse_N_m_s(brakes, since) - momentum_N_m_s
        since = brakes.ops.maximum(since - missing / torque_N_m(brakes, since), 0.0)
    return brakes.ops.where(brakes.kept >= 1.0, steady, since)
