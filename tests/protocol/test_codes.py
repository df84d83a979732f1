"""Codes and addresses: values that are on the air must never move."""

from enum import IntEnum

import pytest

from protocol import codes
from protocol.codes import (
    SIMULATED_BIT,
    Activity,
    AnswerState,
    Code,
    Direction,
    Flags,
    Reason,
    Setting,
    identity_bits,
    is_simulated,
)


def test_addresses_of_all_sorts_lie_apart_in_this_order() -> None:
    ladder = [
        codes.CONSOLE_ADDRESS,
        codes.BRIDGE_ADDRESS,
        codes.FIRST_MODULE_ADDRESS,
        codes.LAST_MODULE_ADDRESS,
        codes.FIRST_GROUP_ADDRESS,
        codes.EVERYONE_ADDRESS,
    ]
    assert ladder == sorted(set(ladder))
    assert ladder[0] > 0
    assert ladder[-1] == 0xFFFF


def test_bit_7_of_a_code_says_who_sent_it() -> None:
    from_modules = {"PRESENCE", "NAMEPLATE", "TELEMETRY", "ANSWER", "FACTS", "STOPPED"}
    assert {code.name for code in Code if code & 0x80} == from_modules


@pytest.mark.parametrize("codes_of", [Code, AnswerState, Reason, Setting, Activity])
def test_codes_fit_an_unsigned_byte(codes_of: type[IntEnum]) -> None:
    assert all(0 <= each < 256 for each in codes_of)


def test_zero_means_nothing_where_it_could_be_a_forgotten_field() -> None:
    assert 0 not in [*Code, *AnswerState, *Setting, *Direction]
    assert Reason(0) is Reason.NONE


def test_directions_are_opposite() -> None:
    assert Direction.FORWARD == -Direction.BACK == 1


def test_flags_are_single_bits_of_a_byte() -> None:
    assert [flag.value for flag in Flags] == [1, 2, 4]


@pytest.mark.parametrize(
    ("identity", "simulated"),
    [(0, False), (1, False), (SIMULATED_BIT, True), (SIMULATED_BIT | 7, True), (2**63 - 1, False)],
)
def test_simulated_mark_is_the_top_bit_of_64(identity: int, simulated: bool) -> None:
    assert is_simulated(identity) is simulated
    assert SIMULATED_BIT == 0x8000_0000_0000_0000


def test_identity_bits_are_the_low_16() -> None:
    assert identity_bits(0x8123_4567_89AB_CDEF) == 0xCDEF
