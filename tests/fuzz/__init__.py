"""Targets for coverage-guided fuzzers; tests/long runs them."""

FRAMES_A_RUN = 2
"""Each input of the decoder's target is tried as bytes of the stream, and as a frame's payload."""
