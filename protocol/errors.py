"""The one family of errors that protocol raises, split by whose fault it is."""


class ProtocolError(Exception):
    """Base of everything that protocol raises."""


class LocalProtocolError(ProtocolError):
    """We misused the protocol: a field out of range, a message that cannot be sent."""


class RemoteProtocolError(ProtocolError):
    """The peer's bytes are bad: an unknown message code, a body of the wrong length."""
