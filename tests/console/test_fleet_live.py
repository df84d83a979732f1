"""The reducer under a console and a simulated fleet on a poor channel, in virtual time: all that a
console asks by itself comes in, and the records alone give the same rows and pictures."""

import pytest

from console.fleet import FleetReducer
from protocol.codes import SettingId
from sim_link.options import SimOptions
from storage.rows import Row
from tests.support.virtual import VirtualSession
from tests.support.wire_script import Tables, tables_of

MODULES = 3


def lived(seed: int) -> VirtualSession:
    """A minute of a fleet whose channel loses, repeats and damages frames."""
    options = SimOptions(modules=MODULES, seed=seed, loss=0.1, damage=0.02, repeat=0.05)
    session = VirtualSession(options)

    def go_on(seconds: float) -> None:
        for _ in range(round(seconds * 10)):
            session.core.beat(session.now_ns)
            session.run_for(0.1)

    go_on(8)
    session.order("alder, birch pivot forward at 4400 together")
    go_on(12)
    session.order("cedar set wheel-limit to 6000")
    session.order("birch lock by Ada")
    go_on(5)
    session.order("birch unlock by Ada")
    session.order("alder pivot back at 4400")
    go_on(15)
    return session


@pytest.fixture(scope="module", params=[3, 8])
def session(request: pytest.FixtureRequest) -> VirtualSession:
    return lived(request.param)


@pytest.fixture
def tables(session: VirtualSession) -> Tables:
    return tables_of(session.log.rows)


def test_every_setting_was_read_and_the_written_one_again(
    session: VirtualSession, tables: Tables
) -> None:
    assert session.core.fleet.settings_wanted() == ()
    for module in session.view.modules:
        assert [setting for setting, _ in module.settings] == list(map(int, SettingId))
    cedar = session.core.fleet.find("cedar")
    assert cedar is not None
    assert dict(cedar.settings)[SettingId.WHEEL_LIMIT_RPM] == 6000
    assert len(tables["settings"]) == MODULES * len(SettingId) + 1


def test_every_motion_has_its_trace_or_the_reason_why_not(
    session: VirtualSession, tables: Tables
) -> None:
    assert session.core.fleet.trace_wanted() == ()
    assert len(tables["motions"]) == 3
    told = {row.command for row in tables["command_events"].values() if row.event == "trace"}  # type: ignore[union-attr]
    assert told == {row.command for row in tables["motions"].values()}  # type: ignore[union-attr]
    assert len(tables["traces"]) >= 2


def test_staged_motions_began_at_one_time(tables: Tables) -> None:
    """Each in its own module's time; a simulated fleet starts as one, give or take its clocks."""
    first, second = (tables["motions"][command,] for command in (1, 2))
    assert first.started_ms is not None  # type: ignore[union-attr]
    assert abs(first.started_ms - second.started_ms) <= 20  # type: ignore[union-attr]


def test_clocks_are_known_well_and_the_lock_came_and_went(
    session: VirtualSession, tables: Tables
) -> None:
    for module in session.view.modules:
        assert module.clock_bound_ms is not None
        assert 0 < module.clock_bound_ms < 200
    alarms = [row.alarm for row in tables["alarms"].values()]  # type: ignore[union-attr]
    # Twice where the word with the name is lost, and a flag told of the lock before it.
    assert alarms.count("locked out") in {1, 2}
    assert alarms.count("unlocked") == 1
    assert [module.locked_by for module in session.view.modules] == [None] * MODULES


def test_the_records_alone_give_the_same(session: VirtualSession) -> None:
    """Law 7, clocks and questions included."""
    again = FleetReducer()
    rows: list[Row] = []
    for number, record in session.log.records:
        rows += again.apply(number, record).rows
    assert rows == session.log.rows
    assert again.view(session.now_ns) == session.view
    for module in session.view.modules:
        live, replayed = session.core.fleet.clock(module.module), again.clock(module.module)
        assert live is not None
        assert replayed is not None
        later_ns = session.now_ns + 10**10
        assert replayed.offset_ns(later_ns) == live.offset_ns(later_ns)
        assert replayed.bound_ns(later_ns) == live.bound_ns(later_ns)
