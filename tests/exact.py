"""The trees of a law evaluated in exact fractions: what the author wrote, in real numbers."""

from __future__ import annotations

from collections.abc import Mapping
from fractions import Fraction
from typing import Any

from hybgen.expr.core import Const, Node, Op, Ref, RefKind
from hybgen.law.model import Grid, Table

Values = Mapping[tuple[RefKind, str, int | None], Any]


def line(x: Fraction, xs: tuple[Fraction, ...], ys: tuple[Fraction, ...]) -> Fraction:
    """Linear between points, held beyond the ends."""
    if x <= xs[0] or x >= xs[-1]:
        return ys[0] if x <= xs[0] else ys[-1]
    i = max(k for k in range(len(xs)) if xs[k] <= x)
    return ys[i] + (ys[i + 1] - ys[i]) * (x - xs[i]) / (xs[i + 1] - xs[i])


def evaluate(
    node: Node, values: Values, terms: Mapping[tuple[str, int | None], Node], tables: Mapping[str, Table | Grid]
) -> Any:
    """The exact value. Raises ZeroDivisionError, KeyError for an elementary function."""

    def of(n: Node) -> Any:
        return evaluate(n, values, terms, tables)

    match node:
        case Const():
            return node.value
        case Ref(kind=RefKind.TERM):
            return of(terms[(node.name, node.index)])
        case Ref():
            return values[(node.kind, node.name, node.index)]
        case Op(op="select"):
            return of(node.args[1] if of(node.args[0]) else node.args[2])
        case Op(op="and"):
            return all(of(a) for a in node.args)
        case Op(op="or"):
            return any(of(a) for a in node.args)
        case Op(op="lookup" | "lookup2"):
            table, args = tables[node.table], [Fraction(of(a)) for a in node.args]
            if isinstance(table, Table):
                return line(args[0], table.x, table.y)
            return line(
                args[1], table.y, tuple(line(args[0], table.x, column) for column in zip(*table.z, strict=True))
            )
    return _WORK[node.op](*map(of, node.args))


def _clamp(x: Any, low: Any, high: Any) -> Any:
    return low if x < low else high if x > high else x


_WORK: dict[str, Any] = {
    "add": lambda a, b: a + b,
    "sub": lambda a, b: a - b,
    "mul": lambda a, b: a * b,
    "div": lambda a, b: Fraction(a) / b,
    "neg": lambda a: -a,
    "abs": abs,
    "min": min,
    "max": max,
    "clamp": _clamp,
    "sign": lambda a: Fraction((a > 0) - (a < 0)),
    "floor": lambda a: Fraction(a // 1),
    "to_real": Fraction,
    "lt": lambda a, b: a < b,
    "le": lambda a, b: a <= b,
    "gt": lambda a, b: a > b,
    "ge": lambda a, b: a >= b,
    "eq": lambda a, b: a == b,
    "ne": lambda a, b: a != b,
    "not": lambda a: not a,
}
_WORK |= {f"i{n}": _WORK[n] for n in ("neg", "abs", "min", "max", "clamp", "sign")}
_WORK |= {"iadd": _WORK["add"], "isub": _WORK["sub"], "imul": _WORK["mul"]}
