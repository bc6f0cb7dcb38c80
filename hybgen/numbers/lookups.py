"""Interval and error of a table's look-up: exact points and exact arithmetic against rounded ones.

A curve through points that are each moved by at most dx and dy is, everywhere, within slope * dx + dy of the first one (both run
through the same share of a cell). To that come the roundings of one evaluation, in units of the rise and the size of the
cells that a box can reach.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from fractions import Fraction

import numpy as np
from numpy.typing import NDArray

from hybgen.numbers.enclosures import Array, Enclosure

Row = tuple[Fraction, ...]

MOST_POINTS = 400
"""Tables of more points are bounded as a whole, not by cells."""
GROW = 1 + 2.0**-20
IN_A_CELL = {1: 5, 2: 14}
"""Roundings in proportion to the rise, by number of inputs: slope or inverse width (up to 4: it may be rounded down), product,
and with two inputs the differences of values."""


@dataclass(frozen=True, slots=True)
class Lookup:
    """A table in double precision: points of each input, values with one axis for each, and how far rounding moves each."""

    points: tuple[Array, ...]
    values: Array
    moved: tuple[Array, ...]
    lifted: Array

    @classmethod
    def of(
        cls, points: tuple[Row, ...], values: Row | tuple[Row, ...], rounding: Callable[[Fraction], float]
    ) -> Lookup:
        """From exact numbers; `values` is a row, or a row for each point of the first input."""

        def rows(change: Callable[[Fraction], float]) -> Array:
            return np.array([[change(v) for v in r] if isinstance(r, tuple) else change(r) for r in values])

        moved = tuple(np.array([rounding(v) for v in row]) for row in points)
        return cls(tuple(np.array([float(v) for v in row]) for row in points), rows(float), moved, rows(rounding))

    def enclosure(self, args: list[Enclosure], half: Callable[[Array], Array], unit: float) -> Enclosure:
        """The table on boxes; `half` is half a unit in the last place of a magnitude, `unit` the relative rounding (0: none)."""
        moved = [a.error + row.max() for a, row in zip(args, self.moved, strict=True)]
        inside = [self._touched(row, a, s) for row, a, s in zip(self.points, args, moved, strict=True)]
        if self.values.size > MOST_POINTS:
            inside = [np.ones((1, len(row)), bool) for row in self.points]
        reach = inside[0] if len(inside) == 1 else inside[0][:, :, None] & inside[1][:, None, :]
        axes = tuple(range(1, reach.ndim))
        low, high = np.where(reach, self.values, np.inf).min(axes), np.where(reach, self.values, -np.inf).max(axes)
        size = np.maximum(np.abs(low), np.abs(high)) * GROW
        error = unit * IN_A_CELL[len(args)] * (high - low) + len(args) * half(size)
        if unit:
            error = error + np.where(reach, self.lifted, 0.0).max(axes)
        for axis, arg in enumerate(args):
            width = np.diff(self.points[axis]).reshape((-1,) if len(args) == 1 else (-1, 1) if axis == 0 else (1, -1))
            rise = np.abs(np.diff(self.values, axis=axis))
            slope, far = (self._most(axis, v, reach) for v in (rise / width, width + 0 * rise))
            off = arg.error + (self.moved[axis].max() if unit else 0.0) + half(far)
            error = error + np.where(slope > 0, slope * off, 0.0)
        wide, full = 2.0**-50 * size, np.zeros(args[0].low.shape)
        return Enclosure(low - wide + full, high + wide + full, error * GROW + full)

    def _touched(self, points: Array, a: Enclosure, slack: Array) -> NDArray[np.bool_]:
        """Which points bound a cell that the box, or what is computed for it, can reach; beyond the ends the last one."""
        low, high = (a.low - slack)[:, None], (a.high + slack)[:, None]
        inside = (points >= low) & (points <= high)
        before = np.clip(np.searchsorted(points, a.low - slack, side="right") - 1, 0, len(points) - 1)
        after = np.clip(np.searchsorted(points, a.high + slack, side="left"), 0, len(points) - 1)
        index = np.arange(len(points))
        return np.asarray(inside | ((index >= before[:, None]) & (index <= after[:, None])))

    def _most(self, axis: int, of_cells: Array, reach: NDArray[np.bool_]) -> Array:
        """The largest of a property of cells along one input, of those that are reached."""
        count = reach.shape[axis + 1]
        first, second = (np.take(reach, range(k, count - 1 + k), axis + 1) for k in (0, 1))
        return np.asarray(np.where(first & second, of_cells, 0.0).max(tuple(range(1, reach.ndim))) * GROW)
