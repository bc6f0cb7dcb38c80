"""Expressions of a law -> expressions of a step law: constants rounded, timers in whole steps.

A real constant that is compared is rounded so that the comparison with any number of the format answers
exactly as the law does with the exact constant: `>= c` and `< c` round up, `<= c` and `> c` round down. Other
constants round to the nearest. With `thresholds: nearest` all do.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction

from hybgen.diag.finding import Finding, Findings, Severity, Verdict
from hybgen.diag.span import NOWHERE, Span
from hybgen.expr.core import COMPARISONS, INT, REAL, Const, Kind, Node, Op, Ref, RefKind, integer, op, real
from hybgen.expr.fold import fold
from hybgen.expr.units import SECOND, Unit
from hybgen.law.model import Law, StateKind
from hybgen.numbers.format import LARGEST_COUNT, Format, Rounding

_LATER = {"ge": Rounding.UP, "lt": Rounding.UP, "le": Rounding.DOWN, "gt": Rounding.DOWN}
_MIRROR = {"ge": "le", "le": "ge", "gt": "lt", "lt": "gt", "eq": "eq", "ne": "ne"}


def component(name: str, index: int | None) -> str:
    """The name of one component: `x`, `x_2`."""
    return name if index is None else f"{name}_{index}"


@dataclass(frozen=True, slots=True)
class Translator:
    """Translates the trees of one law into one format at one step."""

    law: Law
    format: Format
    step: Fraction
    findings: Findings
    constants: Mapping[Node, Const]
    """The parameters that are not tunable."""
    timers: Mapping[str, Unit]
    local: Mapping[tuple[str, int | None], str]
    """Terms and stage values: (name, component) -> name of the definition."""

    def exact(self, node: Node) -> Node:
        """The law's tree with its constants folded, still exact."""
        return fold(node, self.constants)

    def translate(self, node: Node) -> Node:
        """The step law's tree for a tree of the law."""
        return self._translate(self.exact(node))

    def rounded(self, value: Fraction, span: Span = NOWHERE, how: Rounding = Rounding.NEAREST) -> Fraction:
        """A constant in the format; a finding if it is beyond its range."""
        try:
            return self.format.round(value, how)
        except OverflowError as beyond:
            self.findings.error("HG401", span, str(beyond), hint="use float64, or another unit")
            return Fraction(0)

    def steps(self, time: Fraction, unit: Unit, span: Span = NOWHERE) -> int:
        """A time in whole steps, rounded up; a note if it is no whole number of steps."""
        exact = time * unit.scale / self.step
        whole = -((-exact.numerator) // exact.denominator)
        if exact.denominator != 1:
            used = float(whole * self.step / unit.scale)
            message = (
                f"{float(time):.9g} {unit} is not a whole number of steps of {float(self.step):.9g} s: "
                f"{used:.9g} {unit} is used"
            )
            note = Finding("HG410", "rounding", Verdict.REFUTED, Severity.NOTE, span, "time", message)
            self.findings.add(note)
        return max(-1, min(whole, LARGEST_COUNT))

    def _translate(self, node: Node) -> Node:
        match node:
            case Const():
                return real(self.rounded(Fraction(node.value), node.span), node.span) if node.type == REAL else node
            case Ref(kind=RefKind.TERM):
                return Ref(RefKind.LOCAL, self.local[(node.name, node.index)], node.type, None, node.span)
            case Ref(kind=RefKind.STATE) if node.name in self.timers:
                return self._timer_value(node)
            case Ref():
                return node
            case Op() if node.op in COMPARISONS:
                return self._comparison(node)
            case Op(op="sub", args=(Const(value=0), other)):
                # 0 - x is -x: gcc 12 folds 0.0 - (float)i so, with the other sign of zero, whatever the flags
                return op("neg", self._translate(other), span=node.span)
            case Op():
                return Op(node.op, tuple(self._translate(a) for a in node.args), node.type, node.table, node.span)

    def _timer(self, node: Node) -> bool:
        return isinstance(node, Ref) and node.kind is RefKind.STATE and node.name in self.timers

    def _timer_value(self, node: Ref) -> Node:
        """A timer as a real time: its steps times the step."""
        unit = self.timers[node.name]
        return op(
            "mul",
            op("to_real", _steps_of(node), span=node.span),
            real(self.rounded(self.step / unit.scale), node.span),
            span=node.span,
        )

    def _comparison(self, node: Op) -> Node:
        left, right = node.args
        if self._timer(left) or self._timer(right):
            unit = self.timers[(left if self._timer(left) else right).name]  # type: ignore[union-attr]
            return Op(node.op, (self.in_steps(left, unit), self.in_steps(right, unit)), node.type, "", node.span)
        return Op(node.op, (self._side(left, _MIRROR[node.op]), self._side(right, node.op)), node.type, "", node.span)

    def _side(self, node: Node, sign: str) -> Node:
        """One side of a comparison; `sign` as seen with this side on the right."""
        if isinstance(node, Const) and node.type == REAL:
            how = Rounding.NEAREST if self.law.thresholds == "nearest" else _LATER[sign]
            return real(self.rounded(Fraction(node.value), node.span, how), node.span)
        return self._translate(node)

    def in_steps(self, node: Node, unit: Unit) -> Node:
        """A time (in the unit of a timer) in whole steps, rounded up."""
        node = self.exact(node)
        if isinstance(node, Const):
            return integer(self.steps(Fraction(node.value), unit, node.span), node.span)
        if isinstance(node, Ref) and self._timer(node) and self.timers[node.name].same(unit):
            return _steps_of(node)
        if isinstance(node, Op) and node.op == "select":
            condition, yes, no = node.args
            return op(
                "select", self._translate(condition), self.in_steps(yes, unit), self.in_steps(no, unit), span=node.span
            )
        if isinstance(node, Op) and node.op == "mul" and isinstance(node.args[1], Const):
            scaled = Unit(unit.powers, unit.scale * Fraction(node.args[1].value))
            return self.in_steps(node.args[0], scaled)
        period = real(self.rounded(self.step / unit.scale), node.span)
        return op("to_steps", op("div", self._translate(node), period, span=node.span), span=node.span)


def _steps_of(node: Ref) -> Ref:
    return Ref(RefKind.STATE, node.name, INT, None, node.span)


def constants_of(law: Law) -> dict[Node, Const]:
    """The parameters that are not tunable, as known nodes."""
    known: dict[Node, Const] = {}
    for p in law.parameters:
        if not p.tunable:
            for i, value in enumerate(p.value):
                ref = Ref(RefKind.PARAMETER, p.name, p.type, i if p.shape else None)
                known[ref] = Const(Fraction(value) if p.type.kind is Kind.REAL else value, p.type, p.span)
                if p.type.kind is Kind.REAL and Fraction(value).denominator == 1:
                    known[Ref(ref.kind, ref.name, INT, ref.index)] = integer(int(value), p.span)
    return known


def timers_of(law: Law) -> dict[str, Unit]:
    """The timers and their units (each a time)."""
    timers = {s.name: s.unit for s in law.states if s.kind is StateKind.TIMER}
    assert all(u.alike(SECOND) for u in timers.values())
    return timers
