"""A fleet that is not there: virtual modules behind a serial line, reached as bytes alone.

``register`` makes ``sim://`` known to pyserial. Importing this package costs nothing; whatever
is costly is imported where a simulated port is opened.
"""


def register() -> None:
    """Let ``serial.serial_for_url`` find ``sim://`` URLs. May be called any number of times."""
    import serial  # only whoever opens a port needs pyserial

    if __name__ not in serial.protocol_handler_packages:
        serial.protocol_handler_packages.append(__name__)
