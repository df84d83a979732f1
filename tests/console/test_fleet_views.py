"""Pictures: every field of a module's stands where its name says, and nobody can change one."""

from dataclasses import MISSING, FrozenInstanceError, asdict, fields

import pytest

from console.fleet_views import module_view
from console.view import BridgeView, CommandView, FleetView, ModuleView, Outcome
from protocol.codes import Activity, Fault, Flags, SettingId
from tests.support.module_words import bridge_status, echo, fault, lock_state, probe, settings_read
from tests.support.wire_script import (
    BOOT,
    CONSOLE,
    EPOCH,
    IDENTITY,
    Fold,
    Script,
    facts,
    nameplate,
    pivot,
    planned,
    presence,
    stopped,
    telemetry,
)

FLAGS = Flags.LATCHED | Flags.LOCKED_OUT | Flags.FAULTY | Flags.PERMITTED


def full() -> Script:
    """A session after which nearly every field of birch's picture has a value of its own."""
    script = Script().open().heard(presence(owner_left_ms=2900), nameplate())
    script.order(planned(1)).sent(pivot(1)).heard(facts(1))
    script.order(planned(2, setting=2, speed_rpm=4700)).sent(pivot(2))
    script.sent(probe(1)).heard(echo(1, 500_300, 200))
    script.heard(*settings_read()).heard(stopped(6), lock_state("Ada"), fault(1, 90))
    script.heard(fault(1, 95, Fault.SENSOR_LOST))
    words = {"activity": Activity.STAGED, "face_up": 3, "wheel_rpm": -42, "battery_mV": 3700}
    return script.heard(telemetry(1, flags=int(FLAGS), temperature_cC=2175, **words))


def test_every_field_stands_where_its_name_says() -> None:
    """The picture is made field by field, in order; here each is looked up by its name."""
    script = full()
    view = Fold(script).view.modules[0]
    expected = {
        "module": 1,
        "identity": IDENTITY,
        "simulated": True,
        "address": 0x10,
        "link": 0,
        "name": "birch",
        "kind": "paver",
        "boot": BOOT,
        "epoch": EPOCH,
        "wheel_max_rpm": 9000,
        "wheel_rpm": -42,
        "battery_V": 3.7,
        "temperature_C": 21.75,
        "face_up": 3,
        "activity": Activity.STAGED,
        "flags": int(FLAGS),
        "latched": True,
        "stop_number": 6,
        "heard_t_ns": script.t_ns,
        "signal": 1.0,
        "outcomes": (Outcome.LANDED,),
        "doing": "pivot wall forward at 4700 rpm",
        "shares_address": False,
        "console": CONSOLE,
        "owner_left_ms": 2900,
        "owner_heard_ns": 3_000_000,
        "locked_by": "Ada",
        "faults": ("sensor_lost", "overheated"),
        "clock_offset_ms": view.clock_offset_ms,
        "clock_bound_ms": view.clock_bound_ms,
        "round_trip_ms": 0.8,
        "groups": 0b101,
        "settings": ((1, 9000), (2, 500), (3, 3500), (4, 0b101), (5, 4)),
        "settings_total": len(SettingId),
        "permitted": True,
        "staged": True,
    }
    assert asdict(view) == expected
    assert [field.name for field in fields(ModuleView)] == list(asdict(view))
    # Sent at 9 ms and heard at 10: (500.3 + 500.5 - 9 - 10) / 2. Half of 0.8 ms is the bound.
    assert view.clock_offset_ms == pytest.approx(490.9)
    assert view.clock_bound_ms == pytest.approx(0.4, abs=0.01)


def test_a_picture_equals_one_made_by_hand_and_cannot_be_changed() -> None:
    view = Fold(full()).view.modules[0]
    by_hand = ModuleView(**{each.name: getattr(view, each.name) for each in fields(view)})
    assert by_hand == view
    assert hash(by_hand) == hash(view)
    with pytest.raises(FrozenInstanceError):
        view.wheel_rpm = 1  # type: ignore[misc]


def test_a_picture_stays_the_same_until_something_changes() -> None:
    fold = Fold(full())
    state = fold.reducer._state.modules[1]
    first = module_view(state)
    assert module_view(state) is first
    fold.script.heard(telemetry(2, face_up=4))
    fold.on()
    assert (first.face_up, module_view(state).face_up) == (3, 4)


@pytest.mark.parametrize(
    ("picture", "first_optional"),
    [(ModuleView, "shares_address"), (CommandView, "accepted"), (FleetView, "sealed")],
)
def test_what_came_later_may_be_left_out(picture: type, first_optional: str) -> None:
    """So that whoever makes pictures by hand names only what matters there."""
    names = [each.name for each in fields(picture)]
    optional = [each.name for each in fields(picture) if each.default is not MISSING]
    assert optional == names[names.index(first_optional) :]


def test_a_module_of_whom_only_a_presence_is_known() -> None:
    view = Fold(Script().open().heard(presence(flags=0))).view.modules[0]
    assert (view.locked_by, view.faults, view.settings, view.groups) == (None, (), (), 0)
    assert (view.permitted, view.staged, view.settings_total) == (False, False, 0)


def test_bridges_are_in_the_order_in_which_they_spoke() -> None:
    script = Script().open()
    for link in (2, 0):
        script.heard(bridge_status(1, 1000 + link), address=2, link=link)
    bridges = Fold(script).view.bridges
    assert all(isinstance(each, BridgeView) for each in bridges)
    assert [(each.link, each.uptime_ms) for each in bridges] == [(2, 1002), (0, 1000)]
