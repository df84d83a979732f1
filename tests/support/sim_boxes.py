"""Boxes for tests of a virtual module's rooms: clock told, permit given, nothing on its way."""

from protocol.message import Probe
from sim_link.box import Boot, Box
from sim_link.drive import Drive
from sim_link.fleet_file import ModuleSpec
from sim_link.module_time import ModuleTime
from sim_link.randomness import Draws
from sim_link.settings import Settings
from tests.support.virtual_console import CONSOLE, EPOCH, MS, permit, spec_of

BOOT = 7


def boxed(spec: ModuleSpec | None = None, boot_ns: int = 0, seed: int = 3) -> Box:
    """A box that may drive for 50 s from its boot on."""
    spec = spec_of() if spec is None else spec
    boot = Boot(BOOT, spec.identity, ModuleTime(boot_ns))
    boot.allegiance.roll_call(EPOCH, CONSOLE, 0)
    boot.allegiance.hear_probe(Probe(CONSOLE, BOOT, 1, 1, -boot_ns // MS % 2**32, 5), 0)
    boot.allegiance.hear_permit(permit(boot_ns), 0)
    return Box(spec, Drive(spec, Draws(seed, spec.identity)), Settings(spec), boot)
