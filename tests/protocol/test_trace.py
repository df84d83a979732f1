"""Motion traces: laid out, read, and fetched over a link that loses and repeats."""

import random

import pytest
from hypothesis import given
from hypothesis import strategies as st

from protocol.errors import LocalProtocolError, RemoteProtocolError
from protocol.message import TraceChunk
from protocol.trace import (
    ASK_AT_ONCE,
    CHUNK_BYTES,
    Trace,
    TraceFetch,
    TraceHead,
    TraceSample,
    chunks_of,
    pack_trace,
    unpack_trace,
)

I16 = st.integers(-(2**15), 2**15 - 1)
U16 = st.integers(0, 2**16 - 1)
U32 = st.integers(0, 2**32 - 1)
SAMPLES = st.lists(st.builds(TraceSample, I16, I16, I16, U16), max_size=150)


@st.composite
def traces(draw: st.DrawFn) -> Trace:
    samples = draw(SAMPLES)
    head = TraceHead(draw(U32), len(samples), draw(U16), draw(U32))
    return Trace(head, tuple(samples))


def some_trace(samples: int) -> Trace:
    made = tuple(TraceSample(37 * at, -at, 9 * at, 4100 - at) for at in range(samples))
    return Trace(TraceHead(2_500, samples, samples // 2, 31_000), made)


def chunk(data: bytes, at: int, total: int) -> TraceChunk:
    return TraceChunk(7, 1, 0x2211, at, total, data)


def chunks(trace: Trace) -> list[TraceChunk]:
    datas = pack_trace(trace.head, trace.samples)
    return [chunk(data, at, len(datas)) for at, data in enumerate(datas)]


# Laid out by hand.


def test_the_head_by_hand() -> None:
    head, *rest = pack_trace(TraceHead(0x01020304, 0, 0x0506, 0x0708090A), [])
    assert head.hex() == "04030201000006050a090807" + "00" * 12
    assert rest == []


def test_three_samples_a_chunk_and_zeros_behind_the_last() -> None:
    samples = [TraceSample(1, -1, 0x0203, 0x0405), *some_trace(3).samples]
    data = pack_trace(TraceHead(1, 4, 4, 0), samples)
    assert len(data) == 3
    assert data[1][:8].hex() == "0100ffff03020504"
    assert data[2] == data[2][:8] + bytes(16)
    assert all(len(each) == CHUNK_BYTES for each in data)


@pytest.mark.parametrize(
    ("samples", "many"), [(0, 1), (1, 2), (2, 2), (3, 2), (4, 3), (6, 3), (65_535, 21_846)]
)
def test_how_many_chunks(samples: int, many: int) -> None:
    assert chunks_of(samples) == many


@given(traces())
def test_a_trace_comes_back_as_it_was_packed(trace: Trace) -> None:
    data = pack_trace(trace.head, trace.samples)
    assert len(data) == chunks_of(trace.head.samples)
    assert unpack_trace(data) == trace


# What cannot be.


@pytest.mark.parametrize("told", [0, 3, 5])
def test_a_head_for_another_number_of_samples_is_misuse(told: int) -> None:
    with pytest.raises(LocalProtocolError, match=f"a head for {told} samples, and 4 samples"):
        pack_trace(TraceHead(1, told, 0, 0), some_trace(4).samples)


@pytest.mark.parametrize(
    ("head", "sample"),
    [
        (TraceHead(2**32, 1, 0, 0), TraceSample(0, 0, 0, 0)),
        (TraceHead(1, 1, 2**16, 0), TraceSample(0, 0, 0, 0)),
        (TraceHead(1, 1, 0, -1), TraceSample(0, 0, 0, 0)),
        (TraceHead(1, 1, 0, 0), TraceSample(2**15, 0, 0, 0)),
        (TraceHead(1, 1, 0, 0), TraceSample(0, -(2**15) - 1, 0, 0)),
        (TraceHead(1, 1, 0, 0), TraceSample(0, 0, 0, -1)),
    ],
)
def test_a_value_past_its_width_is_misuse(head: TraceHead, sample: TraceSample) -> None:
    with pytest.raises(LocalProtocolError, match="does not fit"):
        pack_trace(head, [sample])


@pytest.mark.parametrize("spoil", [[], [b""], [bytes(23)], [bytes(25)]])
def test_chunks_of_another_length_are_no_trace(spoil: list[bytes]) -> None:
    with pytest.raises(RemoteProtocolError, match="chunks of 24 bytes"):
        unpack_trace(spoil)


@pytest.mark.parametrize("left", [1, 2, 4])
def test_too_few_chunks_and_too_many_are_no_trace(left: int) -> None:
    data = [*pack_trace(some_trace(6).head, some_trace(6).samples), bytes(24)]
    with pytest.raises(RemoteProtocolError, match=f"{left} chunks cannot hold 6 samples"):
        unpack_trace(data[:left])


# Fetching.


def test_the_first_question_is_for_the_head() -> None:
    fetch = TraceFetch()
    assert fetch.missing() == (0, 1)
    assert not fetch.complete
    assert not fetch.absent
    with pytest.raises(LocalProtocolError, match="not complete"):
        fetch.trace()


def test_then_for_the_next_eight_that_lack() -> None:
    fetch, sent = TraceFetch(), chunks(some_trace(40))  # 15 chunks
    assert len(sent) == 15
    fetch.take(sent[0])
    assert fetch.missing() == (1, 0b1111_1111)
    for at in (1, 3, 8):
        fetch.take(sent[at])
    # By hand: 2, 4, 5, 6, 7, 9, 10, 11 lack; as bits from 2 on.
    assert fetch.missing() == (2, 0b11_1011_1101)
    assert fetch.missing(at_most=2) == (2, 0b101)


def test_a_question_reaches_no_further_than_its_mask() -> None:
    fetch, sent = TraceFetch(), chunks(some_trace(300))
    fetch.take(sent[0])
    for at in range(2, 40):
        fetch.take(sent[at])
    first, wanted = fetch.missing()
    # Chunk 1, and none of 40 and above: they are more than 31 further on.
    assert (first, wanted) == (1, 1)
    fetch.take(sent[1])
    assert fetch.missing() == (40, 0b1111_1111)


@pytest.mark.parametrize(("further", "mask"), [(31, 1 | 1 << 31), (32, 1)])
def test_the_last_bit_of_a_question_is_its_thirty_second(further: int, mask: int) -> None:
    """WIRE.md gives `wanted` 32 bits: one more would not go into the message."""
    fetch, sent = TraceFetch(), chunks(some_trace(150))
    lacking = (2, 2 + further)
    for at, each in enumerate(sent):
        if at not in lacking:
            fetch.take(each)
    assert fetch.missing() == (2, mask)
    assert mask < 2**32


def test_a_trace_that_is_not_there_is_told_apart_from_one_that_is_late() -> None:
    fetch = TraceFetch()
    fetch.take(chunk(bytes(24), 0, 0))
    assert fetch.absent
    assert not fetch.complete
    assert fetch.missing() == (0, 0)


@pytest.mark.parametrize(
    ("first", "second"),
    [((0, 3), (1, 4)), ((0, 3), (3, 3)), ((0, 3), (0, 0)), ((0, 0), (0, 3)), ((0, 0), (1, 0))],
)
def test_a_chunk_that_contradicts_those_before_is_refused(
    first: tuple[int, int], second: tuple[int, int]
) -> None:
    fetch = TraceFetch()
    fetch.take(chunk(bytes(24), *first))
    asked = fetch.missing()
    with pytest.raises(RemoteProtocolError, match=f"chunk {second[0]} of {second[1]} fits no"):
        fetch.take(chunk(bytes(24), *second))
    assert fetch.missing() == asked


def test_the_first_copy_of_a_chunk_is_kept() -> None:
    fetch, sent = TraceFetch(), chunks(some_trace(4))
    for each in sent:
        fetch.take(each)
        fetch.take(each._replace(data=b"\xff" * 24))
    assert fetch.trace() == some_trace(4)


def test_all_chunks_that_make_no_trace_are_told_as_such() -> None:
    fetch = TraceFetch()
    head = pack_trace(TraceHead(1, 0, 0, 0), [])[0]
    for at in range(2):
        fetch.take(chunk(head, at, 2))
    assert fetch.complete
    with pytest.raises(RemoteProtocolError, match="2 chunks cannot hold 0 samples"):
        fetch.trace()


@given(trace=traces(), seed=U32, loss=st.floats(0, 0.8), repeat=st.floats(0, 0.5))
def test_any_order_loss_and_repeats_end_with_what_was_packed(
    trace: Trace, seed: int, loss: float, repeat: float
) -> None:
    """The module answers a question with the chunks of its mask; the air does what it likes."""
    rng, fetch, kept = random.Random(seed), TraceFetch(), chunks(trace)
    late: list[TraceChunk] = []
    for _ in range(10_000):
        first, wanted = fetch.missing()
        if not wanted:
            break
        asked = [first + bit for bit in range(32) if wanted >> bit & 1]
        assert len(asked) <= ASK_AT_ONCE
        assert asked[-1] < max(len(kept), 1)
        answers = [kept[at] for at in asked if rng.random() >= loss]
        answers += [each for each in answers if rng.random() < repeat] + late
        late = [each for each in answers if rng.random() < repeat]
        rng.shuffle(answers)
        for each in answers:
            fetch.take(each)
    assert fetch.complete
    assert fetch.trace() == trace


@given(st.lists(st.tuples(U16, U16, st.binary(min_size=24, max_size=24)), max_size=30))
def test_whatever_is_heard_a_fetch_refuses_it_or_goes_on(
    heard: list[tuple[int, int, bytes]],
) -> None:
    fetch = TraceFetch()
    for at, total, data in heard:
        try:
            fetch.take(chunk(data, at % 8, total % 4))
        except RemoteProtocolError:
            continue
        first, wanted = fetch.missing()
        assert first + wanted.bit_length() <= 4
    if fetch.complete:
        try:
            assert len(pack_trace(*fetch.trace())) in (1, 2, 3)
        except RemoteProtocolError:
            assert fetch.missing() == (0, 0)
