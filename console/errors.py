"""The one family of errors that the console raises, split by whose fault it is.

Each text is one line that a person can act on: what, where, and what to do.
"""


class ConsoleError(Exception):
    """Base of everything that console raises."""

    exit_status = 2


class InputError(ConsoleError):
    """What the person gave cannot be used: an order, a sheet, an option, a file."""


class LinkError(ConsoleError):
    """The link is bad: a port that is missing, taken, forbidden, or that went away."""

    exit_status = 3


class LogError(ConsoleError):
    """The log is bad, or was lost."""

    exit_status = 3


class EngineError(ConsoleError):
    """The engine failed by a fault of its own; every wheel was told to rest."""

    exit_status = 3
