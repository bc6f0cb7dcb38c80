"""Published facts on number formats, clocks, counters and sampled control, through generated C."""

from __future__ import annotations

import math
from fractions import Fraction

import numpy as np
import pytest
from scipy.linalg import expm
from scipy.signal import cont2discrete

from hybgen.checks import check
from hybgen.expr.core import Const, Op, walk
from hybgen.sil import Chip
from hybgen.step import build
from tests.conftest import law_of, run_both

COUNTER = """
    law: counter
    step: 10 ms
    inputs: {{go: {{type: bool}}}}
    states: {{since: {{timer: {longest}}}, pulses: {{count: 2147483647}}}}
    sample: {{pulses: "choose(go, pulses + 1, pulses)"}}
    outputs: {{late: {{type: bool, value: since >= 21474836.46 s}}, n: {{type: integer, value: pulses}}}}
"""


# J2. FAA AD 2015-09-07, 80 FR 24789: a 32-bit count of 10 ms ends after 248 days; 248.551348 days by arithmetic.
def test_a_timer_beyond_32_bits_is_refused_with_the_date() -> None:
    report = check(law_of(COUNTER.format(longest="300 d")))
    messages = [f.message for f in report.findings if f.code == "HG404"]
    assert len(messages) == 1 and "248.551 d" in messages[0]
    assert check(law_of(COUNTER.format(longest="248 d"))).ok


def test_counters_hold_at_the_end_of_32_bits() -> None:
    law = law_of(COUNTER.format(longest="21474836.47 s"))
    _, reference, chip = run_both(law, {"go": np.zeros(1, bool)})
    for machine in (reference, chip):
        machine.fields["since"][0] = machine.fields["pulses"][0] = 2**31 - 5
        machine.fields["jumps"][0] = 2**32 - 1
        seen = []
        for _ in range(10):
            outputs = machine.step({"go": True})
            seen.append((int(machine.fields["since"][0]), outputs["late"], outputs["n"]))
        assert [s[0] for s in seen] == [min(2**31 - 4 + k, 2**31 - 1) for k in range(10)]
        assert [s[1] for s in seen] == [2**31 - 5 + k >= 2**31 - 2 for k in range(10)]
        assert seen[-1][2] == 2**31 - 1


# J3. IEEE 754 arithmetic; 99.999046, 1.0000001, 0.9999999999999999 seen in print.
def test_float_clocks_drift_and_a_timer_does_not() -> None:
    total = np.float32(0)
    for k in range(1000):
        total = np.float32(total + np.float32(0.1))
        if k == 9:
            assert f"{total:.10f}" == "1.0000001192"
    assert f"{total:.7f}" == "99.9990463"
    assert sum([0.1] * 10) == 0.9999999999999999
    assert np.float32(32768) + np.float32(0.001) == np.float32(32768)
    law = law_of("""
        law: clock
        step: 1 ms
        inputs: {go: {type: bool}}
        states: {since: {timer: 30000 s}, phase: {logic: [early, late]}}
        jumps: {pass: {set: phase == early and since >= 1000.044 s, map: {phase: late}, keep: [since]}}
        outputs: {late: {type: bool, value: phase == late}}
    """)
    steps = 1000100
    chip = Chip(law)
    found = chip.run({"go": np.zeros(steps, bool)})
    assert np.flatnonzero(found["late"])[0] == 1000044
    assert chip.state["since"] == steps / 1000


# J6. IEEE 754-2019: every ordered comparison with NaN is false (from memory); MISRA C:2023 Dir 4.15 is about this.
@pytest.mark.parametrize("policy", ["hold", "clamp", "0.2 m"])
def test_what_is_no_number_takes_no_jump(policy: str) -> None:
    law = law_of(f"""
        law: marks
        step: 100 ms
        inputs: {{level: {{unit: m, range: [0, 1], invalid: {policy}, initial: 0.2 m}}}}
        states: {{side: {{logic: [below, above]}}}}
        jumps:
          up: {{set: side == below and level >= 0.5 m, map: {{side: above}}}}
          down: {{set: side == above and not (level > 0.1 m), map: {{side: below}}}}
        outputs: {{above_: {{type: bool, value: side == above}}}}
    """)
    bad = np.array([np.nan, np.nan, np.nan, -np.nan])
    found, reference, chip = run_both(law, {"level": bad})
    assert not found["above_"].any() and chip.jumps == 0
    assert reference.status == chip.status == 1
    for machine in (reference, chip):
        machine.state["side"] = "above"
    found, reference, chip = run_both(law, {"level": np.concatenate([[0.7], bad])})
    # with the substitute 0.2 m nothing is at or below 0.1 m either
    assert chip.jumps == 1
    assert found["above_"].all()


def test_a_computed_value_that_is_not_finite_takes_no_jump_under_not_either() -> None:
    law = law_of("""
        law: ratio
        step: 100 ms
        inputs: {a: {range: [0, 1]}, b: {range: [0, 1]}}
        states: {side: {logic: [below, above]}}
        jumps:
          up: {set: side == below and a / b >= 2, map: {side: above}}
          other: {set: side == below and not (a / b < 5), map: {side: above}}
        outputs: {above_: {type: bool, value: side == above}}
    """)
    found, _, chip = run_both(law, {"a": np.array([0.0, 1.0, 0.0]), "b": np.array([0.0, 0.0, 0.0])})
    assert not found["above_"].any()
    assert int(chip.status) == 8
    found, _, chip = run_both(law, {"a": np.array([1.0]), "b": np.array([0.1])})
    assert found["above_"].all() and int(chip.status) == 0


# E1. K. J. Astrom, B. Wittenmark, Computer-Controlled Systems, ex. in ch. 2 (from memory); scipy cont2discrete.
HULL = """
    law: hull
    step: 1 s
    number: float64
    inputs: {u: {range: [-10, 10]}}
    states: {y: {range: [-1000, 1000]}, v: {range: [-1000, 1000]}}
    flow:
      method: exact
      map: {y: v / (1 s), v: (u - v) / (1 s)}
    outputs: {out: {value: y}}
"""


def constants(law: object) -> set[float]:
    made = build(law)  # type: ignore[arg-type]
    return {
        float(n.value)
        for a in made.flow
        for n in walk(a.expr)
        if isinstance(n, Const) and isinstance(n.value, Fraction)
    }


def test_exact_hold_of_an_integrator_with_lag() -> None:
    law = law_of(HULL)
    e = math.exp(-1)
    assert all(any(abs(c - wanted) <= math.ulp(wanted) for c in constants(law)) for wanted in (e, 1 - e))
    u = np.random.default_rng(1).uniform(-1, 1, 200)
    found, _, _ = run_both(law, {"u": u})
    y = np.zeros(200)

    def past(a: np.ndarray, i: int) -> float:
        return float(a[i]) if i >= 0 else 0.0

    for k in range(200):
        y[k] = (
            1.367879441171442 * past(y, k - 1)
            - 0.36787944117144233 * past(y, k - 2)
            + 0.36787944117144233 * past(u, k - 1)
            + 0.26424111765711533 * past(u, k - 2)
        )
    assert np.max(np.abs(found["out"] - y)) < 1e-11
    a, b, *_ = cont2discrete((np.array([[0, 1], [0, -1]]), np.array([[0], [1]]), np.eye(2), np.zeros((2, 1))), 1.0)
    made = build(law)
    assert isinstance(made.flow[0].expr, Op)
    assert all(min(abs(c - v) for c in constants(law)) < 1e-15 for v in (a[0, 1], a[1, 1], b[0, 0], b[1, 0]))


# E2. Two-step deadbeat of a double integrator, L = [1/h^2, 3/(2h)], h = 0.5: [4, 3] (from memory).
@pytest.mark.parametrize(("number", "bound"), [("float64", 4e-15), ("float32", 4e-6)])
def test_deadbeat_reaches_zero_in_two_steps(number: str, bound: float) -> None:
    law = law_of(f"""
        law: deadbeat
        step: 500 ms
        number: {number}
        inputs: {{x: {{unit: m, range: [-50, 50]}}, v: {{unit: m/s, range: [-50, 50]}}}}
        parameters: {{kx: 4 /s2, kv: 3 /s}}
        outputs: {{a: {{unit: m/s2, value: "-(kx * x + kv * v)"}}}}
    """)
    chip = Chip(law)
    for x, v in ((1.0, 0.0), (-3.7, 2.2), (0.3, -4.1)):
        for _ in range(2):
            a = chip.step({"x": x, "v": v})["a"]
            x, v = x + 0.5 * v + 0.125 * a, v + 0.5 * a
        assert abs(x) < bound and abs(v) < bound


# E3. Sampled PI that cancels the pole of 1/(s+1), h = 0.1: y_k = 1 - 0.8^k exactly (from memory, re-derived).
@pytest.mark.parametrize(("number", "bound"), [("float64", 1e-12), ("float32", 1e-5)])
def test_sampled_pi_places_the_pole(number: str, bound: float) -> None:
    a = math.exp(-0.1)
    b = 1 - a
    k0, k1 = 0.2 / b, 0.2 * a / b
    assert f"{k0:.9f}" == "2.101666389" and f"{k1:.9f}" == "1.901666389"
    law = law_of(f"""
        law: lead
        step: 100 ms
        number: {number}
        inputs: {{y: {{range: [-10, 10]}}}}
        parameters: {{k0: {k0!r}, k1: {k1!r}}}
        states: {{last_u: {{range: [-100, 100]}}, last_e: {{range: [-100, 100]}}}}
        terms: {{e: 1 - y, u: last_u + k0 * e - k1 * last_e}}
        sample: {{last_u: u, last_e: e}}
        outputs: {{drive: {{value: u}}}}
    """)
    chip = Chip(law)
    y = 0.0
    for k in range(60):
        assert abs(y - (1 - 0.8**k)) < bound
        if k == 10:
            assert abs(y - 0.892625818) < 1e-5
        y = a * y + b * chip.step({"y": y})["drive"]


# E6. C. Moler, C. Van Loan, Nineteen Dubious Ways ..., SIAM Review 20 (1978), 45 (2003) 3-49 (from memory).
def test_a_nasty_matrix_exponential_is_right() -> None:
    law = law_of("""
        law: nasty
        step: 1 s
        number: float64
        inputs: {go: {type: bool}}
        states: {x: {range: [-1000, 1000], initial: 1}, y: {range: [-1000, 1000], initial: 0}}
        flow:
          method: exact
          map: {x: "(-49 * x + 24 * y) / (1 s)", y: "(-64 * x + 31 * y) / (1 s)"}
        outputs: {a: {value: x}, b: {value: y}}
    """)
    e1, e17 = math.exp(-1), math.exp(-17)
    first = {(0, 0): -2 * e1 + 3 * e17, (1, 0): -4 * e1 + 4 * e17}  # eigenvalues -1 and -17
    found, _, _ = run_both(law, {"go": np.zeros(2, bool)})
    assert abs(found["a"][1] - first[0, 0]) < 1e-13 and abs(found["b"][1] - first[1, 0]) < 1e-13
    assert f"{found['a'][1]:.9f}" == "-0.735758758" and f"{found['b'][1]:.9f}" == "-1.471517599"
    printed = np.array([[-0.735758758, 0.551819100], [-1.471517599, 1.103638241]])
    assert np.max(np.abs(expm(np.array([[-49, 24], [-64, 31]])) - printed)) < 2e-9
    assert all(min(abs(abs(c) - abs(v)) for c in constants(law)) < 1e-9 for v in printed.ravel())
