"""What the two ends of the air say to each other: bytes to meaning and back.

Usable by either end. It does no I/O and reads no clock: bytes and times come in as arguments,
events go out as return values. WIRE.md describes the format, enough to implement it from.

Reading order: codes (what single numbers mean), message (layouts), frame (messages in a byte
stream), command_memory (the module's side of "at most once"), exchange (the console's side),
rto (how long to wait before sending again), pacing (how fast bytes may be handed to a line),
errors.
"""
