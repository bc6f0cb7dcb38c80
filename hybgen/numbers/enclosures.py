"""Interval and error of each operation, for many boxes at once: the rows of numbers/rounding.py."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Enclosure:
    """For each box: the exact value is in [low, high], the computed one at most `error` away from it."""

    low: Array
    high: Array
    error: Array

    @property
    def size(self) -> Array:
        """The largest magnitude of the computed value."""
        return np.maximum(np.abs(self.low), np.abs(self.high)) + self.error


def _add(a: Enclosure, b: Enclosure) -> tuple[Array, Array, Array]:
    return a.low + b.low, a.high + b.high, a.error + b.error


def _sub(a: Enclosure, b: Enclosure) -> tuple[Array, Array, Array]:
    return a.low - b.high, a.high - b.low, a.error + b.error


def _corners(a: Enclosure, b: Enclosure, work: Callable[[Any, Any], Any]) -> tuple[Array, Array]:
    corners = np.stack([work(x, y) for x in (a.low, a.high) for y in (b.low, b.high)])
    return corners.min(axis=0), corners.max(axis=0)


def _mul(a: Enclosure, b: Enclosure) -> tuple[Array, Array, Array]:
    low, high = _corners(a, b, np.multiply)
    if a is b:
        low = np.maximum(low, 0.0)
    return low, high, a.size * b.error + b.size * a.error


def _div(a: Enclosure, b: Enclosure) -> tuple[Array, Array, Array]:
    least = np.minimum(np.abs(b.low), np.abs(b.high)) - b.error
    open_ = (b.low <= 0) & (b.high >= 0) | (least <= 0)
    low, high = _corners(a, b, np.divide)
    ratio = np.maximum(np.abs(low), np.abs(high))
    error = np.where(open_, np.inf, (a.error + ratio * b.error) / np.where(least > 0, least, 1.0))
    return np.where(open_, -np.inf, low), np.where(open_, np.inf, high), error


ARITHMETIC: dict[str, Callable[..., tuple[Array, Array, Array]]] = {"add": _add, "sub": _sub, "mul": _mul, "div": _div}


def _pair(pick: Callable[[Any, Any], Any]) -> Callable[[Enclosure, Enclosure], Enclosure]:
    return lambda a, b: Enclosure(pick(a.low, b.low), pick(a.high, b.high), np.maximum(a.error, b.error))


def _abs(a: Enclosure) -> Enclosure:
    low = np.maximum(np.maximum(a.low, -a.high), 0.0)
    return Enclosure(low, np.maximum(-a.low, a.high), a.error)


def _clamp(x: Enclosure, low: Enclosure, high: Enclosure) -> Enclosure:
    error = np.maximum(np.maximum(x.error, low.error), high.error)
    bottom = np.maximum(np.minimum(low.low, high.low), np.minimum(x.low, high.low))
    top = np.minimum(np.maximum(low.high, high.high), np.maximum(x.high, low.high))
    return Enclosure(bottom, top, error)


EXACT: dict[str, Callable[..., Enclosure]] = {
    "neg": lambda a: Enclosure(-a.high, -a.low, a.error),
    "abs": _abs,
    "min": _pair(np.minimum),
    "max": _pair(np.maximum),
    "clamp": _clamp,
    "iadd": lambda a, b: Enclosure(a.low + b.low, a.high + b.high, a.error + b.error),
    "isub": lambda a, b: Enclosure(a.low - b.high, a.high - b.low, a.error + b.error),
    "imul": lambda a, b: Enclosure(*_corners(a, b, np.multiply), a.error),
    "ineg": lambda a: Enclosure(-a.high, -a.low, a.error),
    "iabs": _abs,
    "imin": _pair(np.minimum),
    "imax": _pair(np.maximum),
    "iclamp": _clamp,
    "isign": lambda a: sign_of(a),
}


def floor_of(a: Enclosure) -> Enclosure:
    low, high = np.floor(a.low), np.floor(a.high)
    sure = (a.error == 0) | (np.floor(a.low - a.error) == np.floor(a.high + a.error))
    return Enclosure(low, high, np.where(sure, 0.0, np.ceil(a.error) + 1))


def sign_of(a: Enclosure) -> Enclosure:
    sure = (a.error == 0) | (a.low > a.error) | (a.high < -a.error)
    return Enclosure(np.sign(a.low), np.sign(a.high), np.where(sure, 0.0, 2.0))


def _wide(low: Array, high: Array) -> tuple[Array, Array]:
    """Wider by four units: what numpy's functions may be off."""
    slack = 2.0**-50
    return low - slack * np.abs(low) - 1e-300, high + slack * np.abs(high) + 1e-300


def _sqrt(a: Enclosure) -> tuple[Array, Array, Array]:
    low, high = _wide(np.sqrt(np.maximum(a.low, 0.0)), np.sqrt(np.maximum(a.high, 0.0)))
    least = np.maximum(a.low - a.error, 0.0)
    return low, high, np.minimum(np.sqrt(a.error), a.error / (2 * np.sqrt(least)))


def _exp(a: Enclosure) -> tuple[Array, Array, Array]:
    return *_wide(np.exp(a.low), np.exp(a.high)), a.error * np.exp(a.high + a.error) * 1.001


def _log(a: Enclosure) -> tuple[Array, Array, Array]:
    least = a.low - a.error
    open_ = least <= 0
    low, high = _wide(np.log(np.where(open_, 1.0, a.low)), np.log(np.where(a.high > 0, a.high, 1.0)))
    return np.where(open_, -np.inf, low), high, np.where(open_, np.inf, a.error / np.where(open_, 1.0, least))


def _wave(function: Callable[[Any], Any]) -> Callable[[Enclosure], tuple[Array, Array, Array]]:
    def bounds(a: Enclosure) -> tuple[Array, Array, Array]:
        middle, reach = (a.low + a.high) / 2, (a.high - a.low) / 2
        centre = function(middle)
        return np.maximum(centre - reach - 1e-15, -1.0), np.minimum(centre + reach + 1e-15, 1.0), a.error

    return bounds


def _tan(a: Enclosure) -> tuple[Array, Array, Array]:
    reach = a.size
    open_ = reach >= 1.57
    low, high = _wide(np.tan(np.where(open_, 0.0, a.low)), np.tan(np.where(open_, 0.0, a.high)))
    steep = 1.001 / np.cos(np.where(open_, 0.0, reach)) ** 2
    return np.where(open_, -np.inf, low), np.where(open_, np.inf, high), np.where(open_, np.inf, a.error * steep)


def _arc(a: Enclosure, low: Array, high: Array) -> tuple[Array, Array, Array]:
    """The modulus of continuity at ±1 is that of a square root."""
    inside = np.minimum(a.size, 1.0)
    smooth = a.error / np.sqrt(np.maximum(1 - inside * inside, 0.0))
    return (
        low - 1e-15,
        high + 1e-15,
        np.minimum(np.where(a.size < 1, smooth, np.inf) * 1.001, 1.6 * np.sqrt(2 * a.error)),
    )


def _asin(a: Enclosure) -> tuple[Array, Array, Array]:
    return _arc(a, np.arcsin(np.clip(a.low, -1, 1)), np.arcsin(np.clip(a.high, -1, 1)))


def _acos(a: Enclosure) -> tuple[Array, Array, Array]:
    return _arc(a, np.arccos(np.clip(a.high, -1, 1)), np.arccos(np.clip(a.low, -1, 1)))


def _tanh(a: Enclosure) -> tuple[Array, Array, Array]:
    return *_wide(np.tanh(a.low), np.tanh(a.high)), a.error


def _hypot(a: Enclosure, b: Enclosure) -> tuple[Array, Array, Array]:
    a, b = _abs(a), _abs(b)
    return *_wide(np.hypot(a.low, b.low), np.hypot(a.high, b.high)), a.error + b.error


def _atan2(y: Enclosure, x: Enclosure) -> tuple[Array, Array, Array]:
    """Across the cut (y around 0, x below 0) the error is a whole turn, unless both are exact."""
    near_y, near_x = (np.maximum(np.maximum(v.low, -v.high), 0.0) - v.error for v in (y, x))
    radius = np.hypot(np.maximum(near_y, 0.0), np.maximum(near_x, 0.0))
    exact = (y.error == 0) & (x.error == 0)
    cut = (y.low - y.error <= 0) & (y.high + y.error >= 0) & (x.low - x.error <= 0)
    error = np.where(radius > 0, (y.error + x.error) / np.where(radius > 0, radius, 1.0) * 1.001, np.inf)
    error = np.where(exact, 0.0, np.where(cut, 6.2832, np.minimum(error, 6.2832)))
    corners = np.stack([np.arctan2(v, w) for v in (y.low, y.high) for w in (x.low, x.high)])
    around = cut | ((y.low <= 0) & (y.high >= 0) & (x.low <= 0) & (x.high >= 0))
    low, high = corners.min(axis=0) - 1e-15, corners.max(axis=0) + 1e-15
    return np.where(around, -3.1415927, low), np.where(around, 3.1415927, high), error


def wrap_of(a: Enclosure, half: float = 3.1415927) -> tuple[Array, Array, Array]:
    """Away from the cut: a condition with an inexact argument is guarded against it."""
    inside = (a.low > -half * (1 - 1e-7)) & (a.high < half * (1 - 1e-7))
    return np.where(inside, a.low, -half), np.where(inside, a.high, half), a.error


ELEMENTARY: dict[str, Callable[..., tuple[Array, Array, Array]]] = {
    "sqrt": _sqrt,
    "exp": _exp,
    "log": _log,
    "sin": _wave(np.sin),
    "cos": _wave(np.cos),
    "tan": _tan,
    "asin": _asin,
    "acos": _acos,
    "tanh": _tanh,
    "hypot": _hypot,
    "atan2": _atan2,
    "wrap": wrap_of,
}
