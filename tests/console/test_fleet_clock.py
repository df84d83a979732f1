"""Module clocks in the reducer: which Echo answers which Probe, and what voids a clock."""

import random
from typing import Any

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from console.fleet import FleetReducer
from console.fleet_clock import PROBES_KEPT
from protocol.clock import DRIFT_LIMIT_PPM, ModuleClock
from protocol.codes import identity_bits
from protocol.message import BOUND_UNKNOWN, Echo, Probe
from storage.records import BytesIn, BytesOut, LinkChanged, Record
from tests.support.wire_script import (
    ADDRESS,
    BOOT,
    CONSOLE,
    IDENTITY,
    Fold,
    Script,
    from_module,
    nameplate,
    presence,
    telemetry,
    to_module,
)

BITS = identity_bits(IDENTITY)
MS = 1_000_000


def probe(sequence: int, **changes: Any) -> Probe:
    """A Probe for birch that tells it nothing yet."""
    return Probe(CONSOLE, BOOT, sequence, BITS, 0, BOUND_UNKNOWN)._replace(**changes)


def echo(sequence: int, received_us: int, held_us: int = 0, **changes: Any) -> Echo:
    """Birch's answer to it."""
    return Echo(BOOT, sequence, BITS, received_us, held_us)._replace(**changes)


def met() -> Script:
    """Birch is known."""
    return Script().open().heard(presence(), nameplate())


def exchange(script: Script, sequence: int, received_us: int, held_us: int = 0) -> Script:
    """Sent at one millisecond, answered at the next: the script's step."""
    return script.sent(probe(sequence)).heard(echo(sequence, received_us, held_us))


def clock(fold: Fold) -> ModuleClock:
    """Birch's clock, which is known."""
    known = fold.reducer.clock(1)
    assert known is not None
    return known


# -- one exchange ------------------------------------------------------------------------


def test_there_is_no_clock_before_the_first_exchange() -> None:
    fold = Fold(met().sent(probe(1)))
    assert fold.reducer.clock(1) is None
    assert fold.reducer.clock(2) is None
    view = fold.view.modules[0]
    assert (view.clock_bound_ms, view.clock_offset_ms, view.round_trip_ms) == (None, None, None)


def test_one_exchange_by_hand() -> None:
    """RFC 5905 section 8: T1 = 4 ms, T4 = 5 ms; the module hears it at 900.3 ms of its own time and
    holds it 200 us, so theta = ((900.3 - 4) + (900.5 - 5)) / 2 = 895.9 ms, delta = 0.8 ms."""
    script = met()
    fold = Fold(exchange(script, 7, 900_300, 200))
    assert script.t_ns == 5 * MS
    assert clock(fold).exchanges == 1
    assert clock(fold).offset_ns(script.t_ns) == 895_900_000
    view = fold.view.modules[0]
    assert (view.clock_offset_ms, view.round_trip_ms) == (895.9, 0.8)
    # Half of the round trip, the two microseconds of both clocks, and the drift of the 1.3 ms that
    # it is old in the worst case: 0.156 us.
    assert view.clock_bound_ms == pytest.approx(0.4 + 0.002 + 0.000_156, abs=1e-6)
    assert view.heard_t_ns == script.t_ns


def test_the_bound_that_is_shown_grows_with_the_age_of_the_last_word() -> None:
    script = exchange(met(), 1, 900_000)
    fold = Fold(script)
    before = fold.view.modules[0].clock_bound_ms
    script.t_ns += 10_000 * MS
    fold.script.heard(telemetry(1))
    fold.on()
    after = fold.view.modules[0].clock_bound_ms
    assert before is not None
    assert after is not None
    grown_ms = 10_001 * DRIFT_LIMIT_PPM / 1_000_000
    assert after - before == pytest.approx(grown_ms, abs=1e-6)
    assert after * MS >= clock(fold).bound_ns(script.t_ns) - 1


def test_the_round_trip_shown_is_the_shortest_of_the_last_eight() -> None:
    script = met()
    for sequence, held_us in enumerate([900, *[100] * 8], 1):
        exchange(script, sequence, 1_000 * sequence, held_us)
        fold = Fold(script)
        shortest = 0.1 if sequence <= 8 else 0.9
        assert fold.view.modules[0].round_trip_ms == pytest.approx(shortest)


# -- which Echo belongs to which Probe ---------------------------------------------------


def exchanges(script: Script) -> int:
    """How many were had."""
    known = Fold(script).reducer.clock(1)
    return 0 if known is None else known.exchanges


def test_an_echo_that_no_probe_asked_for_measures_nothing() -> None:
    assert exchanges(met().heard(echo(1, 5))) == 0
    assert exchanges(met().sent(probe(1)).heard(echo(2, 5))) == 0


def test_a_repeated_echo_measures_once() -> None:
    assert exchanges(met().sent(probe(1)).heard(echo(1, 5), echo(1, 5)).heard(echo(1, 5))) == 1


def test_a_probe_sent_twice_measures_nothing() -> None:
    """Karn's rule: its Echo does not say which of the two it answers."""
    script = met().sent(probe(1)).sent(probe(1)).heard(echo(1, 5)).heard(echo(1, 9))
    assert exchanges(script) == 0
    assert exchanges(exchange(script, 2, 50)) == 1


def test_echoes_may_come_in_any_order() -> None:
    script = met().sent(probe(1)).sent(probe(2)).heard(echo(2, 7)).heard(echo(1, 6))
    assert exchanges(script) == 2


def test_only_the_last_eight_probes_are_remembered() -> None:
    script = met()
    for sequence in range(1, PROBES_KEPT + 2):
        script.sent(probe(sequence))
    assert PROBES_KEPT == 8
    assert exchanges(script.heard(echo(1, 5))) == 0
    assert exchanges(script.heard(echo(2, 6))) == 1


@pytest.mark.parametrize(
    "changes", [{"boot": BOOT - 1}, {"boot": BOOT + 1}, {"identity_bits": BITS ^ 1}]
)
def test_an_echo_of_another_boot_or_box_measures_nothing(changes: dict[str, int]) -> None:
    script = met().sent(probe(1)).heard(echo(1, 5, **changes))
    assert exchanges(script) == 0


def test_an_echo_of_a_boot_not_heard_of_calls_the_roll_and_ends_nothing() -> None:
    fold = Fold(met().heard(echo(1, 5, boot=BOOT + 1)))
    assert fold.reducer.unknown_heard
    assert fold.view.modules[0].boot == BOOT
    assert fold.alarms == []


def test_a_probe_for_another_is_not_this_one_s() -> None:
    script = met().sent(probe(1, identity_bits=BITS ^ 1)).heard(echo(1, 5))
    assert exchanges(script) == 0
    assert exchanges(met().sent(probe(1), address=0x11).heard(echo(1, 5))) == 0


# -- what is wrong, and what voids it ----------------------------------------------------


def test_timestamps_that_cannot_be_are_told_once_a_boot() -> None:
    """An answer that took longer than the whole exchange of 1 ms."""
    script = met()
    for sequence in (1, 2):
        exchange(script, sequence, 500, 1_500)
    fold = Fold(script)
    assert fold.reducer.clock(1) is None
    assert fold.alarms == ["clock"]
    assert "birch: timestamps out of order" in fold.table("alarms")[0].detail
    assert len(fold.view.notices) == 1
    script.heard(presence(boot=BOOT + 1)).sent(probe(3, boot=BOOT + 1))
    script.heard(echo(3, 500, 1_500, boot=BOOT + 1))
    fold.on()
    assert fold.alarms == ["clock", "restart", "clock"]


@pytest.mark.parametrize("word", [presence(boot=BOOT + 1), telemetry(1, boot=BOOT + 1)])
def test_a_restart_voids_it(word: Any) -> None:
    script = exchange(met(), 1, 900_000).sent(probe(2)).heard(word)
    fold = Fold(script.heard(echo(2, 900_900)))
    assert fold.reducer.clock(1) is None
    view = fold.view.modules[0]
    assert (view.clock_bound_ms, view.clock_offset_ms, view.round_trip_ms) == (None, None, None)


def test_another_link_voids_it() -> None:
    script = exchange(met(), 1, 900_000).sent(probe(2))
    script.add(LinkChanged, 0, "sim://", "lost", "unplugged")
    script.add(LinkChanged, 1, "sim://", "open", "")
    fold = Fold(script.heard(presence(), link=1))
    assert fold.view.modules[0].link == 1
    assert fold.reducer.clock(1) is None
    script.heard(echo(2, 900_900), link=1)
    script.sent(probe(3), link=1).heard(echo(3, 901_500), link=1)
    fold.on()
    assert clock(fold).exchanges == 1


def test_what_goes_over_another_link_measures_nothing() -> None:
    """Heard over two bridges, a module stays with the first; its clock is that link's."""
    script = met()
    script.add(LinkChanged, 1, "sim://", "open", "")
    script.heard(presence(), link=1)
    script.sent(probe(1), link=1).heard(echo(1, 5), link=1)
    script.sent(probe(2)).heard(echo(2, 5), link=1)
    assert exchanges(script) == 0
    assert exchanges(script.heard(echo(2, 5))) == 1


# -- the same from the records alone -----------------------------------------------------


@settings(max_examples=60, deadline=None)
@given(st.integers(0, 10**6))
def test_folding_again_gives_the_same_clock_and_its_bound_holds(seed: int) -> None:
    """The truth is known here: an offset, a drift within the limit, and delays each way."""
    draw = random.Random(seed)
    offset_us, drift_ppm = draw.randrange(10**9), draw.uniform(-DRIFT_LIMIT_PPM, DRIFT_LIMIT_PPM)

    def module_us(t_ns: int) -> float:
        return offset_us + t_ns / 1_000 * (1 + drift_ppm / 1_000_000)

    events: list[tuple[int, type[Any], bytes]] = []
    for sequence in range(1, 13):
        sent_ns = 10 * MS + sequence * 250 * MS
        there_ns = sent_ns + draw.randrange(40 * MS)
        back_ns = there_ns + draw.randrange(1, 2 * MS)
        heard_ns = back_ns + draw.randrange(40 * MS)
        received_us = int(module_us(there_ns))
        held_us = max(0, int(module_us(back_ns)) - received_us)
        events.append((sent_ns, BytesOut, to_module(probe(sequence))))
        if draw.random() < 0.8:
            answer = from_module(echo(sequence, received_us, held_us), ADDRESS)
            events.append((heard_ns, BytesIn, answer))
    script = met()
    records = list(script.records)
    for t_ns, made, data in sorted(events, key=lambda each: each[0]):
        record: Record = made(t_ns, 0, data)
        records.append((len(records) + 1, record))
    ends = []
    for _ in range(2):
        reducer = FleetReducer()
        for number, record in records:
            reducer.apply(number, record)
        ends.append(reducer)
    end_ns = records[-1][1].t_ns
    assert ends[0].view(end_ns) == ends[1].view(end_ns)
    known = ends[0].clock(1)
    assert known is not None
    for later_ns in (0, 5_000 * MS, 60_000 * MS):
        truth_ns = module_us(end_ns + later_ns) * 1_000
        estimate_ns = known.module_time_ns(end_ns + later_ns)
        assert abs(estimate_ns - truth_ns) <= known.bound_ns(end_ns + later_ns)
