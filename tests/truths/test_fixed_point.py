"""Published facts on fixed-point formats and rounding, through generated C."""

from __future__ import annotations

import math
from collections.abc import Callable
from fractions import Fraction

import numpy as np
import pytest

from hybgen.expr.core import RefKind
from hybgen.sil import Chip
from hybgen.step import build
from tests.conftest import law_of, run_both


# J4. ISO/IEC TR 18037 (draft WG14 N1120; formats seen): _Fract of 16 bits ends at 0.999969482421875 in steps of 3.0517578125e-5, and
# -1 times -1 saturates there; _Accum s16.15 ends at 65535.999969482.
def test_fractional_numbers_saturate() -> None:
    top = 1 - 2.0**-15
    assert top == 0.999969482421875
    law = law_of(f"""
        law: fraction
        step: 1 s
        number: fixed32
        inputs: {{a: {{range: [-1, {top!r}]}}, b: {{range: [-1, {top!r}]}}}}
        outputs: {{product: {{value: a * b, range: [-1, {top!r}], limit: true}}}}
    """)
    steps = np.random.default_rng(5).integers(-(2**15), 2**15, (2, 2000))
    steps[:, :3] = [[-(2**15), -(2**15), 2**15 - 1], [-(2**15), 2**15 - 1, 2**15 - 1]]
    found, _, _ = run_both(law, {"a": steps[0] / 2**15, "b": steps[1] / 2**15})
    exact = [min(Fraction(int(a) * int(b), 2**30), Fraction(2**15 - 1, 2**15)) for a, b in steps.T]
    assert [Fraction(float(p)) for p in found["product"]] == exact
    assert found["product"][0] == top


def test_accumulators_have_the_standard_s_scale() -> None:
    top = 65536 - 2.0**-15
    assert top == pytest.approx(65535.999969482, abs=1e-9)
    law = law_of(f"""
        law: accumulator
        step: 1 s
        number: fixed32
        inputs: {{u: {{range: [-65535, 65535]}}}}
        states: {{sum: {{range: [-{top:.15f}, {top:.15f}], limit: true}}}}
        sample: {{sum: sum + u}}
        outputs: {{y: {{value: sum}}}}
    """)
    assert build(law).places[(RefKind.STATE, "sum")] == 15
    chip = Chip(law)
    values = [65000.25, 2.0**-15, 535.75, 1.0, -0.5]
    raws = [chip.step({"u": v})["y"] for v in values]
    kept, wanted = Fraction(0), []
    for v in values:
        wanted.append(float(kept))
        kept = min(kept + Fraction(v), Fraction(top))
    assert raws == wanted
    assert wanted[-1] == top
    assert chip.state["sum"] == top - 0.5


def sticks(rounding: Callable[[Fraction], int], factor: Fraction, start: int) -> int:
    """Where y = round(factor * y) comes to rest (its magnitude)."""
    y = start
    for _ in range(300):
        y = rounding(factor * y)
    return y


# J7. L. B. Jackson, An analysis of limit cycles due to multiplication rounding in recursive digital filters, 1969 (from memory): the
# rounding dead band; half away from zero rests at 0.5 / (1 - 0.9) = 5, half to even at 4, floor at 0 from above and -9 from below.
@pytest.mark.parametrize(
    ("factor", "start", "rest"), [("0.9", 100, 4), ("0.9", -100, -4), ("0.95", 100, 10), ("-0.9", 100, 4)]
)
def test_dead_band_of_a_rounded_lag(factor: str, start: int, rest: int) -> None:
    law = law_of(f"""
        law: lag
        step: 1 s
        number: fixed32
        states: {{y: {{range: [-2e9, 2e9], limit: true, initial: {start}}}}}
        sample: {{y: {factor} * y}}
        outputs: {{out: {{value: y}}}}
    """)
    assert build(law).places[(RefKind.STATE, "y")] == 0
    found, _, _ = run_both(law, {"steps": 300})
    assert set(np.abs(found["out"][-4:]).tolist()) == {float(abs(rest))}
    assert np.sign(found["out"][-1]) == np.sign(rest) or factor.startswith("-")


def test_other_ways_of_rounding_rest_elsewhere() -> None:
    def away(x: Fraction) -> int:
        return int(math.copysign(math.floor(abs(x) + Fraction(1, 2)), x))

    lag = Fraction(9, 10)
    assert (
        sticks(away, lag, 100),
        sticks(round, lag, 100),
        sticks(math.floor, lag, 100),
        sticks(math.floor, lag, -100),
    ) == (5, 4, 0, -9)


def test_a_lag_that_flows_rests_inside_its_dead_band() -> None:
    """The exact step of a lag of 10 s: x decays by exp(-0.1) a step, and rests within 0.5 / (1 - exp(-0.1)) units, but for the
    second rounding of the product."""
    law = law_of("""
        law: filter
        step: 1 s
        number: fixed32
        inputs: {u: {range: [-1, 1]}}
        states: {x: {range: [-1, 1], initial: 1, limit: true}}
        flow: {method: exact, map: {x: (u - x) / (10 s)}}
        outputs: {y: {value: x}}
    """)
    assert build(law).places[(RefKind.STATE, "x")] == 30
    _, reference, _ = run_both(law, {"u": np.zeros(400)})
    last = int(reference.fields["x"][0])
    decay = Fraction(round(math.exp(-0.1) * 2**31), 2**31)
    assert last == sticks(lambda y: round(Fraction(round(2 * y), 2)), decay, 1 << 30)
    assert 0 < last <= 0.75 / (1 - math.exp(-0.1))
