"""`python -m tests.bench`: each measured number with its limit; `--json` for a program.

Exits with 1 where a limit is missed, so that nobody has to read to notice.
"""

import argparse
import json
import operator
import sys
from collections.abc import Callable
from typing import NamedTuple

from tests.bench.decoding import decode_vs_floor
from tests.bench.fleet import sim_1000_peak_MB, sim_1000_times_real, sim_cost_exponent
from tests.bench.goodput import exchange_goodput_vs_bound
from tests.bench.ingesting import ingest_vs_floor
from tests.bench.measure import Figure
from tests.bench.sealed import sealed_decode_vs_floor


class Bench(NamedTuple):
    """A named number, how it is measured, and the limit it is held to."""

    name: str
    measure: Callable[[], Figure]
    holds: Callable[[float, float], bool]
    limit: float
    words: str


BENCHES = (
    Bench("decode_vs_floor", decode_vs_floor, operator.ge, 0.5, "at least"),
    Bench("ingest_vs_floor", ingest_vs_floor, operator.ge, 0.4, "at least"),
    Bench("sealed_decode_vs_floor", sealed_decode_vs_floor, operator.ge, 0.5, "at least"),
    Bench("exchange_goodput_vs_bound", exchange_goodput_vs_bound, operator.ge, 0.85, "at least"),
    Bench("sim_1000_times_real", sim_1000_times_real, operator.ge, 20.0, "at least"),
    Bench("sim_cost_exponent", sim_cost_exponent, operator.le, 1.1, "at most"),
    Bench("sim_1000_peak_MB", sim_1000_peak_MB, operator.le, 200.0, "at most"),
)


def main() -> int:
    """Measure all, or those named."""
    parser = argparse.ArgumentParser(prog="python -m tests.bench", description=__doc__)
    parser.add_argument("names", nargs="*", help="only these")
    parser.add_argument("--json", action="store_true", help="one JSON object on standard output")
    chosen = parser.parse_args()
    known = {bench.name for bench in BENCHES}
    strange = set(chosen.names) - known
    if strange:
        parser.error(f"no such number: {', '.join(sorted(strange))}; known: {', '.join(known)}")
    missed = 0
    document = {}
    for bench in BENCHES:
        if chosen.names and bench.name not in chosen.names:
            continue
        figure = bench.measure()
        document[bench.name] = figure.as_json()
        met = bench.holds(figure.value, bench.limit)
        missed += not met
        line = f"{bench.name}: {figure.value:.3f} ({bench.words} {bench.limit})"
        print(line + ("" if met else "  MISSED"), file=sys.stderr if chosen.json else sys.stdout)
    if chosen.json:
        print(json.dumps(document, indent=2))
    return 1 if missed else 0


if __name__ == "__main__":
    sys.exit(main())
