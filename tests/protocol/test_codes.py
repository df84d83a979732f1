"""Codes and addresses: values that are on the air must never move."""

from enum import IntEnum
from typing import get_args

import pytest

from protocol import codes
from protocol.codes import (
    SIMULATED_BIT,
    Activity,
    AnswerState,
    Code,
    Direction,
    Fault,
    Flags,
    Reason,
    Setting,
    SettingId,
    concerns,
    identity_bits,
    is_simulated,
)
from protocol.message import CODES, Command


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
    from_modules = {
        *("PRESENCE", "NAMEPLATE", "TELEMETRY", "ANSWER", "FACTS", "STOPPED", "ECHO"),
        *("LOCK_STATE", "SETTING_VALUE", "TRACE_CHUNK", "FAULT_NOTICE", "BRIDGE_STATUS"),
    }
    assert {code.name for code in Code if code & 0x80} == from_modules


def test_0x10_to_0x1f_are_the_numbered_commands() -> None:
    commands = {CODES[each] for each in get_args(Command)}
    assert {code for code in Code if 0x10 <= code <= 0x1F} == commands


@pytest.mark.parametrize(
    "codes_of", [Code, AnswerState, Reason, Setting, Activity, Fault, SettingId]
)
def test_codes_fit_an_unsigned_byte(codes_of: type[IntEnum]) -> None:
    assert all(0 <= each < 256 for each in codes_of)


def test_zero_means_nothing_where_it_could_be_a_forgotten_field() -> None:
    assert 0 not in [*Code, *AnswerState, *Setting, *Direction, *Fault, *SettingId]
    assert Reason(0) is Reason.NONE


def test_directions_are_opposite() -> None:
    assert Direction.FORWARD == -Direction.BACK == 1


def test_flags_are_single_bits_of_a_byte() -> None:
    assert [flag.value for flag in Flags] == [1, 2, 4, 8, 16, 32, 64]


@pytest.mark.parametrize(
    ("identity", "simulated"),
    [(0, False), (1, False), (SIMULATED_BIT, True), (SIMULATED_BIT | 7, True), (2**63 - 1, False)],
)
def test_simulated_mark_is_the_top_bit_of_64(identity: int, simulated: bool) -> None:
    assert is_simulated(identity) is simulated
    assert SIMULATED_BIT == 0x8000_0000_0000_0000


def test_identity_bits_are_the_low_16() -> None:
    assert identity_bits(0x8123_4567_89AB_CDEF) == 0xCDEF


@pytest.mark.parametrize("codes_of", [SettingId])
def test_settings_are_counted_from_one_without_a_gap(codes_of: type[IntEnum]) -> None:
    assert list(codes_of) == list(range(1, len(codes_of) + 1))


@pytest.mark.parametrize(
    ("destination", "groups", "meant"),
    [
        (0x0011, 0, True),
        (0x0012, 0xFFFF_FFFF, False),
        (codes.EVERYONE_ADDRESS, 0, True),
        (codes.CONSOLE_ADDRESS, 0xFFFF_FFFF, False),
        # By hand: 0xf000 + n is bit n, n from 0 to 31.
        (0xF000, 0b01, True),
        (0xF000, 0b10, False),
        (0xF001, 0b10, True),
        (0xF01F, 1 << 31, True),
        (0xF01F, 0x7FFF_FFFF, False),
        (0xF020, 0xFFFF_FFFF, False),
        (0xF020, 1 << 32, False),
        (0xFFFE, 0xFFFF_FFFF, False),
        (0xEFFF, 0xFFFF_FFFF, False),
    ],
)
def test_whom_a_destination_concerns(destination: int, groups: int, meant: bool) -> None:
    assert concerns(destination, 0x0011, groups) is meant
