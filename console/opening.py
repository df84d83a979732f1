"""Opening a session: ports, clock, log, engine, in the order that leaves nothing half done.

Owns that order and what is undone where a later step fails. Knows no screens.
"""

import getpass
import secrets
from collections.abc import Sequence
from dataclasses import dataclass
from importlib.metadata import PackageNotFoundError, version
from pathlib import Path
from typing import Final

from console.airtime import EVERYDAY_DUTY_PERCENT, Channel
from console.clock import SessionClock, next_utc_second, utc_now, utc_seconds
from console.engine import Engine
from console.errors import InputError, LogError
from console.key_file import OpeningStore, default_opening_path, load_keys_from
from console.paths import default_log_path
from console.port import Port, open_port
from console.sealing import ConsoleSeal
from protocol.seal import KeyRing
from storage.errors import StorageError
from storage.records import SessionOpened

PRACTICE_LINK: Final = "sim://?modules=8"


@dataclass(frozen=True, slots=True)
class SessionOptions:
    """What a person chose for a session. ``log`` None: the default place; ``pace`` None: the
    port's own (a simulated one says it), else 1; ``keys``: the key file of a sealed fleet, or
    ``keyring:NAME``; ``air_rate_bps`` None: not known, so modules report as they like; else
    telemetry is on the air for at most ``duty_percent`` of the time, None for the everyday part."""

    links: tuple[str, ...]
    log: Path | None = None
    operator: str = ""
    rate_baud: int = 921_600
    pace: float | None = None
    keys: str | None = None
    air_rate_bps: int | None = None
    duty_percent: float | None = None

    @property
    def channel(self) -> Channel | None:
        """The radio channel of each link, None where its rate is not known. Raises InputError for
        what no channel has, and for a duty without a rate."""
        duty_percent = self.duty_percent
        if self.air_rate_bps is None:
            if duty_percent is not None:
                raise InputError("--duty needs --air-rate: a part of what is not known is nothing")
            return None
        return Channel(
            self.air_rate_bps, EVERYDAY_DUTY_PERCENT if duty_percent is None else duty_percent
        )


def program_name() -> str:
    """Name and version of this program, for the log."""
    try:
        return f"tumblewire {version('tumblewire')}"
    except PackageNotFoundError:
        return "tumblewire, not installed"


def operator_name(given: str) -> str:
    """The operator as given, else the name under which the person is logged in."""
    if given:
        return given
    try:
        return getpass.getuser()
    except (OSError, KeyError, ImportError):
        return "unnamed"


def open_session(options: SessionOptions) -> Engine:
    """Open ports and log and return a started engine.

    Raises InputError, LinkError or LogError; then nothing is left open and no session is in
    the log.
    """
    channel = options.channel
    keys = None if options.keys is None else load_keys_from(options.keys)
    ports: list[Port] = []
    try:
        ports += [open_port(url, options.rate_baud) for url in options.links]
        return _start(ports, options, keys, channel)
    except BaseException:
        for port in ports:
            port.close()
        raise


def _start(
    ports: Sequence[Port], options: SessionOptions, keys: KeyRing | None, channel: Channel | None
) -> Engine:
    from storage.writer import LogWriter

    openings = OpeningStore(default_opening_path())
    epoch = _own_second(options.links) if keys is None else max(utc_seconds(), openings.last() + 1)
    seal = None if keys is None else ConsoleSeal(keys, epoch, openings.remember)
    pace = _common_pace(ports, options.pace)
    clock = SessionClock(pace)
    opened = SessionOpened(
        t_ns=0,
        utc=utc_now(),
        operator=operator_name(options.operator),
        epoch=epoch,
        pace=pace,
        program=program_name(),
        sealed=seal is not None,
        console=1 + secrets.randbelow(0xFFFF_FFFF),
    )
    try:
        log = LogWriter.open(options.log or default_log_path(), opened)
    except StorageError as error:
        raise LogError(str(error)) from error
    engine = Engine(ports, log, clock, opened, seal, channel=channel)
    engine.start()
    return engine


def _own_second(links: Sequence[str]) -> int:
    """An epoch that no session before had: modules would take its first commands for repeats
    of the other's, and answer them from memory without moving. A fleet made with the session
    remembers none."""
    return utc_seconds() if all(map(is_simulated, links)) else next_utc_second()


def is_simulated(link: str) -> bool:
    """Whether a link leads to a fleet that is made as it is opened."""
    return link.startswith("sim://")


def _common_pace(ports: Sequence[Port], given: float | None) -> float:
    paces = {port.pace for port in ports if port.pace != 1.0}
    if given is not None:
        paces.add(given)
    if len(paces) > 1:
        raise InputError(f"the links run at different paces ({sorted(paces)}); give one")
    return paces.pop() if paces else 1.0
