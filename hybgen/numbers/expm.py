"""The exact discretisation of x' = A x + v with v held: x(h) = Phi x(0) + Gamma v.

[Phi Gamma; 0 I] = exp([A I; 0 0] h). Source: C. F. Van Loan, Computing integrals involving the matrix exponential, IEEE Trans.
Automatic Control 23 (1978) 395-404 (from memory). Computed with balls (a middle and a proved radius), at more and more
bits until each radius is below 1e-60 of its entry.
"""

from __future__ import annotations

from fractions import Fraction
from typing import Any

Matrix = tuple[tuple[Fraction, ...], ...]

RELATIVE = Fraction(1, 10**60)
NEGLIGIBLE = Fraction(1, 10**600)
"""An entry below this is zero in every number format."""
MOST_BITS = 40000


def discretise(a: Matrix, h: Fraction) -> tuple[Matrix, Matrix]:
    """(Phi, Gamma) for the n-by-n matrix A (per second) and the step h in seconds.

    Entries that are 0 or 1 by the structure of A are exact; the others are proved to 60 digits. Raises OverflowError if
    A h is beyond 20000.
    """
    n = len(a)
    if not any(any(row) for row in a):
        identity = tuple(tuple(Fraction(int(i == j)) for j in range(n)) for i in range(n))
        return identity, tuple(tuple(h * e for e in row) for row in identity)
    norm = max(sum(abs(e) for e in row) for row in a) * h
    if norm > 20000:
        raise OverflowError("the flow map is too fast for this step: rate times step is beyond 20000")
    bits = 300 + 3 * int(norm)
    while (found := _exponential(a, h, bits)) is None:
        bits *= 2
        assert bits < MOST_BITS, "an entry of a matrix exponential can't be told from zero"
    reach = _reach(a)
    phi = tuple(tuple(_structural(found[i][j], i, j, reach) for j in range(n)) for i in range(n))
    gamma = tuple(tuple(found[i][n + j] if reach[i][j] or i == j else Fraction(0) for j in range(n)) for i in range(n))
    return phi, gamma


def _exponential(a: Matrix, h: Fraction, bits: int) -> list[list[Fraction]] | None:
    """The upper half of the exponential, or None where the bits were too few."""
    import flint  # only laws with a coupled or decaying flow need it

    n = len(a)
    before, flint.ctx.prec = flint.ctx.prec, bits
    try:
        rows = [[*(e * h for e in a[i]), *(h if i == j else Fraction(0) for j in range(n))] for i in range(n)]
        rows += [[Fraction(0)] * (2 * n)] * n
        full = flint.arb_mat(
            2 * n, 2 * n, [flint.arb(flint.fmpq(e.numerator, e.denominator)) for row in rows for e in row]
        )
        ball = full.exp()
        made = [[_middle(ball[i, j]) for j in range(2 * n)] for i in range(n)]
    finally:
        flint.ctx.prec = before
    if any(e is None for row in made for e in row):
        return None
    return [[e for e in row if e is not None] for row in made]


def _middle(ball: Any) -> Fraction | None:
    """The middle of a ball whose radius is small enough, else None."""
    middle, radius = _fraction(ball.mid()), _fraction(ball.rad())
    if abs(middle) + radius < NEGLIGIBLE:
        return Fraction(0)
    return middle if radius <= RELATIVE * abs(middle) else None


def _fraction(value: Any) -> Fraction:
    mantissa, exponent = value.man_exp()
    return Fraction(int(mantissa)) * Fraction(2) ** int(exponent)


def _reach(a: Matrix) -> list[list[bool]]:
    """reach[i][j]: does state j act on state i, directly or through others?"""
    n = len(a)
    reach = [[a[i][j] != 0 for j in range(n)] for i in range(n)]
    for k in range(n):
        for i in range(n):
            if reach[i][k]:
                reach[i] = [x or y for x, y in zip(reach[i], reach[k], strict=True)]
    return reach


def _structural(value: Fraction, i: int, j: int, reach: list[list[bool]]) -> Fraction:
    if i == j and not reach[i][i]:
        return Fraction(1)
    return value if i == j or reach[i][j] else Fraction(0)
