"""Published facts on reset elements, through generated C: the first Fourier bin of the answer to a sine."""

from __future__ import annotations

import cmath
import math

import numpy as np
import pytest

from hybgen.sil import Chip
from tests.conftest import law_of, run_both

PERIODS = 24

RESET = """
    law: reset_element
    step: {step!r} s
    number: {number}
    inputs: {{error: {{range: [-2, 2], rate: 100 /s}}}}
    states:
      side: {{logic: [below, above], initial: below}}
      memory: {{range: [-8, 8], unit: s}}
    flow: {{map: {{memory: "{rate}"}}}}
    jumps_per_step: 1
    jumps:
      rise: {{set: side == below and error >= 0, map: {{side: above, memory: 0}}}}
      fall: {{set: side == above and error <= 0, map: {{side: below, memory: 0}}}}
    outputs: {{answer: {{unit: s, value: memory}}}}
"""


def first_bin(rate: str, frequency: float, samples: int, number: str) -> complex:
    """Answer over question at the frequency, from the last periods of a run of the C (and of the reference, bit for bit)."""
    step = 2 * math.pi / frequency / samples
    phase = 2 * math.pi * np.arange(PERIODS * samples) / samples
    error = np.where(np.abs(np.sin(phase)) < 1e-9, 0.0, np.sin(phase))  # the samples on the crossings are 0
    law = law_of(RESET.format(step=step, rate=rate, number=number))
    run_both(law, {"error": error[: 2 * samples]})
    found = Chip(law).run({"error": error})
    kept = slice(4 * samples, None)
    turning = np.exp(-1j * phase[kept])
    return complex(np.mean(found["answer"][kept] * turning) / np.mean(error[kept] * turning))


# C1. J. C. Clegg, A nonlinear integrator for servomechanisms, Trans. AIEE 77 (1958) 41-42 (from memory): (4/pi - j) / omega.
@pytest.mark.parametrize("number", ["float32", "float64", "fixed32"])
@pytest.mark.parametrize(("samples", "share", "degrees"), [(1000, 0.004, 0.06), (4000, 0.001, 0.02)])
def test_clegg_integrator(number: str, samples: int, share: float, degrees: float) -> None:
    omega = 2.0
    exact = (4 / math.pi - 1j) / omega
    assert abs(exact) * omega == pytest.approx(1.618993187, abs=1e-9)
    assert math.degrees(cmath.phase(exact)) == pytest.approx(-38.146025987, abs=1e-9)
    found = first_bin("error", omega, samples, number)
    assert abs(abs(found) / abs(exact) - 1) < share
    assert abs(math.degrees(cmath.phase(found) - cmath.phase(exact))) < degrees


# C2. I. Horowitz, P. Rosenbaum, Int. J. Control 21 (1975); Y. Guo, Y. Wang, L. Xie, IEEE Trans. Control Systems Technology 17
# (2009) (both from memory): the describing function of the first-order reset element.
@pytest.mark.parametrize("number", ["float32", "float64", "fixed32"])
@pytest.mark.parametrize(
    ("omega", "size", "angle"), [(1.0, 0.745072938, -26.630463510), (10.0, 0.147239613, -36.805284031)]
)
def test_first_order_reset_element(number: str, omega: float, size: float, angle: float) -> None:
    growth = (2 / math.pi) * omega**2 / (omega**2 + 1) * (1 + math.exp(-math.pi / omega))
    exact = (1 + 1j * growth) / (1j * omega + 1)
    assert abs(exact) == pytest.approx(size, abs=1e-9)
    assert math.degrees(cmath.phase(exact)) == pytest.approx(angle, abs=1e-8)
    found = first_bin("error - memory / (1 s)", omega, 1000, number)
    assert abs(abs(found) / abs(exact) - 1) < 0.005
    assert abs(math.degrees(cmath.phase(found) - cmath.phase(exact))) < 0.25
