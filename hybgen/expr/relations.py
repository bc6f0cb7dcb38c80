"""Comparisons and logic of checked values."""

from __future__ import annotations

from dataclasses import replace

from hybgen.diag.finding import Findings
from hybgen.diag.span import Span
from hybgen.expr.algebra import stop
from hybgen.expr.core import BOOL, INT, Kind, op
from hybgen.expr.quantity import Typed, describe, fit_unit, rescaled, to_integers, to_reals, type_words

_NAMES = {"<": "lt", "<=": "le", ">": "gt", ">=": "ge", "==": "eq", "!=": "ne"}


def condition(found: Typed, findings: Findings) -> Typed:
    """The value, known to be true or false."""
    if found.type != BOOL or found.shape:
        raise stop(
            findings,
            "HG204",
            found.span,
            f"a condition is true or false, this is {describe(found)}",
            "compare it with a threshold" if found.type.kind in (Kind.REAL, Kind.INT) else None,
        )
    return found


def inverse(found: Typed, span: Span, findings: Findings) -> Typed:
    """not found."""
    condition(found, findings)
    return replace(found, nodes=(op("not", found.nodes[0], span=span),), span=span)


def logic(word: str, operands: list[Typed], span: Span, findings: Findings) -> Typed:
    """`and` or `or` of two or more conditions."""
    nodes = tuple(condition(o, findings).nodes[0] for o in operands)
    names = frozenset[str]().union(*(o.names for o in operands))
    return Typed(
        (op(word, *nodes, span=span),), BOOL, names=names, uses_jumped=any(o.uses_jumped for o in operands), span=span
    )


def compare(sign: str, left: Typed, right: Typed, span: Span, findings: Findings) -> Typed:
    """left sign right."""
    if left.shape or right.shape:
        raise stop(findings, "HG208", span, "a vector can't be compared", "compare its components")
    left, right = _matched(sign, left, right, span, findings)
    node = op(_NAMES[sign], left.nodes[0], right.nodes[0], span=span)
    return Typed(
        (node,), BOOL, names=left.names | right.names, uses_jumped=left.uses_jumped or right.uses_jumped, span=span
    )


def _matched(sign: str, left: Typed, right: Typed, span: Span, findings: Findings) -> tuple[Typed, Typed]:
    """Both sides in one type and unit."""
    kinds = {left.type.kind, right.type.kind}
    if kinds <= {Kind.INT, Kind.REAL}:
        return _numbers(sign, left, right, span, findings)
    if len(kinds) > 1:
        raise stop(findings, "HG204", span, f"{type_words(left.type)} can't be compared with {type_words(right.type)}")
    if sign not in ("==", "!="):
        raise stop(
            findings, "HG204", span, f"'{sign}' compares numbers; these are {type_words(left.type)}", "use == or !="
        )
    if left.type.values != right.type.values:
        raise stop(findings, "HG204", span, f"{left.type.owner} and {right.type.owner} have different values")
    return left, right


def _numbers(sign: str, left: Typed, right: Typed, span: Span, findings: Findings) -> tuple[Typed, Typed]:
    if INT in (left.type, right.type) and all(s.type == INT or s.whole for s in (left, right)):
        return to_integers(left), to_integers(right)
    left, right = to_reals(left), to_reals(right)
    timed = left.timer or right.timer
    if sign in ("==", "!=") and not timed:
        raise stop(
            findings,
            "HG205",
            span,
            f"'{sign}' between real numbers is hardly ever what happens",
            "say what band you mean: abs(a - b) <= tolerance",
        )
    if timed and not left.timer and left.unit.alike(right.unit) and not left.unit.same(right.unit):
        left = rescaled(left, right.unit)
    if left.zero:
        left = replace(left, unit=right.unit)
    return left, fit_unit(right, left.unit, "the left side", findings, timer=timed)
