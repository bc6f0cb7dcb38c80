"""What reading the C back costs, against generating it: milliseconds of one run.

python tests/bench/reread.py
"""

from __future__ import annotations

import time
from pathlib import Path

from hybgen.emit import emit
from hybgen.law import load
from hybgen.lower import lower
from hybgen.reread import reread
from hybgen.step import build

ROOT = Path(__file__).resolve().parent.parent.parent


def main() -> None:
    """Prints both times and their ratio for each raft law (the first pass, with its imports, is left out)."""
    print(f"{'law':<12} {'generate':>9} {'reread':>8} {'ratio':>6}   milliseconds")
    for path in sorted((ROOT / "specs").glob("*.yaml")) * 2:
        law = load(path)
        start = time.perf_counter()
        made = build(law)
        files = emit(lower(made))
        made_in = time.perf_counter() - start
        start = time.perf_counter()
        assert reread(made, files) == ()
        read_in = time.perf_counter() - start
        if path in _seen:
            print(f"{law.name:<12} {made_in * 1e3:9.1f} {read_in * 1e3:8.1f} {read_in / made_in:6.2f}")
        _seen.add(path)


_seen: set[Path] = set()

if __name__ == "__main__":
    main()
