"""`tumblewire ports`: serial ports, and what is wrong with each.

Owns the checks. Opens nothing: to open a port resets some radios.
"""

import os
from collections.abc import Sequence
from dataclasses import asdict, dataclass

from console.commands.output import print_json, print_line
from console.port import UNKNOWN_HOLDER, holder_of, permission_advice

_FREE = ""


@dataclass(frozen=True, slots=True)
class PortReport:
    """One port; ``trouble`` is what stands in the way of opening it, or empty."""

    device: str
    description: str
    trouble: str


def report_on(device: str, description: str) -> PortReport:
    """Look at one device without opening it."""
    if not os.path.exists(device):
        trouble = "gone"
    elif not os.access(device, os.R_OK | os.W_OK):
        trouble = f"no permission; {permission_advice(device)}"
    else:
        holder = holder_of(device)
        trouble = _FREE if holder == UNKNOWN_HOLDER else f"in use by {holder}"
    return PortReport(device, description, trouble)


def list_ports(as_json: bool) -> int:
    """Print the serial ports of this computer."""
    from serial.tools.list_ports import comports

    reports = [report_on(port.device, _described(port.description)) for port in sorted(comports())]
    if as_json:
        print_json({"ports": [asdict(report) for report in reports]})
        return 0
    for line in _lines(reports):
        print_line(line)
    return 0


def _described(description: str | None) -> str:
    return "" if description in (None, "n/a") else str(description)


def _lines(reports: Sequence[PortReport]) -> list[str]:
    if not reports:
        return ["no serial ports found; plug the bridge in, or try a simulated fleet: sim://"]
    width = max(len(report.device) for report in reports)
    return [
        f"{report.device.ljust(width)}  {report.trouble or 'free'}"
        + (f"  ({report.description})" if report.description else "")
        for report in reports
    ]
