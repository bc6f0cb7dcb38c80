"""Fixed point: what the resolution of a quantity is too coarse for."""

from __future__ import annotations

from collections.abc import Iterator
from fractions import Fraction

from hybgen.diag.finding import Finding, Severity, Verdict
from hybgen.diag.span import Span
from hybgen.expr.core import Const, Node, Op, Ref, RefKind, walk
from hybgen.numbers.rounding import Domain, Unbounded, interval
from hybgen.step import StepLaw
from hybgen.step.build import domain

FEW = 4
"""A gap of fewer units than this between opposite jumps is hardly one."""
_MIRROR = {"ge": "le", "gt": "lt", "le": "ge", "lt": "gt"}


def questions(made: StepLaw) -> Iterator[Finding]:
    """Increments, noise and gaps against the resolution; nothing for floats."""
    if made.places:
        yield from _stuck(made)
        yield from _noise(made)
        yield from _gaps(made)


def _unit(made: StepLaw, kind: RefKind, name: str) -> float:
    return 2.0 ** -made.places[(kind, name)]


def _finding(code: str, span: Span, subject: str, message: str, resolution: float, value: float, hint: str) -> Finding:
    values = {"resolution": resolution, "value": value}
    return Finding(code, "rounding", Verdict.REFUTED, Severity.WARNING, span, subject, message, value=values, hint=hint)


def _stuck(made: StepLaw) -> Iterator[Finding]:
    """States whose largest increment is rounded to nothing."""
    translator, known = domain(made.law, step=made.step, number=made.format.name)
    for rate in made.law.flow.rates:
        unit = _unit(made, RefKind.STATE, rate.state)
        try:
            low, high = interval(translator.exact(rate.expr), known)
        except Unbounded:
            continue
        largest = max(-low, high) * float(made.step)
        if 0 < largest < unit / 2:
            message = (
                f"'{rate.state}' can't move: its resolution is {unit:.3g}, and {float(made.step):.9g} s of its fastest "
                f"rate are {largest:.3g}"
            )
            yield _finding(
                "HG423", rate.span, rate.state, message, unit, largest, "use float64, a longer step, or a smaller range"
            )


def _noise(made: StepLaw) -> Iterator[Finding]:
    for u in made.law.inputs:
        if (RefKind.INPUT, u.name) not in made.places:
            continue
        unit = _unit(made, RefKind.INPUT, u.name)
        for word, value in (("noise", u.noise), ("resolution", u.resolution)):
            if value is not None and 0 < value < unit:
                message = f"the {word} of '{u.name}' is {float(value):.3g}, its resolution in fixed32 {unit:.3g}"
                yield _finding(
                    "HG424",
                    u.span,
                    u.name,
                    message,
                    unit,
                    float(value),
                    "use a smaller range, another unit, or float32",
                )


def _gaps(made: StepLaw) -> Iterator[Finding]:
    """Pairs of jumps, one above a threshold of a quantity and one below another."""
    translator, known = domain(made.law, step=made.step, number=made.format.name)
    marks = [(j, m) for j in made.law.jumps for m in _marks(translator.exact(j.condition), known)]
    for upper, (up, ref, (high, _)) in marks:
        for lower, (down, other, (_, low)) in marks:
            if upper is lower or not up or down or ref != other or (ref.kind, ref.name) not in made.places:
                continue
            unit = _unit(made, ref.kind, ref.name)
            gap = float(high - low)
            if 0 < gap < FEW * unit:
                message = (
                    f"between '{upper.name}' and '{lower.name}' '{ref.name}' has a gap of {gap:.3g}, "
                    f"its resolution is {unit:.3g}"
                )
                yield _finding(
                    "HG425", upper.span, upper.name, message, unit, gap, "use a wider gap, or a smaller range"
                )


def _marks(condition: Node, known: Domain) -> Iterator[tuple[bool, Ref, tuple[Fraction, Fraction]]]:
    """(above?, quantity, ends of the threshold) of each comparison of a quantity with a constant or parameter."""
    for node in walk(condition):
        if isinstance(node, Op) and node.op in _MIRROR:
            left, right = node.args
            for name, a, b in ((node.op, left, right), (_MIRROR[node.op], right, left)):
                ends = _ends(b, known)
                if isinstance(a, Ref) and a.kind in (RefKind.INPUT, RefKind.STATE) and ends is not None:
                    yield name in ("ge", "gt"), a, ends


def _ends(node: Node, known: Domain) -> tuple[Fraction, Fraction] | None:
    if isinstance(node, Const):
        return Fraction(node.value), Fraction(node.value)
    if isinstance(node, Ref) and node.kind is RefKind.PARAMETER:
        return known.leaves.get((node.kind, node.name))
    return None
