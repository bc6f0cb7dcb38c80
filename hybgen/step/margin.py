"""Jump conditions that rounding can only delay: each computed comparison is moved outward by the bound of its rounding error.

Against a constant c: `f >= c` becomes `f >= c'`, c' the float at or above c + E. Otherwise `f >= g` becomes `f - g >= e`, e one
float above E: a difference that rounds to e or more is above E. Comparisons that rounding can't mistake stay as they are.
"""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass, field
from fractions import Fraction

from hybgen.expr.constant import PI
from hybgen.expr.core import OPPOSITE, REAL, Const, Kind, Node, Op, Ref, RefKind, op, real, truth, walk
from hybgen.law.model import Grid, Law, StateKind, Table
from hybgen.numbers.format import FIXED32, Rounding
from hybgen.numbers.rounding import Domain, Unbounded, difference, largest_error, turned
from hybgen.step import declare
from hybgen.step.model import ConditionBound
from hybgen.step.translate import Translator

_MIRROR = {"ge": "le", "le": "ge", "gt": "lt", "lt": "gt"}
_UP = ("ge", "gt")


@dataclass(frozen=True, slots=True)
class Margins:
    """Makes the jump conditions of one law in a floating-point format; notes each bound in `records`."""

    law: Law
    translator: Translator
    domain: Domain
    records: list[ConditionBound] = field(default_factory=list)
    known: dict[Node, bool] = field(default_factory=dict)

    @classmethod
    def of(cls, law: Law, translator: Translator) -> Margins:
        """The margins of a law."""
        terms = {
            (t.name, i if t.size is not None else None): translator.exact(e)
            for t in law.terms
            for i, e in enumerate(t.exprs)
        }
        timers = {n: translator.step / u.scale for n, u in translator.timers.items()}
        tables = {t.name: _table(t) for t in law.tables}
        return cls(law, translator, Domain(translator.format, _leaves(law, translator), terms, timers, tables))

    def condition(self, jump: str, condition: Node) -> Node:
        """The translated condition of a jump."""
        if self.law.thresholds == "nearest":
            return self.translator.translate(condition)
        return self.made(jump, self.translator.exact(condition), True)

    def made(self, jump: str, node: Node, positive: bool) -> Node:
        match node:
            case Const():
                return truth(bool(node.value) is positive, node.span)
            case Op(op="not"):
                return self.made(jump, node.args[0], not positive)
            case Op(op="and" | "or"):
                name = node.op if positive else ("or" if node.op == "and" else "and")
                return op(name, *(self.made(jump, a, positive) for a in node.args), span=node.span)
            case Op(op="lt" | "le" | "gt" | "ge") if node.args[0].type == REAL:
                return self.comparison(
                    jump, node if positive else Op(OPPOSITE[node.op], node.args, node.type, "", node.span)
                )
            case Op(op="select") if self.inexact(node.args[0]):
                asked, yes, no = node.args
                both = [op("and", asked, yes, span=node.span), op("and", op("not", asked), no, span=node.span)]
                chosen = (
                    both if positive else [op("and", asked, op("not", yes)), op("and", op("not", asked), op("not", no))]
                )
                return self.made(jump, op("or", *chosen, span=node.span), True)
            case Op(op="select"):
                asked, yes, no = node.args
                rest = (self.made(jump, yes, positive), self.made(jump, no, positive))
                return op("select", self.translator.translate(asked), *rest, span=node.span)
            case Op(op="eq" | "ne") if node.args[0].type.kind is Kind.BOOL and self.inexact(node):
                a, b = node.args
                alike = (node.op == "eq") is positive
                parts = [
                    op("and", a, b if alike else op("not", b)),
                    op("and", op("not", a), op("not", b) if alike else b),
                ]
                return self.made(jump, op("or", *parts, span=node.span), True)
            case Ref(kind=RefKind.TERM) if self.inexact(node):
                return self.made(jump, self.domain.terms[(node.name, node.index)], positive)
            case _:
                leaf = self.translator.translate(node)
                return leaf if positive else op("not", leaf, span=node.span)

    def inexact(self, node: Node) -> bool:
        """Is there a comparison in the condition that rounding could mistake?"""
        if node not in self.known:
            self.known[node] = any(
                self.inexact(self.domain.terms[(n.name, n.index)])
                if isinstance(n, Ref) and n.kind is RefKind.TERM and n.type.kind is Kind.BOOL
                else self.computed(n)
                for n in walk(node)
            )
        return self.known[node]

    def computed(self, node: Node) -> bool:
        """Is it a comparison of real numbers of which one is computed?"""
        if not (isinstance(node, Op) and node.op in _MIRROR and node.args[0].type == REAL):
            return False
        return not any(self.timer(a) for a in node.args) and not all(self.stored(a) for a in node.args)

    def timer(self, node: Node) -> bool:
        return isinstance(node, Ref) and node.name in self.domain.timers

    def stored(self, node: Node) -> bool:
        """A constant, a sample, a parameter, a state: exact in the format, or rounded outward."""
        return isinstance(node, Const) or (
            isinstance(node, Ref) and node.kind is not RefKind.TERM and not self.timer(node)
        )

    def comparison(self, jump: str, node: Op) -> Node:
        """A comparison, moved where it has to be; the cut of an angle is guarded."""
        plain = self.translator.translate(node)
        if not self.computed(node) or self.domain.format is FIXED32:
            return plain
        name, (left, right) = node.op, node.args
        if isinstance(left, Const):
            name, left, right = _MIRROR[name], right, left
        try:
            moved, error, margin, reach = self.moved(name, left, right, node)
            guards = [g for side in (left, right) for g in self.cuts(side)]
        except Unbounded as missing:
            self.note(jump, node, None, None, f"'{missing}' has no range")
            return plain
        if not math.isfinite(error):
            self.note(
                jump, node, None, None, "the error has no bound (a divisor or an argument reaches an end of its domain)"
            )
            return plain
        if error == 0 and not guards:
            return plain
        self.note(jump, node, error, margin, "", never=margin >= reach)
        return op("and", moved, *guards, span=node.span) if guards else moved

    def moved(self, name: str, left: Node, right: Node, node: Op) -> tuple[Node, float, float, float]:
        """(the comparison, the error's bound, how far beyond the exact surface it holds at the latest, how far it can be)."""
        up = name in _UP
        first, second = (left, right) if up else (right, left)
        constant = isinstance(right, Const)
        zero = constant and right.value == 0 and isinstance(left, Op) and left.op in ("add", "sub")  # type: ignore[union-attr]
        if zero:
            assert isinstance(left, Op)
            a, b = left.args
            other = b if left.op == "sub" else op("neg", b)
            first, second = (a, other) if up else (other, a)
        error, reach = difference(first, second, self.domain)
        translated = self.translator.translate(left)
        if error == 0 or not math.isfinite(error):
            return self.translator.translate(node), error, 0.0, reach
        if constant and not zero:
            assert isinstance(right, Const)
            exact = Fraction(right.value)
            edge = self.rounded(exact + (Fraction(error) if up else -Fraction(error)), up)
            return (
                op(name, translated, real(edge, right.span), span=node.span),
                error,
                float(abs(edge - exact)) + error,
                reach,
            )
        edge = self.above(error)
        gap = translated if zero else op("sub", translated, self.translator.translate(right), span=node.span)
        return op(name, gap, real(edge if up else -edge), span=node.span), error, float(edge) + error, reach

    def rounded(self, value: Fraction, up: bool) -> Fraction:
        return self.translator.rounded(value, how=Rounding.UP if up else Rounding.DOWN)

    def above(self, error: float) -> Fraction:
        """One float above the error rounded up."""
        first = self.rounded(Fraction(error), True)
        return self.rounded(first + Fraction(2) ** self.domain.format.least, True)

    def cuts(self, node: Node) -> Iterator[Node]:
        """For each wrapped angle whose argument is computed: it is not so close to the cut that rounding could turn it."""
        for here, name in self.inside(node):
            found = turned(here)
            if found is None:
                continue
            angle, half = found
            error = largest_error(angle, self.domain)
            if error == 0 and half == PI:
                continue
            slack = Fraction(error) + 8 * half / 2**self.domain.format.precision
            limit = real(self.rounded(half - slack, False))
            yield op("le", op("abs", self.translator.translate(name), span=here.span), limit, span=here.span)

    def inside(self, node: Node) -> Iterator[tuple[Node, Node]]:
        """Every node of an expression, through terms; beside it the term's name where it is the whole of one."""
        for here in walk(node):
            yield here, here
            if isinstance(here, Ref) and here.kind is RefKind.TERM:
                body = self.domain.terms[(here.name, here.index)]
                yield from ((inner, here if inner is body else name) for inner, name in self.inside(body))

    def note(
        self, jump: str, node: Op, error: float | None, margin: float | None, why: str, never: bool = False
    ) -> None:
        self.records.append(ConditionBound(jump, node.span, error, margin, never, why))


def _leaves(law: Law, translator: Translator) -> dict[tuple[RefKind, str], tuple[Fraction, Fraction]]:
    """Ranges of samples, tunable parameters, states, counts and timers (as real times too)."""
    found: dict[tuple[RefKind, str], tuple[Fraction, Fraction]] = {}
    for u in law.inputs:
        if u.low is not None and u.high is not None:
            ends = [
                Fraction(v) for v in (u.low, u.high, u.initial, u.substitute if u.substitute is not None else u.low)
            ]
            found[(RefKind.INPUT, u.name)] = min(ends), max(ends)
    for p in law.tunables:
        if p.low is not None and p.high is not None:
            found[(RefKind.PARAMETER, p.name)] = Fraction(p.low), Fraction(p.high)
    for x in law.states:
        if x.kind is StateKind.REAL and x.low is not None and x.high is not None:
            found[(RefKind.STATE, x.name)] = x.low, x.high
        elif ends_ := declare.state_range(x, translator):
            factor = translator.step / x.unit.scale if x.kind is StateKind.TIMER else 1
            found[(RefKind.STATE, x.name)] = ends_[0] * factor, ends_[1] * factor
    return found


def _table(table: Table | Grid) -> tuple[float, float, float]:
    """(steepest slope of all inputs together, largest value, largest point)"""

    def steepest(points: tuple[Fraction, ...], rows: list[tuple[Fraction, ...]]) -> Fraction:
        return max(
            abs(d - c) / (b - a) for row in rows for a, b, c, d in zip(points, points[1:], row, row[1:], strict=False)
        )

    if isinstance(table, Table):
        slope, values, points = steepest(table.x, [table.y]), list(table.y), list(table.x)
    else:
        columns = [tuple(row[j] for row in table.z) for j in range(len(table.y))]
        slope = steepest(table.x, columns) + steepest(table.y, list(table.z))
        values, points = [v for row in table.z for v in row], [*table.x, *table.y]
    return (*(float(v) * (1 + 2.0**-40) for v in (slope, max(map(abs, values)), max(map(abs, points)))),)  # type: ignore[return-value]
