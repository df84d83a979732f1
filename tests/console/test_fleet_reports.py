"""Bridges: what they say of themselves, and when one restarted."""

from typing import Any

import pytest

from console.view import BridgeView
from protocol.codes import BRIDGE_ADDRESS
from protocol.message import BridgeStatus
from storage.records import LinkChanged
from storage.rows import BridgeStatusRow
from tests.support.wire_script import Fold, Script, presence


def status(sequence: int, uptime_ms: int = 60_000, **changes: Any) -> BridgeStatus:
    """A bridge in good health."""
    return BridgeStatus(sequence, uptime_ms, 100, 200, 3, 1, 9, -61, -97)._replace(**changes)


def said(*words: BridgeStatus, link: int = 0) -> Script:
    """A session in which the bridge says all this."""
    script = Script().open()
    for word in words:
        script.heard(word, address=BRIDGE_ADDRESS, link=link)
    return script


def test_no_bridge_is_shown_before_one_speaks() -> None:
    assert Fold(Script().open()).view.bridges == ()


def test_a_bridge_is_shown_and_written() -> None:
    script = said(status(7))
    fold = Fold(script)
    assert fold.view.bridges == (
        BridgeView(
            link=0,
            uptime_ms=60_000,
            frames_from_console=100,
            frames_to_console=200,
            dropped=3,
            queue=1,
            queue_most=9,
            signal_dBm=-61,
            noise_dBm=-97,
            heard_t_ns=script.t_ns,
        ),
    )
    assert fold.table("bridge_status") == [
        BridgeStatusRow(3, 0, script.t_ns, 0, 60_000, 100, 200, 3, 1, 9, -61, -97)
    ]
    assert fold.alarms == []


def test_each_link_has_its_own() -> None:
    script = said(status(1))
    script.add(LinkChanged, 1, "sim://", "open", "")
    script.heard(status(1, 5, queue=4), address=BRIDGE_ADDRESS, link=1)
    fold = Fold(script)
    assert [(each.link, each.queue) for each in fold.view.bridges] == [(0, 1), (1, 4)]
    assert fold.alarms == []


def test_an_uptime_that_went_back_is_a_restart() -> None:
    script = said(status(1, 60_000), status(2, 62_000), status(3, 400))
    fold = Fold(script)
    assert fold.alarms == ["bridge restart"]
    assert fold.view.notices == ((script.t_ns, "the bridge of link 0 restarted"),)
    assert len(fold.table("bridge_status")) == 3


def test_an_uptime_that_wraps_is_none() -> None:
    """WIRE.md, "Times": milliseconds of 32 bits wrap, after 49 days."""
    assert Fold(said(status(1, 2**32 - 500), status(2, 1500))).alarms == []


@pytest.mark.parametrize("late", [status(5, 60_000), status(4, 58_000), status(0xFFF0, 1)])
def test_a_repeated_or_overtaken_word_is_passed_over(late: BridgeStatus) -> None:
    script = said(status(5, 60_000))
    fold = Fold(script)
    before = fold.view.bridges
    script.heard(late, address=BRIDGE_ADDRESS)
    assert fold.on() == []
    assert fold.view.bridges == before


def test_sequences_wrap() -> None:
    fold = Fold(said(status(0xFFFF, 1_000), status(0, 3_000)))
    assert fold.view.bridges[0].uptime_ms == 3_000


def test_only_a_bridge_speaks_for_a_bridge() -> None:
    fold = Fold(Script().open().heard(presence(), status(1)))
    assert fold.view.bridges == ()
    assert fold.table("bridge_status") == []


@pytest.mark.parametrize("state", ["lost", "closed"])
def test_a_link_that_is_gone_has_no_bridge(state: str) -> None:
    """What is plugged in next may be another one: its uptime is no restart."""
    script = said(status(9))
    script.add(LinkChanged, 0, "sim://", state, "unplugged")
    fold = Fold(script)
    assert fold.view.bridges == ()
    script.add(LinkChanged, 0, "sim://", "open", "")
    script.heard(status(1, 50), address=BRIDGE_ADDRESS)
    fold.on()
    assert fold.alarms == (["link lost"] if state == "lost" else [])
    assert fold.view.bridges[0].uptime_ms == 50
