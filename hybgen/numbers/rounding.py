"""How far a computed comparison can be off: bounds of the rounding error where it can change the answer.

Forward error analysis (N. J. Higham, Accuracy and Stability of Numerical Algorithms, 2nd ed. 2002, ch. 3; from memory) on intervals
(R. E. Moore, 1966; from memory), over boxes that are halved and dropped where the comparison can't be mistaken: only a
box in which the exact difference can be below 0 while the computed one is not matters. Everything is rounded outward.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hybgen.expr.core import Const, Kind, Node, Op, Ref, RefKind
from hybgen.kernels.errors import ULP
from hybgen.kernels.word import ELEMENTARY
from hybgen.numbers.format import Format

Array = NDArray[np.float64]
Leaf = tuple[RefKind, str, int | None]

MOST_BOXES = 4096
ROUNDS = 40
GROW = 1 + 2.0**-40
"""Covers the rounding of the analysis itself, which is in float64."""


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


@dataclass(frozen=True, slots=True)
class Domain:
    """What the leaves of an expression can be; `terms`: bodies of terms; `timers`: seconds of a step in the timer's unit."""

    format: Format
    leaves: Mapping[tuple[RefKind, str], tuple[Fraction, Fraction]]
    terms: Mapping[tuple[str, int | None], Node]
    timers: Mapping[str, Fraction]
    tables: Mapping[str, tuple[float, float, float]]
    """name -> (steepest slope of all inputs together, largest magnitude, largest magnitude of a point)"""


class Unbounded(Exception):
    """A leaf has no range; the message names it."""


def leaves_of(node: Node, domain: Domain, found: dict[Leaf, None] | None = None) -> dict[Leaf, None]:
    """The numbers that an expression depends on, through terms."""
    found = {} if found is None else found
    todo = [node]
    seen: set[tuple[str, int | None]] = set()
    while todo:
        here = todo.pop()
        if isinstance(here, Op):
            todo += here.args
        elif isinstance(here, Ref) and here.kind is RefKind.TERM:
            key = (here.name, here.index)
            if key not in seen:
                seen.add(key)
                todo.append(domain.terms[key])
        elif isinstance(here, Ref) and here.type.kind in (Kind.REAL, Kind.INT):
            found[(here.kind, here.name, here.index)] = None
    return found


def difference(left: Node, right: Node, domain: Domain) -> tuple[float, float]:
    """(bound of the error of computed left - computed right, largest exact left - right).

    The bound holds for every point of the domain where left - right is below 0 and is computed as 0 or more. The
    subtraction itself counts as exact. Raises Unbounded.
    """
    leaves = list(leaves_of(left, domain) | leaves_of(right, domain))
    low, high = (
        (np.array([[end] for end in ends]) for ends in zip(*_ends(leaves, domain), strict=True))
        if leaves
        else (
            np.zeros((0, 1)),
            np.zeros((0, 1)),
        )
    )
    largest = -math.inf
    for turn in range(ROUNDS):
        error, below, above = _gap(left, right, leaves, low, high, domain)
        largest = max(largest, float(above.max())) if turn == 0 else largest
        touching = (below < 0) & (above >= -error)
        if not touching.any():
            return 0.0, largest
        low, high, error = low[:, touching], high[:, touching], error[touching]
        if not leaves or 2 * low.shape[1] > MOST_BOXES:
            break
        low, high = _halved(low, high, turn % len(leaves))
    return float(error.max()), largest


def _ends(leaves: list[Leaf], domain: Domain) -> list[tuple[float, float]]:
    found = []
    for kind, name, _ in leaves:
        if (kind, name) not in domain.leaves:
            raise Unbounded(name)
        found.append(tuple(float(e) for e in domain.leaves[(kind, name)]))
    return [(np.nextafter(a, -np.inf), np.nextafter(b, np.inf)) for a, b in found]


def _halved(low: Array, high: Array, axis: int) -> tuple[Array, Array]:
    middle = (low[axis] + high[axis]) / 2
    first_high, second_low = high.copy(), low.copy()
    first_high[axis], second_low[axis] = middle, middle
    return np.concatenate([low, second_low], axis=1), np.concatenate([first_high, high], axis=1)


def _gap(
    left: Node, right: Node, leaves: list[Leaf], low: Array, high: Array, domain: Domain
) -> tuple[Array, Array, Array]:
    """(error, lowest, highest) of the exact left - right in each box."""
    at = {leaf: (low[i], high[i]) for i, leaf in enumerate(leaves)}
    evaluator = _Evaluator(domain, at, low.shape[1] if leaves else 1, {})
    with np.errstate(all="ignore"):
        a, b = evaluator.of(left), evaluator.of(right)
        error = (a.error + b.error) * GROW
        return np.where(np.isnan(error), np.inf, error), _down(a.low - b.high), _up(a.high - b.low)


def _down(x: Array) -> Array:
    return np.where(np.isnan(x), -np.inf, np.nextafter(x, -np.inf))


def _up(x: Array) -> Array:
    return np.where(np.isnan(x), np.inf, np.nextafter(x, np.inf))


@dataclass(frozen=True, slots=True)
class _Evaluator:
    """Evaluates one expression on all boxes."""

    domain: Domain
    at: Mapping[Leaf, tuple[Array, Array]]
    count: int
    memo: dict[Node, Enclosure]

    def half(self, size: Array) -> Array:
        """Half a unit in the last place of results up to a magnitude: the error of one rounding."""
        fmt = self.domain.format
        exponent = np.frexp(np.where(np.isfinite(size), size, 1.0))[1] - fmt.precision
        half = np.ldexp(0.5, np.maximum(exponent, fmt.least).astype(int))
        return np.where(np.isfinite(size), half, np.inf)

    def rounded(self, low: Array, high: Array, error: Array, units: float = 0.5) -> Enclosure:
        """A result with the error of its operands, and that of its own rounding (in units in the last place)."""
        low, high, error = _down(low), _up(high), np.where(np.isnan(error), np.inf, error * GROW)
        size = np.maximum(np.abs(low), np.abs(high)) + error
        return Enclosure(low, high, (error + 2 * units * self.half(size)) * GROW)

    def of(self, node: Node) -> Enclosure:
        found = self.memo.get(node)
        if found is None:
            found = self.memo[node] = self.computed(node)
        return found

    def full(self, value: float) -> Array:
        return np.full(self.count, value)

    def computed(self, node: Node) -> Enclosure:
        match node:
            case Const():
                exact = Fraction(node.value)
                off = abs(exact - self.domain.format.round(exact)) if node.type.kind is Kind.REAL else 0
                value = self.full(float(exact))
                return Enclosure(_down(value), _up(value), _up(self.full(float(off))) if off else self.full(0.0))
            case Ref(kind=RefKind.TERM):
                return self.of(self.domain.terms[(node.name, node.index)])
            case Ref():
                low, high = self.at[(node.kind, node.name, node.index)]
                made = Enclosure(low, high, self.full(0.0))
                return self.timer(made) if node.type.kind is Kind.REAL and node.name in self.domain.timers else made
            case Op():
                return self.operation(node)

    def timer(self, steps: Enclosure) -> Enclosure:
        """A timer as a real time: its steps become real, times a rounded constant, rounded: three roundings."""
        return Enclosure(steps.low, steps.high, 3 * self.half(steps.size) * (1 + 2.0**-20))

    def operation(self, node: Op) -> Enclosure:
        if node.op == "select":
            return self.choice(node)
        args = [self.of(a) for a in node.args]
        if node.op in _EXACT:
            return _EXACT[node.op](*args)
        if node.op in ELEMENTARY:
            low, high, error = _ELEMENTARY[node.op](*args)
            return self.rounded(low, high, error, ULP[self.domain.format.name][node.op])
        match node.op:
            case "lookup" | "lookup2":
                return self.lookup(node, args)
            case "floor":
                return _floor(args[0])
            case "sign":
                return _sign(args[0])
            case "to_real":
                exact = args[0].size < float(self.domain.format.whole)
                return Enclosure(args[0].low, args[0].high, np.where(exact, 0.0, self.half(args[0].size)))
            case _:
                return self.rounded(*_ARITHMETIC[node.op](*args))

    def lookup(self, node: Op, args: list[Enclosure]) -> Enclosure:
        """Continuous and as steep as its steepest part; a dozen roundings at the size of its values and points."""
        slope, size, points = self.domain.tables[node.table]
        off = sum(a.error + 2 * self.half(np.maximum(np.minimum(a.size, points), points)) for a in args)
        error = (slope * off + 12 * self.half(self.full(size))) * GROW
        return Enclosure(self.full(-size), self.full(size), error)

    def choice(self, node: Op) -> Enclosure:
        asked, yes, no = node.args
        a, b = self.of(yes), self.of(no)
        low, high, error = np.minimum(a.low, b.low), np.maximum(a.high, b.high), np.maximum(a.error, b.error)
        return Enclosure(low, high, np.where(self.sure(asked), error, high - low + error))

    def sure(self, condition: Node) -> NDArray[np.bool_]:
        """In which boxes is the condition certainly answered as the exact one?"""
        match condition:
            case Op(op="lt" | "le" | "gt" | "ge") if condition.args[0].type.kind is Kind.REAL:
                return self.decided(*condition.args)
            case Ref(kind=RefKind.TERM):
                return self.sure(self.domain.terms[(condition.name, condition.index)])
            case Op():
                found = np.ones(self.count, bool)
                for arg in condition.args:
                    found &= self.sure(arg)
                return found
            case _:
                return np.ones(self.count, bool)

    def decided(self, left: Node, right: Node) -> NDArray[np.bool_]:
        a, b = self.of(left), self.of(right)
        # a constant against an exact number is rounded so that the answer is exact
        first, second = (0.0 if isinstance(n, Const) else e.error for n, e in ((left, a), (right, b)))
        error = first + second
        return np.asarray((error == 0) | (a.low - b.high > error) | (b.low - a.high > error))


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


_ARITHMETIC: dict[str, Callable[..., tuple[Array, Array, Array]]] = {"add": _add, "sub": _sub, "mul": _mul, "div": _div}


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


_EXACT: dict[str, Callable[..., Enclosure]] = {
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
    "isign": lambda a: _sign(a),
}


def _floor(a: Enclosure) -> Enclosure:
    low, high = np.floor(a.low), np.floor(a.high)
    sure = (a.error == 0) | (np.floor(a.low - a.error) == np.floor(a.high + a.error))
    return Enclosure(low, high, np.where(sure, 0.0, np.ceil(a.error) + 1))


def _sign(a: Enclosure) -> Enclosure:
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


def _wrap(a: Enclosure) -> tuple[Array, Array, Array]:
    """Away from the cut: a condition with an inexact argument is guarded against it."""
    inside = (a.low > -math.pi) & (a.high < math.pi)
    return np.where(inside, a.low, -3.1415927), np.where(inside, a.high, 3.1415927), a.error


_ELEMENTARY: dict[str, Callable[..., tuple[Array, Array, Array]]] = {
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
    "wrap": _wrap,
}
