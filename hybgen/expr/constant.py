"""Exact values of constant expressions: the numbers of declarations."""

from __future__ import annotations

from fractions import Fraction

from hybgen.diag.finding import Findings
from hybgen.diag.span import Span
from hybgen.expr.tree import Binary, Expr, Name, Number, Unary
from hybgen.expr.units import KELVIN, ONE, Unit

PI = Fraction("3.14159265358979323846264338327950288419716939937510582097494459230781640628620899")
"""To 80 decimals: rounding it to a number format gives the same as rounding pi."""

MOST_BITS = 4096


class _Stop(Exception):
    """Internal: a finding has been added."""


def value_in(
    expr: Expr, unit: Unit | None, findings: Findings, difference: bool = False
) -> tuple[Fraction, Unit] | None:
    """The exact value of a constant expression, in `unit`, and that unit.

    A bare number is already in `unit`; a number with a unit is converted exactly. With `unit` None the
    written unit is taken. `difference` says that a difference is meant: for a unit degC that is K. None after
    adding findings (no constant, another dimension, division by zero).
    """
    if unit is not None and difference and unit.absolute:
        unit = KELVIN
    try:
        value, written = _value(expr, findings)
    except _Stop:
        return None
    if unit is None:
        return value, written if written is not None else ONE
    if written is None:
        return value, unit
    if not written.alike(unit):
        findings.error(
            "HG202",
            expr.span,
            f"this is in {written}, but {unit if not unit.plain else 'a bare number'} is expected",
            hint=_temperature_hint(written, unit) or f"give it in {unit}" if not unit.plain else "leave the unit out",
        )
        return None
    return convert(value, written, unit), unit


def _temperature_hint(written: Unit, unit: Unit) -> str | None:
    if written.powers != unit.powers or written.absolute == unit.absolute:
        return None
    return "a difference of temperatures is in K, a temperature in degC"


def convert(value: Fraction, written: Unit, unit: Unit) -> Fraction:
    """A value in one unit, in another of the same dimension."""
    return value * factor(written, unit)


def factor(written: Unit, unit: Unit) -> Fraction:
    """How many of `unit` one of `written` is (pi to 80 decimals)."""
    return written.scale / unit.scale * PI ** (written.pi - unit.pi)


def _value(expr: Expr, findings: Findings) -> tuple[Fraction, Unit | None]:
    match expr:
        case Number():
            return expr.value, expr.unit
        case Name(name="pi"):
            return PI, None
        case Unary(op="-"):
            value, unit = _value(expr.operand, findings)
            return -value, unit
        case Binary(op="**"):
            return _power(expr, findings)
        case Binary(op="+" | "-" | "*" | "/"):
            return _binary(expr, findings)
        case _:
            raise _stop(findings, expr.span, "a constant is needed here: numbers and + - * / ** only")


def _stop(findings: Findings, span: Span, message: str) -> _Stop:
    findings.error("HG216", span, message)
    return _Stop()


def _binary(expr: Binary, findings: Findings) -> tuple[Fraction, Unit | None]:
    left, left_unit = _value(expr.left, findings)
    right, right_unit = _value(expr.right, findings)
    if expr.op in ("+", "-"):
        if (left_unit or ONE) != (right_unit or ONE) and not (left_unit or ONE).same(right_unit or ONE):
            raise _stop(
                findings,
                expr.span,
                f"{left_unit or 'a bare number'} and {right_unit or 'a bare number'} can't be added",
            )
        value = left + right if expr.op == "+" else left - right
        return _bounded(value, findings, expr.span), left_unit
    if any(u is not None and u.absolute for u in (left_unit, right_unit)):
        raise _stop(findings, expr.span, "a temperature in degC can't be multiplied")
    if expr.op == "/":
        if right == 0:
            raise _stop(findings, expr.span, "this divides by zero")
        value = left / right
        unit = (left_unit or ONE) / right_unit if right_unit else left_unit
    else:
        value = left * right
        unit = left_unit * right_unit if left_unit and right_unit else left_unit or right_unit
    return _bounded(value, findings, expr.span), unit


def _power(expr: Binary, findings: Findings) -> tuple[Fraction, Unit | None]:
    base, unit = _value(expr.left, findings)
    exponent, _ = _value(expr.right, findings)
    if exponent.denominator != 1 or abs(exponent) > 16:
        raise _stop(findings, expr.span, "the power has to be a whole number from -16 to 16")
    if base == 0 and exponent < 0:
        raise _stop(findings, expr.span, "this divides by zero")
    n = int(exponent)
    return _bounded(base**n, findings, expr.span), unit**n if unit else None


def _bounded(value: Fraction, findings: Findings, span: Span) -> Fraction:
    if value.numerator.bit_length() + value.denominator.bit_length() > MOST_BITS:
        raise _stop(findings, span, "this constant is out of any reason")
    return value
