"""Functions in fixed point: for each the interval of its results, and from it their places; and what errors become."""

from __future__ import annotations

import math
from fractions import Fraction

import numpy as np

from hybgen.diag.span import Span
from hybgen.expr.core import Node, integer, op
from hybgen.kernels.errors import RELATIVE
from hybgen.numbers.enclosures import ELEMENTARY as FUNCTIONS
from hybgen.numbers.enclosures import Enclosure
from hybgen.step.scaled import COARSEST, Refused, Scaled, common, fitted


def picked(name: str, args: list[Scaled], span: Span) -> Scaled:
    """neg, abs, min, max, clamp: no rounding, but to common places."""
    args = common(args, span)
    low, high = args[0].low, args[0].high
    match name:
        case "neg":
            low, high = -high, -low
        case "abs":
            low, high = max(low, -high, 0), max(-low, high)
        case "min":
            low, high = min(low, args[1].low), min(high, args[1].high)
        case "max":
            low, high = max(low, args[1].low), max(high, args[1].high)
        case "clamp":
            least, most = args[1:]
            low, high = (
                max(min(least.low, most.low), min(low, most.low)),
                min(max(least.high, most.high), max(high, least.high)),
            )
    error = max(a.error for a in args)
    return Scaled(op(f"i{name}", *(a.node for a in args), span=span), args[0].places, low, high, error)


_SLACK = Fraction(1, 10**6)


def elementary(name: str, args: list[Scaled], span: Span) -> Scaled:
    """An elementary function, on an interval inside its domain."""
    low, high = _image(name, [(float(a.ends[0]), float(a.ends[1])) for a in args])
    wide = [Fraction(low) - _SLACK * (1 + abs(Fraction(low))), Fraction(high) + _SLACK * (1 + abs(Fraction(high)))]
    most = {"sin": 30, "cos": 30, "tanh": 30, "asin": 30, "acos": 29, "atan2": 29, "wrap": 29}.get(name, 62)

    def make(places: int) -> Node:
        shifts = [*(a.places for a in args), places]
        return op(f"fixed_{name}", *(a.node for a in args), *map(integer, shifts), span=span)

    error = _propagated(name, args) + Fraction(RELATIVE[name]) * max(map(abs, wide))
    return fitted(wide[0], wide[1], (COARSEST, most), make, error)


def _propagated(name: str, args: list[Scaled]) -> Fraction:
    """What the errors of the arguments make of the result. Raises Refused where there is no bound."""
    if not any(a.error for a in args):
        return Fraction(0)
    boxes = [Enclosure(*(np.array([float(v)]) for v in (*a.ends, a.error * (1 + Fraction(1, 2**40))))) for a in args]
    with np.errstate(all="ignore"):
        error = float(FUNCTIONS[name](*boxes)[2][0])
    if not math.isfinite(error):
        raise Refused(f"the argument of {name}() is as near to an end of its domain as its own rounding error")
    return Fraction(error) * (1 + Fraction(1, 2**40))


def _image(name: str, ends: list[tuple[float, float]]) -> tuple[float, float]:
    """The interval of an elementary function's results."""
    low, high = ends[0]
    match name:
        case "sqrt":
            if low < 0:
                raise Refused(f"sqrt() of a number that can be {low:.6g}")
            return math.sqrt(low), math.sqrt(high)
        case "log":
            if low <= 0:
                raise Refused(f"log() of a number that can be {low:.6g}")
            return math.log(low), math.log(high)
        case "exp":
            if high > 40:
                raise Refused(f"exp() of a number that can be {high:.6g}")
            return math.exp(max(low, -700.0)), math.exp(high)
        case "asin" | "acos":
            if low < -1 or high > 1:
                raise Refused(f"{name}() of a number between {low:.6g} and {high:.6g}")
            return (-1.5707964, 1.5707964) if name == "asin" else (0.0, 3.1415927)
        case "tan":
            if low <= -1.57 or high >= 1.57:
                raise Refused(f"tan() of an angle between {low:.6g} and {high:.6g}: pi/2 may be among them")
            return math.tan(low), math.tan(high)
        case "hypot":
            return 0.0, math.hypot(*(max(-a, b) for a, b in ends))
        case "atan2" | "wrap":
            return -3.1415927, 3.1415927
        case _:
            return -1.0, 1.0
