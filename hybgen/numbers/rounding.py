"""How far a computed comparison can be off: bounds of the rounding error where it can change the answer.

Forward error analysis (N. J. Higham, Accuracy and Stability of Numerical Algorithms, 2nd ed. 2002, ch. 3; from memory) on intervals
(R. E. Moore, 1966; from memory), over boxes that are halved and dropped where the comparison can't be mistaken: only a
box in which the exact difference can be below 0 while the computed one is not matters. Everything is rounded outward. A result that
may overflow has no bound.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from fractions import Fraction

import numpy as np
from numpy.typing import NDArray

from hybgen.expr.constant import PI
from hybgen.expr.core import Const, Kind, Node, Op, Ref, RefKind
from hybgen.kernels.errors import ULP
from hybgen.numbers.enclosures import ARITHMETIC, ELEMENTARY, EXACT, Array, Enclosure, floor_of, sign_of, wrap_of
from hybgen.numbers.format import Format
from hybgen.numbers.lookups import Lookup

Leaf = tuple[RefKind, str, int | None]

MOST_BOXES = 2048
ROUNDS = 64
NEARLY = 0.75
"""Boxes whose score is this share of the worst are halved together."""
GROW = 1 + 2.0**-40
"""Covers the rounding of the analysis itself, which is in float64."""


@dataclass(frozen=True, slots=True)
class Domain:
    """What the leaves of an expression can be; `terms`: bodies of terms; `timers`: seconds of a step in the timer's unit."""

    format: Format
    leaves: Mapping[tuple[RefKind, str], tuple[Fraction, Fraction]]
    terms: Mapping[tuple[str, int | None], Node]
    timers: Mapping[str, Fraction]
    tables: Mapping[str, Lookup]
    ordered: frozenset[tuple[Node, Node]] = frozenset()
    """Pairs of which the first is never above the second, because a rule on the parameters says so."""
    noise: Mapping[str, float] | None = None
    """None: operations round. Otherwise nothing rounds, and samples are off by this much: what noise does to a comparison."""

    def constant(self, value: Fraction) -> float:
        """How far a constant is from its number of the format, rounded up; infinite beyond the format's range."""
        if self.noise is not None:
            return 0.0
        try:
            off = abs(value - self.format.round(value))
        except OverflowError:
            return math.inf
        return math.nextafter(nearest(off), math.inf) if off else 0.0

    def half(self, size: Array) -> Array:
        """Half a unit in the last place of results up to a magnitude: the error of one rounding."""
        if self.noise is not None:
            return np.zeros(np.shape(size))
        fmt = self.format
        known = np.isfinite(size)
        exponent = np.frexp(np.where(known, np.maximum(size, 2.0**-1000), 1.0))[1] - fmt.precision
        return np.where(known, np.ldexp(0.5, np.maximum(exponent, max(fmt.least, -1070)).astype(int)), np.inf)

    @property
    def unit(self) -> float:
        """The relative error of one rounding."""
        return 0.0 if self.noise is not None else 2.0**-self.format.precision

    @property
    def top(self) -> float:
        """Beyond this a result may be computed as infinite."""
        return nearest(self.format.max) * (1 - 2.0**-20)


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


@dataclass(frozen=True, slots=True)
class Difference:
    """left - right on a domain, where the subtraction itself counts as exact.

    `outward`: a constant side counts as exact, because the caller moves it outward itself.
    """

    left: Node
    right: Node
    domain: Domain
    outward: bool

    def error(self) -> float:
        """A bound of |computed - exact| where the exact difference is 0 or less and the computed one may be 0 or more.

        Raises Unbounded.
        """
        return self._worst(lambda below, above, off: np.where((below <= 0) & (above >= -off), off, 0.0))

    def latest(self, threshold: float) -> float:
        """The largest exact difference at which the computed one may still be at or below a threshold."""

        def score(below: Array, above: Array, off: Array) -> Array:
            return np.where(below <= threshold + off, np.minimum(above, threshold + off), 0.0)

        return self._worst(score, MOST_BOXES // 4)

    def around(self) -> float:
        """A bound of |computed - exact| where either may be on another side of 0 than the other."""
        return self._worst(lambda below, above, off: np.where((below <= off) & (above >= -off), off, 0.0), 64)

    def reach(self) -> float:
        """A bound of the largest exact difference."""
        return self._worst(lambda below, above, off: np.maximum(above, 0.0), 64)

    def _worst(self, score: Callable[[Array, Array, Array], Array], budget: int = MOST_BOXES) -> float:
        """The largest score of all boxes, after halving the worst ones again and again."""
        leaves = list(leaves_of(self.left, self.domain) | leaves_of(self.right, self.domain))
        ends = np.array(_ends(leaves, self.domain)).reshape(-1, 2)
        low, high = ends[:, :1], ends[:, 1:]
        scores, depth = score(*self._gap(leaves, low, high)), np.zeros(1, int)
        best, since, spent = math.inf, 0, 0
        for _ in range(ROUNDS if leaves else 0):
            top = scores.max()
            best, since = (top, 0) if top < 0.98 * best or best == math.inf > top else (best, since + 1)
            if top <= 0 or spent >= budget or since > (ROUNDS if top == math.inf else 2 * len(leaves) + 2):
                break
            split = np.flatnonzero(scores >= NEARLY * top)[: budget - spent]
            spent += len(split)
            parts = _halved(low[:, split], high[:, split], depth[split] % len(leaves))
            kept = np.setdiff1d(np.flatnonzero(scores > 0), split)
            scores = np.concatenate([scores[kept], score(*self._gap(leaves, *parts))])
            low, high = (np.concatenate([old[:, kept], new], 1) for old, new in zip((low, high), parts, strict=True))
            depth = np.concatenate([depth[kept], *[depth[split] + 1] * 2])
        return max(0.0, float(scores.max()))

    def _gap(self, leaves: list[Leaf], low: Array, high: Array) -> tuple[Array, Array, Array]:
        """(lowest, highest, error) of the difference in each box."""
        at = {leaf: (low[i], high[i]) for i, leaf in enumerate(leaves)}
        evaluator = _Evaluator(self.domain, at, low.shape[1], {})
        with np.errstate(all="ignore"):
            a, b = evaluator.of(self.left), evaluator.of(self.right)
            sides = [
                e.error for n, e in ((self.left, a), (self.right, b)) if not (self.outward and isinstance(n, Const))
            ]
            error = sum(sides, evaluator.full(0.0)) * GROW
            error = np.where(np.isnan(error), np.inf, error)
            return _down(a.low - b.high), _up(a.high - b.low), error


def whole(node: Node, domain: Domain) -> Enclosure:
    """An expression over the whole domain, as one box. Raises Unbounded."""
    leaves = list(leaves_of(node, domain))
    ends = _ends(leaves, domain)
    at = {leaf: (np.array([low]), np.array([high])) for leaf, (low, high) in zip(leaves, ends, strict=True)}
    with np.errstate(all="ignore"):
        return _Evaluator(domain, at, 1, {}).of(node)


def interval(node: Node, domain: Domain) -> tuple[float, float]:
    """Between which exact values an expression lies over the whole domain. Raises Unbounded."""
    found = whole(node, domain)
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
    found: list[tuple[float, float]] = []
    for kind, name, _ in leaves:
        if (kind, name) not in domain.leaves:
            raise Unbounded(name)
        low, high = domain.leaves[(kind, name)]
        found.append((_below(low), -_below(-high)))
    return found


def _below(value: Fraction) -> float:
    """The largest float that is not above a fraction."""
    found = nearest(value)
    return found if math.isinf(found) or Fraction(found) <= value else math.nextafter(found, -math.inf)


def _halved(low: Array, high: Array, axes: NDArray[np.int_]) -> tuple[Array, Array]:
    """Both halves of each box, along its axis."""
    boxes = np.arange(low.shape[1])
    middle = (low[axes, boxes] + high[axes, boxes]) / 2
    first_high, second_low = high.copy(), low.copy()
    first_high[axes, boxes], second_low[axes, boxes] = middle, middle
    return np.concatenate([low, second_low], axis=1), np.concatenate([first_high, high], axis=1)


def _down(x: Array) -> Array:
    return np.where(np.isnan(x), -np.inf, np.nextafter(x, -np.inf))


def _up(x: Array) -> Array:
    return np.where(np.isnan(x), np.inf, np.nextafter(x, np.inf))


Flags = NDArray[np.bool_]


@dataclass(frozen=True, slots=True)
class _Answer:
    """For each box: can the exact condition hold, can it fail, and is the computed one certainly the same?"""

    yes: Flags
    no: Flags
    sure: Flags


@dataclass(frozen=True, slots=True)
class _Evaluator:
    """Evaluates one expression on all boxes."""

    domain: Domain
    at: Mapping[Leaf, tuple[Array, Array]]
    count: int
    memo: dict[Node, Enclosure]

    def rounded(self, low: Array, high: Array, error: Array, units: float = 0.5) -> Enclosure:
        """A result with the error of its operands, and that of its own rounding (in units in the last place)."""
        low, high, error = _down(low), _up(high), np.where(np.isnan(error), np.inf, error * GROW)
        size = np.maximum(np.abs(low), np.abs(high)) + error
        total = (error + 2 * units * self.domain.half(size)) * GROW
        return Enclosure(low, high, np.where(size < self.domain.top, total, np.inf))

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
                off = self.domain.constant(exact) if node.type.kind is Kind.REAL else 0.0
                return Enclosure(self.full(_below(exact)), self.full(-_below(-exact)), self.full(off))
            case Ref(kind=RefKind.TERM):
                return self.of(self.domain.terms[(node.name, node.index)])
            case Ref():
                return self.leaf(node)
            case Op():
                return self.operation(node)

    def leaf(self, node: Ref) -> Enclosure:
        """What is stored is exact; a timer as a real time is its steps, made real, times a rounded constant, rounded."""
        if node.type.kind in (Kind.BOOL, Kind.ENUM):
            return Enclosure(self.full(0.0), self.full(1.0), self.full(0.0))
        low, high = self.at[(node.kind, node.name, node.index)]
        off = self.full(0.0)
        if node.type.kind is Kind.REAL and node.kind is RefKind.STATE and node.name in self.domain.timers:
            off = 3 * self.domain.unit * np.maximum(np.abs(low), np.abs(high)) * GROW
        elif self.domain.noise is not None and node.kind is RefKind.INPUT:
            off = self.full(self.domain.noise.get(node.name, 0.0))
        return Enclosure(low, high, off)

    def operation(self, node: Op) -> Enclosure:
        if node.op == "select":
            return self.choice(node)
        if node.op == "add" and (found := turned(node)) is not None:
            return self.turned(self.of(found[0]), float(found[1]))
        args = [self.of(a) for a in node.args]
        if node.op == "clamp" and node.args[1:] in self.domain.ordered:
            return EXACT["max"](args[1], EXACT["min"](args[0], args[2]))
        if node.op in EXACT:
            return EXACT[node.op](*args)
        if node.op in ELEMENTARY:
            low, high, error = ELEMENTARY[node.op](*args)
            units = ULP.get(self.domain.format.name, {}).get(node.op, 1.0)  # fixed point asks for intervals only
            return self.rounded(low, high, error, units)
        match node.op:
            case "lookup" | "lookup2":
                return self.domain.tables[node.table].enclosure(args, self.domain.half, self.domain.unit)
            case "floor":
                return floor_of(args[0])
            case "sign":
                return sign_of(args[0])
            case "to_real":
                off = np.where(args[0].size < float(self.domain.format.whole), 0.0, self.domain.half(args[0].size))
                return Enclosure(args[0].low, args[0].high, args[0].error + off)
            case _:
                return self.rounded(*ARITHMETIC[node.op](*args))

    def turned(self, x: Enclosure, half: float) -> Enclosure:
        """An angle less whole turns, away from the cut: the product of turns, and the sum, are rounded."""
        low, high, _ = wrap_of(x, half)
        error = x.error + np.where(
            x.size < half, 0.0, self.domain.half(x.size + 2 * half) + self.domain.half(self.full(half))
        )
        return Enclosure(low, high, error * GROW)

    def choice(self, node: Op) -> Enclosure:
        """The branch that is taken, or the hull of both; where rounding may take another than the law, either for the other."""
        asked = self.answer(node.args[0])
        a, b = self.of(node.args[1]), self.of(node.args[2])
        low, high, error = np.minimum(a.low, b.low), np.maximum(a.high, b.high), np.maximum(a.error, b.error)
        doubtful = high - low + error
        error = np.where(asked.sure, error, np.where(np.isnan(doubtful), np.inf, doubtful))
        for only, branch in ((asked.sure & ~asked.no, a), (asked.sure & ~asked.yes, b)):
            low, high, error = (
                np.where(only, x, y)
                for x, y in zip((branch.low, branch.high, branch.error), (low, high, error), strict=True)
            )
        return Enclosure(low, high, error)

    def answer(self, condition: Node) -> _Answer:
        """What a condition can be in each box."""
        match condition:
            case Const(value=value):
                return _Answer(self.flags(bool(value)), self.flags(not value), self.flags(True))
            case Ref(kind=RefKind.TERM):
                return self.answer(self.domain.terms[(condition.name, condition.index)])
            case Op(op="lt" | "le" | "gt" | "ge") if condition.args[0].type.kind is Kind.REAL:
                return self.compared(condition.op, *condition.args)
            case Op(op="not"):
                inner = self.answer(condition.args[0])
                return _Answer(inner.no, inner.yes, inner.sure)
            case Op(op="and" | "or"):
                parts = [self.answer(a) for a in condition.args]
                every, some = np.logical_and.reduce, np.logical_or.reduce
                first, second = (every, some) if condition.op == "and" else (some, every)
                sure = every([p.sure for p in parts])
                return _Answer(first([p.yes for p in parts]), second([p.no for p in parts]), sure)
            case Op():
                sure = np.logical_and.reduce([self.answer(a).sure for a in condition.args])
                return _Answer(self.flags(True), self.flags(True), sure)
            case _:
                return _Answer(self.flags(True), self.flags(True), self.flags(True))

    def flags(self, value: bool) -> Flags:
        return np.full(self.count, value)

    def compared(self, name: str, left: Node, right: Node) -> _Answer:
        a, b = self.of(left), self.of(right)
        # a constant is rounded outward, by up to a whole unit: against an exact number the answer is exact
        first, second = (
            self.domain.half(e.size) * 2 * (e.error > 0) if isinstance(n, Const) else e.error
            for n, e in ((left, a), (right, b))
        )
        exact = [e.error == 0 for n, e in ((left, a), (right, b)) if not isinstance(n, Const)]
        error = (first + second) * GROW
        apart = (_down(a.low - b.high) > error) | (_down(b.low - a.high) > error)
        strict = name in ("gt", "lt")
        larger, smaller = (a, b) if name in ("gt", "ge") else (b, a)
        yes = larger.high > smaller.low if strict else larger.high >= smaller.low
        no = larger.low <= smaller.high if strict else larger.low < smaller.high
        return _Answer(yes, no, np.logical_and.reduce(exact) | apart)
