"""Tables in fixed point: a choice of lines, each rounded once; every number a constant in the code."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import replace
from fractions import Fraction

from hybgen.diag.span import Span
from hybgen.expr.core import Node, integer, op
from hybgen.step.model import StepGrid, StepTable
from hybgen.step.scaled import MOST, Refused, Scaled, added, multiplied, raw, rescaled, room

Numbers = Sequence[Fraction]
Define = Callable[[str, Scaled], Scaled]
"""Makes a definition of a value, so that it is computed once; the reference to it."""

FINE = 2**20
"""So many raw values between two points make the rounding of the points negligible."""
LONGEST = 30
"""Places of a slope: with them `fixed_line` stays below 2**63."""


def curve(table: StepTable, x: Scaled, span: Span, define: Define) -> Scaled:
    """table(x)."""
    return _line(table.x, table.y, define(f"{table.name} at", _among(table.x, x, span)), span)


def grid(table: StepGrid, x: Scaled, y: Scaled, span: Span, define: Define) -> Scaled:
    """table(x, y): between two rows' curves of x (the rows are those of y)."""
    x = define(f"{table.name} at x", _among(table.x, x, span))
    y = define(f"{table.name} at y", _among(table.y, y, span))
    rows = [
        define(f"{table.name} row {j}", _line(table.x, [z[j] for z in table.z], x, span)) for j in range(len(table.y))
    ]
    cells: list[Scaled] = []
    for j in range(len(rows) - 1):
        share = _line(table.y[j : j + 2], [Fraction(0), Fraction(1)], y, span)
        rise = added(rows[j + 1], rows[j], True, span)
        cells.append(added(rows[j], multiplied(share, rise, span), False, span))
    places = min(c.places for c in (*cells, rows[0], rows[-1]))
    first, *inner, last = (rescaled(c, places, span) for c in (rows[0], *cells, rows[-1]))
    return _chosen([raw(p, y.places) for p in table.y], inner, first, last, y, span)


def _among(points: Numbers, x: Scaled, span: Span) -> Scaled:
    """x with places for which the points have room, and which tell them apart finely; x beyond the last point may be held."""
    most = room(max(abs(p) for p in points))
    if x.places > most:
        return rescaled(x, most, span)
    unit = Fraction(2) ** x.places
    exact = all((p * unit).denominator == 1 for p in points)
    gap = min(b - a for a, b in zip(points, points[1:], strict=False))
    found = x if exact or gap * unit >= FINE else rescaled(x, most, span)
    if gap * Fraction(2) ** found.places < 1:
        raise Refused(f"two points of a table are closer than {2.0**-found.places:.3g}, the resolution of its argument")
    return found


def _line(xs: Numbers, ys: Numbers, x: Scaled, span: Span) -> Scaled:
    """Linear between the points, held beyond the ends."""
    points = [raw(p, x.places) for p in xs]
    slopes = [(d - c) / (b - a) for a, b, c, d in zip(points, points[1:], ys, ys[1:], strict=False)]
    places = min(room(max(abs(v) for v in ys)), room(max(abs(m) for m in slopes)))
    cells = [_segment(points[i : i + 2], raw(ys[i], places), m, x, places, span) for i, m in enumerate(slopes)]
    # the rounding of the points, and the error of x, along the steepest slope
    aside = max(abs((d - c) / (b - a)) for a, b, c, d in zip(xs, xs[1:], ys, ys[1:], strict=False)) * (x.half + x.error)
    cells = [replace(c, error=c.error + aside) for c in cells]
    first, last = (_constant(y, places, span) for y in (ys[0], ys[-1]))
    return _chosen(points, cells, first, last, x, span)


def _constant(value: Fraction, places: int, span: Span) -> Scaled:
    found = raw(value, places)
    return Scaled(integer(found, span), places, found, found, Fraction(2) ** -(places + 1))


def _segment(points: Sequence[int], start: int, slope: Fraction, x: Scaled, places: int, span: Span) -> Scaled:
    """start + slope * (x - first point), rounded once; its interval is that of its two ends."""
    per = slope * Fraction(2) ** places
    left = min(LONGEST, max(0, room(abs(per))))
    numbers = (start, raw(per, left))
    shifts = [integer(left, span), integer(left, span)]
    begin, steep, first = (integer(n, span) for n in (*numbers, points[0]))
    last = round(start + Fraction(numbers[1] * (points[1] - points[0]), 2**left))
    node = op("fixed_line", begin, steep, x.node, first, *shifts, span=span)
    found = Scaled(node, places, max(-MOST, min(start, last)), min(MOST, max(start, last)))
    # the rounding of the start and of the result, and that of the slope along the run
    run = Fraction(points[1] - points[0], 2 ** (left + 1)) * Fraction(2) ** -places
    return replace(found, error=2 * found.half + run)


def _chosen(
    points: Sequence[int], cells: Sequence[Scaled], first: Scaled, last: Scaled, x: Scaled, span: Span
) -> Scaled:
    """The cell in which x lies, found by halves; the first value up to the first point, the last one from the last. All of
    them have the same places."""
    marks = [integer(p, span) for p in points]

    def between(low: int, high: int) -> Node:
        """x is known to be in the cells low … high - 1."""
        if high - low == 1:
            return cells[low].node
        middle = (low + high) // 2
        return op("select", op("lt", x.node, marks[middle]), between(low, middle), between(middle, high), span=span)

    inner = op("select", op("ge", x.node, marks[-1]), last.node, between(0, len(cells)), span=span)
    whole = op("select", op("le", x.node, marks[0]), first.node, inner, span=span)
    values = (first, last, *cells)
    # a point that rounding moves, or an error of x, may choose the neighbour: both lines meet at the point
    error = 2 * max(v.error for v in values)
    return Scaled(whole, first.places, min(v.low for v in values), max(v.high for v in values), error)
