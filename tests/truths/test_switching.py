"""Published facts on switching with hysteresis, through generated C."""

from __future__ import annotations

import math

import numpy as np
import pytest
from statsmodels.datasets import sunspots

from hybgen.sil import Chip
from tests.conftest import law_of, run_both


# A10. TI precision design TIPD144 and data sheets SNOSD50A (2.7 V and 2.3 V at 5 V seen), TI circuit SBOA313 (1.7 V and
# 1.3 V at 3 V seen); the ratio formulas are from memory, re-derived.
@pytest.mark.parametrize(
    ("supply", "rx", "ry", "rh", "high", "low"),
    [
        ("5 V", "100 kohm", "100 kohm", "576 kohm", 2.699680511, 2.300319489),
        ("5 V", "100 kohm", "100 kohm", "575 kohm", 2.7, 2.3),
    ],
)
def test_comparator_thresholds_from_resistors(supply: str, rx: str, ry: str, rh: str, high: float, low: float) -> None:
    law = law_of(f"""
        law: comparator
        step: 1 ms
        inputs: {{vin: {{unit: V, range: [0, 5], rate: 5 V/s}}}}
        parameters: {{supply: {supply}, rx: {rx}, ry: {ry}, rh: {rh}}}
        states: {{out: {{logic: [low, high], initial: high}}}}
        terms:
          upper: {{unit: V, value: "supply * ry / (ry + rx * rh / (rx + rh))"}}
          lower: {{unit: V, value: "supply * (ry * rh / (ry + rh)) / (rx + ry * rh / (ry + rh))"}}
        jumps:
          fall: {{set: out == high and vin >= upper, map: {{out: low}}}}
          rise: {{set: out == low and vin <= lower, map: {{out: high}}}}
        outputs: {{q: {{type: bool, value: out == high}}}}
    """)
    ramp = np.linspace(0, 5, 50001)
    vin = np.concatenate([ramp, ramp[::-1]])
    found, _, chip = run_both(law, {"vin": vin})
    turns = np.flatnonzero(np.diff(found["q"].astype(int))) + 1
    assert chip.jumps == 2
    assert -1e-6 <= vin[turns[0]] - high <= 1.01e-4
    assert -1e-6 <= low - vin[turns[1]] <= 1.01e-4


# A11. S. Finch, Number of Sign Changes: Segment of AR(1) (abstract seen), crediting S. O. Rice (1945): the expected number of
# sign changes in n samples is (n - 1) arccos(rho) / pi.
@pytest.mark.parametrize(("rho", "rate"), [(0.0, 0.5), (0.5, 0.333333333), (0.9, 0.143566293), (0.99, 0.045053414)])
def test_noise_chatter_without_a_gap_follows_rice(rho: float, rate: float) -> None:
    assert abs(math.acos(rho) / math.pi - rate) < 1e-9
    n = 2_000_000
    noise = np.random.default_rng(11).standard_normal(n)
    x = np.empty(n)
    x[0] = noise[0]
    scaled = math.sqrt(1 - rho * rho) * noise
    from scipy.signal import lfilter

    x = lfilter([1.0], [1.0, -rho], np.concatenate([[noise[0]], scaled[1:]]))
    text = """
        law: chatter
        step: 1 ms
        inputs: {{x: {{range: [-20, 20]}}}}
        states: {{side: {{logic: [below, above], initial: {first}}}}}
        jumps:
          up: {{set: side == below and x > {gap}, map: {{side: above}}}}
          down: {{set: side == above and x < -{gap}, map: {{side: below}}}}
        outputs: {{q: {{type: bool, value: side == above}}}}
    """
    first = "above" if x[0] > 0 else "below"
    chip = Chip(law_of(text.format(gap="0", first=first)))
    chip.run({"x": x})
    assert abs(chip.jumps / (n - 1) - rate) < (0.005 if rho < 0.95 else 0.01) * rate
    calm = Chip(law_of(text.format(gap="6", first=first)))
    calm.run({"x": x})
    assert calm.jumps == 0


# N1. Yearly sunspot numbers 1700-2008 (statsmodels; 309 values), SILSO list of solar cycles: on at >= 44, off at <= 24 finds 28
# cycles, 23 of them since 1755; a plain comparator at 44 counts 29, splitting cycle 5. Starts and maxima of cycles 1-23 (years
# with a decimal) are from memory.
STARTS = [
    1755.2,
    1766.5,
    1775.5,
    1784.7,
    1798.3,
    1810.6,
    1823.3,
    1833.9,
    1843.5,
    1856.0,
    1867.2,
    1878.9,
    1890.2,
    1902.1,
    1913.6,
    1923.6,
    1933.8,
    1944.2,
    1954.3,
    1964.8,
    1976.2,
    1986.7,
    1996.6,
]
MAXIMA = [
    1761.5,
    1769.7,
    1778.4,
    1788.1,
    1805.2,
    1816.4,
    1829.9,
    1837.2,
    1848.1,
    1860.1,
    1870.6,
    1883.9,
    1894.1,
    1906.2,
    1917.6,
    1928.4,
    1937.4,
    1947.5,
    1958.3,
    1968.9,
    1979.9,
    1989.6,
    2001.9,
]


def test_solar_cycles_are_counted_with_a_gap() -> None:
    data = sunspots.load_pandas().data
    years, numbers = data["YEAR"].to_numpy(int), data["SUNACTIVITY"].to_numpy(float)
    assert len(numbers) == 309 and (years[0], years[-1]) == (1700, 2008)
    text = """
        law: cycles
        step: 1 d
        inputs: {{activity: {{range: [0, 500]}}}}
        states: {{sun: {{logic: [quiet, active]}}}}
        jumps:
          wake: {{set: sun == quiet and activity >= 44, map: {{sun: active}}}}
          rest: {{set: sun == active and activity {off}, map: {{sun: quiet}}}}
        outputs: {{on: {{type: bool, value: jumped(wake)}}}}
    """
    found, _, _ = run_both(law_of(text.format(off="<= 24")), {"activity": numbers})
    on = years[found["on"]]
    assert len(on) == 28
    later = on[on >= 1755]
    assert len(later) == 23
    for year, start, top in zip(later, STARTS, MAXIMA, strict=True):
        assert math.floor(start) <= year <= math.ceil(top)
    plain, _, _ = run_both(law_of(text.format(off="< 44")), {"activity": numbers})
    extra = years[plain["on"]]
    assert len(extra) == 29
    assert any(1802 <= y <= 1804 for y in extra)
