"""Published facts on impacts, as laws: a float that bounces on the water, and its energy."""

from __future__ import annotations

import math

import numpy as np
import pytest

from hybgen.checks import check
from hybgen.diag.finding import Verdict
from hybgen.sil import Chip
from tests.conftest import law_of, run_both

FORMATS = ["float32", "float64", "fixed32"]

BOUNCE = """
    law: bounce
    step: {step!r} s
    number: {number}
    parameters: {{gravity: 9.81 m/s2, restitution: 0.8}}
    states:
      height: {{unit: m, range: [-0.5, 2], initial: 1 m}}
      speed: {{unit: m/s, range: [-8, 8]}}
      impacts: {{count: 1000}}
    flow: {{map: {{height: speed, speed: -gravity}}}}
    jumps:
      impact: {{set: height <= 0 m and speed < 0 m/s, map: {{speed: -restitution * speed, impacts: impacts + 1}}, keep: [height]}}
    outputs:
      hit: {{type: bool, value: jumped(impact)}}
      n: {{type: integer, value: impacts}}
      seen: {{unit: m, value: height}}
      share: {{value: (gravity * height + speed**2 / 2) / (gravity * 1 m)}}
"""


# D1. R. Styer, M. Besson, Bouncing Balls and Geometric Series, J. Online Mathematics and its Applications 7 (2007) (seen); J. Tatum,
# Classical Mechanics, sec. 5.2 (seen): the n-th impact is at sqrt(2h/g) (1 + 2 e (1 - e^(n-1)) / (1 - e)), all are over at
# sqrt(2h/g) (1+e)/(1-e), on a path of h (1+e^2)/(1-e^2).
FIRST = math.sqrt(2 / 9.81)
TIMES = np.array([FIRST * (1 + 2 * 0.8 * (1 - 0.8 ** (n - 1)) / (1 - 0.8)) for n in range(1, 11)])
END = FIRST * 1.8 / 0.2
PATH = 1.64 / 0.36


def test_published_times_of_impacts() -> None:
    assert (TIMES[0], TIMES[9], END, PATH) == pytest.approx(
        (0.451523641, 3.578892951, 4.063712769, 4.555555556), abs=1e-9
    )


@pytest.mark.parametrize("number", FORMATS)
@pytest.mark.parametrize("step", [1e-3, 1e-4])
def test_times_of_impacts_and_their_end(number: str, step: float) -> None:
    law = law_of(BOUNCE.format(number=number, step=step))
    if step == 1e-3:  # through the end of all impacts; with the short step up to the first one
        found, _, chip = run_both(law, {"steps": 5000})
    else:
        run_both(law, {"steps": 5000})
        chip = Chip(law)
        found = chip.run({"steps": 50000})
    late = np.flatnonzero(found["hit"])[:10] * step - TIMES
    # To first order an impact seen d too late, 0 <= d <= step, moves those after it by between (1 + 2e - 1/e) d = 1.35 d
    # (the next one) and -2.25 d (the end): the float starts lower and slower.
    before = np.arange(10)
    assert 0 <= late[0] <= step
    assert np.all(late <= (1 + 1.4 * before) * step) and np.all(late >= -2.3 * before * step)
    assert np.abs(np.diff(found["seen"])).sum() == pytest.approx(PATH, abs=10 * step)
    # After the end the C goes on with one impact in each step: out at e u, back at -u = e u - g step, so u = g step / (1 + e);
    # the mean of both lets the float sink slowly. Fixed point rounds the height by up to two units in each step.
    assert chip.jumps == found["hit"].sum()
    rest = round(4.3 / step)
    assert found["hit"][rest:].all()
    sinks = (found["seen"][rest] - found["seen"][-1]) / ((len(found["seen"]) - 1 - rest) * step)
    expected = 9.81 * step * 0.2 / (2 * 1.8)
    assert sinks == pytest.approx(expected, rel=1e-3, abs=2 * 2.0**-29 / step if number == "fixed32" else None)
    # D3 in the law of D1: the share of the first energy is constant between impacts
    assert found["n"][np.flatnonzero(found["share"] < 1e-3)[0]] == 16


def test_endless_impacts_are_not_called_bounded() -> None:
    """Impacts pile up at the end, so neither a bound on repeated jumps nor a least time between them may be proved."""
    report = check(law_of(BOUNCE.format(number="float64", step=1e-3)))
    verdicts = {f.property: f.verdict for f in report.findings if f.property in ("repeat", "dwell")}
    assert set(verdicts) == {"repeat", "dwell"} and Verdict.PROVED not in verdicts.values()


# D3. From memory: E_n = e^(2n) E_0; for e = 0.8 the first below a thousandth is n = 16.
@pytest.mark.parametrize("number", FORMATS)
def test_energy_after_impacts(number: str) -> None:
    shares = (0.8**30, 0.8**32)
    assert shares == pytest.approx((1.2379e-3, 7.9228e-4), rel=1e-4)
    law = law_of(f"""
        law: energy
        step: 1 s
        number: {number}
        parameters: {{restitution: 0.8}}
        states: {{share: {{range: [0, 1], initial: 1, limit: true}}, impacts: {{count: 100}}}}
        jumps_per_step: 3
        jumps:
          impact: {{set: share >= 0.001, map: {{share: restitution**2 * share, impacts: impacts + 1}}}}
        outputs: {{n: {{type: integer, value: impacts}}, left: {{value: share}}}}
    """)
    found, _, chip = run_both(law, {"steps": 8})
    assert found["n"].tolist() == [3, 6, 9, 12, 15, 16, 16, 16]
    assert chip.jumps == 16
    assert found["left"] == pytest.approx([0.64**n for n in found["n"]], abs=1e-6)
