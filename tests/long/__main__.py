"""`python -m tests.long`: the long proofs whole; `--part 0.05` does a part of each.

Prints a line of figures for each and exits with 1 where one fails. Seeds count from --seed on;
a piece that fails names its own.
"""

import argparse
import math
import sys
import time
from concurrent.futures import ProcessPoolExecutor

from tests.long.proofs import PROOFS, Figures, Proof, add_up
from tests.support.fuzz_runs import CannotFuzzError


def prove(proof: Proof, part: float, seed: int, pool: ProcessPoolExecutor) -> Figures:
    """Do so much of a proof; return its figures."""
    size = max(1, math.ceil(proof.size * part))
    piece_size = min(proof.piece_size, size)
    count = math.ceil(size / piece_size)
    seeds = range(seed, seed + count)
    return add_up(list(pool.map(proof.piece, seeds, [piece_size] * count)))


def main() -> int:
    """Prove all, or those named."""
    names = [proof.name for proof in PROOFS]
    parser = argparse.ArgumentParser(prog="python -m tests.long", description=__doc__)
    parser.add_argument("names", nargs="*", metavar="NAME", help=f"only these: {', '.join(names)}")
    parser.add_argument("--part", type=float, default=1.0, help="how much of each, 0 to 1")
    parser.add_argument("--seed", type=int, default=1, help="the first piece's seed")
    chosen = parser.parse_args()
    if strange := set(chosen.names) - set(names):
        parser.error(f"no such proof: {', '.join(sorted(strange))}")
    failed = 0
    with ProcessPoolExecutor(max_workers=2) as pool:
        for proof in PROOFS:
            if chosen.names and proof.name not in chosen.names:
                continue
            begun = time.monotonic()
            try:
                figures = prove(proof, chosen.part, chosen.seed, pool)
            except CannotFuzzError as lack:
                failed += 1
                print(f"{proof.name}: {lack}", flush=True)
                continue
            failed += bool(figures["breaches"])
            told = ", ".join(f"{name} {count}" for name, count in figures.items())
            print(f"{proof.name}: {told} ({time.monotonic() - begun:.0f} s)", flush=True)
    print(f"{len(chosen.names or names) - failed} passed, {failed} failed")
    return 1 if failed else 0


if __name__ == "__main__":
    sys.exit(main())
