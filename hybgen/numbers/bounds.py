"""Coarse value bounds: can an expression leave the finite numbers of a format?

Forward interval evaluation in double precision with slack; what the program itself enforces (sampled inputs,
checked parameters, limited states, timers, counts, logic variables) bounds the leaves, so the answer holds
whatever happens. Source: R. E. Moore, Interval Analysis, 1966 (from memory).
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from fractions import Fraction

from hybgen.expr.core import Const, Kind, Node, Op, Ref, RefKind
from hybgen.numbers.format import LARGEST_COUNT, Format

SLACK = 1e-6
"""Relative widening of each operation: covers the rounding of both this evaluation and the format."""


@dataclass(frozen=True, slots=True)
class Range:
    """Between low and high; infinite ends mean that nothing is known, NaN included."""

    low: float
    high: float

    @property
    def known(self) -> bool:
        """Are both ends finite?"""
        return math.isfinite(self.low) and math.isfinite(self.high)


UNKNOWN = Range(-math.inf, math.inf)
_BIT = Range(0.0, 1.0)
Key = tuple[RefKind, str]


def exact_range(low: Fraction | int, high: Fraction | int) -> Range:
    """The range between two exact numbers."""
    return _wide(_float(Fraction(low)), _float(Fraction(high)))


def _float(value: Fraction) -> float:
    try:
        return float(value)
    except OverflowError:
        return math.inf if value > 0 else -math.inf


def _wide(low: float, high: float) -> Range:
    if math.isnan(low) or math.isnan(high):
        return UNKNOWN
    return Range(low - SLACK * abs(low), high + SLACK * abs(high))


@dataclass(frozen=True, slots=True)
class Bounds:
    """Ranges of leaves (inputs, parameters, states, locals, tables) in one format."""

    format: Format
    leaves: Mapping[Key, Range]
    tables: Mapping[str, Range]

    def of(self, node: Node) -> Range:
        """The range of an expression."""
        match node:
            case Const():
                return (
                    _BIT
                    if node.type.kind in (Kind.BOOL, Kind.ENUM)
                    else exact_range(Fraction(node.value), Fraction(node.value))
                )
            case Ref():
                return self._leaf(node)
            case Op():
                return self._operation(node)

    def finite(self, node: Node) -> bool:
        """Is the expression certainly a finite number of the format? A leaf is: nothing else is ever stored."""
        if (
            node.type.kind is not Kind.REAL
            or isinstance(node, Const)
            or (isinstance(node, Ref) and node.kind is not RefKind.LOCAL)
        ):
            return True
        found = self.of(node)
        top = _float(self.format.max) * (1 - SLACK)
        return found.known and -top < found.low and found.high < top

    def _leaf(self, node: Ref) -> Range:
        if node.type.kind in (Kind.BOOL, Kind.ENUM):
            return _BIT
        found = self.leaves.get((node.kind, node.name))
        if found is not None:
            return found
        top = float(LARGEST_COUNT) if node.type.kind is Kind.INT else _float(self.format.max)
        return Range(-top, top)

    def _operation(self, node: Op) -> Range:
        if node.table:
            return self.tables[node.table] if all(self.finite(a) for a in node.args) else UNKNOWN
        if node.type.kind in (Kind.BOOL, Kind.ENUM):
            return _BIT
        if node.op == "select":
            return _hull(self.of(node.args[1]), self.of(node.args[2]))
        args = [self.of(a) for a in node.args]
        if node.type.kind is Kind.REAL and not all(a.known for a in args):
            return UNKNOWN
        found = _RULES[node.op](*args)
        top = _float(self.format.max)
        if node.type.kind is Kind.REAL and not (found.known and max(abs(found.low), abs(found.high)) < top):
            return UNKNOWN
        return found


def _hull(a: Range, b: Range) -> Range:
    return Range(min(a.low, b.low), max(a.high, b.high))


def _add(a: Range, b: Range) -> Range:
    return _wide(a.low + b.low, a.high + b.high)


def _sub(a: Range, b: Range) -> Range:
    return _wide(a.low - b.high, a.high - b.low)


def _mul(a: Range, b: Range) -> Range:
    ends = [x * y for x in (a.low, a.high) for y in (b.low, b.high)]
    if any(math.isnan(e) for e in ends):
        return UNKNOWN
    return _wide(min(ends), max(ends))


def _div(a: Range, b: Range) -> Range:
    if b.low <= 0 <= b.high:
        return UNKNOWN
    ends = [x / y for x in (a.low, a.high) for y in (b.low, b.high)]
    return _wide(min(ends), max(ends))


def _neg(a: Range) -> Range:
    return Range(-a.high, -a.low)


def _abs(a: Range) -> Range:
    return Range(max(a.low, -a.high, 0.0), max(-a.low, a.high))


def _min(a: Range, b: Range) -> Range:
    return Range(min(a.low, b.low), min(a.high, b.high))


def _max(a: Range, b: Range) -> Range:
    return Range(max(a.low, b.low), max(a.high, b.high))


def _clamp(x: Range, low: Range, high: Range) -> Range:
    return Range(min(max(x.low, low.low), high.low, x.high), max(min(x.high, high.high), low.high, high.high))


def _steps(_: Range) -> Range:
    return Range(0.0, float(LARGEST_COUNT))


def _sqrt(a: Range) -> Range:
    return UNKNOWN if a.low < 0 else _wide(math.sqrt(a.low), math.sqrt(a.high))


def _log(a: Range) -> Range:
    return UNKNOWN if a.low <= 0 else _moved(math.log(a.low), math.log(a.high))


def _exp(a: Range) -> Range:
    return UNKNOWN if a.high > 700 else _wide(math.exp(a.low), math.exp(a.high))


def _tan(a: Range) -> Range:
    inside = a.low > -1.57 and a.high < 1.57
    return _moved(math.tan(a.low), math.tan(a.high)) if inside else UNKNOWN


def _arc(low: float, high: float) -> Callable[[Range], Range]:
    return lambda a: Range(low, high) if a.low >= -1 and a.high <= 1 else UNKNOWN


def _hypot(a: Range, b: Range) -> Range:
    return _wide(0.0, math.hypot(max(-a.low, a.high), max(-b.low, b.high)))


def _moved(low: float, high: float) -> Range:
    """Widened by an absolute slack too: near a zero of the function the relative one is nothing."""
    return Range(low - SLACK * (abs(low) + 1), high + SLACK * (abs(high) + 1))


_RULES: dict[str, Callable[..., Range]] = {
    "add": _add,
    "iadd": _add,
    "sub": _sub,
    "isub": _sub,
    "mul": _mul,
    "imul": _mul,
    "div": _div,
    "neg": _neg,
    "ineg": _neg,
    "abs": _abs,
    "iabs": _abs,
    "min": _min,
    "imin": _min,
    "max": _max,
    "imax": _max,
    "clamp": _clamp,
    "iclamp": _clamp,
    "sign": lambda _: Range(-1.0, 1.0),
    "isign": lambda _: Range(-1.0, 1.0),
    "floor": lambda a: Range(a.low - 1.0, a.high),
    "to_real": lambda a: _wide(a.low, a.high),
    "to_steps": _steps,
    "sqrt": _sqrt,
    "sin": lambda _: Range(-1.0, 1.0),
    "cos": lambda _: Range(-1.0, 1.0),
    "tan": _tan,
    "asin": _arc(-1.5708, 1.5708),
    "acos": _arc(0.0, 3.1416),
    "atan2": lambda _a, _b: Range(-3.1416, 3.1416),
    "exp": _exp,
    "log": _log,
    "tanh": lambda _: Range(-1.0, 1.0),
    "hypot": _hypot,
    "wrap": lambda _: Range(-3.1416, 3.1416),
}
