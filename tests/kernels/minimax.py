"""The coefficients of the elementary functions: `python tests/kernels/minimax.py` prints hybgen/kernels/coefficients.py.

Minimax polynomials by E. Remez' exchange algorithm (1934; as in J.-M. Muller, Elementary Functions, 3rd ed. 2016, ch. 3; from memory),
with each coefficient rounded to its fixed-point word before the ones after it are fitted again.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import mpmath as mp

mp.mp.dps = 45
Real = Any
Function = Callable[[Real], Real]

TINY = mp.mpf(10) ** -25
OFFSET = mp.floor((1 - mp.sqrt(mp.mpf(1) / 2)) * 2**24 + 2) / 2**24
"""log: g = f + OFFSET is positive for every f >= sqrt(1/2) - 1."""


@dataclass(frozen=True)
class Fit:
    """A function on [0, end] and the weight of its error; terms and binary places above the point by width of the word."""

    function: Function
    weight: Function
    end: Real
    terms: dict[int, int]
    point: dict[int, int]


def _series(function: Function, near_zero: Function) -> Function:
    return lambda x: function(x) if x > TINY else near_zero(x)


QUARTER = (mp.pi / 4) ** 2 * (1 + mp.mpf(2) ** -20)
FITS = {
    "SIN": Fit(
        _series(lambda z: (1 - mp.sin(mp.sqrt(z)) / mp.sqrt(z)) / z, lambda z: mp.mpf(1) / 6 - z / 120),
        lambda z: z,
        QUARTER,
        {32: 5, 64: 9},
        {32: 0, 64: 0},
    ),
    "COS": Fit(
        _series(lambda z: (1 - mp.cos(mp.sqrt(z))) / z, lambda z: mp.mpf(1) / 2 - z / 24),
        lambda z: z,
        QUARTER,
        {32: 5, 64: 9},
        {32: 0, 64: 0},
    ),
    "EXP": Fit(
        _series(lambda x: (mp.mpf(2) ** x - 1) / x, lambda x: mp.log(2) + x * mp.log(2) ** 2 / 2),
        lambda x: x / mp.mpf(2) ** x,
        mp.mpf(1),
        {32: 7, 64: 14},
        {32: 1, 64: 1},
    ),
    "LOG": Fit(
        lambda g: mp.log1p(g - OFFSET) / (g - OFFSET) if abs(g - OFFSET) > TINY else 1 - (g - OFFSET) / 2,
        lambda g: mp.mpf(1),
        mp.sqrt(2) - 1 + OFFSET + mp.mpf(10) ** -6,
        {32: 12, 64: 26},
        {32: 2, 64: 4},
    ),
    "ATAN": Fit(
        _series(lambda z: (1 - mp.atan(mp.sqrt(z)) / mp.sqrt(z)) / z, lambda z: mp.mpf(1) / 3 - z / 5),
        lambda z: z,
        mp.mpf(1),
        {32: 11, 64: 23},
        {32: 0, 64: 0},
    ),
    "RSQRT": Fit(
        lambda a: 1 / mp.sqrt(a + mp.mpf(1) / 4), lambda a: mp.sqrt(a + mp.mpf(1) / 4), mp.mpf(3) / 4, {32: 4}, {32: 3}
    ),
}
"""RSQRT: 1 / sqrt(a + 1/4), the start of Newton's iteration; it is used in words of 32 bits only."""


def remez(function: Function, weight: Function, end: Real, powers: range, grid: int = 300) -> tuple[list[Real], Real]:
    """The coefficients of x**k (k in powers) with the least weighted error on [0, end], and that error."""
    count = len(powers)
    nodes = [end / 2 - end / 2 * mp.cos(mp.pi * (i + mp.mpf(1) / 2) / (count + 1)) for i in range(count + 1)]
    points = [end / 2 - end / 2 * mp.cos(mp.pi * i / grid) for i in range(grid + 1)]
    values, weights = [function(x) for x in points], [weight(x) for x in points]
    for _ in range(8):
        matrix, right = mp.matrix(count + 1, count + 1), mp.matrix(count + 1, 1)
        for i, x in enumerate(nodes):
            for j, k in enumerate(powers):
                matrix[i, j] = x**k
            matrix[i, count] = (-1) ** i / max(weight(x), TINY)
            right[i] = function(x)
        solved = mp.lu_solve(matrix, right)
        found, level = [solved[j] for j in range(count)], abs(solved[count])
        errors = [
            w * (v - mp.polyval(found[::-1], x) * x ** powers[0])
            for x, v, w in zip(points, values, weights, strict=True)
        ]
        most = max(abs(e) for e in errors)
        extremes = _extremes(errors, count + 1)
        if len(extremes) <= count or most - level < most / 50:
            break
        nodes = [points[i] for i in extremes]
    return found, most


def _extremes(errors: list[Real], wanted: int) -> list[int]:
    """Points of largest error between changes of sign."""
    found: list[int] = []
    for i, error in enumerate(errors):
        if found and (error > 0) == (errors[found[-1]] > 0):
            if abs(error) > abs(errors[found[-1]]):
                found[-1] = i
        else:
            found.append(i)
    while len(found) > wanted:
        found.pop(0 if abs(errors[found[0]]) < abs(errors[found[-1]]) else -1)
    return found


def rounded(fit: Fit, width: int) -> list[int]:
    """The magnitudes of the coefficients as words of `width` bits."""
    count, unit = fit.terms[width], mp.mpf(2) ** (width - fit.point[width])
    if width == 64:
        found, _ = remez(fit.function, fit.weight, fit.end, range(count))
        return [int(mp.nint(abs(c) * unit)) for c in found]
    made: list[Real] = []
    for k in range(count):

        def rest(x: Real, known: tuple[Real, ...] = tuple(made)) -> Real:
            return fit.function(x) - mp.polyval(list(known[::-1]), x)

        found, _ = remez(rest, fit.weight, fit.end, range(k, count))
        made.append(mp.nint(found[0] * unit) / unit)
    return [int(abs(c) * unit) for c in made]


HEAD = '''"""Coefficients of the elementary functions, as fixed-point words. Printed by `python tests/kernels/minimax.py`."""

COEFFICIENTS: dict[str, dict[int, tuple[int, ...]]] = {'''


def main() -> None:
    """Prints the module."""
    print(HEAD)
    for name, fit in FITS.items():
        print(f'    "{name}": {{')
        for width in fit.terms:
            print(f"        {width}: (")
            for word in rounded(fit, width):
                print(f"            0x{word:0{width // 4}X},")
            print("        ),")
        print("    },")
    print("}")


if __name__ == "__main__":
    main()
