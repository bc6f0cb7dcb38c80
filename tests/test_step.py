"""The step: rounding of constants, exact flow, order of the methods, value bounds, against outside references."""

from __future__ import annotations

import math
import random
from fractions import Fraction

import mpmath
import numpy as np
import pytest
import sympy
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.integrate import solve_ivp

from hybgen.expr.core import REAL, Const, Node, Op, Ref, RefKind, walk
from hybgen.law import read
from hybgen.numbers.expm import discretise
from hybgen.numbers.format import FLOAT32, FLOAT64, Rounding
from hybgen.reference import Reference
from hybgen.reference.plan import Planner
from hybgen.step import build
from hybgen.step.affine import Affine
from tests.conftest import law_of, run_both
from tests.strategies import law_text

# ------------------------------------------------------------------------------------------------ constants


@given(st.fractions(-1000, 1000, max_denominator=10**9), st.sampled_from([FLOAT32, FLOAT64]))
def test_rounding_agrees_with_numpy_and_directions_enclose(value: Fraction, fmt: object) -> None:
    near, up, down = (fmt.round(value, how) for how in (Rounding.NEAREST, Rounding.UP, Rounding.DOWN))  # type: ignore[attr-defined]
    assert down <= value <= up and near in (down, up)
    if fmt is FLOAT64:
        assert float(near) == value.numerator / value.denominator
    else:
        candidates = [np.float32(float(down)), np.float32(float(up))]
        assert min(abs(Fraction(float(c)) - value) for c in candidates) == abs(near - value)
    assert down == up or Fraction(float(np.nextafter(fmt.dtype.type(float(down)), fmt.dtype.type(np.inf)))) == up  # type: ignore[attr-defined]


def test_the_ends_of_a_format() -> None:
    for fmt, info in ((FLOAT32, np.finfo(np.float32)), (FLOAT64, np.finfo(np.float64))):
        assert float(fmt.max) == info.max
        tiny = Fraction(2) ** fmt.least
        assert float(tiny) == info.smallest_subnormal
        assert fmt.round(tiny / 2) == 0 and fmt.round(tiny / 2, Rounding.UP) == tiny
        with pytest.raises(OverflowError):
            fmt.round(fmt.max * 2)


@settings(max_examples=150)
@given(
    st.sampled_from([">=", ">", "<=", "<"]),
    st.decimals(0, 1, places=3),
    st.integers(-3, 3),
    st.sampled_from(["float32", "float64"]),
)
def test_a_comparison_in_the_format_answers_as_the_law(sign: str, mark: object, ulps: int, number: str) -> None:
    """Whenever the step jumps, the law's real-number condition holds at the sampled value, and the other way round."""
    law = read(
        f"""
law: mark
step: 1 s
number: {number}
inputs: {{u: {{range: [-1, 2]}}}}
states: {{side: {{logic: [no, yes]}}}}
jumps: {{turn: {{set: side == no and u {sign} {mark}, map: {{side: yes}}}}}}
outputs: {{y: {{value: side}}}}
""".encode(),
        "mark.yaml",
    )
    real = np.dtype(number).type
    u = real(float(mark))  # type: ignore[arg-type]
    for _ in range(abs(ulps)):
        u = np.nextafter(u, real(math.copysign(np.inf, ulps)))
    exact, threshold = Fraction(float(u)), Fraction(str(mark))
    holds = {">=": exact >= threshold, ">": exact > threshold, "<=": exact <= threshold, "<": exact < threshold}[sign]
    assert Reference(law).step({"u": u})["y"] == ("yes" if holds else "no")


# ------------------------------------------------------------------------------------------------ exact flow


def test_matrix_exponential_against_mpmath_at_50_digits() -> None:
    dice = random.Random(7)
    for n in (1, 2, 3, 6):
        a = tuple(
            tuple(Fraction(dice.randint(-400, 400), 100) * (dice.random() < 0.7) for _ in range(n)) for _ in range(n)
        )
        h = Fraction(dice.randint(1, 200), 100)
        phi, gamma = discretise(a, h)
        with mpmath.workdps(60):
            full = mpmath.zeros(2 * n)
            for i in range(n):
                full[i, n + i] = mpmath.mpf(h.numerator) / h.denominator
                for j in range(n):
                    full[i, j] = mpmath.mpf((a[i][j] * h).numerator) / (a[i][j] * h).denominator
            wanted = mpmath.expm(full)
            for i in range(n):
                for j in range(2 * n):
                    found = phi[i][j] if j < n else gamma[i][j - n]
                    error = abs(mpmath.mpf(found.numerator) / found.denominator - wanted[i, j])
                    assert error <= mpmath.mpf(10) ** -50 * max(1, abs(wanted[i, j]))


def to_sympy(node: Node, names: dict[str, sympy.Symbol]) -> sympy.Expr:
    """A tree as sympy sees it: the witness."""
    match node:
        case Const():
            return sympy.Rational(node.value.numerator, node.value.denominator)
        case Ref():
            return names.setdefault(node.name, sympy.Symbol(node.name, real=True))
        case Op():
            args = [to_sympy(a, names) for a in node.args]
            match node.op:
                case "add":
                    return args[0] + args[1]
                case "sub":
                    return args[0] - args[1]
                case "mul":
                    return args[0] * args[1]
                case "div":
                    return args[0] / args[1]
                case "neg":
                    return -args[0]
    raise AssertionError(node)


def affine_tree(dice: random.Random, depth: int) -> Node:
    """A random tree that is affine in x and y with constant coefficients; u and v are held."""

    def constant() -> Node:
        return Const(Fraction(dice.choice([-3, -1, 1, 2, 5]), dice.choice([1, 2, 3, 10])), REAL)

    def leaf() -> Node:
        name = dice.choice(["x", "y", "u", "v"])
        return Ref(RefKind.STATE if name in "xy" else RefKind.INPUT, name, REAL)

    if depth == 0:
        return dice.choice([leaf, leaf, constant])()
    a, b = affine_tree(dice, depth - 1), affine_tree(dice, depth - 1)
    match dice.randrange(6):
        case 0:
            return Op("add", (a, b), REAL)
        case 1:
            return Op("sub", (a, b), REAL)
        case 2:
            return Op("mul", (constant(), a), REAL)
        case 3:
            return Op("mul", (a, constant()), REAL)
        case 4:
            return Op("div", (a, constant()), REAL)
        case _:
            return Op("neg", (a,), REAL)


@given(st.integers(0, 2**32))
def test_affine_forms_against_sympy(seed: int) -> None:
    tree = affine_tree(random.Random(seed), 5)
    flowing = frozenset({("x", None), ("y", None)})
    form = Affine(flowing, {}, frozenset(), {}, {}).form(tree)
    names: dict[str, sympy.Symbol] = {}
    wanted = to_sympy(tree, names)
    found = sum(
        (
            sympy.Rational(c.numerator, c.denominator) * names.setdefault(k[0], sympy.Symbol(k[0], real=True))
            for k, c in form.states.items()
        ),
        sympy.Integer(0),
    )
    found += sum(
        (sympy.Rational(c.numerator, c.denominator) * to_sympy(n, names) for n, c in form.atoms.items()),
        sympy.Integer(0),
    )
    assert sympy.expand(wanted - found) == 0
    for name in "xy":
        if name in names:
            slope = sympy.diff(wanted, names[name])
            assert slope == sympy.Rational(*form.states.get((name, None), Fraction(0)).as_integer_ratio())


def test_exact_steps_by_cases_follow_each_case() -> None:
    law = law_of("""
        law: cases
        step: 250 ms
        number: float64
        inputs: {u: {range: [-2, 2]}, fast: {type: bool}}
        states: {x: {range: [-9, 9], initial: 1}}
        flow:
          map:
            x:
              - when: fast
                is: (u - x) / (0.5 s)
              - otherwise: 0
        outputs: {y: {value: x}}
    """)
    assert build(law).method == "exact"
    fast = np.array([True, False, True, True])
    found, _, _ = run_both(law, {"u": np.full(4, 2.0), "fast": fast})
    e = math.exp(-0.5)
    x = [1.0, 2 - e, 2 - e, 2 - e * e]
    assert np.allclose(found["y"], x, rtol=0, atol=4e-16)


# ------------------------------------------------------------------------------------------------ explicit methods


@pytest.mark.parametrize(("method", "order"), [("euler", 1), ("heun", 2), ("rk4", 4)])
def test_methods_have_their_order(method: str, order: int) -> None:
    """Against scipy's solve_ivp at tight tolerance: halving the step divides the error by 2**order."""
    text = """
        law: swing
        step: {step} s
        number: float64
        inputs: {{u: {{range: [-2, 2]}}}}
        states: {{a: {{range: [-9, 9], initial: 1}}, w: {{range: [-9, 9]}}}}
        flow:
          method: {method}
          map: {{a: w / (1 s), w: "(u - a * a * a - 0.2 * w) / (1 s)"}}
        outputs: {{y: {{value: a}}}}
    """
    wanted = solve_ivp(lambda _, s: [s[1], 0.3 - s[0] ** 3 - 0.2 * s[1]], (0, 2), [1, 0], rtol=1e-12, atol=1e-13).y[
        0, -1
    ]
    errors = []
    for n in (20, 40, 80):
        found, _, _ = run_both(law_of(text.format(step=2 / n, method=method)), {"u": np.full(n + 1, 0.3)})
        errors.append(abs(found["y"][n] - wanted))
    for coarse, fine in zip(errors, errors[1:], strict=False):
        assert 0.75 * 2**order < coarse / fine < 1.4 * 2**order


# ------------------------------------------------------------------------------------------------ bounds


def test_values_stay_inside_their_bounds() -> None:
    """Definitions and outputs that bounds call finite are finite for every sample, parameter and state of the domain."""
    from hybgen.diag.finding import LawError
    from hybgen.sil.vectors import Stimulus

    asked = 0
    for seed in range(150):
        try:
            made = build(read(law_text(random.Random(seed)).encode(), "law.yaml"))
        except LawError:
            continue
        plain = [o.expr for o in made.outputs if o.expr.type == REAL and not o.guarded]
        plain += [a.expr for a in (*made.flow, *made.sample) if a.expr.type == REAL and not a.guarded]
        stimulus = Stimulus.of(made, 99)
        reference = Reference(made, lanes=200)
        for name, array in stimulus.states(200).items():
            reference.fields[name][...] = array
        reference._advance({n: a[0] for n, a in stimulus.inputs(1, 200).items()})
        plan, _ = Planner(made).plan(plain)
        with np.errstate(all="ignore"):
            for value in plan.run(reference._load(None))[0]:
                asked += 1
                assert np.isfinite(value).all(), seed
    assert asked > 100


def test_a_timer_in_another_unit_and_a_tunable_time() -> None:
    law = law_of("""
        law: wait
        step: 100 ms
        inputs: {go: {type: bool}}
        parameters: {rest: {value: 0.3 s, range: [0 s, 100 s], tunable: true}}
        states: {since: {timer: 2 min}, phase: {logic: [early, late]}}
        jumps:
          pass: {set: phase == early and since >= rest, map: {phase: late, since: 0 s}}
          back: {set: phase == late and since >= 0.01 min, map: {phase: early, since: 100 ms}}
        outputs: {late: {type: bool, value: phase == late}}
    """)
    found, _, chip = run_both(law, {"go": np.zeros(16, bool)})
    assert "".join("01"[int(v)] for v in found["late"]) == "0001111110011111"
    for rest, steps in ((0.30000001192, 3), (0.3001, 4), (0.29, 3), (100.0, 1000), (0.0, 0)):
        chip = type(chip)(law, parameters={"rest": rest})
        out = chip.run({"go": np.zeros(1002, bool)})["late"]
        assert int(np.flatnonzero(out)[0]) == steps
    assert not any(isinstance(n, Const) and n.type == REAL for j in build(law).jumps[1:] for n in walk(j.condition))
