"""Published facts on impacts, as laws: a float that bounces on the water, and its energy."""

from __future__ import annotations

import math

import numpy as np
import pytest

from hybgen.sil import Chip
from tests.conftest import law_of, run_both

STEP = 1e-4

BOUNCE = """
    law: bounce
    step: 0.1 ms
    number: {number}
    parameters: {{gravity: 9.81 m/s2, restitution: 0.8}}
    states:
      height: {{unit: m, range: [-0.5, 2], initial: 1 m}}
      speed: {{unit: m/s, range: [-8, 8]}}
      impacts: {{count: 1000}}
    flow: {{map: {{height: speed, speed: -gravity}}}}
    jumps:
      impact: {{set: height <= 0 m and speed < 0 m/s, map: {{speed: -restitution * speed, impacts: impacts + 1}}, keep: [height]}}
    outputs: {{count_now: {{type: integer, value: impacts}}, height_now: {{unit: m, value: height}}}}
"""


# D1. R. Styer, M. Besson, Bouncing Balls and Geometric Series, J. Online Mathematics and its Applications 7 (2007) (seen); J. Tatum,
# Classical Mechanics, sec. 5.2 (seen): the n-th impact is at sqrt(2h/g) (1 + 2 e (1 - e^(n-1)) / (1 - e)), all are over at sqrt(2h/g) (1+e)/(1-e).
@pytest.mark.parametrize("number", ["float32", "float64", "fixed32"])
def test_times_of_impacts_and_their_end(number: str) -> None:
    first = math.sqrt(2 / 9.81)
    times = [first * (1 + 2 * 0.8 * (1 - 0.8 ** (n - 1)) / (1 - 0.8)) for n in range(1, 11)]
    end = first * 1.8 / 0.2
    assert (times[0], times[9], end) == pytest.approx((0.451523641, 3.578892951, 4.063712769), abs=1e-9)
    law = law_of(BOUNCE.format(number=number))
    run_both(law, {"steps": 6000})
    chip = Chip(law)
    found = chip.run({"steps": 50000})
    taken = np.flatnonzero(np.diff(found["count_now"].astype(int)) > 0) + 1
    for n, time in enumerate(times, 1):
        # each impact is seen within a step after it, and the speed is then too large by gravity times that delay
        assert abs(taken[n - 1] * STEP - time) < 10 * STEP * n
    # after the accumulation point the C goes on: at most one impact for each step, the height stays at the water
    assert chip.jumps < 50000 - end / STEP + 200
    assert np.abs(found["height_now"][int(4.2 / STEP) :]).max() < 2e-3


# D3. From memory: E_n = e^(2n) E_0; for e = 0.8 the first below a thousandth is n = 16.
@pytest.mark.parametrize("number", ["float32", "float64", "fixed32"])
def test_energy_after_impacts(number: str) -> None:
    assert 0.8**30 > 1e-3 > 0.8**32
    chip = Chip(
        law_of(f"""
        law: energy
        step: 1 s
        number: {number}
        parameters: {{restitution: 0.8}}
        states: {{share: {{range: [0, 1], initial: 1, limit: true}}, impacts: {{count: 100}}}}
        jumps_per_step: 3
        jumps:
          impact: {{set: share >= 0.001, map: {{share: restitution**2 * share, impacts: impacts + 1}}}}
        outputs: {{n: {{type: integer, value: impacts}}}}
    """)
    )
    assert [chip.step({})["n"] for _ in range(8)] == [3, 6, 9, 12, 15, 16, 16, 16]
