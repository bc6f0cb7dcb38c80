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

MOST_POINTS = 400
"""Tables of more points are bounded as a whole, not by cells."""
GROW = 1 + 2.0**-20
IN_A_CELL = {1: 5, 2: 14}
"""Roundings in proportion to the rise, by number of inputs: slope or inverse width (up to 4: it may be rounded down), product,
and with two inputs the differences of values."""
AT_ITS_SIZE = {1: 2, 2: 3}
"""Roundings in proportion to the value: the point's own, and each sum."""


@dataclass(frozen=True, slots=True)
class Lookup:
    """A table in double precision: points of each input, values with one axis for each."""

    points: tuple[Array, ...]
    values: Array

    @classmethod
    def of(cls, points: tuple[tuple[Fraction, ...], ...], values: tuple[object, ...]) -> Lookup:
        """From exact numbers; `values` is a row, or a row for each point of the first input."""
        rows = [[float(v) for v in row] if isinstance(row, tuple) else float(row) for row in values]  # type: ignore[arg-type]
        return cls(tuple(np.array([float(v) for v in row]) for row in points), np.array(rows))

    def enclosure(self, args: list[Enclosure], half: Callable[[Array], Array], unit: float) -> Enclosure:
        """The table on boxes; `half` is half a unit in the last place of a magnitude, `unit` the relative rounding."""
        ends = [np.abs(row).max() * GROW for row in self.points]
        slack = [a.error + 3 * half(np.full(a.low.shape, end)) for a, end in zip(args, ends, strict=True)]
        inside = [self._touched(row, a, s) for row, a, s in zip(self.points, args, slack, strict=True)]
        if self.values.size > MOST_POINTS:
            inside = [np.ones((1, len(row)), bool) for row in self.points]
        reach = inside[0] if len(inside) == 1 else inside[0][:, :, None] & inside[1][:, None, :]
        axes = tuple(range(1, reach.ndim))
        low, high = np.where(reach, self.values, np.inf).min(axes), np.where(reach, self.values, -np.inf).max(axes)
        size = np.maximum(np.abs(low), np.abs(high)) * GROW
        error = unit * IN_A_CELL[len(args)] * (high - low) + AT_ITS_SIZE[len(args)] * half(size)
        for axis, off in enumerate(slack):
            slope = self._steepest(axis, reach)
            error = error + np.where(slope > 0, slope * off, 0.0)
        wide = 2.0**-50 * size
        full = np.zeros(args[0].low.shape)
        return Enclosure(low - wide + full, high + wide + full, error * GROW + full)

    def _touched(self, points: Array, a: Enclosure, slack: Array) -> NDArray[np.bool_]:
        """Which points bound a cell that the box, or what is computed for it, can reach; beyond the ends the last one."""
        low, high = (a.low - slack)[:, None], (a.high + slack)[:, None]
        inside = (points >= low) & (points <= high)
        before = np.clip(np.searchsorted(points, a.low - slack, side="right") - 1, 0, len(points) - 1)
        after = np.clip(np.searchsorted(points, a.high + slack, side="left"), 0, len(points) - 1)
        index = np.arange(len(points))
        return np.asarray(inside | ((index >= before[:, None]) & (index <= after[:, None])))

    def _steepest(self, axis: int, reach: NDArray[np.bool_]) -> Array:
        """The steepest slope along one input in the cells reached."""
        rise = np.abs(np.diff(self.values, axis=axis))
        width = np.diff(self.points[axis])
        slope = rise / (width if rise.ndim == 1 else np.expand_dims(width, 1 - axis))
        first = np.take(reach, range(reach.shape[axis + 1] - 1), axis + 1)
        second = np.take(reach, range(1, reach.shape[axis + 1]), axis + 1)
        axes = tuple(range(1, reach.ndim))
        return np.asarray(np.where(first & second, slope, 0.0).max(axes) * GROW)
