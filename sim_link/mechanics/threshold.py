"""What a hinged body needs: the exact threshold without an equation of motion.

Owns the ideal, the closed-form and the exact least wheel speed, infeasibility and its reason, for a
brake whose torque is constant from its onset on. What slides, flies or fades is found by following
the motion (search.py). Elementwise over modules; SI units, radians.
"""

from dataclasses import dataclass
from functools import lru_cache
from itertools import pairwise
from typing import Final

import numpy as np

from sim_link.mechanics.arrays import Bools, Floats
from sim_link.mechanics.hold import Hold

NO_LIFT: Final = "the brake does not lift the body: torque is {ratio:.3f} of the hold torque"
STALLS: Final = (
    "the brake lifts the body but stalls on the way, at any speed: torque is {margin:.3f} of "
    "what is needed"
)
_GRID: Final = 400
_HALVINGS: Final = 60
_NODES: Final = 24
_PANELS: Final = (0.0, 0.01, 0.03, 0.1, 0.3, 1.0)
"""Ends of the quadrature's panels: close together at the start, where a brake that barely
beats the hold leaves the body slowest."""


@dataclass(frozen=True, slots=True)
class HingeThresholds:
    """What hinged bodies need, one element each; NaN where no speed is enough.

    ``ratio`` is k, the brake's torque over the hold torque at rest; ``margin`` the brake's torque
    over the least that could do it; ``lock_rad`` and ``brake_s`` are those at ``w_min_rad_s``.
    """

    w_min_rad_s: Floats
    w_ideal_rad_s: Floats
    ratio: Floats
    margin: Floats
    lock_rad: Floats
    brake_s: Floats


def ideal_rad_s(hold: Hold, edge_inertia: Floats, wheel_inertia: Floats) -> Floats:
    """Least wheel speed with an instant brake: angular momentum about the edge survives, so
    w = sqrt(2 Ie dE) / Iw."""
    needed = hold.energy_J(hold.end_rad)
    return np.asarray(np.sqrt(2.0 * edge_inertia * needed) / wheel_inertia)


def closed_form_rad_s(
    hold: Hold, edge_inertia: Floats, wheel_inertia: Floats, brake: Floats
) -> Floats:
    """Least wheel speed if the hold torque stayed what it is at rest:
    w_ideal sqrt(1 + (1 - j)/(k - 1)).

    Too high, so on the safe side, where the hold torque falls with the angle (floor, magnets); too
    low on a wall and over a crest, where it grows first. NaN where k is not above 1.
    """
    ratio = brake / hold.torque_N_m(0.0)
    part = wheel_inertia / edge_inertia
    with np.errstate(invalid="ignore", divide="ignore"):
        factor = np.sqrt(1.0 + (1.0 - part) / (ratio - 1.0))
    found = ideal_rad_s(hold, edge_inertia, wheel_inertia) * factor
    return np.where(ratio > 1.0, found, np.nan)


def needed_torque_N_m(hold: Hold) -> Floats:
    """Least constant torque that turns the body through: the greatest V/theta, or T at rest.

    The work tau theta must stay ahead of V all the way. On a wall without magnets that is
    0.654 m g a, at 67 degrees; on the floor the torque at rest.
    """
    angles = np.asarray(hold.end_rad)[..., None] * (np.arange(1, _GRID + 1) / _GRID)
    work = _spread(hold).energy_J(angles) / angles
    most: Floats = work.max(axis=-1)
    return np.maximum(hold.torque_N_m(0.0), most)


def hinge_thresholds(
    hold: Hold, edge_inertia: Floats, wheel_inertia: Floats, brake: Floats
) -> HingeThresholds:
    """Least wheel speeds that carry hinged bodies through ``hold.end_rad``.

    While the wheel slips, Ib theta'' = tau - T by the work-energy theorem gives theta'^2 =
    2 (tau theta - V) / Ib; it must lock at the first angle where (Ie/Ib)(tau theta - V) =
    dE - V, which fixes the speed before. Infeasible where tau theta - V reaches zero first; zero
    where nothing holds at all (flat, no magnets, no drag), and ratio and margin are then infinite.
    """
    body_inertia = edge_inertia - wheel_inertia
    lock, reached = _lock_angle(hold, edge_inertia / body_inertia, brake)
    at_rest = hold.torque_N_m(0.0)
    with np.errstate(divide="ignore", invalid="ignore"):
        ratio = np.where(at_rest > 0.0, brake / at_rest, np.inf)
        rate = np.sqrt(2.0 * (brake * lock - hold.energy_J(lock)) / body_inertia)
        brake_s = np.where(lock > 0.0, _slipping_s(hold, body_inertia, brake, lock), 0.0)
        margin = np.asarray(brake / needed_torque_N_m(hold))
    feasible = reached & (ratio > 1.0)
    w_min = rate + brake / wheel_inertia * brake_s
    return HingeThresholds(
        np.where(feasible, w_min, np.nan),
        ideal_rad_s(hold, edge_inertia, wheel_inertia),
        ratio,
        margin,
        np.where(feasible, lock, np.nan),
        np.where(feasible, brake_s, np.nan),
    )


def _spread(hold: Hold) -> Hold:
    """The same curves with a further axis for angles."""
    return Hold(*(np.asarray(getattr(hold, name))[..., None] for name in Hold.__slots__))


def _lock_angle(hold: Hold, inertia_ratio: Floats, brake: Floats) -> tuple[Floats, Bools]:
    """First angle at which locking leaves exactly the energy still needed; and whether the
    body gets there."""
    end = np.asarray(hold.end_rad)
    needed = hold.energy_J(end)
    angles = end[..., None] * (np.arange(_GRID + 1) / _GRID)
    lift = _spread(hold).energy_J(angles)
    spare = np.asarray(brake)[..., None] * angles - lift
    enough = np.asarray(inertia_ratio)[..., None] * spare >= needed[..., None] - lift
    first = np.argmax(enough, axis=-1)
    stalled = np.argmax((spare <= 0.0)[..., 1:], axis=-1) + 1
    stalls = (spare <= 0.0)[..., 1:].any(axis=-1)
    reached = enough.any(axis=-1) & (~stalls | (first <= stalled))
    low, high = end * (first - 1) / _GRID, end * first / _GRID
    for _ in range(_HALVINGS):
        middle = (low + high) / 2
        lift = hold.energy_J(middle)
        over = inertia_ratio * (brake * middle - lift) >= needed - lift
        low, high = np.where(over, low, middle), np.where(over, middle, high)
    return np.asarray(high), np.asarray(reached)


@lru_cache(maxsize=1)
def _nodes() -> tuple[Floats, Floats]:
    """Gauss-Legendre nodes and weights of all panels, on 0 to 1."""
    nodes, weights = np.polynomial.legendre.leggauss(_NODES)
    spans = [(low, high - low) for low, high in pairwise(_PANELS)]
    places = [low + width * (nodes + 1.0) / 2.0 for low, width in spans]
    return np.concatenate(places), np.concatenate([weights * width / 2.0 for _, width in spans])


def _slipping_s(hold: Hold, body_inertia: Floats, brake: Floats, angle: Floats) -> Floats:
    """Time to reach an angle with the wheel slipping: integral of dtheta/theta'.

    theta = y^2 takes the square-root singularity at the start away; Gauss-Legendre then.
    """
    nodes, weights = _nodes()
    root = np.sqrt(np.asarray(angle))[..., None]
    y = root * nodes
    theta = y * y
    spare = np.asarray(brake)[..., None] * theta - _spread(hold).energy_J(theta)
    rate = np.sqrt(2.0 * spare / np.asarray(body_inertia)[..., None])
    return np.asarray((weights * root * 2.0 * y / rate).sum(axis=-1))
