"""Values in fixed point: an expression on raw integers, how many binary places it has, and between which raw values it lies.

Places are chosen so that nothing overflows: a result gets as many as its operands give, and no more than its interval leaves
room for. Intervals are exact fractions, so this is a proof, operation by operation.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from fractions import Fraction

from hybgen.diag.span import Span
from hybgen.expr.core import Const, Node, integer, op

MOST = 2**31 - 1
FINEST = 62
COARSEST = -31


class Refused(Exception):
    """Internal: no scale fits, or the operation is not defined on the whole interval; the message says which."""


@dataclass(frozen=True, slots=True)
class Scaled:
    """raw * 2**-places, low <= raw <= high."""

    node: Node
    """int"""
    places: int
    low: int
    high: int
    error: Fraction = Fraction(0)
    """How far the value is from the law's at most, where the law's is exact in real numbers."""

    @property
    def half(self) -> Fraction:
        """Half a unit: the error of one rounding."""
        return Fraction(2) ** -(self.places + 1)

    @property
    def size(self) -> Fraction:
        """The largest magnitude."""
        return max(abs(e) for e in self.ends)

    @property
    def ends(self) -> tuple[Fraction, Fraction]:
        """The interval of the value."""
        unit = Fraction(2) ** -self.places
        return self.low * unit, self.high * unit


def room(largest: Fraction) -> int:
    """The most places with which a magnitude stays below 2**31."""
    if largest == 0:
        return FINEST
    places = 31 - (largest.numerator.bit_length() - largest.denominator.bit_length()) + 1
    while largest * Fraction(2) ** places > MOST:
        places -= 1
    if places < COARSEST:
        raise Refused(f"numbers up to {float(largest):.6g} have no room in 32 bits")
    return min(places, FINEST)


def raw(value: Fraction, places: int) -> int:
    """The nearest raw value, ties to even."""
    return round(value * Fraction(2) ** places)


def fitted(
    low: Fraction,
    high: Fraction,
    most: int,
    make: Callable[[int], Node],
    error: Fraction,
    exact: int | None = None,
    kept: int = COARSEST,
) -> Scaled:
    """A result in [low, high], with at most `most` places; `make` gives its node for the places chosen.

    `error` is that of the operands; with `exact` places or more the operation itself does not round. `kept`: places that
    are wanted although the result may then be held at the ends (it is stored into a state that is held there anyway).
    """
    places = min(most, max(kept, room(max(abs(low), abs(high)))))
    lowest, highest = (max(-MOST, min(MOST, raw(e, places))) for e in (low, high))
    found = Scaled(make(places), places, lowest, highest)
    rounds = exact is None or places < exact
    return replace(found, error=error + (found.half if rounds else 0))


def constant(value: Fraction, span: Span) -> Scaled:
    """A constant: as few places as it needs to be exact, or as many as there is room for."""
    places = room(abs(value))
    exact = value.denominator.bit_length() - 1
    if value.denominator == 1 << exact:
        places = min(places, exact)
    found = raw(value, places)
    off = abs(value - found * Fraction(2) ** -places)
    return Scaled(integer(found, span), places, found, found, off)


def rescaled(x: Scaled, places: int, span: Span) -> Scaled:
    """The same value with other places: rounded where there are fewer, held where there is no room."""
    if x.places == places:
        return x
    low, high = (max(-MOST, min(MOST, raw(e, places))) for e in x.ends)
    left = max(-FINEST, min(31, places - x.places))
    node = integer(low, span) if isinstance(x.node, Const) else op("fixed_scale", x.node, integer(left), span=span)
    found = Scaled(node, places, low, high)
    return replace(found, error=x.error + (found.half if places < x.places else 0))


def common(values: list[Scaled], span: Span) -> list[Scaled]:
    """The values with the same places: the most that there is room for."""
    largest = max(abs(e) for v in values for e in v.ends)
    places = min(max(v.places for v in values), room(largest))
    return [rescaled(v, places, span) for v in values]


def added(a: Scaled, b: Scaled, minus: bool, span: Span, kept: int = COARSEST) -> Scaled:
    """a + b or a - b, rounded once; an operand that is more than 2**31 times finer than the other is rounded first."""
    fine = min(a.places, b.places) + 31
    a, b = (rescaled(x, fine, span) if x.places > fine else x for x in (a, b))
    a, b = _joined(a, b, span), _joined(b, a, span)
    (a_low, a_high), (b_low, b_high) = a.ends, b.ends
    low, high = (a_low - b_high, a_high - b_low) if minus else (a_low + b_low, a_high + b_high)
    top = max(a.places, b.places)

    def make(places: int) -> Node:
        inside = max(abs(low), abs(high)) * Fraction(2) ** places <= MOST
        if a.places == b.places == places and inside:
            return op("isub" if minus else "iadd", a.node, b.node, span=span)
        other = op("ineg", b.node, span=span) if minus else b.node
        shifts = (top - a.places, top - b.places, top - places)
        return op("fixed_add", a.node, other, *map(integer, shifts), span=span)

    return fitted(low, high, top, make, a.error + b.error, top, kept)


def _joined(x: Scaled, other: Scaled, span: Span) -> Scaled:
    """A constant with the places of the other operand, where that loses nothing."""
    finer = x.places < other.places <= room(abs(x.ends[0]))
    return rescaled(x, other.places, span) if isinstance(x.node, Const) and finer else x


def multiplied(a: Scaled, b: Scaled, span: Span, kept: int = COARSEST) -> Scaled:
    """a * b, rounded once."""
    ends = [x * y for x in a.ends for y in b.ends]
    if a.node == b.node:  # a square is nowhere below 0
        ends = [max(ends), Fraction(0) if a.low <= 0 <= a.high else min(e * e for e in a.ends)]
    whole = a.places + b.places

    def make(places: int) -> Node:
        return op("fixed_mul", a.node, b.node, integer(min(FINEST, whole - places)), span=span)

    error = a.size * b.error + b.size * a.error + a.error * b.error
    return fitted(min(ends), max(ends), whole, make, error, whole, kept)


def divided(a: Scaled, b: Scaled, span: Span) -> Scaled:
    """a / b, rounded once; b is not 0."""
    if b.low <= 0 <= b.high:
        raise Refused(f"the divisor can be 0: it lies between {float(b.ends[0]):.6g} and {float(b.ends[1]):.6g}")
    ends = [x / y for x in a.ends for y in b.ends]

    def make(places: int) -> Node:
        return op("fixed_div", a.node, b.node, integer(max(-31, places - a.places + b.places)), span=span)

    least = min(abs(e) for e in b.ends) - b.error
    if least <= 0:
        raise Refused("the divisor is as small as its own rounding error")
    error = (a.error + max(abs(e) for e in ends) * b.error) / least
    return fitted(min(ends), max(ends), a.places - b.places + 31, make, error)


def ordered(name: str, a: Scaled, b: Scaled, span: Span) -> Node:
    """A comparison of two values, exact whatever their places. Beyond 31 more places only the sign of the finer one counts."""
    if a.places == b.places:
        return op(name, a.node, b.node, span=span)
    top = max(a.places, b.places)
    shifts = [integer(min(31, top - x.places)) for x in (a, b)]
    return op(name, op("fixed_order", a.node, b.node, *shifts, span=span), integer(0), span=span)
