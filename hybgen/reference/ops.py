"""The operations in numpy, one function for each row of OPS; each rounds once, in the format's own type."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from fractions import Fraction
from functools import cache, reduce
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hybgen.kernels.run import function
from hybgen.kernels.table import FIXED, kernel
from hybgen.kernels.word import ELEMENTARY
from hybgen.numbers.format import FIXED32, LARGEST_COUNT, Format
from hybgen.step.model import StepGrid, StepTable

Array = NDArray[Any]
Operation = Callable[..., Any]

_I = np.int32


@cache
def operations(fmt: Format) -> Mapping[str, Operation]:
    """Operation name -> function on arrays (or scalars) of the format's type, int32 or bool."""
    return _common() | (_fixed() if fmt is FIXED32 else _floating(fmt))


def _fixed() -> dict[str, Operation]:
    return {name: function(kernel(name, FIXED32.name)) for name in FIXED}


def _floating(fmt: Format) -> dict[str, Operation]:
    real = fmt.dtype.type
    zero, one, largest = real(0), real(1), real(float(fmt.max))
    return {
        "add": np.add,
        "sub": np.subtract,
        "mul": np.multiply,
        "div": np.divide,
        "neg": np.negative,
        "abs": lambda a: np.where(a < zero, -a, a),
        "min": lambda a, b: np.where(b < a, b, a),
        "max": lambda a, b: np.where(b > a, b, a),
        "clamp": lambda x, low, high: np.where(x < low, low, np.where(x > high, high, x)),
        "sign": lambda a: np.where(a > zero, one, np.where(a < zero, -one, zero)),
        "floor": _floor(fmt),
        "to_real": lambda a: np.asarray(a).astype(real),
        "to_steps": _to_steps(fmt),
        "finite": lambda a: (a >= -largest) & (a <= largest),
        **{name: function(kernel(name, fmt.name), fmt.dtype) for name in ELEMENTARY},
    }


def _common() -> dict[str, Operation]:
    """Operations on whole numbers and conditions, alike in every format."""
    return {
        "iadd": np.add,
        "isub": np.subtract,
        "imul": np.multiply,
        "ineg": np.negative,
        "iabs": lambda a: np.where(a < _I(0), -a, a),
        "imin": lambda a, b: np.where(b < a, b, a),
        "imax": lambda a, b: np.where(b > a, b, a),
        "iclamp": lambda x, low, high: np.where(x < low, low, np.where(x > high, high, x)),
        "isign": lambda a: np.where(a > _I(0), _I(1), np.where(a < _I(0), _I(-1), _I(0))),
        "lt": np.less,
        "le": np.less_equal,
        "gt": np.greater,
        "ge": np.greater_equal,
        "eq": np.equal,
        "ne": np.not_equal,
        "and": lambda *a: reduce(np.logical_and, a),
        "or": lambda *a: reduce(np.logical_or, a),
        "not": np.logical_not,
        "select": np.where,
    }


def _floor(fmt: Format) -> Operation:
    real, whole = fmt.dtype.type, fmt.dtype.type(fmt.whole)
    integer = np.int32 if fmt.precision == 24 else np.int64

    def floor(a: Array) -> Any:
        a = np.asarray(a)
        small = (a > -whole) & (a < whole)
        down = np.where(small, a, real(0)).astype(integer).astype(real)
        return np.where(small, np.where(down > a, down - real(1), down), a)

    return floor


def _to_steps(fmt: Format) -> Operation:
    real = fmt.dtype.type
    top, near = real(LARGEST_COUNT), real(8 / 2**fmt.precision)

    def to_steps(a: Array) -> Any:
        a = np.asarray(a)
        inside = (a > real(0)) & (a < top)
        safe = np.where(inside, a, real(0))
        steps = safe.astype(np.int32)
        up = (safe - steps.astype(real)) > (safe * near)
        return np.where(a >= top, _I(LARGEST_COUNT), np.where(inside, steps + up.astype(np.int32), _I(0)))

    return to_steps


def lookup(table: StepTable | StepGrid, fmt: Format) -> Operation:
    """The function of a table."""
    return _curve(table, fmt) if isinstance(table, StepTable) else _grid(table, fmt)


def _array(values: Sequence[Fraction], fmt: Format) -> Array:
    return np.array([float(v) for v in values], dtype=fmt.dtype)


def _curve(table: StepTable, fmt: Format) -> Operation:
    x, y, slope = (_array(row, fmt) for row in (table.x, table.y, table.slope))

    def look(u: Array) -> Any:
        u = np.asarray(u)
        i = np.clip(np.searchsorted(x, u, side="right") - 1, 0, len(slope) - 1)
        inner = y[i] + slope[i] * (u - x[i])
        return np.where(u <= x[0], y[0], np.where(u >= x[-1], y[-1], inner))

    return look


def _grid(grid: StepGrid, fmt: Format) -> Operation:
    z = np.stack([_array(row, fmt) for row in grid.z])
    along_x, along_y = _cell(grid.x, grid.per_x, fmt), _cell(grid.y, grid.per_y, fmt)

    def look(u: Array, v: Array) -> Any:
        (i, k, s), (j, m, t) = along_x(np.asarray(u)), along_y(np.asarray(v))
        low = z[i, j] + s * (z[k, j] - z[i, j])
        high = z[i, m] + s * (z[k, m] - z[i, m])
        return low + t * (high - low)

    return look


def _cell(points: Sequence[Fraction], inverses: Sequence[Fraction], fmt: Format) -> Callable[[Array], Any]:
    """The points before and after a value, and which part of the way between them it has gone."""
    x, per = _array(points, fmt), _array(inverses, fmt)
    last = len(x) - 1

    def cell(u: Array) -> Any:
        before = np.clip(np.searchsorted(x, u, side="right") - 1, 0, last - 1)
        first, end = u <= x[0], u >= x[-1]
        held = first | end
        i = np.where(first, 0, np.where(end, last, before))
        part = (np.where(held, x[0], u) - x[before]) * per[before]
        return i, np.where(held, i, i + 1), np.where(held, fmt.dtype.type(0), part)

    return cell
