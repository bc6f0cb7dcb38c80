"""A checked expression as a value, and making it fit what is wanted."""

from __future__ import annotations

from dataclasses import dataclass, replace
from fractions import Fraction

from hybgen.diag.finding import Findings
from hybgen.diag.span import NOWHERE, Span
from hybgen.diag.suggest import nearest
from hybgen.expr.constant import factor
from hybgen.expr.core import INT, REAL, Const, Kind, Node, Op, Ref, Type, integer, op, real
from hybgen.expr.units import ONE, Unit


class Stop(Exception):
    """Internal: a finding has been added and there is nothing to go on with."""


@dataclass(frozen=True, slots=True)
class Typed:
    """A checked expression.

    `nodes` has one tree for each component (row-major). `const` are the exact values of a constant
    expression (real nodes). `zero`: a literal 0, which fits any unit. `timer`: a timer itself. `bounds`: the
    range of an integer. `bare`: a name that is no quantity; it may be a logic value. `names`: the
    quantities used.
    """

    nodes: tuple[Node, ...]
    type: Type
    shape: tuple[int, ...] = ()
    unit: Unit = ONE
    const: tuple[Fraction, ...] | None = None
    zero: bool = False
    timer: bool = False
    bounds: tuple[Fraction, Fraction] | None = None
    bare: str | None = None
    names: frozenset[str] = frozenset()
    uses_jumped: bool = False
    span: Span = NOWHERE

    @property
    def whole(self) -> bool:
        """Dimensionless constants that may stand as integers."""
        if self.const is None and self.type == REAL and self.unit.plain:
            return all(isinstance(n, Op) and _as_integer(n) is not None for n in self.nodes)
        return (
            self.const is not None
            and self.unit.plain
            and self.type == REAL
            and all(c.denominator == 1 and abs(c) < 2**31 for c in self.const)
        )


@dataclass(frozen=True, slots=True)
class Want:
    """What an expression has to fit: `what` names it in messages (`state 'depth'`)."""

    type: Type
    shape: tuple[int, ...] = ()
    unit: Unit = ONE
    what: str = "this"
    timer: bool = False
    """Times in any unit are converted."""


def enum_value(name: str, owner: Type, span: Span) -> Typed:
    """A value of a logic variable."""
    return Typed((Const(owner.values.index(name), owner, span),), owner, span=span)


def shape_words(shape: tuple[int, ...]) -> str:
    """A shape in words."""
    match shape:
        case ():
            return "a single value"
        case (n,):
            return f"a vector of {n}"
        case _:
            return f"a {' by '.join(map(str, shape))} matrix"


def type_words(type_: Type) -> str:
    """A type in words."""
    match type_.kind:
        case Kind.BOOL:
            return "true or false"
        case Kind.INT:
            return "a whole number"
        case Kind.REAL:
            return "a number"
        case Kind.ENUM:
            return f"one of {', '.join(type_.values)}"


def describe(found: Typed) -> str:
    """What a checked expression is, in words."""
    return shape_words(found.shape) if found.shape else type_words(found.type)


def unit_words(unit: Unit) -> str:
    """A unit in words."""
    return "dimensionless" if unit.plain else f"in {unit}"


def _as_integer(node: Node) -> Node | None:
    """Whole constants, and choices of them, as integers."""
    match node:
        case Const():
            return integer(int(node.value), node.span) if Fraction(node.value).denominator == 1 else None
        case Op(op="select"):
            parts = [_as_integer(a) for a in node.args[1:]]
            return op("select", node.args[0], *[p for p in parts if p], span=node.span) if all(parts) else None
        case _:
            return None


def _ends(node: Node) -> tuple[Fraction, Fraction]:
    """The least and the largest of the constants that a choice may give."""
    if isinstance(node, Op):
        ends = [_ends(a) for a in node.args[1:]]
        return min(e[0] for e in ends), max(e[1] for e in ends)
    assert isinstance(node, Const)
    return Fraction(node.value), Fraction(node.value)


def to_integers(found: Typed) -> Typed:
    """A whole constant, or a choice of them, as integers."""
    if found.type == INT:
        return found
    assert found.whole
    if found.const is None:
        nodes = tuple(n for n in (_as_integer(n) for n in found.nodes) if n is not None)
        ends = [_ends(n) for n in nodes]
        return replace(found, nodes=nodes, type=INT, bounds=(min(e[0] for e in ends), max(e[1] for e in ends)))
    nodes = tuple(
        Ref(n.kind, n.name, INT, n.index, n.span) if isinstance(n, Ref) else integer(int(c), found.span)
        for n, c in zip(found.nodes, found.const, strict=True)
    )
    return replace(found, nodes=nodes, type=INT, bounds=(min(found.const), max(found.const)))


def to_reals(found: Typed) -> Typed:
    """Integers as reals."""
    if found.type != INT:
        return found
    return replace(found, nodes=tuple(op("to_real", n, span=found.span) for n in found.nodes), type=REAL, bounds=None)


def rescaled(found: Typed, unit: Unit) -> Typed:
    """An expression in another unit of the same dimension, by its exact factor."""
    ratio = factor(found.unit, unit)
    nodes = tuple(op("mul", n, real(ratio, found.span), span=found.span) for n in found.nodes)
    const = tuple(c * ratio for c in found.const) if found.const is not None else None
    return replace(found, nodes=nodes, const=const, unit=unit, timer=False)


def fit_unit(found: Typed, unit: Unit, what: str, findings: Findings, timer: bool = False) -> Typed:
    """The value, known to be in `unit`; raises Stop after a finding."""
    if found.zero or found.unit.same(unit):
        return replace(found, unit=unit)
    if found.unit.alike(unit):
        if timer:
            return rescaled(found, unit)
        factor_text = found.unit.factor_text(unit)
        findings.error(
            "HG203",
            found.span,
            f"{what} is {unit_words(unit)}, this is {unit_words(found.unit)}: the factor {factor_text} is missing",
            hint=f"multiply by {factor_text}, or declare both in one unit",
        )
        raise Stop
    hint = None
    if found.unit.powers == unit.powers:
        hint = "a difference of temperatures is in K, a temperature in degC"
    findings.error("HG202", found.span, f"{what} is {unit_words(unit)}, this is {unit_words(found.unit)}", hint=hint)
    raise Stop


def coerce(found: Typed, want: Want, findings: Findings) -> Typed:
    """The value made to fit; raises Stop after a finding."""
    if found.bare is not None:
        raise _no_value(found, want, findings)
    if found.shape != want.shape:
        if found.zero and want.type.kind is Kind.REAL:
            count = 1
            for n in want.shape:
                count *= n
            return replace(
                found,
                nodes=found.nodes * count,
                shape=want.shape,
                const=(Fraction(0),) * count,
                unit=want.unit,
            )
        findings.error(
            "HG208", found.span, f"{want.what} is {shape_words(want.shape)}, this is {shape_words(found.shape)}"
        )
        raise Stop
    match want.type.kind:
        case Kind.REAL if found.type.kind in (Kind.REAL, Kind.INT):
            return fit_unit(to_reals(found), want.unit, want.what, findings, want.timer)
        case Kind.INT if found.type == INT:
            return found
        case Kind.INT if found.whole:
            return to_integers(found)
        case Kind.BOOL if found.type.kind is Kind.BOOL:
            return found
        case Kind.ENUM if found.type.kind is Kind.ENUM and found.type.values == want.type.values:
            return found
    hint = None
    if want.type.kind is Kind.BOOL and found.type.kind in (Kind.REAL, Kind.INT):
        hint = "compare it with a threshold"
    elif want.type.kind is Kind.REAL and found.type.kind is Kind.BOOL:
        hint = "write choose(condition, 1, 0)"
    findings.error(
        "HG204", found.span, f"{want.what} has to be {type_words(want.type)}, this is {describe(found)}", hint=hint
    )
    raise Stop


def _no_value(found: Typed, want: Want, findings: Findings) -> Stop:
    assert found.bare is not None
    close, hint = None, None
    if want.type.kind is Kind.ENUM:
        close = nearest(found.bare, want.type.values)
        hint = f"its values are {', '.join(want.type.values)}"
        message = f"'{found.bare}' is no value of {want.what}"
    else:
        message = f"unknown name '{found.bare}'"
    findings.error("HG201", found.span, message, hint=f"did you mean '{close}'?" if close else hint)
    return Stop()
