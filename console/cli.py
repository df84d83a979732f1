"""The command line: names, options and help of every command.

Owns the words a person types and the exit status: 0 done, 1 ended early, 2 bad input, 3 link or
log lost. What the commands do is in console/commands; it is imported only when needed, so that
help answers at once (scipy alone takes two seconds to import).
"""

import sys
from collections.abc import Callable
from functools import partial
from pathlib import Path
from typing import Any, Final

import click

from console.errors import ConsoleError
from sim_link.options import OPTIONS, Option

_File = partial(click.Path, dir_okay=True, path_type=Path)

link_option = click.option(
    "--link",
    "links",
    multiple=True,
    metavar="URL",
    help="Serial port or any pyserial URL (sim://, socket://, rfc2217://).",
)
log_option = click.option("--log", type=_File(), metavar="FILE", help="Log file.")
json_option = click.option("--json", "as_json", is_flag=True, help="One JSON document.")
operator_option = click.option("--operator", default="", metavar="NAME", help="Who operates.")
rate_option = click.option(
    "--rate",
    "rate_baud",
    default=921_600,
    show_default=True,
    type=click.IntRange(min=300),
    help="Line rate of the serial port, baud.",
)
air_rate_option = click.option(
    "--air-rate",
    "air_rate_bps",
    type=click.IntRange(min=300),
    metavar="BPS",
    help="What the radio carries, bits a second; telemetry is then shared out in slots.",
)
duty_option = click.option(
    "--duty",
    "duty_percent",
    type=click.FloatRange(min=0.0, max=100.0, min_open=True),
    metavar="PERCENT",
    help="Most of the air's time that telemetry may take, with --air-rate; 25.",
)
keys_option = click.option(
    "--keys",
    metavar="FILE",
    help="Key file of a sealed fleet, yours alone; or keyring:NAME.",
)
pace_option = click.option(
    "--pace",
    type=click.FloatRange(min=0.01, max=1000.0),
    help="Rehearse so many times faster, against `simulate --pace` with the same figure.",
)


def example(text: str) -> dict[str, Any]:
    """Help's last lines: one example of the command, left as it is laid out."""
    return {"epilog": f"\b\nExample:\n  {text}"}


@click.group(context_settings={"help_option_names": ["-h", "--help"]})
@click.version_option(package_name="tumblewire")
def tumblewire() -> None:
    """Command a fleet of flywheel-driven robot modules, and log every byte.

    Wheels store energy, cells burn, magnets pinch, modules jump. Local rules come first.
    """


@tumblewire.command(**example("tumblewire live --link /dev/ttyUSB0 --operator Ines"))
@link_option
@log_option
@operator_option
@rate_option
@air_rate_option
@duty_option
@pace_option
@keys_option
def live(links: tuple[str, ...], log: Path | None, **rest: Any) -> int:
    """The console. Without --link: a simulated practice fleet of eight."""
    from console.commands.live import practice_options, run_live
    from console.opening import SessionOptions

    return run_live(SessionOptions(practice_options(links), log, **rest))


@tumblewire.command(**example("tumblewire run speeds --link 'sim://?seed=7&loss=0.1&pace=4'"))
@click.argument("sheet")
@link_option
@log_option
@operator_option
@rate_option
@air_rate_option
@duty_option
@pace_option
@keys_option
@json_option
def run(sheet: str, links: tuple[str, ...], log: Path | None, as_json: bool, **rest: Any) -> int:
    """Carry out a run SHEET without the screens (a file, or the name of a shipped one).

    Without --link: on the simulated practice fleet. Ctrl-C is an all-stop.
    """
    from console.commands.live import practice_options
    from console.commands.run import run_sheet
    from console.opening import SessionOptions
    from console.paths import find_sheet

    options = SessionOptions(practice_options(links), log, **rest)
    return run_sheet(find_sheet(sheet), options, as_json)


@tumblewire.command(**example("tumblewire review --session last"))
@log_option
@click.option("--from", "csv", type=_File(), metavar="FILE.csv", help="Trials from a CSV file.")
@click.option("--session", metavar="SESSION", help="Only this session (a number, or `last`).")
@click.option(
    "--by", metavar="WORDS", help="Group by: module,motion,setting,speed_rpm,session,kind."
)
@click.option("--simulated", "with_simulated", is_flag=True, help="Count simulated with real ones.")
@json_option
def review(by: str | None, as_json: bool, **choice: Any) -> int:
    """Success rates with their intervals."""
    from console.commands.log import ReviewChoice
    from console.commands.log import review as print_review

    return print_review(ReviewChoice(by=by, **choice), as_json)


@tumblewire.command(**example("tumblewire replay last --speed 4"))
@click.argument("session")
@log_option
@click.option("--speed", default=1.0, show_default=True, help="How many times as fast.")
def replay(session: str, log: Path | None, speed: float) -> int:
    """Play a recorded SESSION on the same screen. Never transmits."""
    from console.commands.live import run_replay

    return run_replay(session, log, speed)


@tumblewire.command(**example("tumblewire rebuild last"))
@click.argument("session")
@log_option
@json_option
def rebuild(session: str, log: Path | None, as_json: bool) -> int:
    """Derive a SESSION's tables again from its records."""
    from console.commands.log import rebuild as rebuild_tables

    return rebuild_tables(session, log, as_json)


@tumblewire.command(**example("tumblewire sessions --json"))
@log_option
@json_option
def sessions(log: Path | None, as_json: bool) -> int:
    """What the log holds, a line a session."""
    from console.commands.log import list_sessions

    return list_sessions(log, as_json)


@tumblewire.command(**example("tumblewire ports"))
@json_option
def ports(as_json: bool) -> int:
    """Serial ports, and what is wrong with each."""
    from console.commands.ports import list_ports

    return list_ports(as_json)


@tumblewire.command(**example("tumblewire predict --kind practice:paver --motion pivot"))
@click.option("--kind", required=True, metavar="FILE[:NAME]", help="Fleet file, and which kind.")
@click.option(
    "--motion",
    required=True,
    type=click.Choice(("pivot", "hop", "twist")),
    help="Over an edge, off the floor, or on the spot.",
)
@click.option(
    "--setting", type=click.Choice(("floor", "wall", "crest", "flat")), help="Of a pivot; floor."
)
@click.option(
    "--speed", "speed_rpm", type=float, metavar="RPM", help="Wheel speed; left out: the least."
)
@click.option(
    "--angle",
    "angle_deg",
    type=click.FloatRange(min=1.0, max=3600.0),
    metavar="DEGREES",
    help="How far a twist should turn; 90.",
)
@json_option
def predict(as_json: bool, **question: Any) -> int:
    """What speed a motion needs, what comes of one, and why it may be impossible.

    FILE is a fleet file, or the name of a shipped fleet.
    """
    from console.commands.predict import predict as print_prediction

    return print_prediction(as_json=as_json, **question)


def _fleet_options(command: Callable[..., int]) -> Callable[..., int]:
    """Give a command all options of a simulated fleet, from their one table."""
    for option in reversed(OPTIONS.values()):
        command = _fleet_option(option)(command)
    return command


def _fleet_option(option: Option) -> Callable[[Callable[..., int]], Callable[..., int]]:
    flag = "--" + option.name.replace("_", "-")
    return click.option(
        flag, option.name, metavar="VALUE", help=option.help[:1].upper() + option.help[1:] + "."
    )


@tumblewire.command(**example("tumblewire simulate --pty --loss 0.1 --tally tally.jsonl"))
@click.option("--pty", is_flag=True, help="On a pseudo-terminal; its name is the first line.")
@click.option("--tcp", metavar="HOST:PORT", help="On a TCP port (port 0: any that is free).")
@click.option("--tally", type=_File(), metavar="FILE", help="A JSON line for each command done.")
@_fleet_options
def simulate(pty: bool, tcp: str | None, tally: Path | None, **options: Any) -> int:
    """The simulated fleet in a process of its own, for any program."""
    from console.commands.simulate import simulate as serve

    if pty == (tcp is not None):
        raise click.UsageError("give either --pty or --tcp HOST:PORT")
    return serve(tcp, options, tally)


EXIT_ENDED_EARLY: Final = 1


def main() -> None:
    """Run the command line and exit with its status."""
    try:
        status = tumblewire.main(standalone_mode=False)
    except click.exceptions.Abort:
        status = EXIT_ENDED_EARLY
    except click.ClickException as error:
        error.show()
        status = error.exit_code
    except ConsoleError as error:
        click.echo(f"tumblewire: {error}", err=True)
        status = error.exit_status
    sys.exit(status)
