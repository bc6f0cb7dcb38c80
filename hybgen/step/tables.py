"""The tables of a law in a number format."""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction
from typing import assert_never

from hybgen.law.model import Grid, Law, Table
from hybgen.numbers.bounds import SLACK, Range, exact_range
from hybgen.numbers.format import Format, Rounding
from hybgen.step.model import StepGrid, StepTable
from hybgen.step.translate import Translator

Numbers = tuple[Fraction, ...]


def tables(law: Law, translator: Translator) -> tuple[StepTable | StepGrid, ...]:
    """The tables. Points and values are rounded once, then slopes and inverses of the rounded ones.

    Findings: points that fall together (HG405), numbers and differences that the format can't hold (HG401).
    """
    return tuple(_table(t, translator) for t in law.tables)


def table_range(table: Table | Grid) -> Range:
    """Where the values of a table are for all finite inputs: their hull, wider by the rounding of the look-up."""
    values = _values(table)
    slack = Fraction(SLACK) * max(abs(v) for v in values)
    return exact_range(min(values) - slack, max(values) + slack)


def _values(table: Table | Grid) -> Numbers:
    return table.y if isinstance(table, Table) else tuple(v for row in table.z for v in row)


def _table(table: Table | Grid, translator: Translator) -> StepTable | StepGrid:
    def rounded(values: Numbers) -> Numbers:
        return tuple(translator.rounded(v, table.span) for v in values)

    values = _values(table)
    if 2 * (max(values) - min(values)) > translator.format.max:  # twice: rounding never makes a difference too large
        message = (
            f"the values of '{table.name}' are too far apart: {translator.format.name} can't hold their difference"
        )
        translator.findings.error("HG401", table.span, message, hint="use float64, or another unit")
    x, y = rounded(table.x), rounded(table.y)
    match table:
        case Table():
            rises = [b - a for a, b in zip(y, y[1:], strict=False)]
            return StepTable(table.name, x, y, _slopes(rises, "x", x, table, translator), table.span)
        case Grid():
            per_x, per_y = (
                _slopes([Fraction(1)] * (len(points) - 1), word, points, table, translator)
                for word, points in (("x", x), ("y", y))
            )
            return StepGrid(table.name, x, y, tuple(map(rounded, table.z)), per_x, per_y, table.span)
        case _:
            assert_never(table)


def _slopes(
    rises: Sequence[Fraction], word: str, points: Numbers, table: Table | Grid, translator: Translator
) -> Numbers:
    """rise / width for each cell between the points, so rounded that (x - x[i]) * slope never goes beyond the rise."""
    widths = [b - a for a, b in zip(points, points[1:], strict=False)]
    if min(widths) <= 0:
        translator.findings.error(
            "HG405",
            table.span,
            f"two points of '{table.name}' have the same {word} in {translator.format.name}",
            hint="use float64, or points further apart",
        )
        return (Fraction(0),) * len(rises)
    slopes = [translator.rounded(rise / width, table.span) for rise, width in zip(rises, widths, strict=True)]
    largest = [translator.rounded(width, table.span) for width in widths]
    return tuple(_inside(*row, translator.format) for row in zip(slopes, largest, rises, strict=True))


def _inside(slope: Fraction, width: Fraction, rise: Fraction, fmt: Format) -> Fraction:
    """The slope, or the next one towards zero where its rounded product with the width is beyond the rounded rise."""
    size = abs(slope)
    if max(abs(rise), size * width) > fmt.max:
        return slope  # a finding has told that
    top = fmt.round(abs(rise))
    if fmt.round(size * width) > top:
        size = fmt.round(size * (1 - Fraction(1, 2 ** (fmt.precision + 1))), Rounding.DOWN)
        assert fmt.round(size * width) <= top, (slope, width, rise)
    return -size if slope < 0 else size
