"""The serial line: ten bits a byte, in order, never early, and droppable."""

import pytest
from hypothesis import given
from hypothesis import strategies as st

from sim_link.line import Line

S = 1_000_000_000
CHUNKS = st.lists(st.tuples(st.integers(0, 5_000_000), st.binary(max_size=40)), max_size=12)


def test_a_byte_takes_ten_bits() -> None:
    # 9,600 baud, 8N1: 960 bytes a second (common practice of the trade).
    line = Line(9600)
    line.put(bytes(range(1, 200)) * 10, 0)
    assert len(line.take(S)) == 960


def test_nothing_is_early_and_all_arrives() -> None:
    line = Line(1000)  # 10 ms a byte
    line.put(b"abc", 5)
    assert line.take(10_000_004) == b""
    assert line.take(10_000_005) == b"a"
    assert line.take(29_999_999) == b"b"
    assert line.take(30_000_005) == b"c"
    assert line.next_ns is None


@given(st.sampled_from([300, 9600, 115_200, 921_600]), CHUNKS)
def test_bytes_come_out_whole_in_order_and_at_the_rate(
    rate: int, chunks: list[tuple[int, bytes]]
) -> None:
    line, t_ns, sent, got = Line(rate), 0, b"", b""
    for gap_ns, data in chunks:
        t_ns += gap_ns
        line.put(data, t_ns)
        sent += data
        got += line.take(t_ns)
        assert sent.startswith(got)
        assert len(got) <= t_ns * rate // (10 * S)
        assert line.waiting(t_ns) == len(sent) - len(got)
    assert got + line.take(t_ns + len(sent) * 10 * S // rate + S) == sent


def test_next_is_the_end_of_the_frame_on_the_wire() -> None:
    line = Line(10_000)  # 1 ms a byte
    line.put(b"ab\0cd\0", 0)
    assert line.next_ns == 3_000_000
    assert line.take(3_000_000) == b"ab\0"
    assert line.next_ns == 6_000_000


def test_an_idle_line_starts_when_it_is_given_something() -> None:
    line = Line(10_000)
    line.put(b"a", 0)
    line.take(S)
    line.put(b"b", 7 * S)
    assert line.next_ns == 7 * S + 1_000_000


def test_empty_data_is_nothing() -> None:
    line = Line(9600)
    line.put(b"", 0)
    assert line.next_ns is None
    assert line.waiting(0) == 0
    assert line.take(S) == b""


@pytest.mark.parametrize(("at_ns", "arrives"), [(0, b"a"), (1_500_000, b"ab"), (9_000_000, b"abc")])
def test_discard_keeps_the_byte_on_the_wire_and_drops_the_rest(at_ns: int, arrives: bytes) -> None:
    line = Line(10_000)
    line.put(b"abc", 0)
    line.discard(at_ns)
    assert line.take(S) == arrives


def test_after_a_discard_the_line_is_free_at_once() -> None:
    line = Line(10_000)
    line.put(b"x" * 500, 0)
    line.put(b"y" * 500, 0)
    line.discard(2_500_000)
    line.put(b"z", 2_500_000)
    assert line.take(4_000_000) == b"xxxz"
