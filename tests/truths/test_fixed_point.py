"""Published facts on fixed-point formats and rounding, through generated C."""

from __future__ import annotations

import math
from collections.abc import Callable
from fractions import Fraction

import numpy as np
import pytest

from hybgen.emit import emit
from hybgen.expr.core import RefKind
from hybgen.lower import lower
from hybgen.reference import Reference
from hybgen.sil import Chip
from hybgen.step import build
from tests.conftest import law_of, run_both


# J4. ISO/IEC TR 18037 (draft WG14 N1120; formats seen): _Fract of 16 bits ends at 0.999969482421875 in steps of 3.0517578125e-5, and
# -1 times -1 saturates there; _Accum s16.15 ends at 65535.999969482.
def test_fractional_numbers_saturate() -> None:
    top = 1 - 2.0**-15
    assert (top, 2.0**-15) == (0.999969482421875, 3.0517578125e-5)
    law = law_of(f"""
        law: fraction
        step: 1 s
        number: fixed32
        inputs: {{a: {{range: [-1, {top!r}]}}, b: {{range: [-1, {top!r}]}}}}
        outputs: {{product: {{value: a * b, range: [-1, {top!r}], limit: true}}}}
    """)
    steps = np.random.default_rng(5).integers(-(2**15), 2**15, (2, 2000))
    steps[:, :3] = [[-(2**15), -(2**15), 2**15 - 1], [-(2**15), 2**15 - 1, 2**15 - 1]]
    found, _, chip = run_both(law, {"a": steps[0] / 2**15, "b": steps[1] / 2**15})
    places = chip.step_law.places[(RefKind.OUTPUT, "product")]
    assert places == 30  # the product of two numbers with 15 places each is exact
    exact = [min(int(a) * int(b), (2**15 - 1) << 15) for a, b in steps.T]
    assert [int(p) for p in found["product"] * 2.0**places] == exact
    assert found["product"][0] == top


def test_accumulators_have_the_standard_s_scale() -> None:
    top = 65536 - 2.0**-15
    assert top == pytest.approx(65535.999969482, abs=1e-9)
    law = law_of(f"""
        law: accumulator
        step: 1 s
        number: fixed32
        inputs: {{u: {{range: [-{top:.15f}, {top:.15f}]}}}}
        states: {{sum: {{range: [-{top:.15f}, {top:.15f}], limit: true}}}}
        sample: {{sum: sum + u}}
        outputs: {{y: {{value: sum}}}}
    """)
    assert build(law).places[(RefKind.STATE, "sum")] == 15
    steps = np.random.default_rng(6).integers(-(2**31) + 1, 2**31, 500)
    steps[:5] = [int(v * 2**15) for v in (65000.25, 2.0**-15, 535.75, 1.0, -0.5)]
    reference, chip = Reference(law), Chip(law)
    kept = 0
    for k, u in enumerate(steps.tolist()):
        for machine in (reference, chip):
            assert machine.step({"u": u}, raw=True) == {"y": kept}
        if k == 4:
            assert kept == 2**31 - 1 and chip.state["sum"] == top - 0.5
        kept = max(-(2**31) + 1, min(2**31 - 1, kept + u))


def half_away(x: Fraction) -> int:
    """The nearest integer, ties away from zero."""
    return int(math.copysign(math.floor(abs(x) + Fraction(1, 2)), x))


def trail(rounding: Callable[[Fraction], int], factor: Fraction, start: int) -> list[int]:
    """300 values of y = rounding(factor * y)."""
    found = [start]
    while len(found) < 300:
        found.append(rounding(factor * found[-1]))
    return found


# 0.9 y is written as y - y / 10, so that its ties are exact: 0.9 is no binary fraction, and 0.9 rounded times 5 is no tie.
LAG = """
    law: lag
    step: 1 s
    number: fixed32
    states: {{y: {{range: [-2e9, 2e9], limit: true, initial: {start}}}}}
    sample: {{y: {next}}}
    outputs: {{out: {{value: y}}}}
"""


# J7. L. B. Jackson, An analysis of limit cycles due to multiplication rounding in recursive digital filters, 1969 (from memory): the
# rounding dead band. With half to even 0.9 y rests at 4, 0.95 y at 10, -0.9 y goes on between 4 and -4; 0.5 y rests at 0
# (with half away at 1; re-derived).
@pytest.mark.parametrize(
    ("next_value", "factor", "start", "last"),
    [
        ("y - y / 10", Fraction(9, 10), 100, [4, 4]),
        ("y - y / 10", Fraction(9, 10), -100, [-4, -4]),
        ("y - y / 20", Fraction(19, 20), 100, [10, 10]),
        ("y / 10 - y", Fraction(-9, 10), 100, [4, -4]),
        ("0.5 * y", Fraction(1, 2), 100, [0, 0]),
    ],
)
def test_dead_band_of_a_rounded_lag(next_value: str, factor: Fraction, start: int, last: list[int]) -> None:
    law = law_of(LAG.format(next=next_value, start=start))
    assert build(law).places[(RefKind.STATE, "y")] == 0
    found, _, _ = run_both(law, {"steps": 300})
    assert found["out"].tolist() == trail(round, factor, start)
    assert found["out"][-2:].tolist() == last


# The same law with another rounding planted into its C rests where the other rounding does: the test above can tell them apart.
@pytest.mark.parametrize(
    ("old", "new", "rounding", "rest"),
    [
        ("(kept & UINT64_C(1)) != UINT64_C(0)", "true", half_away, 5),
        ("? UINT64_C(1)\n", "? UINT64_C(0)\n", math.trunc, 0),
    ],
    ids=["half_away", "toward_zero"],
)
@pytest.mark.parametrize("sign", [1, -1])
def test_planted_rounding_rests_elsewhere(
    old: str, new: str, rounding: Callable[[Fraction], int], rest: int, sign: int
) -> None:
    made = build(law_of(LAG.format(next="y - y / 10", start=sign * 100)))
    text = emit(lower(made))["lag.c"]
    head, mark, tail = text.partition("static int32_t lag_fixed_fit(")
    assert mark and old in tail.partition("\n}\n")[0]
    found = Chip(made, files={"lag.c": head + mark + tail.replace(old, new, 1)}).run({"steps": 300})["out"]
    assert found.tolist() == trail(rounding, Fraction(9, 10), sign * 100)
    assert found[-1] == sign * rest


def test_four_roundings_rest_in_different_places() -> None:
    """The published numbers, in plain integers."""
    rests = {
        rounding: [trail(rounding, Fraction(9, 10), start)[-1] for start in (100, -100)]
        for rounding in (half_away, round, math.floor, math.trunc)
    }
    assert rests == {half_away: [5, -5], round: [4, -4], math.floor: [0, -9], math.trunc: [0, 0]}
    assert trail(half_away, Fraction(-9, 10), 100)[-2:] == [5, -5]
    assert trail(half_away, Fraction(19, 20), 100)[-1] == 10
