"""Tables in fixed point: a choice of lines, each rounded once; every number a constant in the code."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import replace
from fractions import Fraction

from hybgen.diag.span import Span
from hybgen.expr.core import Node, Op, integer, op
from hybgen.step.model import StepGrid, StepTable
from hybgen.step.scaled import MOST, Scaled, added, constant, multiplied, raw, rescaled, room

Numbers = Sequence[Fraction]
Define = Callable[[str, Scaled], Scaled]
"""Makes a definition of a value, so that it is computed once; the reference to it."""


def curve(table: StepTable, x: Scaled, span: Span, define: Define) -> Scaled:
    """table(x)."""
    return _line(table.x, table.y, define(f"{table.name} at", _among(table.x, x, span)), span)


def _among(points: Numbers, x: Scaled, span: Span) -> Scaled:
    """x with places that the points have room for too."""
    return _to(x, min(x.places, room(max(abs(p) for p in points))), span)


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
    return _chosen(table.y, [_to(c, places, span) for c in cells], rows[0], rows[-1], y, places, span)


def _to(value: Scaled, places: int, span: Span) -> Scaled:
    if value.places == places:
        return value
    return rescaled(value, places, span)


def _line(xs: Numbers, ys: Numbers, x: Scaled, span: Span) -> Scaled:
    """Linear between the points, held beyond the ends."""
    slopes = [(d - c) / (b - a) for a, b, c, d in zip(xs, xs[1:], ys, ys[1:], strict=False)]
    steepest = max(abs(m) for m in slopes)
    places = min(room(max(abs(v) for v in ys)), room(steepest) + x.places)
    cells = [_segment(xs[i], (ys[i], ys[i + 1]), m, x, places, span) for i, m in enumerate(slopes)]
    first, last = (constant(ys[i], span) for i in (0, -1))
    return _chosen(
        xs, cells, _to_constant(first, ys[0], places, span), _to_constant(last, ys[-1], places, span), x, places, span
    )


def _to_constant(made: Scaled, value: Fraction, places: int, span: Span) -> Scaled:
    found = raw(value, places)
    return Scaled(integer(found, span), places, found, found, Fraction(2) ** -(places + 1))


def _segment(start: Fraction, ys: Numbers, slope: Fraction, x: Scaled, places: int, span: Span) -> Scaled:
    """y + slope * (x - start), rounded once; a unit beyond its ends for the rounding of the slope."""
    fine = min(room(abs(slope)), 30 + places - x.places)
    left = fine + x.places - places
    numbers = (raw(ys[0], places), raw(slope, fine), raw(start, x.places), left, left)
    first, second, third, *shifts = (integer(n, span) for n in numbers)
    ends = sorted(raw(y, places) for y in ys)
    node = op("fixed_line", first, second, x.node, third, *shifts, span=span)
    found = Scaled(node, places, max(-MOST, ends[0] - 1), min(MOST, ends[1] + 1))
    # rounding of the result and of y, of the slope along the run, of the start; the error of x along the slope
    run = abs(ys[1] - ys[0]) / abs(slope) if slope else Fraction(0)
    error = 2 * found.half + Fraction(2) ** -(fine + 1) * run + abs(slope) * (x.half + x.error)
    return replace(found, error=error)


def _chosen(
    xs: Numbers, cells: Sequence[Scaled], first: Scaled, last: Scaled, x: Scaled, places: int, span: Span
) -> Scaled:
    """The cell in which x lies, found by halves; the first value up to the first point, the last one from the last."""
    points = [integer(max(-MOST, min(MOST, raw(p, x.places))), span) for p in xs]

    def between(low: int, high: int) -> Node:
        """x is known to be in the cells low … high - 1."""
        if high - low == 1:
            return cells[low].node
        middle = (low + high) // 2
        return op("select", op("lt", x.node, points[middle]), between(low, middle), between(middle, high), span=span)

    inner = op("select", op("ge", x.node, points[-1]), _to(last, places, span).node, between(0, len(cells)), span=span)
    whole: Op = op("select", op("le", x.node, points[0]), _to(first, places, span).node, inner, span=span)
    ends = [*first.ends, *last.ends, *(e for c in cells for e in c.ends)]
    low, high = raw(min(ends), places), raw(max(ends), places)
    # a point that rounding moves, or an error of x, may choose the neighbour: both lines meet at the point
    error = 2 * max([c.error for c in cells] + [first.error, last.error])
    return Scaled(whole, places, max(-MOST, low), min(MOST, high), error)
