"""Expressions of an exact step law on raw integers, with the interval and the error of each (scaled.py)."""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass, field, replace
from fractions import Fraction

import numpy as np

from hybgen.diag.finding import Findings
from hybgen.diag.span import Span
from hybgen.expr.core import FALSE, INT, REAL, TRUE, Const, Kind, Node, Op, Ref, RefKind, integer, op, truth, walk
from hybgen.expr.fold import decide
from hybgen.kernels.errors import RELATIVE
from hybgen.kernels.word import ELEMENTARY
from hybgen.numbers.bounds import Bounds, Range
from hybgen.numbers.enclosures import ELEMENTARY as FUNCTIONS
from hybgen.numbers.enclosures import Enclosure
from hybgen.numbers.rounding import turned
from hybgen.step.curves import curve, grid
from hybgen.step.model import (
    ConditionBound,
    Definition,
    StepLaw,
    StepTable,
)
from hybgen.step.scaled import (
    MOST,
    Refused,
    Scaled,
    added,
    common,
    constant,
    divided,
    fitted,
    multiplied,
    ordered,
    rescaled,
)

Key = tuple[RefKind, str]
Leaf = tuple[int, int, int]
"""(places, lowest raw value, highest raw value)"""
_REALS = ("lt", "le", "gt", "ge")


@dataclass(slots=True)
class Elaborator:
    """Elaborates the expressions of one step law; `more` collects its definitions, `records` the bounds of its jump conditions."""

    made: StepLaw
    bounds: Bounds
    findings: Findings
    leaves: Mapping[Key, Leaf]
    locals: dict[str, Scaled]
    known: dict[Node, Scaled] = field(default_factory=dict)
    asking: str = ""
    """The jump whose condition is made: its comparisons are moved outward."""
    records: list[ConditionBound] = field(default_factory=list)
    more: list[Definition] = field(default_factory=list)
    """Every definition, those of the elaboration too, each before its use."""

    def condition(self, node: Node) -> Node:
        return decide(self.other(node))

    def other(self, node: Node) -> Node:
        """A boolean, integer or enumeration: its parts that are real are elaborated."""
        match node:
            case Op(op="finite"):
                return TRUE
            case Op() if node.op in _REALS and node.args[0].type == REAL:
                return self.tried(node, lambda: self.comparison(node)) or FALSE
            case Op(op="to_steps"):
                return self.tried(node, lambda: self.steps(node)) or integer(0)
            case Op():
                return Op(node.op, tuple(self.other(a) for a in node.args), node.type, node.table, node.span)
            case _:
                return node

    def steps(self, node: Op) -> Node:
        value = self.real(node.args[0])
        if value.places < 0:
            value = rescaled(value, 0, node.span)
        return op("fixed_steps", value.node, integer(value.places), span=node.span)

    def comparison(self, node: Op) -> Node:
        """With a constant: exact, whatever its digits (thresholds: nearest - the nearest raw value)."""
        left, right = node.args
        name = node.op
        if isinstance(left, Const):
            name, left, right = {"lt": "gt", "gt": "lt", "le": "ge", "ge": "le"}[name], right, left
        a = self.real(left)
        if isinstance(right, Const):
            moved = self.moved(name, a, Fraction(right.value), node.span)
        else:
            b = self.real(right)
            if not self.asking or a.error + b.error == 0:
                return ordered(name, a, b, node.span)
            moved = self.moved(name, added(a, b, True, node.span), Fraction(0), node.span)
        guards = [g for side in (left, right) for g in self.cuts(side)] if self.asking else []
        return op("and", moved, *guards, span=node.span) if guards else moved

    def moved(self, name: str, x: Scaled, value: Fraction, span: Span) -> Node:
        """A comparison with a constant, in a jump condition moved outward by the error of x."""
        if not self.asking or x.error == 0:
            return self.against(name, x, value, span)
        up = name in ("ge", "gt")
        unit = Fraction(2) ** x.places
        edge = math.ceil((value + x.error) * unit) if up else math.floor((value - x.error) * unit)
        margin = abs(edge / unit - value) + x.error
        reach = x.ends[1] - value if up else value - x.ends[0]
        self.records.append(ConditionBound(self.asking, span, float(x.error), float(margin), margin >= reach, ""))
        if abs(edge) > MOST:
            return truth((edge > 0) is not up, span)
        return op(name, x.node, integer(edge, span), span=span)

    def cuts(self, node: Node) -> Iterator[Node]:
        """A wrapped angle whose argument is computed must not be so close to the cut that rounding could turn it."""
        bodies = {d.name: d.expr for d in self.made.definitions}
        todo = [node]
        while todo:
            for here in walk(todo.pop()):
                if isinstance(here, Ref) and here.kind is RefKind.LOCAL:
                    todo.append(bodies[here.name])
                found = turned(here)
                if found is not None and (self.real(found[0]).error > 0 or here.op != "wrap"):  # type: ignore[union-attr]
                    angle = _chosen("abs", [self.real(here)], here.span)
                    slack = self.real(found[0]).error + 16 * angle.half
                    yield self.against("le", angle, found[1] - slack, here.span)

    def against(self, name: str, x: Scaled, value: Fraction, span: Span) -> Node:
        exact = value * Fraction(2) ** x.places
        if self.made.law.thresholds == "nearest":
            edge = round(exact)
        else:
            edge = math.ceil(exact) if name in ("ge", "lt") else math.floor(exact)
        if abs(edge) > MOST:
            return truth((edge > 0) is (name in ("lt", "le")), span)
        return op(name, x.node, integer(edge, span), span=span)

    def tried(self, node: Node, make: Callable[[], Node]) -> Node | None:
        """What `make` gives; a finding where it refuses."""
        try:
            return make()
        except Refused as refused:
            self.findings.error("HG422", node.span, f"fixed32: {refused}", hint="limit it first, such as max(x, 0.01)")
            return None

    def real(self, node: Node) -> Scaled:
        """A real expression."""
        found = self.known.get(node)
        if found is None:
            try:
                found = self.computed(node)
            except Refused as refused:
                self.findings.error(
                    "HG422", node.span, f"fixed32: {refused}", hint="limit it first, such as max(x, 0.01)"
                )
                found = Scaled(integer(0), 0, 0, 0)
            self.known[node] = found
        return found

    def held(self, node: Node, places: int) -> Scaled:
        """An expression that is stored with these places, where too large a result is held anyway: a sum or product keeps them."""
        if isinstance(node, Op) and node.op in ("add", "sub", "mul"):
            self.real(node)  # reports what is refused
            try:
                a, b = (self.real(x) for x in node.args)
                if node.op == "mul":
                    return multiplied(a, b, node.span, places)
                return added(a, b, node.op == "sub", node.span, places)
            except Refused:
                pass
        return self.real(node)

    def computed(self, node: Node) -> Scaled:
        match node:
            case Const():
                return constant(Fraction(node.value), node.span)
            case Ref(kind=RefKind.LOCAL):
                return self.locals[node.name]
            case Ref():
                places, low, high = self.leaves[(node.kind, node.name)]
                return Scaled(Ref(node.kind, node.name, INT, node.index, node.span), places, low, high)
            case Op():
                return self.operation(node)

    def operation(self, node: Op) -> Scaled:
        span = node.span
        match node.op:
            case "select":
                yes, no = common([self.real(a) for a in node.args[1:]], span)
                made = op("select", self.plain(node.args[0]), yes.node, no.node, span=span)
                found = Scaled(made, yes.places, min(yes.low, no.low), max(yes.high, no.high))
                error = max(yes.error, no.error)
                if self.doubtful(node.args[0]):
                    error += found.ends[1] - found.ends[0]
                return replace(found, error=error)
            case "to_real":
                known: Range = self.bounds.of(node.args[0])
                low, high = max(-MOST, math.floor(known.low)), min(MOST, math.ceil(known.high))
                return Scaled(self.other(node.args[0]), 0, low, high)
        args = [self.real(a) for a in node.args]
        match node.op:
            case "add" | "sub":
                total = added(args[0], args[1], node.op == "sub", span)
                return replace(total, error=args[0].error + 8 * total.half) if turned(node) else total
            case "mul":
                return multiplied(args[0], args[1], span)
            case "div":
                return divided(args[0], args[1], span)
            case "floor":
                return self.floor(args[0], span)
            case "sign":
                doubt = Fraction(2) if args[0].error else Fraction(0)
                return Scaled(op("isign", args[0].node, span=span), 0, -1, 1, doubt)
            case "lookup" | "lookup2":
                table = next(t for t in self.made.tables if t.name == node.table)
                if isinstance(table, StepTable):
                    return curve(table, args[0], span, self.defined(span))
                return grid(table, args[0], args[1], span, self.defined(span))
        if node.op in ELEMENTARY:
            return _elementary(node.op, args, span)
        return _chosen(node.op, args, span)

    def defined(self, span: Span) -> Callable[[str, Scaled], Scaled]:
        """Makes definitions; their names have blanks, so no name of the author is the same."""

        def define(name: str, value: Scaled) -> Scaled:
            if not isinstance(value.node, Op):
                return value
            unique = f"{name} number {len(self.more) + 1}"
            self.more.append(Definition(unique, value.node, span, name))
            return replace(value, node=Ref(RefKind.LOCAL, unique, INT, None, span))

        return define

    def floor(self, x: Scaled, span: Span) -> Scaled:
        if x.places <= 0:
            return x
        low, high = (math.floor(e) for e in x.ends)
        doubt = Fraction(math.ceil(x.error) + 1) if x.error else Fraction(0)
        return Scaled(op("fixed_floor", x.node, integer(x.places), span=span), 0, low, high, doubt)

    def plain(self, condition: Node) -> Node:
        """A condition inside an expression: not moved."""
        asking, self.asking = self.asking, ""
        made = self.condition(condition)
        self.asking = asking
        return made

    def doubtful(self, condition: Node) -> bool:
        """Could rounding answer the condition otherwise than the law does?"""
        bodies = {d.name: d.expr for d in self.made.definitions}
        return any(
            self.doubtful(bodies[n.name])
            if isinstance(n, Ref) and n.kind is RefKind.LOCAL and n.type.kind is Kind.BOOL
            else isinstance(n, Op)
            and n.op in _REALS
            and n.args[0].type == REAL
            and any(not isinstance(a, Const) and self.real(a).error > 0 for a in n.args)
            for n in walk(condition)
        )


def _chosen(name: str, args: list[Scaled], span: Span) -> Scaled:
    """neg, abs, min, max, clamp: no rounding, but to common places."""
    args = common(args, span)
    low, high = args[0].low, args[0].high
    match name:
        case "neg":
            low, high = -high, -low
        case "abs":
            low, high = max(low, -high, 0), max(-low, high)
        case "min":
            low, high = min(low, args[1].low), min(high, args[1].high)
        case "max":
            low, high = max(low, args[1].low), max(high, args[1].high)
        case "clamp":
            least, most = args[1:]
            low, high = (
                max(min(least.low, most.low), min(low, most.low)),
                min(max(least.high, most.high), max(high, least.high)),
            )
    error = max(a.error for a in args)
    return Scaled(op(f"i{name}", *(a.node for a in args), span=span), args[0].places, low, high, error)


_SLACK = Fraction(1, 10**6)


def _elementary(name: str, args: list[Scaled], span: Span) -> Scaled:
    """An elementary function, on an interval inside its domain."""
    low, high = _image(name, [(float(a.ends[0]), float(a.ends[1])) for a in args])
    wide = [Fraction(low) - _SLACK * (1 + abs(Fraction(low))), Fraction(high) + _SLACK * (1 + abs(Fraction(high)))]
    most = {"sin": 30, "cos": 30, "tanh": 30, "asin": 30, "acos": 29, "atan2": 29, "wrap": 29}.get(name, 62)

    def make(places: int) -> Node:
        shifts = [*(a.places for a in args), places]
        return op(f"fixed_{name}", *(a.node for a in args), *map(integer, shifts), span=span)

    error = _propagated(name, args) + Fraction(RELATIVE[name]) * max(map(abs, wide))
    return fitted(wide[0], wide[1], most, make, error)


def _propagated(name: str, args: list[Scaled]) -> Fraction:
    """What the errors of the arguments make of the result. Raises Refused where there is no bound."""
    if not any(a.error for a in args):
        return Fraction(0)
    boxes = [Enclosure(*(np.array([float(v)]) for v in (*a.ends, a.error * (1 + Fraction(1, 2**40))))) for a in args]
    with np.errstate(all="ignore"):
        error = float(FUNCTIONS[name](*boxes)[2][0])
    if not math.isfinite(error):
        raise Refused(f"the argument of {name}() is as near to an end of its domain as its own rounding error")
    return Fraction(error) * (1 + Fraction(1, 2**40))


def _image(name: str, ends: list[tuple[float, float]]) -> tuple[float, float]:
    """The interval of an elementary function's results."""
    low, high = ends[0]
    match name:
        case "sqrt":
            if low < 0:
                raise Refused(f"sqrt() of a number that can be {low:.6g}")
            return math.sqrt(low), math.sqrt(high)
        case "log":
            if low <= 0:
                raise Refused(f"log() of a number that can be {low:.6g}")
            return math.log(low), math.log(high)
        case "exp":
            if high > 40:
                raise Refused(f"exp() of a number that can be {high:.6g}")
            return math.exp(max(low, -700.0)), math.exp(high)
        case "asin" | "acos":
            if low < -1 or high > 1:
                raise Refused(f"{name}() of a number between {low:.6g} and {high:.6g}")
            return (-1.5707964, 1.5707964) if name == "asin" else (0.0, 3.1415927)
        case "tan":
            if low <= -1.57 or high >= 1.57:
                raise Refused(f"tan() of an angle between {low:.6g} and {high:.6g}: pi/2 may be among them")
            return math.tan(low), math.tan(high)
        case "hypot":
            return 0.0, math.hypot(*(max(-a, b) for a, b in ends))
        case "atan2" | "wrap":
            return -3.1415927, 3.1415927
        case _:
            return -1.0, 1.0
