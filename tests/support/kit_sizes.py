"""What the C kit takes of a small processor: code, kept memory, and the deepest stack.

    python -m tests.support.kit_sizes FOLDER CROSS_PREFIX MOST_CODE MOST_RAM

Owns the reading of what the cross compiler left in FOLDER: objects, and its graph of calls with
the stack of each function (gcc's -fcallgraph-info=su). Exits with 1 where a limit is passed, and
where a function calls itself by any way round, since then no depth can be told. What a hook of
the board takes is not counted.
"""

import re
import subprocess
import sys
from pathlib import Path
from typing import Final

_NODE: Final = re.compile(r'node: \{ title: "([^"]+)" label: "[^"]*\\n(\d+) bytes \(([^)]*)\)')
_EDGE: Final = re.compile(r'edge: \{ sourcename: "([^"]+)" targetname: "([^"]+)"')
_CODE: Final = (".text", ".rodata")
_LIBRARY_BYTES: Final = 24
"""What a function of the C library or the compiler's may take: copying, comparing, division. Those
of newlib's small edition for this processor push at most five registers (from their code)."""
_HOOK: Final = "__indirect_call"


class Calls:
    """Who calls whom, and what each takes of the stack, in bytes."""

    def __init__(self, graphs: list[str]) -> None:
        self.bytes_of: dict[str, int] = {}
        self.callees: dict[str, set[str]] = {}
        for text in graphs:
            for name, stack, how in _NODE.findall(text):
                if how != "static":
                    raise SystemExit(f"{name} takes a stack that is not fixed")
                self.bytes_of[name] = int(stack)
            for caller, callee in _EDGE.findall(text):
                self.callees.setdefault(caller, set()).add(callee)

    def deepest(self, name: str, above: tuple[str, ...] = ()) -> tuple[int, tuple[str, ...]]:
        """The deepest chain from a function down. Raises SystemExit for one that calls itself."""
        if name in above:
            raise SystemExit(f"{name} calls itself: {' > '.join((*above, name))}")
        below = [self.deepest(each, (*above, name)) for each in self.callees.get(name, ())]
        most, chain = max(below, default=(0, ()))
        unknown = 0 if name == _HOOK else _LIBRARY_BYTES
        return self.bytes_of.get(name, unknown) + most, (name, *chain)


def _tool(prefix: str, *words: str) -> str:
    done = subprocess.run(
        [prefix + words[0], *words[1:]], capture_output=True, text=True, check=True
    )
    return done.stdout


def code_bytes(prefix: str, objects: list[Path]) -> dict[str, int]:
    """Text and constants by file."""
    found = {}
    for path in objects:
        rows = [line.split() for line in _tool(prefix, "size", "-A", str(path)).splitlines()]
        found[path.stem] = sum(int(row[1]) for row in rows if row and row[0].startswith(_CODE))
    return found


def state_bytes(prefix: str, path: Path) -> int:
    """Size of the struct a module keeps."""
    rows = [line.split() for line in _tool(prefix, "nm", "-S", str(path)).splitlines()]
    return next(int(row[1], 16) for row in rows if row[-1] == "state")


def main(folder: Path, prefix: str, most_code: int, most_ram: int) -> int:
    """Show all and say whether it fits."""
    kept = folder / "sizes.o"
    codes = code_bytes(prefix, sorted(each for each in folder.glob("tw_*.o")))
    for name, size in codes.items():
        print(f"{size:6d}  {name}")
    calls = Calls([each.read_text() for each in sorted(folder.glob("*.ci"))])
    stack, chain = max(calls.deepest(each) for each in list(calls.bytes_of))
    state = state_bytes(prefix, kept)
    print("deepest:", " > ".join(each.rpartition(":")[2] for each in chain))
    code, ram = sum(codes.values()), state + stack
    print(f"code {code} of {most_code}")
    print(f"RAM {ram} (state {state}, stack {stack}) of {most_ram}")
    return int(code > most_code or ram > most_ram)


if __name__ == "__main__":
    place, cross, *limits = sys.argv[1:]
    sys.exit(main(Path(place), cross, *(int(each) for each in limits)))
