"""Who is who: presence, names, restarts, shared addresses, and the count of telemetry."""

from typing import Any

import pytest
from hypothesis import example, given
from hypothesis import strategies as st

from protocol.codes import SIMULATED_BIT, Flags, identity_bits
from storage.records import BytesIn, CommandExpired, EpochChosen, LinkChanged
from storage.rows import ModuleRow, TelemetryRow
from tests.support.wire_script import (
    ADDRESS,
    BOOT,
    CONSOLE,
    EPOCH,
    IDENTITY,
    Fold,
    Script,
    facts,
    from_module,
    nameplate,
    pivot,
    planned,
    presence,
    stopped,
    telemetry,
)

OTHER = SIMULATED_BIT | 0x0000_5A5A_0000_2222
OTHER_BITS = identity_bits(OTHER)


def met() -> Script:
    """A session in which birch has told who it is."""
    return Script().open().heard(presence(), nameplate())


# -- presence and nameplate --------------------------------------------------------------


def test_a_presence_enters_a_module_and_the_nameplate_fills_it() -> None:
    script = Script().open().heard(presence())
    fold = Fold(script)
    module = fold.view.modules[0]
    assert (module.name, module.kind, module.wheel_max_rpm) == ("module-0x0010", "", 0)
    assert (module.module, module.identity, module.address, module.link) == (1, IDENTITY, 0x10, 0)
    assert (module.boot, module.epoch, module.face_up) == (BOOT, EPOCH, 1)
    assert module.simulated
    assert module.heard_t_ns == script.t_ns
    fold.script.heard(nameplate())
    fold.on()
    assert fold.table("modules") == [
        ModuleRow(1, "80005a5a00001111", 1, 0x10, "birch", "paver", 3, 9000, BOOT, 1, None)
    ]
    module = fold.view.modules[0]
    assert (module.name, module.kind, module.wheel_max_rpm) == ("birch", "paver", 9000)
    assert fold.view.simulated


def test_saying_it_again_writes_nothing_again() -> None:
    fold = Fold(met())
    fold.script.heard(presence(), nameplate(), presence(), nameplate())
    assert fold.on() == []


def test_modules_are_counted_in_order_of_first_hearing() -> None:
    script = Script().open()
    script.heard(presence(identity=OTHER), address=0x30).heard(presence())
    script.heard(presence(identity=OTHER), address=0x30)
    fold = Fold(script)
    assert [(m.module, m.address) for m in fold.view.modules] == [(1, 0x30), (2, 0x10)]
    assert [m.module for m in map(fold.reducer.module, (1, 2)) if m] == [1, 2]
    assert fold.reducer.module(3) is None


def test_names_are_unique_by_address_and_then_by_identity() -> None:
    script = met()
    for count in (1, 2):
        identity = IDENTITY + count
        script.heard(presence(identity=identity), address=0x11)
        script.heard(nameplate(identity=identity), address=0x11)
    fold = Fold(script)
    third = f"birch-{IDENTITY + 2:016x}"
    assert [module.name for module in fold.view.modules] == ["birch", "birch-0x0011", third]
    assert list(fold.reducer.modules_by_name()) == ["birch", "birch-0x0011", third]
    found = fold.reducer.find("birch-0x0011")
    assert found is not None
    assert found.module == 2
    assert fold.reducer.find("elm") is None


def test_two_without_a_nameplate_at_one_address_have_two_names() -> None:
    fold = Fold(Script().open().heard(presence()).heard(presence(identity=OTHER)))
    assert [each.name for each in fold.view.modules] == ["module-0x0010", "module-0x0010-0x0010"]


@pytest.mark.parametrize(
    ("plate", "name"),
    [("old birch", "old-birch"), ("a,b", "a-b"), (" elm ", "elm"), ("", "module-0x0010")],
)
def test_a_name_can_be_typed_as_one_word(plate: str, name: str) -> None:
    fold = Fold(Script().open().heard(presence(), nameplate(plate)))
    assert fold.view.modules[0].name == name


def test_a_nameplate_of_a_stranger_only_calls_the_roll() -> None:
    fold = Fold(Script().open().heard(nameplate()))
    assert fold.view.modules == ()
    assert fold.reducer.unknown_heard


def test_the_highest_epoch_in_the_way_is_kept() -> None:
    """WIRE.md, "Owner": one that is greater than ours."""
    fold = Fold(met())
    assert (fold.reducer.epoch, fold.reducer.highest_epoch) == (EPOCH, 0)
    fold.script.heard(presence(epoch=EPOCH + 5)).heard(presence(epoch=EPOCH + 3))
    fold.on()
    assert (fold.reducer.epoch, fold.reducer.highest_epoch) == (EPOCH, EPOCH + 5)
    assert fold.view.modules[0].epoch == EPOCH + 3


# -- owner -------------------------------------------------------------------------------


def test_our_own_epoch_is_not_in_the_way() -> None:
    fold = Fold(met().heard(presence(epoch=0, console=0)))
    assert (fold.reducer.highest_epoch, fold.reducer.console) == (0, CONSOLE)
    assert fold.view.console == CONSOLE


def test_our_epoch_under_another_number_is_in_the_way() -> None:
    """WIRE.md, "Owner": of its own with another console's number, too."""
    fold = Fold(met().heard(presence(console=CONSOLE + 1)))
    assert fold.reducer.highest_epoch == EPOCH
    fold.script.add(EpochChosen, EPOCH + 1)
    fold.script.heard(presence(console=CONSOLE + 1))
    fold.on()
    assert (fold.reducer.epoch, fold.reducer.highest_epoch) == (EPOCH + 1, EPOCH)
    fold.script.heard(presence(console=CONSOLE + 1, epoch=EPOCH + 1))
    fold.on()
    assert fold.reducer.highest_epoch == EPOCH + 1


def test_an_older_epoch_of_another_is_not_in_the_way() -> None:
    fold = Fold(met().heard(presence(console=CONSOLE + 1, epoch=EPOCH - 1)))
    assert fold.reducer.highest_epoch == 0


def test_whom_a_module_follows_and_for_how_long_is_shown() -> None:
    script = met().heard(presence(console=77, owner_left_ms=2400))
    view = Fold(script).view.modules[0]
    assert (view.console, view.owner_left_ms, view.owner_heard_ns) == (77, 2400, script.t_ns)


def test_another_console_that_owns_a_module_is_told_once() -> None:
    other = presence(console=0xABCD, epoch=EPOCH - 5, owner_left_ms=2400)
    script = met().heard(other).heard(other)
    fold = Fold(script)
    assert fold.alarms == ["owned by another console"]
    (alarm,) = fold.table("alarms")
    assert alarm.module == 1
    assert alarm.detail == "birch follows console 0000abcd, for 2.4 s more at least"
    script.heard(presence()).heard(other)
    fold.on()
    assert len(fold.alarms) == 2


@pytest.mark.parametrize("left", [{"owner_left_ms": 0}, {"console": 0}, {"console": CONSOLE}])
def test_whom_nobody_else_owns_is_not_told(left: dict[str, int]) -> None:
    word = presence(console=0xABCD, epoch=EPOCH - 5)._replace(**left)
    assert Fold(met().heard(word)).alarms == []


def test_a_restarted_module_follows_nobody() -> None:
    view = Fold(met().heard(telemetry(1, boot=BOOT + 1))).view.modules[0]
    assert (view.epoch, view.console, view.owner_left_ms) == (0, 0, 0)


@pytest.mark.parametrize(("flags", "permitted"), [(0, False), (Flags.PERMITTED, True)])
def test_a_drive_permit_is_shown(flags: int, permitted: bool) -> None:
    for word in (presence(flags=flags), telemetry(1, flags=flags)):
        assert Fold(met().heard(word)).view.modules[0].permitted is permitted


# -- addresses and links -----------------------------------------------------------------


def test_two_identities_at_one_address_are_a_conflict_told_once() -> None:
    script = met().heard(presence(identity=OTHER)).heard(presence(), presence(identity=OTHER))
    fold = Fold(script)
    assert fold.alarms == ["address conflict"]
    alarm = fold.table("alarms")[0]
    assert alarm.module == 2
    assert "0x0010" in alarm.detail
    assert "80005a5a00001111" in alarm.detail
    assert "80005a5a00002222" in alarm.detail
    assert len([text for _, text in fold.view.notices if "address conflict" in text]) == 1


def test_in_a_conflict_telemetry_is_told_apart_by_identity_bits() -> None:
    script = met().heard(presence(identity=OTHER, boot=9))
    script.heard(telemetry(1, face_up=2), telemetry(1, face_up=4, boot=9, identity_bits=OTHER_BITS))
    fold = Fold(script)
    assert [module.face_up for module in fold.view.modules] == [2, 4]
    assert fold.alarms == ["address conflict"]


def test_an_address_given_up_is_no_conflict() -> None:
    script = met().heard(presence(), address=0x11).heard(presence(identity=OTHER))
    fold = Fold(script)
    assert fold.alarms == []
    assert [module.address for module in fold.view.modules] == [0x11, 0x10]


def test_sharing_an_address_ends_when_one_goes() -> None:
    script = met().heard(presence(identity=OTHER))
    assert [each.shares_address for each in Fold(script).view.modules] == [True, True]
    script.heard(presence(identity=OTHER), address=0x12)
    assert [each.shares_address for each in Fold(script).view.modules] == [False, False]


def test_a_module_with_a_new_address_is_still_answered_for() -> None:
    script = met().order(planned()).sent(pivot()).heard(presence(), address=0x11)
    fold = Fold(script.heard(facts(), address=0x11))
    assert fold.table("commands")[0].ending == "finished"
    assert fold.table("modules")[0].address == 0x11


def test_a_late_report_from_a_new_address_resolves_what_was_unseen() -> None:
    script = met().order(planned()).sent(pivot())
    script.add(CommandExpired, 1)
    fold = Fold(script.heard(presence(), facts(), address=0x11))
    assert fold.table("commands")[0].ending == "finished"


def test_a_module_heard_over_two_links_stays_with_the_first_while_it_is_open() -> None:
    script = met()
    script.add(LinkChanged, 1, "sim://?modules=1", "open", "")
    script.heard(presence(), telemetry(1), link=1).heard(telemetry(1))
    fold = Fold(script)
    assert fold.view.modules[0].link == 0
    assert len(fold.table("telemetry")) == 1  # the same message over both links is one
    script.add(LinkChanged, 0, "sim://?modules=1", "lost", "unplugged")
    script.heard(presence(), link=1)
    fold.on()
    assert fold.view.modules[0].link == 1
    assert len(fold.view.modules) == 1


# -- restarts ----------------------------------------------------------------------------


@pytest.mark.parametrize("word", [presence(boot=BOOT + 4), telemetry(boot=BOOT + 4)])
def test_a_new_boot_is_a_restart_told_once(word: Any) -> None:
    fold = Fold(met())
    fold.script.heard(word).heard(word)
    fold.on()
    assert fold.alarms == ["restart"]
    assert fold.table("alarms")[0].module == 1
    row = fold.table("modules")[0]
    assert (row.boot, row.boots_seen) == (BOOT + 4, 2)
    assert [text for _, text in fold.view.notices] == ["birch restarted"]


def test_a_boot_number_lower_than_the_last_is_as_new() -> None:
    """Boot numbers never repeat; nothing says that they rise."""
    assert Fold(met().heard(presence(boot=1))).alarms == ["restart"]


def test_a_late_word_of_an_old_boot_is_no_second_restart() -> None:
    script = met().heard(telemetry(8, face_up=1)).heard(presence(boot=BOOT + 1, face_up=3))
    script.heard(telemetry(9, face_up=2), presence(face_up=4, epoch=3))
    fold = Fold(script)
    assert fold.alarms == ["restart"]
    module = fold.view.modules[0]
    assert (module.boot, module.face_up, module.epoch) == (BOOT + 1, 3, EPOCH)
    assert [row.boot for row in fold.table("telemetry")] == [BOOT, BOOT]


def test_a_restart_heard_in_telemetry_calls_the_roll_and_forgets_the_epoch() -> None:
    fold = Fold(met().heard(telemetry(boot=BOOT + 1)))
    assert fold.reducer.unknown_heard
    assert fold.view.modules[0].epoch == 0
    fold.script.heard(presence(boot=BOOT + 1))
    fold.on()
    assert not fold.reducer.unknown_heard
    assert fold.view.modules[0].epoch == EPOCH


# -- telemetry ---------------------------------------------------------------------------


def test_telemetry_fills_the_picture_and_a_row() -> None:
    said = telemetry(
        7, activity=2, flags=Flags.BATTERY_LOW, face_up=3, wheel_rpm=-4200, battery_mV=3655,
        temperature_cC=-512, tilt_ddeg=-33,
    )  # fmt: skip
    fold = Fold(met().heard(said))
    module = fold.view.modules[0]
    assert (module.activity, module.flags, module.face_up) == (2, 2, 3)
    assert module.wheel_rpm == -4200
    assert module.battery_V == pytest.approx(3.655)
    assert module.temperature_C == pytest.approx(-5.12)
    assert module.heard_t_ns == fold.script.t_ns
    number, record = fold.script.records[-1]
    assert fold.table("telemetry") == [
        TelemetryRow(
            number, 0, record.t_ns, 1, BOOT, 7, 3500, 2, 2, 3, -4200, 3655, -512, -33
        )
    ]  # fmt: skip
    assert type(fold.table("telemetry")[0]) is TelemetryRow


def test_parts_count_the_messages_of_a_record() -> None:
    fold = Fold(met().heard(telemetry(1), presence(), telemetry(2)))
    assert [row.part for row in fold.table("telemetry")] == [0, 2]


@pytest.mark.parametrize(
    ("address", "link", "changes"),
    [
        (0x0011, 0, {}),
        (ADDRESS, 1, {}),
        (ADDRESS, 0, {"identity_bits": 0x1112}),
    ],
)
def test_a_stranger_s_telemetry_only_calls_the_roll(
    address: int, link: int, changes: dict[str, int]
) -> None:
    fold = Fold(met())
    assert not fold.reducer.unknown_heard
    fold.script.heard(telemetry(**changes), address=address, link=link)
    assert fold.on() == []
    assert fold.reducer.unknown_heard
    fold.script.heard(presence())
    fold.on()
    assert not fold.reducer.unknown_heard


def test_a_stranger_s_confirmation_calls_the_roll_too() -> None:
    assert Fold(met().heard(stopped(1), address=0x22)).reducer.unknown_heard


def test_a_repeated_frame_is_one_message() -> None:
    fold = Fold(met().heard(telemetry(1), telemetry(2), telemetry(2), telemetry(1)))
    assert [row.sequence for row in fold.table("telemetry")] == [1, 2]
    assert fold.view.modules[0].signal == 1.0


def test_an_overtaken_message_is_kept_but_is_not_the_newest() -> None:
    fold = Fold(met().heard(telemetry(1), telemetry(3, face_up=3), telemetry(2, face_up=2)))
    assert [row.sequence for row in fold.table("telemetry")] == [1, 3, 2]
    assert fold.view.modules[0].face_up == 3
    assert fold.view.modules[0].signal == 1.0


@pytest.mark.parametrize(
    ("sequences", "share"),
    [
        ([], 0.0),
        ([700], 1.0),
        ([0], 1.0),
        ([65535, 0], 1.0),
        ([5, 7], 2 / 3),
        ([5, 8], 2 / 4),
        ([1, 2, 3, 1001], 1 / 32),
        (list(range(0, 64, 2)), 16 / 32),
        ([7, 6], 1.0),
        ([7, 5], 2 / 3),
        (list(range(100)), 1.0),
        ([*range(32), 63], 1 / 32),
        ([*range(32), 62], 2 / 32),
        ([100, 68], 1.0),
        ([100, 69], 2 / 32),
    ],
)
def test_signal_is_the_share_of_the_last_32_that_came(sequences: list[int], share: float) -> None:
    fold = Fold(met().heard(*map(telemetry, sequences)) if sequences else met())
    assert fold.view.modules[0].signal == pytest.approx(share)


def test_a_restart_begins_the_count_anew() -> None:
    script = met().heard(telemetry(1), telemetry(20))
    script.heard(telemetry(1, boot=BOOT + 1), telemetry(2, boot=BOOT + 1))
    assert Fold(script).view.modules[0].signal == 1.0


def newer(one: int, two: int) -> bool:
    """RFC 1982, section 3.2, for 16 bits, as it stands there: whether ``one`` is greater."""
    return (one < two and two - one > 1 << 15) or (one > two and one - two < 1 << 15)


@given(st.integers(0, 65535), st.integers(0, 65535))
@example(0, 65535)
@example(32767, 0)
@example(0, 32768)
@example(32768, 0)
def test_which_is_the_newest_follows_serial_arithmetic(first: int, second: int) -> None:
    script = met().heard(telemetry(first, face_up=2), telemetry(second, face_up=3))
    expected = 3 if newer(second, first) else 2
    assert Fold(script).view.modules[0].face_up == expected


@given(st.lists(st.integers(0, 40), min_size=1, max_size=40))
def test_signal_counts_what_came_whatever_the_order(sequences: list[int]) -> None:
    """Counted anew by sets. What is 32 or more behind the newest when it comes is too late."""
    fold = Fold(met().heard(*map(telemetry, sequences)))
    newest, came = sequences[0], {sequences[0]}
    for each in sequences[1:]:
        newest = max(newest, each)
        if each > newest - 32:
            came.add(each)
    window = {each for each in came if each > newest - 32}
    span = min(32, newest - min(came) + 1)
    assert fold.view.modules[0].signal == pytest.approx(len(window) / span)


def test_a_damaged_frame_costs_only_itself() -> None:
    frames = [from_module(telemetry(count)) for count in range(1, 6)]
    hurt = bytearray(frames[2])
    hurt[4] ^= 0x5A
    script = met()
    script.add(BytesIn, 0, b"".join((*frames[:2], bytes(hurt), *frames[3:])))
    fold = Fold(script)
    assert [row.sequence for row in fold.table("telemetry")] == [1, 2, 4, 5]
    assert fold.view.links[0].dropped == 1
    assert fold.view.modules[0].signal == pytest.approx(4 / 5)
