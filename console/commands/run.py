"""`tumblewire run`: a run sheet without the screens.

Owns the progress bars, what signals do, and the object that ``--json`` prints. An interrupt is
an all-stop: it goes out at once, is confirmed, and then the program ends.
"""

import sys
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any

import click

from console.commands.output import print_json, print_line, say
from console.commands.stopping import await_confirmation, stop_on_signal
from console.dispatch import SheetRun, Tally, TrialEnd
from console.opening import SessionOptions, open_session
from console.sheet import Sheet, load_sheet, plan
from console.view import Outcome


def run_sheet(sheet_path: Path, options: SessionOptions, as_json: bool) -> int:
    """Run a sheet; return the exit status. Raises ConsoleError before anything has moved."""
    sheet = load_sheet(sheet_path)
    trials = plan(sheet)
    engine = open_session(options)
    try:
        with stop_on_signal(engine):
            engine.open_sheet(sheet_path.name, sheet.text, sheet.seed, len(trials))
            with _progress(sheet, len(trials)) as told:
                run = SheetRun(engine, sheet, trials, told)
                tally = run.run()
            engine.close_sheet(tally.stopped or "")
            if tally.stopped is not None and engine.view().stop.in_force:
                await_confirmation(engine)
        simulated = engine.view().simulated
    finally:
        engine.close()
    trouble = engine.log_trouble()  # closing may have mended it, or found it
    answer = _document(engine.session, sheet_path.name, tally, simulated)
    if as_json:
        print_json(answer)
    else:
        _print_summary(answer)
    if trouble:
        say(f"tumblewire: the log lost something: {trouble}")
        return 3
    if tally.lost:
        say(f"tumblewire: {tally.stopped}")
        return 3
    return 0 if tally.stopped is None else 1


@contextmanager
def _progress(sheet: Sheet, planned: int) -> Iterator[Callable[[TrialEnd], None]]:
    """Show one bar for the sheet on a terminal; elsewhere a line for each end that matters."""
    if not sys.stderr.isatty():
        yield lambda end: None
        return
    counts: dict[Outcome, int] = {}
    bar: Any
    with click.progressbar(
        length=planned,
        label=sheet.title[:24],
        width=0,  # as wide as the terminal leaves room for, so that no line wraps
        file=sys.stderr,
        item_show_func=lambda _: "  ".join(f"{count} {each}" for each, count in counts.items()),
        show_pos=True,
    ) as bar:

        def told(end: TrialEnd) -> None:
            counts[end.outcome] = counts.get(end.outcome, 0) + 1
            bar.update(1, end.trial)

        yield told


def _document(session: int, sheet: str, tally: Tally, simulated: bool) -> dict[str, Any]:
    return {
        "session": session,
        "sheet": sheet,
        "planned": tally.planned,
        "started": tally.started,
        "ended": {outcome.value: tally.ended[outcome.value] for outcome in Outcome},
        "commands": tally.commands,
        "resends": tally.resends,
        "repeats_ignored": tally.repeats_ignored,
        "stopped": tally.stopped,
        "simulated": simulated,
    }


def _print_summary(answer: dict[str, Any]) -> None:
    mark = " SIMULATED" if answer["simulated"] else ""
    ended = ", ".join(f"{count} {name}" for name, count in answer["ended"].items() if count)
    print_line(f"session {answer['session']}{mark}: {answer['sheet']}")
    print_line(f"trials: {answer['planned']} planned, {answer['started']} started; {ended or '-'}")
    print_line(
        f"commands: {answer['commands']}, sent again {answer['resends']} times, "
        f"{answer['repeats_ignored']} repeated answers ignored"
    )
    if answer["stopped"] is not None:
        print_line(f"stopped early: {answer['stopped']}")
