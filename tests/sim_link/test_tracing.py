"""Motion traces: whole, consistent with the facts, cheap until asked for."""

import pytest

from protocol.codes import identity_bits
from protocol.message import Facts, RollCall, TraceAsk, TraceChunk
from protocol.trace import Trace, TraceFetch
from sim_link.posture import Braking
from sim_link.tracing import KEPT, MOST_SAMPLES, PERIOD_US
from tests.support.module_bench import Bench, of
from tests.support.virtual_console import CONSOLE, EPOCH, S, pivot, rest, to_all


def ask(bench: Bench, number: int, first: int, wanted: int) -> TraceAsk:
    bits = identity_bits(bench.me.identity)
    return TraceAsk(EPOCH, bench.me.boot, number, bits, first, wanted)


def fetched(bench: Bench, number: int) -> Trace | None:
    """The trace as a console fetches it; None where the module has none."""
    fetch = TraceFetch()
    while not (fetch.complete or fetch.absent):
        for chunk in bench.order(ask(bench, number, *fetch.missing())):
            assert isinstance(chunk, TraceChunk)
            fetch.take(chunk)
    return None if fetch.absent else fetch.trace()


def moved(speed_rpm: int = 6000, direction: int = 1) -> tuple[Bench, Facts]:
    bench = Bench()
    bench.order(pivot(bench.me, 1, speed_rpm, direction))
    [facts] = of(Facts, bench.run())
    assert isinstance(facts, Facts)
    return bench, facts


@pytest.mark.parametrize("direction", [1, -1])
def test_a_trace_agrees_with_the_facts(direction: int) -> None:
    bench, facts = moved(direction=direction)
    trace = fetched(bench, 1)
    assert trace is not None
    head, samples = trace
    assert head.period_us == PERIOD_US
    assert 0 < head.brake_sample < head.samples <= MOST_SAMPLES
    before, after = samples[: head.brake_sample], samples[head.brake_sample :]
    assert samples[head.brake_sample - 1].wheel_rpm == pytest.approx(
        direction * facts.wheel_at_brake_rpm, abs=30
    )
    assert after[-1].tilt_ddeg == pytest.approx(facts.turned_ddeg, abs=20)
    assert max(each.tilt_ddeg for each in samples) == pytest.approx(facts.peak_tilt_ddeg, abs=60)
    assert max(each.rate_dps for each in samples) <= facts.peak_rate_dps * 1.05
    assert all(each.rate_dps == each.tilt_ddeg == 0 for each in before)
    assert abs(after[-1].wheel_rpm) < 100
    drop_mV = before[-1].battery_mV - min(each.battery_mV for each in before)
    assert 0 < drop_mV <= facts.sag_mV + 20


def test_its_times_are_those_of_the_module() -> None:
    bench, facts = moved()
    trace = fetched(bench, 1)
    assert trace is not None
    brake_ms = trace.head.started_ms + trace.head.brake_sample * PERIOD_US / 1000
    # The speed is held for 60 ms before the brake.
    assert brake_ms == pytest.approx(facts.started_ms + facts.spin_up_ms + 60, abs=5)


def test_only_what_is_asked_for_is_said() -> None:
    bench, _ = moved()
    chunks = bench.order(ask(bench, 1, 2, 0b1001))
    assert [each.chunk for each in chunks if isinstance(each, TraceChunk)] == [2, 5]
    assert bench.order(ask(bench, 1, 60_000, 1)) == []


@pytest.mark.parametrize("other", [{"epoch": EPOCH - 1}, {"number": 2}])
def test_of_another_command_there_is_none(other: dict[str, int]) -> None:
    bench, _ = moved()
    [chunk] = bench.order(ask(bench, 1, 0, 1)._replace(**other))
    assert isinstance(chunk, TraceChunk)
    assert (chunk.chunks, chunk.data) == (0, bytes(24))


@pytest.mark.parametrize("other", [{"boot": 1}, {"identity_bits": 1}])
def test_another_boot_or_box_says_nothing(other: dict[str, int]) -> None:
    bench, _ = moved()
    assert bench.order(ask(bench, 1, 0, 1)._replace(**other)) == []


def test_the_last_few_are_kept_and_a_motion_cut_short_has_none() -> None:
    bench = Bench()
    for number in range(1, KEPT + 2):
        bench.order(pivot(bench.me, number, 2500))
        bench.run()
    bench.order(pivot(bench.me, 90, 6000))
    bench.run(S // 2)
    bench.order(rest(bench.me, 91))
    bench.run()
    assert [fetched(bench, number) is None for number in range(1, KEPT + 2)] == [True] + [
        False
    ] * KEPT
    assert fetched(bench, 90) is None


def test_another_epoch_and_a_restart_forget_them() -> None:
    bench, _ = moved()
    bench.say(to_all(RollCall(EPOCH + 1, CONSOLE)))
    assert fetched(bench, 1) is None
    bench, _ = moved()
    bench.module.restart(bench.t_ns)
    assert not list(bench.module.works.traces._kept)


def test_nothing_is_computed_again_before_somebody_asks(monkeypatch: pytest.MonkeyPatch) -> None:
    computed = []
    real = Braking.again

    def counting(self: Braking, watch=None):  # type: ignore[no-untyped-def]
        computed.append(watch is not None)
        return real(self, watch)

    monkeypatch.setattr(Braking, "again", counting)
    bench, _ = moved()
    assert computed == [False]
    fetched(bench, 1)
    fetched(bench, 1)
    assert computed == [False, True]
