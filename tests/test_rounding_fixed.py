"""Fixed point: what is computed is as near to the law as is stated; rounding never causes a jump."""

from __future__ import annotations

import math
import random
from collections.abc import Iterator
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import numpy as np

from hybgen.diag.finding import LawError
from hybgen.expr.core import INT, Const, Kind, Node, Op, Ref, RefKind
from hybgen.law import read
from hybgen.law.model import Law
from hybgen.numbers.format import FIXED32
from hybgen.numbers.rounding import leaves_of
from hybgen.reference.ops import operations
from hybgen.step import build
from tests.strategies import law_text
from tests.test_rounding import Bench


@dataclass
class FixedBench(Bench):
    """The jump conditions of a law, exact and on raw values."""

    def __post_init__(self) -> None:
        self.number = "float64"
        super().__post_init__()
        self.made_law = build(self.law, number="fixed32")
        self.bodies = {d.name: d.expr for d in self.made_law.definitions}
        self.operations = operations(FIXED32)

    def raw(self, key: Any, value: Any) -> Any:
        places = self.made_law.places.get(key[:2])
        return np.int32(value * Fraction(2) ** places) if places is not None else np.int32(value)

    def some(self, ref: Ref, dice: random.Random) -> Any:
        found = super().some(ref, dice)
        return (
            found
            if ref.type.kind is not Kind.REAL or ref.name in self.margins.domain.timers
            else self.on_grid(ref, found)
        )

    def on_grid(self, ref: Ref, value: Fraction) -> Fraction:
        """The nearest value that a raw one stands for, inside the range."""
        unit = Fraction(2) ** self.made_law.places[(ref.kind, ref.name)]
        low, high = self.margins.domain.leaves[(ref.kind, ref.name)]
        least, most = math.ceil(low * unit), math.floor(high * unit)
        return Fraction(max(least, min(most, round(value * unit)))) / unit

    def evaluate(self, node: Node, values: dict[Any, Any]) -> Any:
        """An expression on raw values."""
        match node:
            case Const():
                return np.int32(node.value) if node.type == INT else node.value
            case Ref(kind=RefKind.LOCAL):
                return self.evaluate(self.bodies[node.name], values)
            case Ref():
                value = values[(node.kind, node.name, node.index)]
                if node.kind is RefKind.STATE and node.name in self.margins.domain.timers:
                    return np.int32(round(value / self.margins.domain.timers[node.name]))
                return self.raw((node.kind, node.name), value)
            case Op():
                return self.operations[node.op](*(self.evaluate(a, values) for a in node.args))


def benches(seeds: range) -> Iterator[FixedBench]:
    for seed in seeds:
        try:
            law: Law = read(law_text(random.Random(seed), "law").encode(), "law.yaml")
            if law.thresholds == "safe":
                yield FixedBench(law, "fixed32")
        except LawError:
            continue


def shifted(bench: FixedBench, atom: Op, values: dict[Any, Any], dice: random.Random) -> dict[Any, Any]:
    """A few units aside along one leaf."""
    leaves = [k for k in leaves_of(atom, bench.margins.domain) if k[:2] in bench.made_law.places]
    if not leaves:
        return values
    key = dice.choice(leaves)
    unit = Fraction(2) ** -bench.made_law.places[key[:2]]
    low, high = bench.margins.domain.leaves[key[:2]]
    moved = bench.on_grid(Ref(key[0], key[1], INT), values[key]) + dice.randint(-3, 3) * unit
    return {**values, key: moved if low <= moved <= high else values[key]}


def test_rounding_never_causes_a_jump_in_fixed_point() -> None:
    tried = jumps = late = 0
    for bench in benches(range(2000, 2180)):
        dice = random.Random(4)
        for jump, made in zip(bench.law.jumps, bench.made_law.jumps, strict=True):
            exact = bench.translator.exact(jump.condition)
            if bench.uses_elementary(exact) or any(bench.margins.timer(n) for n in bench.everything(exact)):
                continue
            atoms = [n for n in bench.everything(exact) if isinstance(n, Op) and bench.margins.computed(n)]
            for _ in range(30):
                values = bench.point(exact, dice)
                if atoms:
                    atom = dice.choice(atoms)
                    near = bench.near(atom, dice)
                    values |= shifted(bench, atom, near, dice) if near is not None else {}
                values = {
                    k: bench.on_grid(Ref(k[0], k[1], INT), v) if k[:2] in bench.made_law.places else v
                    for k, v in values.items()
                }
                law_says = bool(bench.exact(exact, values))
                c_says = bool(bench.evaluate(made.condition, values))
                tried, jumps, late = tried + 1, jumps + c_says, late + (law_says and not c_says)
                assert law_says or not c_says, (bench.law.digest, jump.name, values)
    assert tried > 3000 and jumps > 500 and 0 < late < tried / 5
