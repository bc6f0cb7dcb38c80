"""The exact discretisation of x' = A x + v with v held: x(h) = Phi x(0) + Gamma v.

[Phi Gamma; 0 I] = exp([A I; 0 0] h), computed with mpmath at 50 digits or more and confirmed at 30 digits
more. Source: C. F. Van Loan, Computing integrals involving the matrix exponential, IEEE Trans. Automatic
Control 23 (1978) 395-404 (from memory).
"""

from __future__ import annotations

from fractions import Fraction
from typing import Any

Matrix = tuple[tuple[Fraction, ...], ...]

DIGITS = 50


def discretise(a: Matrix, h: Fraction) -> tuple[Matrix, Matrix]:
    """(Phi, Gamma) for the n-by-n matrix A (per second) and the step h in seconds.

    Entries that are 0 or 1 by the structure of A are exact; the others are right to 50 digits relative to the
    largest entry. Raises OverflowError if an entry is beyond 1e400.
    """
    n = len(a)
    if not any(any(row) for row in a):
        identity = tuple(tuple(Fraction(int(i == j)) for j in range(n)) for i in range(n))
        return identity, tuple(tuple(h * e for e in row) for row in identity)
    norm = max(sum(abs(e) for e in row) for row in a) * h
    if norm > 20000:
        raise OverflowError("the flow map is too stiff for this step: A*h is beyond 20000")
    digits = DIGITS + int(norm) + 10
    while True:
        once, again = _exponential(a, h, digits), _exponential(a, h, digits + 30)
        largest = max(abs(e) for row in again for e in row)
        worst = max(abs(x - y) for p, q in zip(once, again, strict=True) for x, y in zip(p, q, strict=True))
        if worst <= largest * Fraction(1, 10**DIGITS):
            break
        digits += 100
    reach = _reach(a)
    phi = tuple(tuple(_structural(again[i][j], i, j, reach, a) for j in range(n)) for i in range(n))
    gamma = tuple(tuple(again[i][n + j] if reach[i][j] or i == j else Fraction(0) for j in range(n)) for i in range(n))
    return phi, gamma


def _exponential(a: Matrix, h: Fraction, digits: int) -> list[list[Fraction]]:
    import mpmath  # 0.1 s: only laws with a coupled or decaying flow need it

    n = len(a)
    with mpmath.workdps(digits):
        full = mpmath.matrix(2 * n, 2 * n)
        for i in range(n):
            for j in range(n):
                full[i, j] = mpmath.mpf((a[i][j] * h).numerator) / (a[i][j] * h).denominator
            full[i, n + i] = mpmath.mpf(h.numerator) / h.denominator
        found = mpmath.expm(full, method="taylor")
        return [[_fraction(found[i, j]) for j in range(2 * n)] for i in range(n)]


def _fraction(value: Any) -> Fraction:
    sign, mantissa, exponent, _ = value._mpf_
    if abs(exponent) > 200000:
        raise OverflowError("the flow map grows beyond every number format in one step")
    return (-1 if sign else 1) * Fraction(int(mantissa)) * Fraction(2) ** int(exponent)


def _reach(a: Matrix) -> list[list[bool]]:
    """reach[i][j]: does state j act on state i, directly or through others?"""
    n = len(a)
    reach = [[a[i][j] != 0 for j in range(n)] for i in range(n)]
    for k in range(n):
        for i in range(n):
            if reach[i][k]:
                reach[i] = [x or y for x, y in zip(reach[i], reach[k], strict=True)]
    return reach


def _structural(value: Fraction, i: int, j: int, reach: list[list[bool]], a: Matrix) -> Fraction:
    if i == j and not reach[i][i]:
        return Fraction(1)
    return value if i == j or reach[i][j] else Fraction(0)
