"""Published facts on reset elements, through generated C: the first Fourier bin of the answer to a sine."""

from __future__ import annotations

import cmath
import math

import numpy as np
import pytest

from hybgen.sil import Chip
from tests.conftest import law_of, run_both

PERIODS = 24

FORMATS = ["float32", "float64", "fixed32"]

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
    """Answer over question at the frequency, from a run of the C over PERIODS equal periods.

    The memory is reset where a period begins, so all periods have to give the same bits; the reference gives the first.
    """
    turn = 2 * math.pi * np.arange(samples) / samples
    sine = np.sin(turn)
    sine[[0, samples // 2]] = 0  # on the crossings exactly: there the element resets, not a sample later
    law = law_of(RESET.format(step=2 * math.pi / frequency / samples, rate=rate, number=number))
    first, _, _ = run_both(law, {"error": sine})
    chip = Chip(law)
    answer = chip.run({"error": np.tile(sine, PERIODS)})["answer"].reshape(PERIODS, samples)
    assert all(period.tobytes() == first["answer"].tobytes() for period in answer)
    assert chip.jumps == 2 * PERIODS and chip.status == 0
    return complex(np.mean(answer * np.exp(-1j * turn)) / np.mean(sine * np.exp(-1j * turn)))


def agrees_and_converges(rate: str, frequency: float, exact: complex, number: str) -> None:
    """The error is inside the bounds for 1000 samples in a period, and a quarter of it is left with 4000."""
    ratios = [first_bin(rate, frequency, samples, number) / exact for samples in (1000, 4000)]
    sizes = [abs(r) - 1 for r in ratios]
    angles = [math.degrees(cmath.phase(r)) for r in ratios]
    assert abs(sizes[0]) < 0.004 and abs(angles[0]) < 0.06
    assert sizes[0] / sizes[1] == pytest.approx(4, rel=0.05)
    assert angles[0] / angles[1] == pytest.approx(4, rel=0.05)


# C1. J. C. Clegg, A nonlinear integrator for servomechanisms, Trans. AIEE 77 (1958) 41-42 (from memory): (4/pi - j) / omega.
@pytest.mark.parametrize("number", FORMATS)
def test_clegg_integrator(number: str) -> None:
    omega = 2.0
    exact = cmath.rect(1.618993187 / omega, math.radians(-38.146025987))
    assert abs(exact - (4 / math.pi - 1j) / omega) < 1e-9
    agrees_and_converges("error", omega, exact, number)


# C2. I. Horowitz, P. Rosenbaum, Int. J. Control 21 (1975); Y. Guo, Y. Wang, L. Xie, IEEE Trans. Control Systems Technology 17
# (2009) (both from memory): the describing function of the first-order reset element, here with its pole at 1 /s.
@pytest.mark.parametrize("number", FORMATS)
@pytest.mark.parametrize(
    ("omega", "size", "angle"), [(1.0, 0.745072938, -26.630463510), (10.0, 0.147239613, -36.805284031)]
)
def test_first_order_reset_element(number: str, omega: float, size: float, angle: float) -> None:
    exact = cmath.rect(size, math.radians(angle))
    growth = (2 / math.pi) * omega**2 / (omega**2 + 1) * (1 + math.exp(-math.pi / omega))
    assert abs(exact - (1 + 1j * growth) / (1j * omega + 1)) < 1e-9
    agrees_and_converges("error - memory / (1 s)", omega, exact, number)
