"""What the tests of fixed point share: the elaboration of a law looked into, and its trees in exact numbers."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction
from typing import Any
from unittest import mock

import mpmath

from hybgen.expr.core import Const, Kind, Node, Op, Ref, RefKind
from hybgen.kernels.run import exact
from hybgen.kernels.table import FIXED, kernel
from hybgen.law.model import Law
from hybgen.step import StepLaw, build
from hybgen.step import fixed as elaboration

Key = tuple[RefKind, str, int | None]
Leaves = Mapping[Key, int]


@dataclass(frozen=True)
class Elaborated:
    """A step law with exact constants, its elaboration in the making, and what came out."""

    made: StepLaw
    fixed: elaboration._Fixed
    done: StepLaw


def elaborated(law: Law, step: Fraction | None = None) -> Elaborated:
    """The law in fixed32, with the values of all its real expressions."""
    seen: list[tuple[StepLaw, elaboration._Fixed]] = []

    class Watched(elaboration._Fixed):
        def built(self) -> StepLaw:
            seen.append((self.made, self))
            return super().built()

    with mock.patch.object(elaboration, "_Fixed", Watched):
        done = build(law, step=step, number="fixed32")
    ((made, fixed),) = seen
    return Elaborated(made, fixed, done)


_INTEGERS: dict[str, Any] = {
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
}


class Evaluation:
    """Trees of a step law in fixed point, in Python integers; an overflow of 32 bits is an AssertionError."""

    def __init__(self, done: StepLaw, leaves: Leaves) -> None:
        self.leaves = leaves
        self.definitions = {d.name: d.expr for d in done.definitions}
        self.known: dict[Node, int] = {}

    def of(self, node: Node) -> int:
        if node not in self.known:
            found = self._of(node)
            if node.type.kind is Kind.INT:
                assert abs(found) <= 2**31 - 1, node
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
        args = [self.of(a) for a in node.args]
        return exact(kernel(node.op, "fixed32"), *args) if node.op in FIXED else int(_INTEGERS[node.op](*args))


def real_operation(node: Op, args: list[Any], table: Any) -> Any:
    """The real operation of a law's tree, on exact numbers."""
    match node.op:
        case "add":
            return args[0] + args[1]
        case "sub":
            return args[0] - args[1]
        case "mul":
            return args[0] * args[1]
        case "div":
            return args[0] / args[1]
        case "neg":
            return -args[0]
        case "abs":
            return abs(args[0])
        case "min" | "max":
            return (min if node.op == "min" else max)(args)
        case "clamp":
            x, low, high = args
            return low if x < low else min(x, high)
        case "sign":
            return Fraction((args[0] > 0) - (args[0] < 0))
        case "floor":
            return Fraction(math.floor(args[0]))
        case "lookup":
            return line(table.x, table.y, args[0])
        case "lookup2":
            return line(table.y, [line(table.x, [row[j] for row in table.z], args[0]) for j in range(len(table.y))], args[1])  # fmt: skip
    function = (lambda x: x - 2 * mpmath.pi * mpmath.nint(x / (2 * mpmath.pi))) if node.op == "wrap" else getattr(mpmath, node.op)  # fmt: skip
    with mpmath.workprec(200):
        found = function(*(mpmath.mpf(a.numerator) / a.denominator for a in args))
        return Fraction(int(mpmath.nint(found * 2**100)), 2**100)


def line(xs: Any, ys: Any, x: Fraction) -> Fraction:
    """Linear between points, held beyond the ends."""
    if x <= xs[0] or x >= xs[-1]:
        return Fraction(ys[0] if x <= xs[0] else ys[-1])
    i = max(k for k in range(len(xs)) if xs[k] <= x)
    return Fraction(ys[i] + (ys[i + 1] - ys[i]) * (x - xs[i]) / (xs[i + 1] - xs[i]))


__all__ = ["Elaborated", "Evaluation", "elaborated", "real_operation"]
