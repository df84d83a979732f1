"""What a large simulated fleet costs: virtual time a second, growth with its size, memory.

Each module reports once a second; one in two hundred starts a motion each second, spins up, brakes
and tumbles. Permits are those of a rehearsal at pace 20: of twenty seconds, to everyone, every two.
Only the simulator is measured: frames are put together and read here by the few lines that a radio
would have.
"""

import gc
import math
import resource
import subprocess
import sys
import time
from pathlib import Path
from statistics import linear_regression, median

from protocol.codes import CONSOLE_ADDRESS, EVERYONE_ADDRESS, Setting, identity_bits
from protocol.frame import frame
from protocol.message import Message, Packet, Permit, Pivot, Probe, RollCall, encode
from sim_link.module import VirtualModule
from sim_link.options import SimOptions
from sim_link.world import World
from tests.bench.measure import Figure

SIZES = (100, 300, 1000, 4000)
MODULES = 1000
VIRTUAL_S = 10.0
WARM_UP_S = 60.0
"""Until most cells have settled after the start, as in a fleet that has been on for a while."""
ROUNDS = 3
FLEET = Path("orangery")
RATE_BAUD = 20_000_000
"""So fast that the serial line is not what is measured."""
_MS, _S = 1_000_000, 1_000_000_000
_EPOCH, _CONSOLE = 1_700_000_000, 77
_PERMIT_MS = 20_000
_PERMIT_EACH_S = 2
_SPEED_RPM = 4_700
_STEP_NS = 50 * _MS


class Drill:
    """A fleet that is called, told its clocks, and then kept moving."""

    def __init__(self, modules: int) -> None:
        fleet = SimOptions(modules=modules, seed=3, rate=RATE_BAUD, fleet=FLEET)
        self.world = World(fleet)
        self.received = 0
        self._t_ns = 0
        self._next = 0
        self._numbers = [0] * modules
        self._say(EVERYONE_ADDRESS, RollCall(_EPOCH, _CONSOLE))
        self._pass(200 * _MS)
        for module in self.world.modules:
            bits, now_ms = identity_bits(module.spec.identity), self._t_ns // _MS
            offset_ms = (module.box.boot.time.ms(self._t_ns) - now_ms) % 2**32
            probe = Probe(_CONSOLE, module.boot, 1, bits, offset_ms, 5)
            self._say(module.spec.address, probe)
        self._pass(500 * _MS)

    def run(self, seconds: float) -> None:
        """Let so much fleet time pass."""
        for second in range(round(seconds)):
            if second % _PERMIT_EACH_S == 0:
                self._say(EVERYONE_ADDRESS, Permit(_CONSOLE, self._t_ns // _MS + _PERMIT_MS))
            self._start_motions()
            self._pass(_S)

    def _start_motions(self) -> None:
        modules = self.world.modules
        for _ in range(max(1, len(modules) // 200)):
            self._order(modules[self._next], self._next)
            self._next = (self._next + 1) % len(modules)

    def _order(self, module: VirtualModule, place: int) -> None:
        self._numbers[place] += 1
        latest_ms = (module.box.boot.time.ms(self._t_ns) + 5_000) % 2**32
        bits = identity_bits(module.spec.identity)
        words = (_EPOCH, module.boot, self._numbers[place], bits, latest_ms)
        self._say(module.spec.address, Pivot(*words, 0, Setting.FLOOR, 1, _SPEED_RPM))

    def _say(self, address: int, message: Message) -> None:
        packet = Packet(address, CONSOLE_ADDRESS, message)
        self.world.write(frame(encode(packet)), self._t_ns)

    def _pass(self, duration_ns: int) -> None:
        end_ns = self._t_ns + duration_ns
        while self._t_ns < end_ns:
            self._t_ns = min(self._t_ns + _STEP_NS, end_ns)
            self.received += len(self.world.read(self._t_ns))


def cost_s(drill: Drill, seconds: float) -> float:
    """Processor time of so much fleet time."""
    begun = time.process_time()
    drill.run(seconds)
    return time.process_time() - begun


def sim_1000_times_real() -> Figure:
    """Fleet seconds a second of one core, with a thousand modules."""
    drill = Drill(MODULES)
    drill.run(WARM_UP_S)
    gc.collect()
    gc.freeze()  # as the simulator's own process does
    spent_s = median(cost_s(drill, VIRTUAL_S) for _ in range(ROUNDS))
    return Figure(VIRTUAL_S / spent_s, VIRTUAL_S, spent_s, ROUNDS)


def sim_cost_exponent() -> Figure:
    """Slope of the logarithm of cost over that of the fleet's size; 1 where it is in proportion."""
    drills = [Drill(size) for size in SIZES]
    for drill in drills:
        drill.run(1.0)
    logs = [math.log(size) for size in SIZES]
    slopes = []
    for _ in range(ROUNDS):
        costs = [
            cost_s(drill, _span_s(size)) / _span_s(size)
            for drill, size in zip(drills, SIZES, strict=True)
        ]
        slopes.append(linear_regression(logs, [math.log(cost) for cost in costs]).slope)
    return Figure(median(slopes), costs[-1], costs[0], ROUNDS)


def _span_s(size: int) -> float:
    """Longer for small fleets, so that each is measured over a good part of a second."""
    return max(2.0, round(4000 / size))


def sim_1000_peak_MB() -> Figure:
    """Largest memory of a process that does nothing else, interpreter and NumPy included."""
    words = [sys.executable, "-c", "from tests.bench.fleet import peak; peak()"]
    run = subprocess.run(words, capture_output=True, text=True, check=True)
    return Figure(float(run.stdout), float(run.stdout), 1.0, 1)


def peak() -> None:
    """Print the peak of this process in megabytes, after a thousand modules lived for a while."""
    Drill(MODULES).run(VIRTUAL_S)
    print(resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024.0)
