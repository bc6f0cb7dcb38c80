"""Fixed-point arithmetic and functions against exact fractions, and against exact integers that check every rule of C."""

from __future__ import annotations

import random
from collections.abc import Callable
from fractions import Fraction
from typing import Any

import mpmath
import numpy as np
import pytest

from hybgen.kernels import fixed
from hybgen.kernels.errors import RELATIVE
from hybgen.kernels.integers import ARITHMETIC, MOST, arithmetic
from hybgen.kernels.run import exact, function
from hybgen.kernels.word import ELEMENTARY

EDGES = [0, 1, -1, 2, -3, MOST, -MOST, 2**30, -(2**30), 65535, 65536, 12345678, -7654321]


def held(value: Fraction) -> int:
    """The nearest whole number, ties to even (Python's round), held at the ends."""
    return max(-MOST, min(MOST, round(value)))


def two(k: int) -> Fraction:
    return Fraction(2) ** k


MEANINGS: dict[str, Callable[..., int]] = {
    "fixed_add": lambda a, b, p, q, s: held((a * two(p) + b * two(q)) / two(s)),
    "fixed_mul": lambda a, b, s: held(a * b / two(s)),
    "fixed_div": lambda a, b, s: held(a * two(s) / b) if b else (a > 0) * MOST - (a < 0) * MOST,
    "fixed_scale": lambda a, s: held(a * two(s)),
    "fixed_order": lambda a, b, p, q: (a * two(p) > b * two(q)) - (a * two(p) < b * two(q)),
    "fixed_floor": lambda a, s: int(a / two(s) // 1),
    "fixed_line": lambda y, m, x, x0, p, s: held((y * two(p) + m * (x - x0)) / two(s)),
}
SHIFTS = {
    "fixed_add": ((0, 31), (0, 31), (0, 62)),
    "fixed_mul": ((0, 62),),
    "fixed_div": ((-31, 31),),
    "fixed_scale": ((-62, 31),),
    "fixed_order": ((0, 31), (0, 31)),
    "fixed_floor": ((0, 62),),
    "fixed_steps": ((0, 40),),
    "fixed_line": ((0, 30), (0, 62)),
}


def operands(name: str, dice: random.Random) -> list[int]:
    """Raw values at edges or anywhere, then shifts."""
    count = len(ARITHMETIC[name][0].split()) - len(SHIFTS[name])
    raws = [
        dice.choice(EDGES) if dice.random() < 0.3 else dice.randint(-MOST, MOST) >> dice.randint(0, 31)
        for _ in range(count)
    ]
    if name == "fixed_line":
        raws[3] = max(-(2**30), min(2**30, raws[3]))
        raws[2] = max(-(2**30), min(2**30, raws[2]))
    return raws + [dice.randint(*ends) for ends in SHIFTS[name]]


@pytest.mark.parametrize("name", MEANINGS)
def test_fixed_point_operations_are_exact_then_rounded_once(name: str) -> None:
    dice = random.Random(name)
    rows = [operands(name, dice) for _ in range(4000)]
    kernel = arithmetic(name)
    found = function(kernel)(*(np.array(c, np.int32) for c in zip(*rows, strict=True)))
    for row, got in zip(rows, found, strict=True):
        assert MEANINGS[name](*row) == int(got) == exact(kernel, *row), (name, row)


def test_whole_steps_are_rounded_up_with_a_little_slack() -> None:
    kernel = arithmetic("fixed_steps")
    cases = {
        (3 << 20, 20): 3,
        ((3 << 20) + 2, 20): 3,
        ((3 << 20) + 9, 20): 4,
        (1, 20): 1,
        (0, 20): 0,
        (-5, 20): 0,
        (MOST, 0): MOST,
        (10, 1): 5,
        (11, 1): 6,
        (1 << 30, 3): 1 << 27,
        ((1 << 30) + 3, 3): (1 << 27) + 1,
    }
    for (raw, places), wanted in cases.items():
        assert exact(kernel, raw, places) == wanted == int(function(kernel)(np.int32(raw), np.int32(places)))


def turned(x: Any) -> Any:
    return x - 2 * mpmath.pi * mpmath.nint(x / (2 * mpmath.pi))


def arguments(name: str, dice: random.Random) -> tuple[list[int], list[int]]:
    """(raw values, their places) inside the domain."""
    places = [dice.randint(8, 40) for _ in range(ELEMENTARY[name])]
    raws = [dice.randint(-MOST, MOST) >> dice.randint(0, 30) for _ in places]
    if name in ("asin", "acos"):
        end = min(MOST, 2 ** places[0])
        raws = [max(-end, min(end, r)) for r in raws]
    if name in ("sqrt", "log"):
        raws = [max(1, abs(r)) for r in raws]
    if name == "exp":
        raws = [min(r, 60 << places[0]) for r in raws]
    return raws, places


# mpmath as the general-purpose reference.
@pytest.mark.parametrize("name", ELEMENTARY)
def test_fixed_point_functions_are_within_their_bound(name: str) -> None:
    dice = random.Random(name)
    kernel = fixed.kernel(name)
    work = function(kernel)
    reference = turned if name == "wrap" else getattr(mpmath, name)
    with mpmath.workprec(200):
        for _ in range(3000):
            raws, places = arguments(name, dice)
            wanted = dice.randint(5, 31)
            got = int(work(*map(np.int32, (*raws, *places, wanted))))
            true = reference(*(mpmath.ldexp(r, -p) for r, p in zip(raws, places, strict=True))) * 2**wanted
            if abs(true) >= MOST:
                assert got == (MOST if true > 0 else -MOST)
            else:
                assert abs(got - true) <= 0.5 + RELATIVE[name] * abs(true), (name, raws, places, wanted)


@pytest.mark.parametrize("name", ELEMENTARY)
def test_fixed_point_functions_in_numpy_are_the_exact_integers(name: str) -> None:
    dice = random.Random(name + "!")
    kernel = fixed.kernel(name)
    rows = [[*(dice.choice([*EDGES, dice.randint(-MOST, MOST)]) for _ in range(ELEMENTARY[name])),
             *(dice.randint(0, 40) for _ in range(ELEMENTARY[name])), dice.randint(0, 31)] for _ in range(300)]  # fmt: skip
    found = function(kernel)(*(np.array(c, np.int32) for c in zip(*rows, strict=True)))
    assert [exact(kernel, *row) for row in rows] == [int(v) for v in found]
