"""`tumblewire predict`: what a motion needs and does, before anybody's wheel turns.

Owns the reading of the question from the command line, and the answer as a text. The figures are
sim_link's.
"""

from dataclasses import asdict
from pathlib import Path
from typing import TYPE_CHECKING, Final

from console.commands.output import print_json, print_line
from console.errors import InputError

if TYPE_CHECKING:
    from sim_link.kinds import Kind
    from sim_link.prediction import Prediction, Question

MOTIONS: Final = ("pivot", "hop", "twist")
SETTINGS: Final = ("floor", "wall", "crest", "flat")


def predict(
    kind: str,
    motion: str,
    *,
    setting: str | None,
    speed_rpm: float | None,
    angle_deg: float | None,
    as_json: bool,
) -> int:
    """Print the prediction. Raises InputError for a file, a kind or options that do not fit."""
    from sim_link.deed import Deed
    from sim_link.errors import SimError
    from sim_link.prediction import Question, predict

    if setting is not None and motion != "pivot":
        raise InputError(f"--setting is for a pivot; a {motion} has none")
    if angle_deg is not None and motion != "twist":
        raise InputError(f"--angle is for a twist; a {motion} turns as far as its faces lie")
    deed = Deed[((setting or "floor") if motion == "pivot" else motion).upper()]
    try:
        question = Question(_kind(kind), deed, speed_rpm, 90.0 if angle_deg is None else angle_deg)
        found = predict(question)
    except SimError as error:
        raise InputError(str(error)) from error
    if as_json:
        print_json(asdict(found))
    else:
        for line in lines(question, found):
            print_line(line)
    return 0


def _kind(given: str) -> "Kind":
    """Read ``FILE[:NAME]``; a bare name before the colon may be that of a shipped fleet."""
    from sim_link.fleet_file import load_kinds

    if Path(given).exists():  # a name may hold a colon of its own
        file, name = given, ""
    else:
        file, _, name = given.rpartition(":") if ":" in given else (given, "", "")
    kinds = load_kinds(Path(file))
    known = ", ".join(kinds)
    if name:
        if name not in kinds:
            raise InputError(f"--kind {given}: no kind {name!r}; known are {known}")
        return kinds[name]
    if len(kinds) != 1:
        raise InputError(f"--kind {given}: which of {known}? Add :NAME")
    return next(iter(kinds.values()))


def lines(question: "Question", found: "Prediction") -> list[str]:
    """The prediction for a person to read: first whether it can be done, then the figures."""
    asked = found.inputs
    where = f" ({asked['setting']})" if "setting" in asked else ""
    rows = [
        ("possible", "yes" if found.feasible else f"no: {found.reason}"),
        ("brake's torque", _of(found.torque_margin, "times what it needs", 2)),
        ("least speed", _of(found.w_min_rpm, "rpm")),
        ("with an ideal brake", _of(found.w_ideal_rpm, "rpm")),
        ("a further face from", _of(found.w_over_rpm, "rpm")),
        ("leaves the floor from", _of(found.lift_off_rpm, "rpm")),
        *_at_speed(question, found),
    ]
    return [
        f"{question.kind.name}, {asked['motion']}{where}",
        *(f"  {name:<22} {value}" for name, value in rows if value),
    ]


def _at_speed(question: "Question", found: "Prediction") -> list[tuple[str, str]]:
    if found.wheel_energy_J is None:
        return []
    given = "as given" if question.speed_rpm is not None else "the least"
    turned = f"{found.outcome}, turned by {_of(found.turned_deg, 'degrees')}"
    return [
        ("at speed", f"{_of(found.at_speed_rpm, 'rpm')}, {given}"),
        ("comes of it", turned if found.outcome else ""),
        ("rises by", _of(found.hop_rise_mm, "mm", 1)),
        ("brake holds for", _of(found.brake_ms, "ms", 2)),
        ("body then turned by", _of(found.lock_angle_deg, "degrees", 1)),
        ("wheel's energy", _of(found.wheel_energy_J, "J", 2)),
        ("gentle rest instead", _of(found.rest_ms, "ms")),
        ("a full cell has", _of(found.motions_left, "such motions in it")),
    ]


def _of(value: float | None, unit: str, digits: int = 0) -> str:
    return "" if value is None else f"{value:,.{digits}f} {unit}"
