"""Settings of a virtual module: what there is, what it may be, what is said of it."""

import pytest

from protocol.codes import Reason, SettingId, identity_bits
from protocol.message import Packet, decode, encode
from sim_link.settings import CALIBRATION, Settings
from tests.support.virtual_console import spec_of

SPEC = spec_of(telemetry_hz=4.0)


def test_every_setting_has_its_usual_value_within_its_bounds() -> None:
    settings = Settings(SPEC)
    usual = {
        SettingId.WHEEL_LIMIT_RPM: 9000,
        SettingId.TELEMETRY_PERIOD_MS: 250,
        SettingId.BATTERY_LOW_MV: 3550,
        SettingId.GROUPS: 0,
        SettingId.CALIBRATION: CALIBRATION,
    }
    assert {each: settings.value(each) for each in SettingId} == usual
    for each in SettingId:
        told = settings.told(each, 5)
        assert told.lowest <= told.value <= told.highest
        assert (told.boot, told.settings) == (5, len(SettingId))
        assert told.identity_bits == identity_bits(SPEC.identity)


@pytest.mark.parametrize("setting", [0, 6, 255])
def test_what_there_is_not_is_said_to_be_nothing(setting: int) -> None:
    told = Settings(SPEC).told(setting, 5)
    assert told.lowest > told.highest
    assert Settings(SPEC).refusal(setting, 0) is Reason.BAD_FIELD


@pytest.mark.parametrize(
    ("setting", "value", "reason"),
    [
        (SettingId.WHEEL_LIMIT_RPM, 9000, Reason.NONE),
        (SettingId.WHEEL_LIMIT_RPM, 9001, Reason.BAD_FIELD),
        (SettingId.WHEEL_LIMIT_RPM, 100, Reason.NONE),
        (SettingId.WHEEL_LIMIT_RPM, 99, Reason.BAD_FIELD),
        (SettingId.TELEMETRY_PERIOD_MS, 19, Reason.BAD_FIELD),
        (SettingId.BATTERY_LOW_MV, 4201, Reason.BAD_FIELD),
        (SettingId.GROUPS, -(2**31), Reason.NONE),
        (SettingId.CALIBRATION, CALIBRATION, Reason.READ_ONLY),
    ],
)
def test_bounds(setting: SettingId, value: int, reason: Reason) -> None:
    assert Settings(SPEC).refusal(setting, value) is reason


def test_all_32_groups_fit_a_signed_value_on_the_wire() -> None:
    settings = Settings(SPEC)
    settings.write(SettingId.GROUPS, -1)
    assert settings.groups == 0xFFFF_FFFF
    packet = Packet(1, 0x10, settings.told(SettingId.GROUPS, 5))
    assert decode(encode(packet)) == packet
