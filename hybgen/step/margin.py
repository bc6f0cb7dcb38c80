"""Jump conditions that rounding can only delay: each computed comparison is moved outward by the bound of its rounding error.

Against a constant c: `f >= c` becomes `f >= c'`, c' the float at or above c + E. Otherwise `f >= g` becomes `f - g >= e`, e one
float above E: a difference that rounds to e or more is above E. Comparisons that rounding can't mistake stay as they are. A comparison with
a choice between values, made by a computed condition, is written as one comparison for each case. The flow condition and the
conditions inside other values are not moved: where flow and jump both may, either is a solution of the law.
"""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass, field, replace
from fractions import Fraction

from hybgen.expr.constant import PI
from hybgen.expr.core import OPPOSITE, REAL, Const, Kind, Node, Op, Ref, RefKind, op, real, rebuild, truth, walk
from hybgen.expr.fold import fold
from hybgen.law.model import Law, StateKind, Table
from hybgen.numbers.format import FIXED32, FLOAT64, Rounding
from hybgen.numbers.lookups import Lookup
from hybgen.numbers.rounding import Difference, Domain, Unbounded, leaves_of, turned, whole
from hybgen.step import declare
from hybgen.step.model import ConditionBound
from hybgen.step.quantity import Edges, disturbance, text_of, unit_text
from hybgen.step.translate import Translator

_MIRROR = {"ge": "le", "le": "ge", "gt": "lt", "lt": "gt"}
_UP = ("ge", "gt")
MOST_CHOICES = 3
"""So many choices by computed conditions in one comparison are written out."""


@dataclass(frozen=True, slots=True)
class Margins:
    """Makes the jump conditions of one law in a floating-point format; notes each bound in `records`."""

    law: Law
    translator: Translator
    domain: Domain
    edges: Edges
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
        domain = Domain(translator.format, _leaves(law, translator), terms, timers, {}, _ordered(law, translator))
        tables = {
            t.name: Lookup.of((t.x,), t.y, domain.constant)
            if isinstance(t, Table)
            else Lookup.of((t.x, t.y), t.z, domain.constant)
            for t in law.tables
        }
        domain = replace(domain, tables=tables)
        edges = Edges.of(law, {j.name: translator.exact(j.condition) for j in law.jumps}, terms)
        return cls(law, translator, domain, edges)

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
            case Op() if node.op in OPPOSITE and node.args[0].type.kind is not Kind.BOOL:
                return self.either(
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
                if isinstance(n, Ref) and n.kind is RefKind.TERM
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

    def choices(self, node: Node) -> list[Op]:
        """The choices by computed conditions in an expression, through terms, each once."""
        return list(dict.fromkeys(n for n, _ in self.inside(node) if isinstance(n, Op) and self.choosing(n)))

    def choosing(self, node: Op) -> bool:
        """Is it a choice by a computed condition, or a clamp that may be one?"""
        if node.op == "clamp":
            return self.torn(node)
        return node.op == "select" and self.inexact(node.args[0])

    def torn(self, node: Op) -> bool:
        """May the ends of a clamp be the other way round, while one of its operands is computed?"""
        if node.args[1:] in self.domain.ordered or all(isinstance(a, Ref) and self.stored(a) for a in node.args):
            return False
        ranges = replace(self.domain, format=FLOAT64)
        try:
            low, high = (whole(a, ranges) for a in node.args[1:])
        except Unbounded:
            return True
        return bool(low.high[0] > high.low[0])

    def either(self, jump: str, node: Op) -> Node:
        """A comparison; with a choice inside, one for each case."""
        found = self.choices(node)
        if not found or len(found) > MOST_CHOICES:
            if found and node.args[0].type != REAL:
                self.note(jump, node, None, None, f"it has more than {MOST_CHOICES} choices by computed conditions")
            return self.comparison(jump, node)
        asked, yes, no = _cases(found[-1])
        cases = [
            op("and", condition, self.chosen(node, found[-1], value), span=node.span)
            for condition, value in ((asked, yes), (op("not", asked, span=asked.span), no))
        ]
        return self.made(jump, fold(op("or", *cases, span=node.span)), True)

    def chosen(self, node: Node, choice: Op, value: Node) -> Node:
        """The expression with a choice made; terms that have it are written out."""

        def change(here: Node) -> Node:
            if here == choice:
                return value
            if isinstance(here, Ref) and here.kind is RefKind.TERM:
                body = self.domain.terms[(here.name, here.index)]
                if any(inner == choice for inner, _ in self.inside(body)):
                    return rebuild(body, change)
            return here

        return rebuild(node, change)

    def comparison(self, jump: str, node: Op) -> Node:
        """A comparison, moved where it has to be; the cut of an angle is guarded."""
        plain = self.translator.translate(node)
        if any(self.timer(a) for a in node.args) and not all(self.whole_time(a) for a in node.args):
            self.note(jump, node, None, None, "a computed time is rounded to whole steps")
        if not self.computed(node) or self.domain.format is FIXED32:
            return plain
        name, (left, right) = node.op, node.args
        if isinstance(left, Const):
            name, left, right = _MIRROR[name], right, left
        try:
            moved, record = self.moved(jump, name, left, right, node)
            guards = list(dict.fromkeys(g for side in (left, right) for g in self.cuts(side)))
        except Unbounded as missing:
            self.note(jump, node, None, None, f"'{missing}' has no range")
            return plain
        if not math.isfinite(record.error or 0.0):
            why = "the error has no bound (a divisor or an argument reaches an end of its domain, or a result may overflow)"
            self.note(jump, node, None, None, why)
            return plain
        if record.error == 0 and not guards:
            return plain
        if record.never and (parts := self.parts(node)) is not None:
            return self.made(jump, fold(parts), True)
        self.records.append(replace(record, within=self.within(node, bool(guards))))
        return op("and", moved, *guards, span=node.span) if guards else moved

    def parts(self, node: Op) -> Node | None:
        """A comparison of a min, max or clamp as comparisons of what it picks from; None if neither side is one.

        As a whole, a value that is held at its end (`clamp(x, -most, most) >= most`) can't get beyond it by a margin.
        """
        for side in (0, 1):
            whole_, other = self.body(node.args[side]), node.args[1 - side]
            if not (isinstance(whole_, Op) and whole_.op in ("min", "max", "clamp")):
                continue
            if whole_.op == "clamp" and self.torn(whole_):
                continue

            def compared(x: Node, other: Node = other, side: int = side) -> Node:
                return Op(node.op, (x, other) if side == 0 else (other, x), node.type, "", node.span)

            needs_all = (whole_.op == "min") is ((node.op in _UP) is (side == 0))
            if whole_.op != "clamp":
                return op("and" if needs_all else "or", *map(compared, whole_.args), span=node.span)
            x, low, high = map(compared, whole_.args)
            if (node.op in _UP) is (side == 0):
                return op("or", low, op("and", x, high, span=node.span), span=node.span)
            return op("or", high, op("and", x, low, span=node.span), span=node.span)
        return None

    def body(self, node: Node) -> Node:
        """The expression of a term, else the node."""
        while isinstance(node, Ref) and node.kind is RefKind.TERM:
            node = self.domain.terms[(node.name, node.index)]
        return node

    def whole_time(self, node: Node) -> bool:
        """A timer, or a time that is made whole steps from a constant or a parameter."""
        match node:
            case Op(op="select"):
                return all(self.whole_time(a) for a in node.args[1:])
            case Op(op="mul", args=(inner, Const())):
                return self.whole_time(inner)
            case _:
                return self.timer(node) or self.stored(node)

    def moved(self, jump: str, name: str, left: Node, right: Node, node: Op) -> tuple[Node, ConditionBound]:
        """The comparison moved, and what is to be said about it."""
        up = name in _UP
        first, second = (left, right) if up else (right, left)
        constant = isinstance(right, Const)
        zero = constant and right.value == 0 and isinstance(left, Op) and left.op in ("add", "sub")  # type: ignore[union-attr]
        if zero:
            assert isinstance(left, Op)
            a, b = left.args
            other = b if left.op == "sub" else op("neg", b)
            first, second = (a, other) if up else (other, a)
        gap = Difference(first, second, self.domain, outward=not zero)
        error = gap.error()
        if error == 0 or not math.isfinite(error):
            return self.translator.translate(node), ConditionBound(jump, node.span, error, 0.0, False, "")
        translated = self.translator.translate(left)
        if isinstance(right, Const) and not zero:
            exact = Fraction(right.value)
            edge = self.rounded(exact + (Fraction(error) if up else -Fraction(error)), up)
            threshold, made = abs(edge - exact), op(name, translated, real(edge, right.span), span=node.span)
        else:
            threshold = self.above(error)
            change = translated if zero else op("sub", translated, self.translator.translate(right), span=node.span)
            made = op(name, change, real(threshold if up else -threshold), span=node.span)
        return made, self.record(jump, node, gap, error, threshold)

    def record(self, jump: str, node: Op, gap: Difference, error: float, threshold: Fraction) -> ConditionBound:
        """What is said about a comparison that is moved by a threshold."""
        limit = math.nextafter(float(threshold), math.inf)
        noises = disturbance(self.law)
        noise = None
        if any(kind is RefKind.INPUT and name in noises for kind, name, _ in leaves_of(node, self.domain)):
            noise = replace(gap, domain=replace(self.domain, noise=noises)).around()
        opposite, late = self.edges.gap(jump, node), gap.latest(limit)
        return ConditionBound(
            jump,
            node.span,
            error,
            late if math.isfinite(late) else None,
            limit >= gap.reach(),
            "",
            text_of(node.span),
            unit_text(node, self.law),
            noise=noise,
            gap=(opposite[0], float(opposite[1])) if opposite else None,
        )

    def within(self, node: Op, turned_: bool) -> str:
        """What the bound takes for granted, and nothing enforces."""
        free = {x.name for x in self.law.states if x.kind is StateKind.REAL and not x.limit}
        names = [n for k, n, _ in leaves_of(node, self.domain) if k is RefKind.STATE and n in free]
        parts = [f"while {', '.join(dict.fromkeys(names))} is inside the declared range"] if names else []
        return "; ".join([*parts, *(["an angle next to half a turn makes no jump"] if turned_ else [])])

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
            error = float(whole(angle, self.domain).error[0])
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

    def note(self, jump: str, node: Op, error: float | None, margin: float | None, why: str) -> None:
        text, unit = text_of(node.span), unit_text(node, self.law)
        self.records.append(ConditionBound(jump, node.span, error, margin, False, why, text, unit))


def _cases(node: Op) -> tuple[Node, ...]:
    """(condition, value where it holds, value where not) of a choice or a clamp."""
    if node.op == "select":
        return node.args
    x, low, high = node.args
    above = op("select", op("gt", x, high, span=node.span), high, x, span=node.span)
    return op("lt", x, low, span=node.span), low, above


def _ordered(law: Law, translator: Translator) -> frozenset[tuple[Node, Node]]:
    """Pairs of stored parameters and constants of which a rule that the program enforces says first <= second."""
    found = set()
    for assumption in law.assume:
        todo = [translator.exact(assumption.condition)]
        while todo:
            match todo.pop():
                case Op(op="and", args=parts):
                    todo += parts
                case Op(op="lt" | "le", args=(Ref(kind=RefKind.PARAMETER) as a, Ref(kind=RefKind.PARAMETER) as b)):
                    found.add((a, b))
                case Op(op="gt" | "ge", args=(Ref(kind=RefKind.PARAMETER) as a, Ref(kind=RefKind.PARAMETER) as b)):
                    found.add((b, a))
                case _:
                    pass
    return frozenset(found)


def _leaves(law: Law, translator: Translator) -> dict[tuple[RefKind, str], tuple[Fraction, Fraction]]:
    """Ranges of samples, tunable parameters, states, counts and timers (as real times too), with their ends as they are
    rounded."""
    found: dict[tuple[RefKind, str], list[Fraction]] = {}
    for u in law.inputs:
        if u.low is not None and u.high is not None:
            substitute = u.substitute if u.substitute is not None else u.low
            found[(RefKind.INPUT, u.name)] = [Fraction(v) for v in (u.low, u.high, u.initial, substitute)]
    for p in law.tunables:
        if p.low is not None and p.high is not None:
            found[(RefKind.PARAMETER, p.name)] = [Fraction(p.low), Fraction(p.high)]
    for x in law.states:
        if x.kind is StateKind.REAL and x.low is not None and x.high is not None:
            found[(RefKind.STATE, x.name)] = [x.low, x.high]
        elif ends_ := declare.state_range(x, translator):
            factor = translator.step / x.unit.scale if x.kind is StateKind.TIMER else 1
            found[(RefKind.STATE, x.name)] = [e * factor for e in ends_]
    wide = {key: [*ends, *map(translator.rounded, ends)] for key, ends in found.items()}
    return {key: (min(ends), max(ends)) for key, ends in wide.items()}
