"""Sums, products and powers of checked values."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from fractions import Fraction

from hybgen.diag.finding import Findings
from hybgen.diag.span import Span
from hybgen.expr.core import INT, REAL, Const, Kind, Node, integer, op, real
from hybgen.expr.quantity import Stop, Typed, fit_unit, shape_words, to_integers, to_reals, type_words, unit_words
from hybgen.expr.units import KELVIN, ONE, Unit

LARGEST = 2**31 - 1
_WORDS = {"+": "added", "-": "subtracted", "*": "multiplied", "/": "divided", "@": "multiplied as matrices"}
_INTEGER = {"+": "iadd", "-": "isub", "*": "imul"}
_REAL = {"+": "add", "-": "sub", "*": "mul", "/": "div"}
_EXACT: dict[str, Callable[[Fraction, Fraction], Fraction]] = {
    "+": lambda a, b: a + b,
    "-": lambda a, b: a - b,
    "*": lambda a, b: a * b,
    "/": lambda a, b: a / b,
}
MOST_BITS = 4096


def stop(findings: Findings, code: str, span: Span, message: str, hint: str | None = None) -> Stop:
    """Add a finding; the exception to raise."""
    findings.error(code, span, message, hint=hint)
    return Stop()


def numeric(found: Typed, what: str, findings: Findings) -> Typed:
    """The value, known to be a number."""
    if found.type.kind not in (Kind.REAL, Kind.INT):
        raise stop(
            findings,
            "HG204",
            found.span,
            f"{what}: this is {type_words(found.type)}, not a number",
            "write choose(condition, 1, 0)" if found.type.kind is Kind.BOOL else None,
        )
    return found


def joined(left: Typed, right: Typed, span: Span) -> Typed:
    """A value with the names of both and nothing else yet."""
    return Typed((), REAL, names=left.names | right.names, uses_jumped=left.uses_jumped or right.uses_jumped, span=span)


def binary(sign: str, left: Typed, right: Typed, span: Span, findings: Findings) -> Typed:
    """left sign right, for + - * / @."""
    for side in (left, right):
        numeric(side, f"nothing else can be {_WORDS[sign]}", findings)
    if sign == "@":
        return matrix_product(left, right, span, findings)
    if sign != "/" and INT in (left.type, right.type) and all(s.type == INT or s.whole for s in (left, right)):
        return _whole(sign, to_integers(left), to_integers(right), span, findings)
    left, right = to_reals(left), to_reals(right)
    if sign in "+-":
        left, right, unit = _same_unit(sign, left, right, span, findings)
    else:
        unit = _product_unit(sign, left, right, span, findings)
    nodes, shape = _elementwise(sign, left, right, span, findings)
    return replace(
        joined(left, right, span), nodes=nodes, shape=shape, unit=unit, const=_folded(sign, left, right, span, findings)
    )


def _whole(sign: str, left: Typed, right: Typed, span: Span, findings: Findings) -> Typed:
    if left.shape or right.shape:
        raise stop(findings, "HG208", span, "whole numbers are single values")
    left = _room_for(sign, left, right, span)
    (a, b), (c, d) = bounds_of(left), bounds_of(right)
    ends = [_EXACT[sign](x, y) for x in (a, b) for y in (c, d)]
    low, high = min(ends), max(ends)
    check_32_bits(low, high, span, findings)
    return replace(
        joined(left, right, span),
        nodes=(op(_INTEGER[sign], left.nodes[0], right.nodes[0], span=span),),
        type=INT,
        bounds=(low, high),
    )


def _room_for(sign: str, left: Typed, right: Typed, span: Span) -> Typed:
    """Adding or subtracting a constant saturates at 32 bits: the other side is held where there is room for it."""
    low, high = bounds_of(left)
    if sign == "*" or right.const is None or not right.const:
        return left
    shift = right.const[0] if sign == "+" else -right.const[0]
    top, bottom = LARGEST - max(shift, Fraction(0)), -LARGEST - min(shift, Fraction(0))
    if high > top:
        left = replace(
            left, nodes=(op("imin", left.nodes[0], integer(int(top)), span=span),), bounds=(low, Fraction(top))
        )
    if low < bottom:
        node = op("imax", left.nodes[0], integer(int(bottom)), span=span)
        left = replace(left, nodes=(node,), bounds=(Fraction(bottom), bounds_of(left)[1]))
    return left


def check_32_bits(low: Fraction, high: Fraction, span: Span, findings: Findings) -> None:
    """A finding if an integer may leave 32 bits."""
    if low < -LARGEST or high > LARGEST:
        raise stop(
            findings,
            "HG211",
            span,
            f"this whole number runs from {low} to {high}: more than 32 bits hold",
            "use smaller ranges, or a real number",
        )


def bounds_of(found: Typed) -> tuple[Fraction, Fraction]:
    """The range of an integer."""
    assert found.type == INT
    return found.bounds if found.bounds is not None else (Fraction(-LARGEST), Fraction(LARGEST))


def _same_unit(sign: str, left: Typed, right: Typed, span: Span, findings: Findings) -> tuple[Typed, Typed, Unit]:
    """Operands of a sum, and the unit of the result; degC and K follow their own rules."""
    if left.unit.absolute or right.unit.absolute:
        return left, right, _temperature(sign, left, right, span, findings)
    if left.zero and not right.zero:
        return replace(left, unit=right.unit), right, right.unit
    return left, fit_unit(right, left.unit, "the left side", findings), left.unit


def _temperature(sign: str, left: Typed, right: Typed, span: Span, findings: Findings) -> Unit:
    if left.unit.absolute and right.unit.absolute:
        if sign == "-":
            return KELVIN
        raise stop(findings, "HG213", span, "two temperatures in degC can't be added", "add a difference in K")
    point, other = (left, right) if left.unit.absolute else (right, left)
    if point is right and sign == "-":
        raise stop(findings, "HG213", span, "a temperature in degC can't be subtracted from a difference")
    fit_unit(other, KELVIN, "a difference of temperatures", findings)
    return point.unit


def _product_unit(sign: str, left: Typed, right: Typed, span: Span, findings: Findings) -> Unit:
    for side, other in ((left, right), (right, left)):
        if side.unit.absolute and not (other.unit.plain and other.const == (Fraction(1),)):
            raise stop(
                findings,
                "HG213",
                side.span,
                "a temperature in degC can't be multiplied or divided",
                "subtract a reference temperature first: (t - 25 degC) is in K",
            )
    unit = left.unit * right.unit if sign == "*" else left.unit / right.unit
    if (
        any(abs(p) > 64 for p in unit.powers)
        or unit.scale.numerator.bit_length() > 2048
        or unit.scale.denominator.bit_length() > 2048
    ):
        raise stop(findings, "HG202", span, "the unit of this product is out of any reason")
    return unit


def _elementwise(
    sign: str, left: Typed, right: Typed, span: Span, findings: Findings
) -> tuple[tuple[Node, ...], tuple[int, ...]]:
    if sign in "*/" and left.shape and right.shape:
        raise stop(
            findings,
            "HG208",
            span,
            f"{shape_words(left.shape)} and {shape_words(right.shape)} can't be {_WORDS[sign]}",
            "use dot(a, b), cross(a, b) or A @ x",
        )
    if sign == "/" and right.shape:
        raise stop(findings, "HG208", right.span, "nothing can be divided by a vector")
    if sign in "+-" and left.shape != right.shape:
        raise stop(
            findings, "HG208", span, f"{shape_words(left.shape)} and {shape_words(right.shape)} can't be {_WORDS[sign]}"
        )
    shape = left.shape or right.shape
    count = max(len(left.nodes), len(right.nodes))
    a = left.nodes if left.shape == shape else left.nodes * count
    b = right.nodes if right.shape == shape else right.nodes * count
    return tuple(op(_REAL[sign], x, y, span=span) for x, y in zip(a, b, strict=True)), shape


def _folded(sign: str, left: Typed, right: Typed, span: Span, findings: Findings) -> tuple[Fraction, ...] | None:
    """Exact values where both sides are constant."""
    if right.const is not None and sign == "/" and 0 in right.const:
        raise stop(findings, "HG216", right.span, "this divides by zero")
    if left.const is None or right.const is None:
        return None
    count = max(len(left.const), len(right.const))
    a = left.const if len(left.const) == count else left.const * count
    b = right.const if len(right.const) == count else right.const * count
    values = tuple(_EXACT[sign](x, y) for x, y in zip(a, b, strict=True))
    if any(v.numerator.bit_length() + v.denominator.bit_length() > MOST_BITS for v in values):
        raise stop(findings, "HG216", span, "this constant is out of any reason")
    return values


def negate(found: Typed, span: Span, findings: Findings) -> Typed:
    """-found."""
    numeric(found, "nothing else has a sign", findings)
    if found.unit.absolute:
        raise stop(findings, "HG213", span, "a temperature in degC has no opposite", "write -5 degC for a constant")
    name = "ineg" if found.type == INT else "neg"
    bounds = (-found.bounds[1], -found.bounds[0]) if found.bounds else None
    const = tuple(-c for c in found.const) if found.const else None
    return replace(
        found,
        nodes=tuple(op(name, n, span=span) for n in found.nodes),
        bounds=bounds,
        const=const,
        timer=False,
        span=span,
    )


def power(base: Typed, exponent: int, span: Span, findings: Findings) -> Typed:
    """base**exponent as a chain of products from the left; a negative power is one divided by the chain."""
    numeric(base, "nothing else has a power", findings)
    if base.shape:
        raise stop(findings, "HG208", span, f"{shape_words(base.shape)} has no power")
    base = to_reals(base)
    one = Typed((Const(Fraction(1), REAL, span),), REAL, const=(Fraction(1),), span=span)
    if exponent == 0:
        return replace(one, names=base.names)
    result = base
    for _ in range(abs(exponent) - 1):
        result = binary("*", result, base, span, findings)
    return result if exponent > 0 else binary("/", one, result, span, findings)


def matrix_product(left: Typed, right: Typed, span: Span, findings: Findings) -> Typed:
    """A @ x: each component is summed from left to right."""
    left, right = to_reals(left), to_reals(right)
    if not left.shape or not right.shape or left.shape[-1] != right.shape[0]:
        raise stop(
            findings,
            "HG208",
            span,
            f"{shape_words(left.shape)} @ {shape_words(right.shape)} does not fit",
            "the columns of the left have to be as many as the rows of the right",
        )
    unit = _product_unit("*", left, right, span, findings)
    inner = right.shape[0]
    rows = left.shape[0] if len(left.shape) == 2 else 1
    columns = right.shape[1] if len(right.shape) == 2 else 1
    if rows * columns * inner > 4096:
        raise stop(findings, "HG208", span, "this product has more than 4096 terms")
    nodes = tuple(
        sum_products([(left.nodes[i * inner + k], right.nodes[k * columns + j]) for k in range(inner)], span)
        for i in range(rows)
        for j in range(columns)
    )
    shape = left.shape[:-1] + right.shape[1:]
    return replace(joined(left, right, span), nodes=nodes, shape=shape, unit=unit)


def sum_products(pairs: list[tuple[Node, Node]], span: Span) -> Node:
    """((a0*b0 + a1*b1) + a2*b2) + ..."""
    total: Node | None = None
    for a, b in pairs:
        term = op("mul", a, b, span=span)
        total = term if total is None else op("add", total, term, span=span)
    return total if total is not None else real(0, span)


__all__ = ["ONE", "binary", "bounds_of", "negate", "power", "unit_words"]
