"""What the tests of fixed point share: a law's elaboration looked into, and its trees in exact numbers."""

from __future__ import annotations

import math
import random
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import Any
from unittest import mock

import mpmath

from hybgen.expr.core import BOOL, INT, REAL, Const, Kind, Node, Op, Ref, RefKind
from hybgen.kernels.run import exact
from hybgen.kernels.table import FIXED, kernel
from hybgen.law import read
from hybgen.law.model import Law
from hybgen.step import StepLaw, build
from hybgen.step import fixed as elaboration
from hybgen.step.elaborate import Elaborator
from hybgen.step.model import StepGrid, StepTable
from tests.strategies import law_text

MOST = 2**31 - 1
REFUSED = {"HG204", "HG211", "HG401", "HG421", "HG422"}
"""Why a random law may not be one in fixed32."""
Leaf = tuple[RefKind, str, int | None]


@dataclass(frozen=True)
class Elaborated:
    """A step law with exact constants, what elaborated its expressions, and what came out."""

    made: StepLaw
    expressions: Elaborator
    done: StepLaw


def elaborated(law: Law) -> Elaborated:
    """The law in fixed32. Raises LawError."""
    seen: list[tuple[StepLaw, Elaborator]] = []
    plain = elaboration._Fixed.built

    def watched(self: elaboration._Fixed) -> StepLaw:
        seen.append((self.made, self.expressions))
        return plain(self)

    with mock.patch.object(elaboration._Fixed, "built", watched):
        done = build(law, number="fixed32")
    ((made, expressions),) = seen
    return Elaborated(made, expressions, done)


def random_law(seed: int) -> Law:
    """A random law. Raises LawError."""
    return read(law_text(random.Random(seed), f"law_{seed}").encode(), f"law_{seed}.yaml")


def some_leaves(e: Elaborated, dice: random.Random) -> dict[Leaf, int]:
    """Raw values, at ends or anywhere, for all that the law's expressions read."""
    found: dict[Leaf, int] = {}
    for kind, rows in (
        (RefKind.INPUT, e.made.inputs),
        (RefKind.PARAMETER, e.made.parameters),
        (RefKind.STATE, e.made.states),
    ):
        for row in rows:
            for index in [None] if row.size is None else range(row.size):
                found[(kind, row.name, index)] = some_value(e, kind, row, dice)
    found |= {(RefKind.VALID, u.name, None): dice.randint(0, 1) for u in e.made.inputs}
    return found | {(RefKind.JUMPED, j.name, None): dice.randint(0, 1) for j in e.made.jumps}


def some_value(e: Elaborated, kind: RefKind, row: Any, dice: random.Random) -> int:
    if row.type == REAL:
        _, low, high = e.expressions.leaves[(kind, row.name)]
    elif row.type == BOOL:
        low, high = 0, 1
    elif row.type != INT:
        low, high = 0, len(row.type.values) - 1
    elif kind is RefKind.STATE and row.maximum is None:
        return int(dice.choice(row.values))
    else:
        low, high = (0, row.maximum) if kind is RefKind.STATE else (int(row.low), int(row.high))
    return dice.choice([low, high, max(low, min(high, 0)), *(dice.randint(low, high) for _ in range(3))])


_INTEGERS: dict[str, Callable[..., Any]] = {
    "iadd": lambda a, b: a + b,
    "isub": lambda a, b: a - b,
    "imul": lambda a, b: a * b,
    "ineg": lambda a: -a,
    "iabs": abs,
    "imin": min,
    "imax": max,
    "iclamp": lambda x, low, high: low if x < low else min(x, high),
    "isign": lambda a: (a > 0) - (a < 0),
    "lt": lambda a, b: a < b,
    "le": lambda a, b: a <= b,
    "gt": lambda a, b: a > b,
    "ge": lambda a, b: a >= b,
    "eq": lambda a, b: a == b,
    "ne": lambda a, b: a != b,
    "and": lambda *a: all(a),
    "or": lambda *a: any(a),
    "not": lambda a: not a,
    "finite": lambda a: True,
}


class Raw:
    """Trees of a step law in fixed point, in Python integers; an overflow of 32 bits is an AssertionError."""

    def __init__(self, expressions: Elaborator, leaves: Mapping[Leaf, int]) -> None:
        self.leaves = leaves
        self.definitions = {d.name: d.expr for d in expressions.more}
        self.known: dict[Node, int] = {}

    def of(self, node: Node) -> int:
        """The raw value of a tree."""
        if node not in self.known:
            found = self._of(node)
            assert node.type.kind is not Kind.INT or abs(found) <= MOST, node
            self.known[node] = found
        return self.known[node]

    def _of(self, node: Node) -> int:
        match node:
            case Const():
                return int(node.value)
            case Ref(kind=RefKind.LOCAL):
                return self.of(self.definitions[node.name])
            case Ref():
                return self.leaves[(node.kind, node.name, node.index)]
            case Op(op="select"):
                return self.of(node.args[1 if self.of(node.args[0]) else 2])
            case Op():
                args = [self.of(a) for a in node.args]
                return exact(kernel(node.op, "fixed32"), *args) if node.op in FIXED else int(_INTEGERS[node.op](*args))


class Exact:
    """Trees of a step law with exact constants, in fractions (elementary functions to 100 bits)."""

    def __init__(self, made: StepLaw, leaves: Mapping[Leaf, int], places: Mapping[tuple[RefKind, str], int]) -> None:
        self.leaves, self.places = leaves, places
        self.tables = {t.name: t for t in made.tables}
        self.definitions = {d.name: d.expr for d in made.definitions}
        self.known: dict[Node, Any] = {}

    def of(self, node: Node) -> Any:
        """The value of a tree: a Fraction, int or bool."""
        if node not in self.known:
            self.known[node] = self._of(node)
        return self.known[node]

    def _of(self, node: Node) -> Any:
        match node:
            case Const():
                return node.value
            case Ref(kind=RefKind.LOCAL):
                return self.of(self.definitions[node.name])
            case Ref():
                raw = self.leaves[(node.kind, node.name, node.index)]
                return raw * Fraction(2) ** -self.places[(node.kind, node.name)] if node.type == REAL else raw
            case Op(op="select"):
                return self.of(node.args[1 if self.of(node.args[0]) else 2])
            case Op():
                args = [self.of(a) for a in node.args]
                if node.op in _INTEGERS:
                    return _INTEGERS[node.op](*args)
                return operation(node, args, self.tables.get(node.table))


_REALS: dict[str, Callable[..., Any]] = {
    "add": lambda a, b: a + b,
    "sub": lambda a, b: a - b,
    "mul": lambda a, b: a * b,
    "div": lambda a, b: a / b,
    "neg": lambda a: -a,
    "abs": abs,
    "min": min,
    "max": max,
    "clamp": _INTEGERS["iclamp"],
    "sign": lambda a: Fraction((a > 0) - (a < 0)),
    "floor": lambda a: Fraction(math.floor(a)),
    "to_real": Fraction,
    "to_steps": lambda a: max(0, math.ceil(a)),
}


def operation(node: Op, args: Sequence[Any], table: StepTable | StepGrid | None) -> Any:
    """A real operation, exactly."""
    if isinstance(table, StepTable):
        return line(table.x, table.y, args[0])
    if isinstance(table, StepGrid):
        rows = [line(table.x, [row[j] for row in table.z], args[0]) for j in range(len(table.y))]
        return line(table.y, rows, args[1])
    if node.op in _REALS:
        return _REALS[node.op](*args)
    with mpmath.workprec(250):
        numbers = [mpmath.mpf(a.numerator) / a.denominator for a in args]
        found = turned(numbers[0]) if node.op == "wrap" else getattr(mpmath, node.op)(*numbers)
        return Fraction(int(mpmath.nint(found * 2**100)), 2**100)


def turned(x: Any) -> Any:
    """The angle without its whole turns."""
    return x - 2 * mpmath.pi * mpmath.nint(x / (2 * mpmath.pi))


def line(xs: Sequence[Fraction], ys: Sequence[Fraction], x: Fraction) -> Fraction:
    """Linear between points, held beyond the ends."""
    if x <= xs[0] or x >= xs[-1]:
        return Fraction(ys[0] if x <= xs[0] else ys[-1])
    i = max(k for k in range(len(xs)) if xs[k] <= x)
    return ys[i] + (ys[i + 1] - ys[i]) * (x - xs[i]) / (xs[i + 1] - xs[i])
