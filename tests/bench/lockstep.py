"""Lock-step, comparison included, against a bare loop of the same C over the same samples: ratios of one run.

python tests/bench/lockstep.py
"""

from __future__ import annotations

import time
from pathlib import Path

import numpy as np

from hybgen.law import load
from hybgen.reference import Reference
from hybgen.reference.machine import layout
from hybgen.sil import Chip
from hybgen.sil.chip import struct
from hybgen.sil.lockstep import compared
from hybgen.sil.vectors import Stimulus
from hybgen.step import build

ROOT = Path(__file__).resolve().parent.parent.parent
LANES, STEPS = 8192, 300


def main() -> None:
    """Prints nanoseconds for a step of a lane, and the ratio bare C / lock-step (1 would be as fast as the bare loop)."""
    print(
        f"{'law':<12} {'bare C':>8} {'lock-step':>10} {'ratio':>6}   ns for a step of a lane; {LANES} lanes, {STEPS} steps"
    )
    for path in sorted((ROOT / "specs").glob("*.yaml")):
        made = build(load(path))
        samples = Stimulus.of(made, 5).inputs(STEPS, LANES)
        chip, bare, reference = Chip(made, lanes=LANES), Chip(made, lanes=LANES), Reference(made, lanes=LANES)
        u = np.zeros((STEPS, LANES), struct(made, "inputs"))
        for name, _, _ in layout(made, "inputs"):
            u[name] = samples[name]
        bare.many(u[:1])
        bare.reset()
        start = time.perf_counter()
        bare.many(u)
        alone = time.perf_counter() - start
        start = time.perf_counter()
        for k in range(STEPS):
            now = {n: a[k] for n, a in samples.items()}
            outputs = reference._advance(now)
            assert compared(reference, chip, outputs, chip._advance(now)) is None
        both = time.perf_counter() - start
        scale = 1e9 / (LANES * STEPS)
        print(f"{made.law.name:<12} {alone * scale:8.1f} {both * scale:10.1f} {alone / both:6.2f}")


if __name__ == "__main__":
    main()
