"""The decoder on mutated frames; a small part of the long proof."""

from tests.support.mutations import run_mutations


def test_mutated_frames_raise_nothing_and_memory_is_bounded() -> None:
    found = run_mutations(seed=1, frames=50_000)
    # Worth something only if all ways were taken.
    assert found.good > 5_000
    assert found.dropped > 20_000
    assert 0 < found.most_held <= 64
