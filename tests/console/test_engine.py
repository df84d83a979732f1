"""The engine's threads over a simulated port, in real time at a high pace."""

import os
import pty
import threading
import time
from collections.abc import Callable, Iterator
from pathlib import Path

import pytest

from console.airtime import Channel
from console.core import SessionCore
from console.engine import Engine
from console.errors import EngineError, InputError, LinkError, LogError
from console.opening import SessionOptions, open_session, operator_name
from protocol.frame import FrameDecoder
from protocol.message import Message, Stop, decode
from storage.reader import LogReader
from tests.support.heart import beating, drivable

LINK = "sim://?seed=7&pace=20"


def wait_for(condition: Callable[[], bool], seconds: float = 20.0) -> bool:
    end = time.monotonic() + seconds
    while time.monotonic() < end:
        if condition():
            return True
        time.sleep(0.01)
    return condition()


@pytest.fixture
def log(tmp_path: Path) -> Path:
    return tmp_path / "log.db"


@pytest.fixture
def engine(log: Path) -> Iterator[Engine]:
    engine = open_session(SessionOptions((LINK,), log, operator="Ida"))
    with beating(engine):
        assert wait_for(lambda: drivable(engine.view()))
        yield engine
    engine.close()


def test_an_order_is_answered_in_a_line_and_becomes_a_motion(engine: Engine, log: Path) -> None:
    line = engine.order("birch, elm pivot forward at 5200")
    assert line == "order 1: birch, elm pivot forward at 5200 on floor (2 commands)"
    assert wait_for(lambda: sum(len(each.outcomes) for each in engine.view().modules) == 2)
    engine.close()
    reader = LogReader.open(log)
    [summary] = reader.sessions()
    assert (summary.operator, summary.ending, summary.motions) == ("Ida", "closed", 2)
    assert [row.outcome for row in reader.trials(None)] == ["landed", "landed"]
    reader.close()


@pytest.mark.parametrize(
    "text", ["birch pivot forward at 99999", "oak rest", "birch dance", "all pivot forward at 9500"]
)
def test_a_bad_order_is_refused_with_one_line(engine: Engine, text: str) -> None:
    with pytest.raises(InputError) as caught:
        engine.order(text)
    assert "\n" not in str(caught.value)


def test_all_stop_and_clear(engine: Engine) -> None:
    engine.order("all spin at 4000 for 60 s")
    assert wait_for(lambda: all(each.wheel_rpm > 3000 for each in engine.view().modules))
    engine.stop("test")
    assert wait_for(lambda: engine.view().stop.in_force and not engine.view().stop.missing)
    assert wait_for(lambda: all(each.wheel_rpm == 0 for each in engine.view().modules))
    with pytest.raises(InputError, match="number 1"):
        engine.clear(7, "test")
    engine.clear(1, "test")
    assert wait_for(lambda: not any(each.latched for each in engine.view().modules))


def test_all_stop_is_on_its_way_without_delay(engine: Engine) -> None:
    begun = time.monotonic()
    engine.stop("test")
    assert wait_for(lambda: engine.view().stop.in_force)
    assert time.monotonic() - begun < 1.0


def test_no_thread_is_left_after_closing(log: Path) -> None:
    before = set(threading.enumerate())
    engine = open_session(SessionOptions((LINK,), log))
    engine.close()
    engine.close()
    assert wait_for(lambda: set(threading.enumerate()) <= before, 5)
    with pytest.raises(InputError, match="closed"):
        engine.order("all rest")


def test_the_end_of_each_command_is_told_once(engine: Engine) -> None:
    from console.orders import parse_order

    ends: list[tuple[int, str]] = []
    names = [each.name for each in engine.view().modules]
    engine.give(
        parse_order("all flash for 1 s", names),
        "typed",
        on_end=lambda command, module: ends.append((command.command, module.name)),
    )
    assert wait_for(lambda: len(ends) == 8)
    time.sleep(0.1)
    assert sorted(ends) == sorted(zip(range(1, 9), names, strict=True))


def test_two_links_make_one_fleet(log: Path, tmp_path: Path) -> None:
    second = tmp_path / "second.toml"
    shipped = Path(__file__).parents[2] / "sim_link/fleets/practice.toml"
    text = shipped.read_text()
    for name in ("alder", "birch", "cedar", "elm", "hazel", "larch", "maple", "rowan"):
        text = text.replace(f'"{name}"', f'"far-{name}"')
    second.write_text(text.replace("0x4c19e2a0", "0x5d19e2a0"))
    links = (LINK, f"{LINK}&fleet={second}")
    engine = open_session(SessionOptions(links, log))
    try:
        with beating(engine):
            assert wait_for(lambda: drivable(engine.view(), 16))
            engine.order("birch, far-birch pivot forward at 5200")
            assert wait_for(lambda: sum(len(each.outcomes) for each in engine.view().modules) == 2)
        landed = {each.name for each in engine.view().modules if each.outcomes}
        assert landed == {"birch", "far-birch"}
    finally:
        engine.close()


def test_a_heart_that_stops_rests_every_wheel(log: Path) -> None:
    engine = open_session(SessionOptions((LINK,), log))
    try:
        with beating(engine):
            assert wait_for(lambda: drivable(engine.view()))
            engine.order("all spin at 4000 for 60 s")
            assert wait_for(lambda: all(each.wheel_rpm > 3000 for each in engine.view().modules))
        assert wait_for(lambda: all(each.wheel_rpm == 0 for each in engine.view().modules))
        with pytest.raises(InputError, match="sign of life"):
            engine.order("birch pivot forward at 5200")
        assert wait_for(lambda: "permit lapsed" in str(engine.view().notices))
    finally:
        engine.close()


def test_an_engine_that_fails_sends_all_stop_and_says_so(
    log: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    master, slave = pty.openpty()
    engine = open_session(SessionOptions((os.ttyname(slave),), log))

    def fail(self: SessionCore, t_ns: int) -> None:
        raise ZeroDivisionError("a fault of ours")

    assert wait_for(lambda: bool(os.read(master, 4096)))
    monkeypatch.setattr(SessionCore, "wake", fail)
    assert wait_for(lambda: engine.view().closed)
    assert Stop(1) in stops_heard(master)
    assert "a fault of ours" in engine.log_trouble()
    assert not engine.link_open()
    with pytest.raises(InputError, match="closed"):
        engine.order("all rest")
    with pytest.raises(EngineError, match="all-stop was sent"):
        engine.close()
    reader = LogReader.open(log)
    assert [each.ending for each in reader.sessions()] == ["failed"]
    reader.close()
    os.close(master)
    os.close(slave)


def stops_heard(master: int) -> list[Message]:
    pieces = FrameDecoder().feed(os.read(master, 4096))
    return [decode(piece).message for piece in pieces if isinstance(piece, bytes)]


# -- opening ----------------------------------------------------------------------------------


def test_a_bad_second_link_leaves_nothing_open_and_no_session(log: Path) -> None:
    before = set(threading.enumerate())
    with pytest.raises(LinkError):
        open_session(SessionOptions((LINK, "/dev/nothing-here"), log))
    assert set(threading.enumerate()) <= before
    assert not log.exists()


def test_a_log_that_is_no_log_is_refused(tmp_path: Path) -> None:
    log = tmp_path / "notes.txt"
    log.write_text("these are my notes, " * 100)
    with pytest.raises(LogError, match=r"notes\.txt"):
        open_session(SessionOptions((LINK,), log))
    assert log.read_text().startswith("these are my notes")


def test_different_paces_are_refused(log: Path) -> None:
    with pytest.raises(InputError, match="pace"):
        open_session(SessionOptions(("sim://?pace=2", "sim://?pace=3"), log))


def test_a_duty_without_an_air_rate_is_refused(log: Path) -> None:
    with pytest.raises(InputError, match="--air-rate"):
        open_session(SessionOptions((LINK,), log, duty_percent=10.0))
    assert not log.exists()


def test_the_channel_is_as_given_and_takes_a_quarter_where_nobody_says() -> None:
    assert SessionOptions((LINK,)).channel is None
    assert SessionOptions((LINK,), air_rate_bps=9_600).channel == Channel(9_600, 25.0)
    said = SessionOptions((LINK,), air_rate_bps=9_600, duty_percent=1.0)
    assert said.channel == Channel(9_600, 1.0)


def test_the_operator_is_as_given_or_who_is_logged_in(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("LOGNAME", "jo")
    assert operator_name("Ida") == "Ida"
    assert operator_name("") == "jo"
