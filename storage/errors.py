"""The one family of errors that storage raises, split by whose fault it is."""


class StorageError(Exception):
    """Base of everything that storage raises. Its text is one line fit to show a person."""


class StorageMisuseError(StorageError):
    """We misused the log: wrote after closing, asked for a session that is not there."""


class LogUnavailableError(StorageError):
    """The log or the disk below it is bad: full, read-only, locked, not a log of ours."""
