"""The one family of errors that sim_link raises, split by whose fault it is."""


class SimError(Exception):
    """Base of everything that sim_link raises. Its text is one line fit to show a person."""


class SimInputError(SimError):
    """What the simulator was given cannot be used: an option, a fleet file, a kind.

    ``where`` is the file, URL or table it stands in, ``key`` the option or key that is wrong,
    ``expected`` what would have been right.
    """

    def __init__(self, where: str, key: str, expected: str) -> None:
        super().__init__(f"{where}: {key}: {expected}")
        self.where = where
        self.key = key
        self.expected = expected


class SimStateError(SimError):
    """We misused the simulator: a value no caller may pass, a call out of turn."""
