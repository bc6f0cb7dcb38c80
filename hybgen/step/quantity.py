"""What a comparison is about: its unit, the samples' noise, and the comparison of another jump that undoes it."""

from __future__ import annotations

import re
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from decimal import ROUND_CEILING, Decimal
from fractions import Fraction

from hybgen.diag.span import Span
from hybgen.expr.core import COMPARISONS, OPPOSITE, REAL, Const, Node, Op, Ref, RefKind
from hybgen.expr.fold import fold
from hybgen.expr.units import KELVIN, ONE, Unit
from hybgen.law.model import Law, Table

Terms = Mapping[tuple[str, int | None], Node]
_ALIKE = frozenset({"add", "sub", "neg", "abs", "min", "max", "clamp", "hypot"})
_PLAIN = re.compile(r"[0-9.eE+-]+")
_UP = ("ge", "gt")


def upward(value: float, digits: int) -> str:
    """A bound with a few digits, never below it."""
    if value == 0:
        return "0"
    exact = Decimal(value)
    return f"{float(exact.quantize(Decimal(1).scaleb(exact.adjusted() - digits + 1), ROUND_CEILING)):.{digits}g}"


def text_of(span: Span) -> str:
    """What the author wrote at a place."""
    return span.text[span.column - 1 : span.column - 1 + span.length]


def unit_text(node: Op, law: Law) -> str | None:
    """The unit of a comparison's two sides, of their difference where it is degC; None where constants leave it open."""
    for side in node.args:
        unit = _unit(side, law)
        if unit is not None:
            return str(KELVIN if unit.absolute else unit)
    return None


def _unit(node: Node, law: Law) -> Unit | None:
    match node:
        case Ref():
            units = [
                *((u.name, u.unit) for u in law.inputs),
                *((p.name, p.unit) for p in law.parameters),
                *((x.name, x.unit) for x in law.states),
                *((t.name, t.unit) for t in law.terms),
            ]
            return dict(units).get(node.name)
        case Const():
            return ONE if _PLAIN.fullmatch(text_of(node.span)) else None
        case Op(op="select"):
            return _first(node.args[1:], law)
        case Op(op="mul" | "div"):
            a, b = (_unit(x, law) for x in node.args)
            if a is None or b is None:
                return None
            return a if b.plain else a * b if node.op == "mul" else a / b
        case Op(op="lookup" | "lookup2"):
            table = next(t for t in law.tables if t.name == node.table)
            return table.y_unit if isinstance(table, Table) else table.z_unit
        case _:
            return _first(node.args, law) if node.op in _ALIKE else ONE


def _first(nodes: tuple[Node, ...], law: Law) -> Unit | None:
    """The unit of a sum is that of each part; a constant does not show its own."""
    return next((u for n in nodes if not isinstance(n, Const) and (u := _unit(n, law)) is not None), None)


def disturbance(law: Law) -> dict[str, float]:
    """How far a sample may be off: its noise or its resolution, whichever is larger; only of those that declare one."""
    found = {u.name: max(u.noise, u.resolution) for u in law.inputs}
    return {name: float(size) for name, size in found.items() if size > 0}


@dataclass(frozen=True, slots=True)
class Edge:
    """A comparison that a jump needs: `expr` at or above (up) or below an edge that is known at the default parameters."""

    jump: str
    expr: Node
    up: bool
    at: Fraction


@dataclass(frozen=True, slots=True)
class Edges:
    """The edges of all jumps of a law."""

    edges: tuple[Edge, ...]
    defaults: Mapping[Node, Const]

    @classmethod
    def of(cls, law: Law, conditions: Mapping[str, Node], terms: Terms) -> Edges:
        """From the exact conditions of the jumps."""
        defaults: dict[Node, Const] = {}
        for p in law.tunables:
            for i, value in enumerate(p.value):
                defaults[Ref(RefKind.PARAMETER, p.name, p.type, i if p.shape else None)] = Const(
                    Fraction(value) if p.type == REAL else value, p.type
                )
        empty = cls((), defaults)
        found = [e for name, c in conditions.items() for atom in _atoms(c, True, terms) for e in empty.both(name, atom)]
        return cls(tuple(found), defaults)

    def both(self, jump: str, atom: Op) -> Iterator[Edge]:
        """A comparison as edges of its left side, and of its right one."""
        left, right = atom.args
        for expr, bound, up in ((left, right, atom.op in _UP), (right, left, atom.op not in _UP)):
            edge = fold(bound, self.defaults)
            if isinstance(edge, Const) and not isinstance(expr, Const):
                yield Edge(jump, expr, up, Fraction(edge.value))

    def gap(self, jump: str, atom: Op) -> tuple[str, Fraction] | None:
        """(other jump, distance) of the nearest opposite comparison of another jump; None without one."""
        found = [
            (other.jump, (one.at - other.at) if one.up else (other.at - one.at))
            for one in self.both(jump, atom)
            for other in self.edges
            if other.jump != jump and other.up is not one.up and other.expr == one.expr
        ]
        return min((f for f in found if f[1] > 0), key=lambda f: f[1], default=None)


def _atoms(node: Node, positive: bool, terms: Terms) -> Iterator[Op]:
    """The comparisons of real numbers that a condition (or its opposite) needs, through terms."""
    match node:
        case Op(op="not"):
            yield from _atoms(node.args[0], not positive, terms)
        case Op(op="and" | "or"):
            for part in node.args:
                yield from _atoms(part, positive, terms)
        case Ref(kind=RefKind.TERM):
            yield from _atoms(terms[(node.name, node.index)], positive, terms)
        case Op() if node.op in COMPARISONS - {"eq", "ne"} and node.args[0].type == REAL:
            yield node if positive else Op(OPPOSITE[node.op], node.args, node.type, "", node.span)
        case _:
            return
