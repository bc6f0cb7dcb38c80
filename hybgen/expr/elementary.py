"""The elementary functions on checked values: what units they take and give."""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction
from math import isqrt

from hybgen.diag.finding import Findings
from hybgen.diag.span import Span
from hybgen.expr.algebra import numeric, stop
from hybgen.expr.constant import PI
from hybgen.expr.core import REAL, Node, op, real
from hybgen.expr.functions import Apply, Function, gathered, scalars, unify
from hybgen.expr.quantity import Typed, fit_unit, shape_words, to_reals, unit_words
from hybgen.expr.units import ONE, Unit


def _one(value: Typed, what: str, findings: Findings) -> Typed:
    """A single real value."""
    (value,) = scalars([value], what, findings)
    return to_reals(value)


def _given(values: list[Typed], node: Node, unit: Unit, span: Span) -> Typed:
    return replace(gathered(values, span), nodes=(node,), type=REAL, shape=(), unit=unit)


def _plain(name: str) -> Apply:
    """A function of a number, that gives a number (an angle in radians)."""

    def apply(values: list[Typed], span: Span, findings: Findings) -> Typed:
        value = fit_unit(_one(values[0], f"{name}()", findings), ONE, f"the argument of {name}()", findings)
        return _given(values, op(name, value.nodes[0], span=span), ONE, span)

    return apply


def _is_degrees(unit: Unit) -> bool:
    """An angle whose scale has a pi, such as the degree."""
    return unit.alike(ONE) and unit.pi == 1


def _of_angle(name: str) -> Apply:
    """A function of an angle: radians as they are, degrees times pi / 180."""

    def apply(values: list[Typed], span: Span, findings: Findings) -> Typed:
        value = _one(values[0], f"{name}()", findings)
        node = value.nodes[0]
        if _is_degrees(value.unit):
            node = op("mul", node, real(PI * value.unit.scale, span), span=span)
        else:
            node = fit_unit(value, ONE, f"the argument of {name}()", findings).nodes[0]
        return _given(values, op(name, node, span=span), ONE, span)

    return apply


def _alike(values: list[Typed], name: str, span: Span, findings: Findings) -> list[Typed]:
    """Real single values of one unit."""
    values = [to_reals(v) for v in unify(scalars(values, f"{name}()", findings), span, findings)]
    if values[0].unit.absolute:
        raise stop(findings, "HG213", span, f"{name}() takes no temperatures in degC", "subtract a reference first")
    return values


def _atan2(values: list[Typed], span: Span, findings: Findings) -> Typed:
    y, x = _alike(values, "atan2", span, findings)
    return _given(values, op("atan2", y.nodes[0], x.nodes[0], span=span), ONE, span)


def _hypot(values: list[Typed], span: Span, findings: Findings) -> Typed:
    x, y = _alike(values, "hypot", span, findings)
    return _given(values, op("hypot", x.nodes[0], y.nodes[0], span=span), x.unit, span)


def _norm(values: list[Typed], span: Span, findings: Findings) -> Typed:
    """The Euclidean norm, component after component: no square that could overflow."""
    value = to_reals(numeric(values[0], "norm() takes a vector", findings))
    if len(value.shape) != 1:
        raise stop(findings, "HG208", span, f"norm() takes a vector, this is {shape_words(value.shape)}")
    if value.unit.absolute:
        raise stop(findings, "HG213", span, "norm() takes no temperatures in degC", "subtract a reference first")
    node = value.nodes[0]
    if len(value.nodes) == 1:
        node = op("abs", node, span=span)
    for other in value.nodes[1:]:
        node = op("hypot", node, other, span=span)
    return _given(values, node, value.unit, span)


def _root(value: int) -> int | None:
    return isqrt(value) if isqrt(value) ** 2 == value else None


def _sqrt(values: list[Typed], span: Span, findings: Findings) -> Typed:
    """The unit's root has to be a unit: m2 -> m."""
    value = _one(values[0], "sqrt()", findings)
    unit = value.unit
    top, bottom = _root(unit.scale.numerator), _root(unit.scale.denominator)
    if unit.absolute or unit.pi % 2 or any(p % 2 for p in unit.powers) or not top or not bottom:
        raise stop(
            findings,
            "HG202",
            span,
            f"the argument of sqrt() is {unit_words(unit)}: that has no square root among the units",
            "divide by a unit first, such as x / (1 m)",
        )
    root = Unit(tuple(p // 2 for p in unit.powers), Fraction(top, bottom), unit.pi // 2)
    return _given(values, op("sqrt", value.nodes[0], span=span), ONE if root.same(ONE) else root, span)


def _wrap(values: list[Typed], span: Span, findings: Findings) -> Typed:
    """The angle in (-pi, pi]. Degrees: x + 360 * floor(1/2 - x / 360), which is exact where x is not large."""
    value = _one(values[0], "wrap()", findings)
    node = value.nodes[0]
    if not _is_degrees(value.unit):
        fit_unit(value, ONE, "the argument of wrap()", findings)
        return _given(values, op("wrap", node, span=span), ONE, span)
    turn = real(2 / value.unit.scale, span)
    turns = op("floor", op("sub", real(Fraction(1, 2), span), op("div", node, turn, span=span), span=span), span=span)
    return _given(values, op("add", node, op("mul", turn, turns, span=span), span=span), value.unit, span)


ELEMENTARY: dict[str, Function] = {
    **{name: Function(1, 1, _plain(name)) for name in ("exp", "log", "asin", "acos", "tanh")},
    **{name: Function(1, 1, _of_angle(name)) for name in ("sin", "cos", "tan")},
    "sqrt": Function(1, 1, _sqrt),
    "atan2": Function(2, 2, _atan2),
    "hypot": Function(2, 2, _hypot),
    "norm": Function(1, 1, _norm),
    "wrap": Function(1, 1, _wrap),
}
