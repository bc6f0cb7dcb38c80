"""numpy lanes against a per-step Python loop over one lane at a time, at 10,000 lanes: ratios of one run.

python tests/bench/lanes.py
"""

from __future__ import annotations

import time
from pathlib import Path

from hybgen.law import load
from hybgen.reference import Reference
from hybgen.sil.vectors import Stimulus
from hybgen.step import build

ROOT = Path(__file__).resolve().parent.parent.parent
LANES, STEPS, ONE = 10_000, 100, 300


def main() -> None:
    """Prints microseconds for a step of one lane both ways, and how many times faster the lanes are."""
    print(f"{'law':<12} {'loop':>9} {'lanes':>9} {'times':>7}   microseconds for a step of a lane")
    for path in sorted((ROOT / "specs").glob("*.yaml")):
        made = build(load(path))
        samples = Stimulus.of(made, 5).inputs(max(STEPS, ONE), LANES)
        single = Reference(made)
        start = time.perf_counter()
        for k in range(ONE):
            single._advance({n: a[k, :1] for n, a in samples.items()})
        loop = (time.perf_counter() - start) / ONE
        wide = Reference(made, lanes=LANES)
        start = time.perf_counter()
        for k in range(STEPS):
            wide._advance({n: a[k] for n, a in samples.items()})
        lanes = (time.perf_counter() - start) / (STEPS * LANES)
        print(f"{made.law.name:<12} {loop * 1e6:9.2f} {lanes * 1e6:9.4f} {loop / lanes:7.0f}")


if __name__ == "__main__":
    main()
