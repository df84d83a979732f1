"""Many bodies at once: each as if it were alone, whatever others are computed beside it.

NumPy's sine, cosine and exponential may differ from the C library's in the last bit, so arrays and
plain numbers agree to 1e-9; arrays among themselves agree to the bit.
"""

import itertools
from dataclasses import astuple

import pytest

from protocol.codes import Setting
from sim_link.mechanics import Attempt, MotionResult, tumble
from tests.support.kinds import kind_with
from tests.support.motions import FACE, SETTINGS

KINDS = (
    kind_with(face_friction=0.1),
    kind_with(magnet_torque_N_m=0.15, face_friction=0.05, restitution=0.3),
    kind_with(com_offset_m=(0.004, -0.006), brake_onset_s=0.002, brake_torque_N_m=3.0),
    kind_with(brake_kept=0.4, brake_decay_s=0.01, face_friction=0.1, brake_torque_N_m=0.8),
)
FREE = (
    kind_with(held=False),
    kind_with(held=False, floor_friction=0.3, brake_torque_N_m=3.0, restitution=0.3),
    kind_with(held=False, com_offset_m=(-0.005, 0.003), floor_friction=1.1, brake_torque_N_m=5.0),
    kind_with(held=False, brake_kept=0.2, brake_decay_s=0.004, brake_torque_N_m=2.0),
)


def mixed() -> list[Attempt]:
    """Every kind and setting, slow and fast, forward and back."""
    held = [
        Attempt(kind, speed, FACE[setting] if sense > 0 else 2, sense, setting)
        for kind, setting, (speed, sense) in itertools.product(
            KINDS, SETTINGS, ((0.0, 1), (430.0, -1), (750.0, 1), (2200.0, 1))
        )
    ]
    free = [
        Attempt(kind, speed, face_up, sense)
        for kind, (speed, face_up, sense) in itertools.product(
            FREE, ((300.0, 1, 1), (610.0, 2, 1), (900.0, 3, -1), (1500.0, 4, 1))
        )
    ]
    return held + free


def by_number(result: MotionResult) -> list[float]:
    return [float(value) for value in astuple(result)]


def test_a_mixed_batch_is_as_each_alone() -> None:
    attempts = mixed()
    results = tumble(attempts)
    assert len({result.faces for result in results}) > 4
    assert any(result.rise_m > 0.0 for result in results)
    for attempt, result in zip(attempts, results, strict=True):
        alone = tumble([attempt])[0]
        assert result.faces == alone.faces, attempt
        assert result.settled is alone.settled
        assert by_number(result) == pytest.approx(by_number(alone), rel=1e-9, abs=1e-9), attempt


def test_what_is_computed_beside_a_body_changes_no_bit_of_it() -> None:
    attempts = mixed()
    whole = tumble(attempts)
    backwards = tumble(attempts[::-1])[::-1]
    assert whole == backwards
    thirds = [tumble(attempts[start::3]) for start in range(3)]
    assert [thirds[place % 3][place // 3] for place in range(len(attempts))] == whole


@pytest.mark.parametrize("setting", [*SETTINGS])
def test_a_steady_brake_is_the_same_to_the_bit_beside_one_that_fades(setting: Setting) -> None:
    """``kept`` 1 with any decay, alone or among others, in plain numbers and in arrays."""
    steady = kind_with(magnet_torque_N_m=0.1)
    same = kind_with(magnet_torque_N_m=0.1, brake_kept=1.0, brake_decay_s=0.003)
    fading = kind_with(magnet_torque_N_m=0.1, brake_kept=0.5, brake_decay_s=0.003)
    one, two, three = (
        Attempt(kind, 900.0, FACE[setting], 1, setting) for kind in (steady, same, fading)
    )
    assert tumble([one]) == tumble([two])
    among = tumble([one, two, three])
    assert among[0] == among[1] == tumble([one, one])[0]
    assert among[2] != among[0]


def test_no_motion_and_no_body() -> None:
    """Wheels at rest move nothing, among bodies that move."""
    still, moving = tumble([Attempt(kind_with(), 0.0), Attempt(kind_with(), 800.0)])
    assert (still.faces, still.peak_tilt_rad, still.settle_s, still.settled) == (0, 0.0, 0.0, True)
    assert moving.faces == 1
