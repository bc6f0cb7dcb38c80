"""Published characteristics of sensors, through generated C."""

from __future__ import annotations

import math

import numpy as np
import pytest

from hybgen.sil import Chip
from tests.conftest import law_of, run_both

FORMATS = ["float32", "float64", "fixed32"]

# K10. IEC 60751 (coefficients and table seen): R(t) = 100 (1 + A t + B t^2 + C (t - 100) t^3), C only below 0.
PT100 = """
    law: probe
    step: 1 s
    number: {number}
    inputs: {{t: {{range: [-200, 850]}}}}
    parameters: {{a: 3.9083e-3, b: -5.775e-7, c: -4.183e-12}}
    terms: {{above: {{value: 1 + t * (a + b * t)}}, below: {{value: above + c * (t - 100) * t * t * t}}}}
    outputs: {{r: {{value: "100 * choose(t < 0, below, above)"}}}}
"""


@pytest.mark.parametrize("number", FORMATS)
def test_platinum_resistance(number: str) -> None:
    found, _, _ = run_both(law_of(PT100.format(number=number)), {"t": np.array([100.0, 200.0, -50.0, 0.0])})
    assert found["r"] == pytest.approx([138.5055, 175.856, 80.306282, 100.0], abs=1e-4)
    assert [round(float(r), 2) for r in found["r"][:3]] == [138.51, 175.86, 80.31]


@pytest.mark.parametrize("number", FORMATS)
def test_platinum_resistance_over_the_range(number: str) -> None:
    t = np.linspace(-200, 850, 21001)
    found, _, _ = run_both(law_of(PT100.format(number=number)), {"t": t[None, :]})
    below = np.where(t < 0, -4.183e-12 * (t - 100) * t**3, 0)
    exact = 100 * (1 + 3.9083e-3 * t - 5.775e-7 * t**2 + below)
    assert np.abs(found["r"][0] - exact).max() < 1e-4


# K9. NIST ITS-90 thermocouple database, type K, 0 ... 1372 C (all coefficients seen): a polynomial and an exponential; millivolts.
COEFFICIENTS = (
    "-0.176004136860e-1 0.389212049750e-1 0.185587700320e-4 -0.994575928740e-7 0.318409457190e-9 "
    "-0.560728448890e-12 0.560750590590e-15 -0.320207200030e-18 0.971511471520e-22 -0.121047212750e-25"
).split()
BUMP = (0.118597600000, -0.118343200000e-3, 0.126968600000e3)


def horner(x: str, scale: int) -> str:
    """The polynomial of t in x = t / 10**scale."""
    shifted = [f"{c.partition('e')[0]}e{int(c.partition('e')[2]) + scale * i}" for i, c in enumerate(COEFFICIENTS)]
    text = shifted[-1]
    for c in reversed(shifted[:-1]):
        text = f"({c} + {x} * {text})"
    return text


TYPE_K = """
    law: junction
    step: 1 s
    number: {number}
    inputs: {{t: {{range: [0, 1372]}}}}
    terms: {{off: {{value: t - 126.9686}}, x: {{value: t / 1000}}}}
    outputs: {{e: {{value: "{polynomial} + 0.1185976 * exp(-0.1183432e-3 * off**2)"}}}}
"""


def type_k(t: np.ndarray) -> np.ndarray:
    """The reference function in double precision."""
    total = np.zeros_like(t)
    for c in reversed(COEFFICIENTS):
        total = float(c) + t * total
    return total + BUMP[0] * np.exp(BUMP[1] * (t - BUMP[2]) ** 2)


@pytest.mark.parametrize(("number", "error"), [("float32", 0.2e-3), ("float64", 1e-12), ("fixed32", 0.2e-3)])
def test_thermocouple(number: str, error: float) -> None:
    # fixed point needs a variable of size one: powers of t have no room in 32 bits
    polynomial = horner("x", 3) if number == "fixed32" else horner("t", 0)
    law = law_of(TYPE_K.format(number=number, polynomial=polynomial))
    marks, _, _ = run_both(law, {"t": np.array([100.0, 500.0, 1000.0])})
    exact = [4.096230219, 20.644286390, 41.275606456]
    assert type_k(np.array([100.0, 500.0, 1000.0])) == pytest.approx(exact, abs=1e-9)
    assert marks["e"] == pytest.approx(exact, abs=max(error, 1e-9))
    t = np.linspace(0, 1000, 20001)[None, :]
    found, _, _ = run_both(law, {"t": t})
    sampled = t.astype(np.float32).astype(float) if number == "float32" else t
    assert np.abs(found["e"] - type_k(sampled)).max() < error


# K9 as a two-point law: the burner of the raft's heater, held between 400 and 500 degrees by the voltage of its junction. In
# closed loop with a lag of 60 s to 700 and to 20 degrees the period is that of any linear-ODE text (K. J. Astrom, R. M. Murray,
# Feedback Systems; from memory).
BURNER = """
    law: burner
    step: 50 ms
    number: {number}
    inputs: {{junction: {{unit: mV, range: [-7, 55], rate: 1 V/s}}}}
    parameters: {{cold: {cold!r} mV, hot: {hot!r} mV}}
    states: {{flame: {{logic: [off, on], initial: on}}}}
    jumps:
      stop: {{set: flame == on and junction >= hot, map: {{flame: off}}}}
      light: {{set: flame == off and junction <= cold, map: {{flame: on}}}}
    outputs: {{fuel: {{type: bool, value: flame == on}}}}
"""


@pytest.mark.parametrize("number", FORMATS)
def test_two_point_law_on_a_thermocouple(number: str) -> None:
    cold, hot = type_k(np.array([400.0, 500.0])).tolist()
    assert (cold, hot) == pytest.approx((16.397, 20.644), abs=1e-3)  # tables; 16.397 from memory
    law = law_of(BURNER.format(number=number, cold=cold, hot=hot))
    chip = Chip(law)
    decay = math.exp(-0.05 / 60)
    temperature, seen, lit = 300.0, [], []
    for _ in range(10000):
        seen.append(float(type_k(np.array(temperature))))
        lit.append(chip.step({"junction": seen[-1]})["fuel"])
        target = 700.0 if lit[-1] else 20.0
        temperature = target + (temperature - target) * decay
    on = np.flatnonzero(np.diff(np.array(lit).astype(int)) == 1)
    period = np.diff(on[1:]).mean() * 0.05
    exact = 60 * math.log(300 / 200) + 60 * math.log(480 / 380)
    assert len(on) >= 12
    # each switch is late by up to a step, and the overshoot is recovered
    assert 0 <= period - exact <= 0.05 * (2 + 480 / 200 + 200 / 480)
    replayed, _, _ = run_both(law, {"junction": np.array(seen)})
    assert replayed["fuel"].tolist() == lit


# J5. Analog Devices tutorials MT-001 and MT-229 (seen): one step of 12 bits of 3.3 V is 0.805664 mV; the noise of rounding to it is a
# step over sqrt(12), 0.232575 mV; a full-scale sine has 6.02 N + 1.76 dB above it.
@pytest.mark.parametrize(("bits", "ratio"), [(12, 74.008), (16, 98.091)])
@pytest.mark.parametrize("number", FORMATS)
def test_noise_of_a_converter(number: str, bits: int, ratio: float) -> None:
    levels = 2**bits
    law = law_of(f"""
        law: converter
        step: 1 ms
        number: {number}
        inputs: {{v: {{unit: V, range: [0, 3.3]}}}}
        parameters: {{full: 3.3 V}}
        terms: {{lsb: {{unit: V, value: full / {levels}}}, code: {{value: floor(v * ({levels} / full) + 0.5)}}}}
        outputs: {{word: {{value: code}}, read: {{unit: V, value: code * lsb}}, one: {{unit: V, value: lsb}}}}
    """)
    count = 1 << 16
    step = 3.3 / levels
    v = step * (levels - 1) / 2 * (1 + np.sin(2 * np.pi * 1009 * np.arange(count) / count + 0.1))
    found, _, _ = run_both(law, {"v": v[None, :]})
    assert set(found["word"].ravel().tolist()) <= set(range(levels))
    assert found["word"].min() == 0 and found["word"].max() == levels - 1
    noise = (found["read"] - v).ravel()
    assert np.abs(noise).max() <= step / 2 * 1.01
    effective = math.sqrt(np.mean(noise**2))
    assert 20 * math.log10(1.65 / math.sqrt(2) / effective) == pytest.approx(ratio, abs=0.1)
    if bits == 12:
        assert found["one"][0, 0] * 1000 == pytest.approx(0.805664, abs=1e-6)
        assert effective * 1000 == pytest.approx(0.232575, rel=0.01)
