"""How sharp the bounds of rounding errors of jump conditions are: the bound against the worst error seen next to the surface.

python -m tests.bench.rounding
"""

from __future__ import annotations

import random
import time
from fractions import Fraction

from hybgen.expr.core import Op
from hybgen.numbers.rounding import Difference
from tests.test_rounding import Bench
from tests.test_rounding_bounds import bench_of

SAMPLES = 6000
CONDITIONS = [
    "u / 3 + w / 3 >= 0.3",
    "0.3 * u + 0.7 * v - 0.2 * w >= 0.1",
    "u * w >= 0.35",
    "u * u + v * v + w * w - 0.7 * u * v >= 0.9",
    "v + 0.37 * w * abs(w) >= 0.2",
    "u / (w + 0.3) >= 0.7",
    "clamp(3 * v, -0.9, 0.9) + u >= 1.1",
    "choose(w > 0.5, 3 * v - 0.7, u - 0.3 * w) >= 0.1",
    "3 * curve(u) >= 0.55",
    "field(u, v) - 0.35 * w >= 0.1",
    "u * 12 + lo >= hi * 9",
    "(u + 0.1) * (v + 1.3) / (w + 0.7) - lo * hi >= 0.6",
]


def worst_seen(bench: Bench, atom: Op, bound: float, dice: random.Random) -> float:
    """The largest |computed - exact| of left - right at points where the two can differ in sign."""
    worst = Fraction(0)
    for _ in range(SAMPLES):
        values = bench.near(atom, dice)
        assert values is not None
        left, right = (bench.exact(a, values) for a in atom.args)
        if abs(left - right) > Fraction(bound):
            continue
        computed = float(bench.computed(bench.translator.translate(atom.args[0]), values))
        other = Fraction(float(bench.computed(bench.translator.translate(atom.args[1]), values)))
        exact_right = right if not isinstance(atom.args[1], Op) else other
        worst = max(worst, abs(Fraction(computed) - exact_right - (left - right)))
    return float(worst)


def main() -> None:
    """Prints a line for each condition."""
    print(f"{'condition':<56} {'bound':>9} {'worst':>9} {'ratio':>6} {'ms':>6}   float32")
    for condition in CONDITIONS:
        bench = bench_of(condition, "float32")
        atom = next(iter(bench.atoms()))
        start = time.perf_counter()
        bound = Difference(atom.args[0], atom.args[1], bench.margins.domain, True).error()
        spent = time.perf_counter() - start
        worst = worst_seen(bench, atom, bound, random.Random(11))
        print(f"{condition:<56} {bound:9.2e} {worst:9.2e} {bound / worst:6.2f} {spent * 1e3:6.1f}")


if __name__ == "__main__":
    main()
