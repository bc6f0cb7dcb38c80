"""Fixed point: published formats, and the dead band of a lag, through laws in fixed32 and plain integers."""

from __future__ import annotations

import math
from collections.abc import Callable
from fractions import Fraction

import numpy as np
import pytest

from hybgen.expr.core import RefKind
from hybgen.kernels.integers import arithmetic
from hybgen.kernels.run import exact
from hybgen.sil import Chip
from hybgen.step import build
from tests.conftest import law_of, run_both

MOST = 2**31 - 1


# ISO/IEC TR 18037 (draft WG14 N1120, formats seen): _Fract with 15 places has the largest value 0.999969482421875 and the step
# 3.0517578125e-5; _Accum with 16.15 ends at 65535.999969482; -1 times -1 saturates.
def test_q_formats() -> None:
    assert (2**15 - 1) * 2.0**-15 == 0.999969482421875 and 2.0**-15 == 3.0517578125e-5
    assert f"{MOST * 2.0**-15:.9f}" == "65535.999969482"
    law = law_of("""
        law: accum
        step: 1 s
        number: fixed32
        inputs: {u: {range: [-65535.9, 65535.9]}, v: {range: [-1, 1]}, w: {range: [-1, 1]}}
        outputs:
          y: {value: u}
          z: {value: v * w}
    """)
    made = build(law)
    assert made.places[(RefKind.INPUT, "u")] == 15 == made.places[(RefKind.OUTPUT, "y")]
    chip = Chip(law)
    for raw in (0, 1, -1, 65535 << 15, (65535 << 15) + 1):
        assert chip.step({"u": raw, "v": 0, "w": 0}, raw=True)["y"] == raw
        assert chip.step({"u": raw * 2.0**-15, "v": 0, "w": 0})["y"] == raw * 2.0**-15
    # -1 * -1 in the format of the operands (Q0.31) is held at its largest value; a law gives the product a place for 1
    assert (
        exact(arithmetic("fixed_mul"), -MOST, -MOST, 31) == MOST - 1 and exact(arithmetic("fixed_scale"), 1, 31) == MOST
    )
    assert exact(arithmetic("fixed_mul"), -(2**31) + 1, -(2**31) + 1, 30) == MOST
    assert chip.step({"u": 0, "v": -1.0, "w": -1.0})["z"] == 1.0 and made.places[(RefKind.OUTPUT, "z")] == 30


def half_even(x: Fraction) -> int:
    return round(x)


def half_away(x: Fraction) -> int:
    return int(math.copysign(math.floor(abs(x) + Fraction(1, 2)), x))


def zero_input(round_: Callable[[Fraction], int], factor: Fraction, start: int, steps: int = 200) -> list[int]:
    """y = round(factor * y) from a start."""
    found = [start]
    for _ in range(steps):
        found.append(round_(factor * found[-1]))
    return found


# L. B. Jackson, zero-input limit cycles of digital filters, 1969/70 (from memory); the definition of the dead band was seen:
# y = round(a y) sticks inside 0.5 / (1 - |a|).
@pytest.mark.parametrize(
    ("round_", "factor", "start", "end"),
    [
        (half_away, Fraction(9, 10), 100, 5),
        (half_away, Fraction(9, 10), -100, -5),
        (half_even, Fraction(9, 10), 100, 4),
        (half_even, Fraction(9, 10), -100, -4),
        (math.floor, Fraction(9, 10), 100, 0),
        (math.floor, Fraction(9, 10), -100, -9),
        (half_away, Fraction(95, 100), 100, 10),
    ],
)
def test_dead_band_of_rounding(round_: Callable[[Fraction], int], factor: Fraction, start: int, end: int) -> None:
    assert zero_input(round_, factor, start)[-1] == end
    assert abs(end) <= Fraction(1, 2) / (1 - abs(factor)) or round_ is math.floor


def test_a_negative_factor_alternates() -> None:
    assert zero_input(half_away, Fraction(-9, 10), 100)[-2:] in ([5, -5], [-5, 5])


@pytest.mark.parametrize("start", [100, -100, 7, 5, 4, 1])
def test_a_lag_in_fixed_point_sticks_where_half_even_says(start: int) -> None:
    """The same lag as a law whose resolution is 1: the state of 31 bits before the point."""
    law = law_of("""
        law: lag
        step: 1 s
        number: fixed32
        states: {y: {range: [-2e9, 2e9], limit: true}}
        sample: {y: 0.9 * y}
        outputs: {shown: {value: y}}
    """)
    assert build(law).places[(RefKind.STATE, "y")] == 0
    chip = Chip(law)
    chip.fields["y"][0] = start
    found = []
    for _ in range(60):
        chip.step({})
        found.append(int(chip.fields["y"][0]))
    assert found == zero_input(half_even, Fraction(9, 10), start, 60)[1:]
    assert found[-1] == int(math.copysign(min(4, abs(start)), start))


def test_a_lag_that_flows_sticks_inside_its_dead_band() -> None:
    """The exact step of a lag of 10 s: x decays by exp(-0.1) a step, and sticks within 0.5 / (1 - exp(-0.1)) units."""
    law = law_of("""
        law: filter
        step: 1 s
        number: fixed32
        inputs: {u: {range: [-1, 1]}}
        states: {x: {range: [-1, 1], initial: 1, limit: true}}
        flow: {method: exact, map: {x: (u - x) / (10 s)}}
        outputs: {y: {value: x}}
    """)
    _, reference, _ = run_both(law, {"u": np.zeros(400)})
    last = int(reference.fields["x"][0])
    assert (
        0 <= last <= 0.5 / (1 - math.exp(-0.1))
        and last == zero_input(half_even, Fraction(math.exp(-0.1)), 1 << 30, 400)[-1]
    )
