"""How far a computed comparison can be off: bounds of the rounding error where it can change the answer.

Forward error analysis (N. J. Higham, Accuracy and Stability of Numerical Algorithms, 2nd ed. 2002, ch. 3; from memory) on intervals
(R. E. Moore, 1966; from memory), over boxes that are halved and dropped where the comparison can't be mistaken: only a
box in which the exact difference can be below 0 while the computed one is not matters. Everything is rounded outward.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction

import numpy as np
from numpy.typing import NDArray

from hybgen.expr.constant import PI
from hybgen.expr.core import Const, Kind, Node, Op, Ref, RefKind
from hybgen.kernels.errors import ULP
from hybgen.numbers.enclosures import ARITHMETIC, ELEMENTARY, EXACT, Array, Enclosure, floor_of, sign_of, wrap_of
from hybgen.numbers.format import Format

Leaf = tuple[RefKind, str, int | None]

MOST_BOXES = 4096
ROUNDS = 40
GROW = 1 + 2.0**-40
"""Covers the rounding of the analysis itself, which is in float64."""


@dataclass(frozen=True, slots=True)
class Domain:
    """What the leaves of an expression can be; `terms`: bodies of terms; `timers`: seconds of a step in the timer's unit."""

    format: Format
    leaves: Mapping[tuple[RefKind, str], tuple[Fraction, Fraction]]
    terms: Mapping[tuple[str, int | None], Node]
    timers: Mapping[str, Fraction]
    tables: Mapping[str, tuple[float, float, float]]
    """name -> (steepest slope of all inputs together, largest magnitude, largest magnitude of a point)"""

    def rounding(self, value: Fraction) -> float:
        """How far a constant is from its number of the format, rounded up; infinite beyond the format's range."""
        try:
            off = abs(value - self.format.round(value))
        except OverflowError:
            return math.inf
        return math.nextafter(nearest(off), math.inf) if off else 0.0


def nearest(value: Fraction) -> float:
    """The float next to a fraction, infinite beyond the range."""
    try:
        return float(value)
    except OverflowError:
        return math.inf if value > 0 else -math.inf


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


def largest_error(node: Node, domain: Domain) -> float:
    """The bound of the error of an expression over the whole domain. Raises Unbounded."""
    leaves = list(leaves_of(node, domain))
    ends = _ends(leaves, domain)
    at = {leaf: (np.array([low]), np.array([high])) for leaf, (low, high) in zip(leaves, ends, strict=True)}
    with np.errstate(all="ignore"):
        return float(_Evaluator(domain, at, 1, {}).of(node).error[0])


def interval(node: Node, domain: Domain) -> tuple[float, float]:
    """Between which exact values an expression lies over the whole domain. Raises Unbounded."""
    leaves = list(leaves_of(node, domain))
    at = {
        leaf: (np.array([low]), np.array([high]))
        for leaf, (low, high) in zip(leaves, _ends(leaves, domain), strict=True)
    }
    with np.errstate(all="ignore"):
        found = _Evaluator(domain, at, 1, {}).of(node)
    return float(found.low[0]), float(found.high[0])


def turned(node: Node) -> tuple[Node, Fraction] | None:
    """(angle, half a turn) of a wrapped angle: wrap(x), or in degrees x + turn * floor(1/2 - x / turn)."""
    match node:
        case Op(op="wrap", args=(angle,)):
            return angle, PI
        case Op(
            op="add",
            args=(
                angle,
                Op(op="mul", args=(Const() as turn, Op(op="floor", args=(Op(op="sub", args=(Const(), ratio)),)))),
            ),
        ) if isinstance(ratio, Op) and ratio.op == "div" and ratio.args == (angle, turn):
            return angle, Fraction(turn.value) / 2
        case _:
            return None


def _ends(leaves: list[Leaf], domain: Domain) -> list[tuple[float, float]]:
    found = []
    for kind, name, _ in leaves:
        if (kind, name) not in domain.leaves:
            raise Unbounded(name)
        found.append(tuple(nearest(e) for e in domain.leaves[(kind, name)]))
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
        # a constant is rounded outward: exact
        error = sum(
            0.0 if isinstance(n, Const) else e.error for n, e in ((left, a), (right, b))
        ) * GROW + evaluator.full(0)
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
                value = self.full(nearest(exact))
                off = self.domain.rounding(exact) if node.type.kind is Kind.REAL else 0.0
                return Enclosure(_down(value), _up(value), self.full(off))
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
        if node.op == "add" and (found := turned(node)) is not None:
            return self.turned(self.of(found[0]), float(found[1]))
        args = [self.of(a) for a in node.args]
        if node.op in EXACT:
            return EXACT[node.op](*args)
        if node.op in ELEMENTARY:
            low, high, error = ELEMENTARY[node.op](*args)
            return self.rounded(low, high, error, ULP[self.domain.format.name][node.op])
        match node.op:
            case "lookup" | "lookup2":
                return self.lookup(node, args)
            case "floor":
                return floor_of(args[0])
            case "sign":
                return sign_of(args[0])
            case "to_real":
                exact = args[0].size < float(self.domain.format.whole)
                return Enclosure(args[0].low, args[0].high, np.where(exact, 0.0, self.half(args[0].size)))
            case _:
                return self.rounded(*ARITHMETIC[node.op](*args))

    def turned(self, x: Enclosure, half: float) -> Enclosure:
        """An angle less whole turns, away from the cut: the product of turns, and the sum, are rounded."""
        low, high, _ = wrap_of(x, half)
        error = x.error + np.where(x.size < half, 0.0, self.half(x.size + 2 * half) + self.half(self.full(half)))
        return Enclosure(low, high, error * GROW)

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
