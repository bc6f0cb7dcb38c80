"""Kernels of fixed point on edge values, and the raw values that they have to give."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

import numpy as np

from hybgen.ir.model import Apply, Constant, Program
from hybgen.ir.walk import all_values
from hybgen.kernels.run import exact, function
from hybgen.kernels.table import kernel
from hybgen.kernels.word import Kernel

MOST = 2**31 - 1
PATTERNS = 4
"""At most so many different sets of constants of one kernel are tried, first, last and some between."""
Pattern = tuple[int | None, ...]


def patterns(name: str, program: Program) -> list[Pattern]:
    """How the law calls a kernel: its constant arguments, None where an argument varies."""
    calls = (v for f in program.functions for v in all_values(f.body) if isinstance(v, Apply) and v.op == name)
    found = sorted({tuple(_constant(a) for a in v.args) for v in calls}, key=lambda p: [(a is None, a or 0) for a in p])
    step = max(1, -(-len(found) // PATTERNS))
    return found[::step]


def _constant(value: object) -> int | None:
    return value.value if isinstance(value, Constant) and isinstance(value.value, int) else None


def edges(pattern: Pattern, random: np.random.Generator) -> list[int]:
    """Ends, signs, ties of each shift in the pattern, and some values between."""
    shifts = sorted({abs(a) for a in pattern if a is not None and 0 < abs(a) < 31})
    ties = [odd << (s - 1) for s in shifts for odd in (1, 3) if odd << (s - 1) <= MOST]
    sizes = [1, MOST, 1 << 30, *ties, *(int(v) for v in random.integers(2, MOST, 3))]
    return [*dict.fromkeys(s * v for v in sizes for s in (1, -1)), 0]


def rows(name: str, program: Program, random: np.random.Generator) -> tuple[Kernel, list[tuple[int, ...]]]:
    """A kernel, and rows of its arguments with the answer last. numpy and exact integers have to agree on it."""
    made = kernel(name, program.number)
    arguments = list(
        dict.fromkeys(row for p in patterns(name, program) for row in _filled(p, random) if _defined(made, row))
    )
    answers = function(made)(*(np.array(column, np.int32) for column in zip(*arguments, strict=True)))
    found = [(*row, int(answer)) for row, answer in zip(arguments, answers, strict=True)]
    assert all(exact(made, *row[:-1]) == row[-1] for row in found), name
    return made, found


def _filled(pattern: Pattern, random: np.random.Generator) -> Iterator[tuple[int, ...]]:
    """The pattern with edge values where it varies: each edge against a plain value, and edges against edges."""
    free = [i for i, a in enumerate(pattern) if a is None]
    some = edges(pattern, random)
    for k, edge in enumerate(some):
        for others in ([1] * len(free), [some[(k * (j + 2) + j) % len(some)] for j in range(len(free))]):
            values: Sequence[int] = [edge, *others[1:]]
            given = iter(values)
            yield tuple(next(given) if a is None else a for a in pattern)


def _defined(made: Kernel, row: tuple[int, ...]) -> bool:
    """Does C define the answer? (A law in fixed point has proved it of its own arguments.)"""
    try:
        exact(made, *row)
    except AssertionError:
        return False
    return True
