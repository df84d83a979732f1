"""Mechanics: what a wheel, a brake and the floor do to modules, for predictor and simulator.

Rooms, from the inside out: arrays, brake and hold (curves), bodies and forces (equations), state,
landing, corner and flight (phases), tumble (whole motions of many modules at once), threshold
(exact answers for a hinge), search, twist and gentle (what a kind needs).
Pure functions; SI units, radians. Imports NumPy, so it is itself imported only where it is needed.
"""

from sim_link.mechanics.bodies import Attempt
from sim_link.mechanics.gentle import rest_s, rest_torque_N_m, tipping_torque_N_m
from sim_link.mechanics.hold import GRAVITY_M_S2
from sim_link.mechanics.search import Threshold, hop_threshold, pivot, pivot_threshold
from sim_link.mechanics.state import Moment, MotionResult, Phase, Watch
from sim_link.mechanics.tumble import tumble
from sim_link.mechanics.twist import twist, twist_threshold

__all__ = [
    "GRAVITY_M_S2",
    "Attempt",
    "Moment",
    "MotionResult",
    "Phase",
    "Threshold",
    "Watch",
    "hop_threshold",
    "pivot",
    "pivot_threshold",
    "rest_s",
    "rest_torque_N_m",
    "tipping_torque_N_m",
    "tumble",
    "twist",
    "twist_threshold",
]
