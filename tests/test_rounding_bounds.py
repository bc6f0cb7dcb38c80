"""Bounds of rounding errors: sound for each operation; jumps never too early and never later than said; told in three places."""

from __future__ import annotations

import json
import math
import random
import re
from collections.abc import Mapping
from fractions import Fraction
from typing import Any

import mpmath
import numpy as np
import pytest

from hybgen import Reference, check
from hybgen.cli.main import main
from hybgen.emit import emit
from hybgen.expr.core import INT, OPS, REAL, Node, Op, Ref, RefKind, op
from hybgen.kernels.word import ELEMENTARY
from hybgen.law.model import Law
from hybgen.lower import lower
from hybgen.numbers.format import FORMATS
from hybgen.numbers.rounding import Domain, whole
from hybgen.reference.ops import lookup, operations
from hybgen.step import build
from hybgen.step.margin import Margins
from hybgen.step.quantity import upward
from hybgen.step.show import show
from hybgen.step.tables import tables as step_tables
from tests.conftest import law_of
from tests.exact import evaluate
from tests.test_rounding import Bench

# ------------------------------------------------------------------------------------------------- each operation

TABLES = """
    law: tables
    step: 1 s
    number: {number}
    inputs: {{u: {{range: [-1, 1]}}}}
    tables:
      curve: {{x: [-1.7, -0.3, 0.1, 1.9], y: [0.3, -2.1, 10.7, 0.7]}}
      field: {{x: [-1.1, 0.3, 1.7], y: [-0.7, 0.9], z: [[0.1, 3.3], [-2.7, 0.9], [7.1, 7.3]]}}
    outputs: {{a: {{value: curve(u)}}, b: {{value: "field(u, u)"}}}}
"""
REALS = [
    r.name for r in OPS.values() if r.gives == "real" and set(r.takes) == {"real"} and not r.name.startswith("fixed")
]
RANGES: dict[str, tuple[float, float]] = {
    "sqrt": (0.0, 4.0),
    "log": (0.1, 5.0),
    "asin": (-0.99, 0.99),
    "acos": (-0.99, 0.99),
    "tan": (-1.4, 1.4),
    "wrap": (-1.6, 1.6),
    "exp": (-4.0, 4.0),
}
EXACT: dict[str, Any] = {n: getattr(mpmath, n) for n in ELEMENTARY if n != "wrap"} | {"wrap": lambda x: x}


def leaf(name: str) -> Ref:
    return Ref(RefKind.INPUT, name, REAL)


def tree(name: str) -> Node:
    """The operation on operands that are themselves rounded: products of two samples."""
    args = [op("mul", leaf(a), leaf(a + "2")) for a in "xyz"[: len(OPS[name].takes)]]
    return op(name, *args, table={"lookup": "curve", "lookup2": "field"}.get(name, ""))


def box(name: str, dice: random.Random) -> dict[str, tuple[float, float]]:
    """A box for the samples; products stay inside the operation's domain."""
    low, high = RANGES.get(name, (-2.0, 2.0))
    found: dict[str, tuple[float, float]] = {}
    for letter in "xyz":
        a, b = sorted(dice.uniform(low, high) for _ in range(2))
        if (name == "div" and letter == "y") or (name == "atan2" and letter == "y"):
            a, b = abs(a) + 0.1, abs(a) + abs(b - a) + 0.1
        if dice.random() < 0.5:
            b = a + (b - a) * 2.0 ** -dice.randint(1, 20)
        found[letter], found[letter + "2"] = (a, b), (0.5, 1.0)
    return found


def exactly(node: Node, values: Mapping[Any, Fraction], law: Law) -> Any:
    assert isinstance(node, Op)
    tables = {t.name: t for t in law.tables}
    if node.op not in ELEMENTARY:
        return mpmath.mpf(found.numerator) / found.denominator if (found := evaluate(node, values, {}, tables)) else 0
    args = [evaluate(a, values, {}, tables) for a in node.args]
    return EXACT[node.op](*(mpmath.mpf(a.numerator) / a.denominator for a in args))


def computed(node: Node, values: Mapping[Any, np.ndarray[Any, Any]], work: Mapping[str, Any]) -> Any:
    if isinstance(node, Ref):
        return values[(node.kind, node.name, node.index)]
    assert isinstance(node, Op)
    return work[node.table or node.op](*(computed(a, values, work) for a in node.args))


@pytest.mark.parametrize("number", ["float32", "float64"])
@pytest.mark.parametrize("name", REALS)
def test_each_operation_s_bound_holds(name: str, number: str) -> None:
    """Against exact fractions, elementary functions against mpmath with 60 digits."""
    mpmath.mp.dps = 60
    law, fmt, dice = law_of(TABLES.format(number=number)), FORMATS[number], random.Random(name + number)
    translator = Bench(law, number).translator
    margins = Margins.of(law, translator)
    work = dict(operations(fmt)) | {t.name: lookup(t, fmt) for t in step_tables(law, translator)}
    node, ratios = tree(name), []
    for _ in range(25):
        ranges = box(name, dice)
        leaves = {(RefKind.INPUT, n): tuple(map(Fraction, ends)) for n, ends in ranges.items()}
        found = whole(node, Domain(fmt, leaves, {}, {}, margins.domain.tables))  # type: ignore[arg-type]
        low, high, bound = (float(v[0]) for v in (found.low, found.high, found.error))
        worst = mpmath.mpf(0)
        for _ in range(40):
            at = {k: fmt.dtype.type(dice.uniform(*map(float, e))) for k, e in leaves.items()}
            at = {k: v for k, v in at.items() if leaves[k][0] <= Fraction(float(v)) <= leaves[k][1]}
            if len(at) < len(leaves):
                continue
            exact = exactly(node, {(*k, None): Fraction(float(v)) for k, v in at.items()}, law)
            got = float(computed(node, {(*k, None): np.array([v]) for k, v in at.items()}, work)[0])
            assert low <= exact <= high
            worst = max(worst, abs(got - exact))
            assert worst <= bound, (name, at)
        if worst > 0 and math.isfinite(bound):
            ratios.append(float(bound / worst))
    assert name in ("floor", "sign") or (len(ratios) > 10 and sorted(ratios)[len(ratios) // 2] < 40)


# ------------------------------------------------------------------------------------------------- whole conditions

NAIVE = [
    "u - 0.7 >= 0",
    "n >= choose(u / 3 + w / 3 >= 0.3, 1, 3)",
    "clamp(u / 3 + w / 3, 0.1, 0.7) - 0.3 >= 0",
    "3 * curve(u) >= 0.55",
]
CONDITIONS = [
    "u - 0.7 >= 0",
    "1.7 - 2 * u <= w",
    "0.7 - w > 0",
    "n >= choose(3 * u >= 0.7, 1, 3)",
    "u * choose(3 * v >= 0.7, 2, 1) >= 0.6",
    "choose(3 * u >= 0.7, 0.5, 0.2) >= w",
    "clamp(3 * v, lo, hi) >= 0.5",
    "clamp(3 * v, 0.1, 0.7) >= 0.7",
    "0.7 <= held",
    "3 * curve(u) >= 0.7",
    "field(u, v) - 0.35 * w >= 0.1",
    "max(u, 0.7) > w",
    "not (u / (w + 0.1) < 2.3) or 3 * u < w",
    "abs(v) * 3 - 0.7 <= 0 and -(3 * u) < -0.35",
    "many * 0.1 >= 0.7",
    "waited + u / 3 * 1 s >= 2.1 s",
    "choose(3 * u > w, u * w, 0.35 * w) < 0.07",
    *NAIVE,
]


def bench_of(condition: str, number: str, extra: str = "") -> Bench:
    return Bench(
        law_of(f"""
        law: bench
        step: 100 ms
        number: {number}
        inputs: {{u: {{range: [0, 1]}}, v: {{range: [-1, 1]}}, w: {{range: [0, 1]}}, n: {{type: integer, range: [0, 5]}}}}
        parameters: {{lo: {{value: 0.2, range: [0, 1], tunable: true}}, hi: {{value: 0.7, range: [0, 1], tunable: true}}}}
        tables:
          curve: {{x: [0, 0.3, 1], y: [0.1, 0.3, 0.2]}}
          field: {{x: [0, 0.3, 1], y: [-1, 0.1, 1], z: [[0.1, 0.3, 0.2], [0.7, 0.1, 0.3], [0.3, 0.2, 0.9]]}}
        terms: {{held: {{value: "clamp(3 * v, -0.7, 0.7)"}}}}
        states: {{mode: {{logic: [a, b]}}, many: {{count: 9}}, waited: {{timer: 5 s}}}}
        jumps:
          one: {{set: "mode == a and ({condition})", map: {{mode: b}}}}
          two: {{set: "mode == b and lo < hi and u > 0.5 and n > 1 and many > 0 and waited > 1 s", map: {{mode: a}}}}
        {extra}
        """),
        number,
    )


@pytest.mark.parametrize("number", ["float32", "float64"])
@pytest.mark.parametrize("condition", CONDITIONS)
def test_a_condition_never_holds_where_the_law_s_does_not(condition: str, number: str) -> None:
    bench, dice = bench_of(condition, number), random.Random(5)
    exact = bench.translator.exact(bench.law.jumps[0].condition)
    node = bench.margins.condition("one", bench.law.jumps[0].condition)
    atoms, late, held = list(bench.atoms()), 0, 0
    assert atoms and all(b.error is not None for b in bench.margins.records)
    for _ in range(600):
        values = bench.point(exact, dice)
        values |= bench.near(dice.choice(atoms), dice) or {}
        values |= {k: v for k, v in bench.point(exact, dice).items() if dice.random() < 0.1}
        values[(RefKind.STATE, "mode", None)] = 0
        law_says, c_says = bool(bench.exact(exact, values)), bool(bench.computed(node, values))
        assert law_says or not c_says, values
        late, held = late + (law_says and not c_says), held + c_says
    assert held > 20 and late < 550


@pytest.mark.parametrize("condition", NAIVE)
def test_without_the_bounds_rounding_does_cause_jumps(condition: str) -> None:
    """The same points, the comparison as written: the test above can fail."""
    bench, dice, mistaken = bench_of(condition, "float32"), random.Random(5), 0
    exact = bench.translator.exact(bench.law.jumps[0].condition)
    plain = bench.translator.translate(bench.law.jumps[0].condition)
    for _ in range(600):
        values = bench.point(exact, dice) | (bench.near(dice.choice(list(bench.atoms())), dice) or {})
        values[(RefKind.STATE, "mode", None)] = 0
        mistaken += bool(bench.computed(plain, values)) and not bench.exact(exact, values)
    assert mistaken > 0


@pytest.mark.parametrize("number", ["float32", "float64"])
@pytest.mark.parametrize("condition", [c for c in CONDITIONS if not re.search("choose|clamp|held", c)])
def test_a_comparison_holds_where_the_law_s_does_with_the_margin(condition: str, number: str) -> None:
    """At points from the surface to a few margins beyond."""
    bench, dice, due = bench_of(condition, number), random.Random(6), 0
    for atom in bench.atoms():
        node, record = bench.made(atom)
        if record is None or record.margin is None:
            continue
        sign = 1 if atom.op in ("ge", "gt") else -1
        for _ in range(300):
            values = (bench.near(atom, dice) if dice.random() < 0.7 else None) or bench.point(atom, dice)
            gap = (bench.exact(atom.args[0], values) - bench.exact(atom.args[1], values)) * sign
            if gap > Fraction(record.margin):
                due += 1
                assert bench.computed(node, values), (record, float(gap))
    assert due > 10 or all(bench.made(a)[1] is None for a in bench.atoms())


def test_the_reference_jumps_only_where_the_law_does() -> None:
    """Whole steps of whole lanes, samples by single units around the threshold; as written, some lanes jump too early."""
    law = bench_of("u / 3 + w / 3 >= 0.3", "float32").law
    w = np.random.default_rng(7).uniform(0, 0.9, 4000).astype(np.float32)
    u = (np.float64(0.9) - w).astype(np.float32)
    u = (u.view(np.int32) + np.random.default_rng(8).integers(-4, 5, 4000).astype(np.int32)).view(np.float32)
    u = np.clip(u, np.float32(0), np.float32(1))
    allowed = np.array(
        [Fraction(float(a)) / 3 + Fraction(float(b)) / 3 >= Fraction(3, 10) for a, b in zip(u, w, strict=True)]
    )
    inputs = {"u": u[None], "w": w[None], "v": 0 * u[None], "n": np.zeros((1, 4000), np.int32)}
    jumped = {}
    for thresholds in ("safe", "nearest"):
        text = f"thresholds: {thresholds}\n        outputs: {{shown: {{value: mode}}}}"
        twin = Reference(bench_of("u / 3 + w / 3 >= 0.3", "float32", text).law)
        jumped[thresholds] = twin.run(inputs)["shown"][0] == 1
    assert law.thresholds == "safe" and 0 < jumped["safe"].sum() < 4000
    assert not (jumped["safe"] & ~allowed).any()
    assert (jumped["nearest"] & ~allowed).sum() > 10


# ------------------------------------------------------------------------------------------------- what has no bound, and where it is told


def test_a_result_that_may_overflow_on_the_way_has_no_bound() -> None:
    (bound,) = build(bench_of("1e38 * u * 8 / (1e38 * (2 + w) * 8) >= 0.3", "float32").law).bounds
    assert bound.error is None and "overflow" in bound.why


def test_a_computed_time_has_no_bound() -> None:
    found = [f for f in check(bench_of("waited >= u * w * 3 s", "float32").law).findings if f.code == "HG431"]
    assert [f.verdict for f in found] == ["open"] and "whole steps" in found[0].message


def test_a_divisor_at_the_end_of_its_range_leaves_a_bound_but_not_of_the_delay() -> None:
    (bound,) = build(bench_of("0.1 / u > 0.3", "float32").law).bounds
    assert bound.error is not None and bound.error < 1e-7 and bound.margin is None


def test_a_rule_on_the_parameters_keeps_the_ends_of_a_clamp_in_order() -> None:
    free = build(bench_of("clamp(3 * v, lo, hi) >= 0.5", "float32").law)
    ruled = build(bench_of("clamp(3 * v, lo, hi) >= 0.5", "float32", "assume: [lo < hi]").law)
    assert len(free.bounds) > 1 and len(ruled.bounds) == 1
    assert ruled.bounds[0].error is not None and ruled.bounds[0].error < 2e-7


def test_the_bound_says_which_ranges_nothing_enforces() -> None:
    text = """
        law: free
        step: 1 s
        states: {mode: {logic: [a, b]}, x: {range: [-2, 2]}, y: {range: [-2, 2], limit: true}}
        jumps:
          one: {set: mode == a and 3 * x + y >= 0.7, map: {mode: b}}
          two: {set: mode == b, map: {mode: a}}
        """
    (bound,) = build(law_of(text)).bounds
    assert bound.within == "while x is inside the declared range"
    assert "while x is inside" in show(build(law_of(text)))


def test_check_show_and_c_tell_the_same_bound(tmp_path: Any, capsys: pytest.CaptureFixture[str]) -> None:
    law = """
        law: raft
        step: 100 ms
        number: float32
        inputs: {level: {unit: m, range: [0, 0.6], noise: 4 mm}, other: {unit: m, range: [0, 0.6]}}
        parameters: {high: {value: 0.3 m, range: [0.2 m, 0.5 m], tunable: true}}
        states: {pump: {logic: [off, on]}}
        jumps:
          start: {set: pump == off and (level + other) / 2 >= high, map: {pump: on}}
          stop: {set: pump == on and (level + other) / 2 <= 0.1 m, map: {pump: off}}
        outputs: {drive: {type: bool, value: pump == on}}
        """
    made = build(law_of(law))
    start = made.bounds[0]
    assert start.text == "(level + other) / 2 >= high" and start.unit == "m" and start.error and start.margin
    assert start.noise is not None and 0.0019 < start.noise < 0.003  # half of 4 mm
    assert start.gap is not None and start.gap[0] == "stop" and math.isclose(start.gap[1], 0.2)
    path = tmp_path / "law.yaml"
    path.write_text("\n".join(line[8:] for line in law.splitlines()).lstrip())
    assert main(["check", str(path), "--json", "-"]) == 0
    found = [f for f in json.loads(capsys.readouterr().out)["findings"] if f["code"] == "HG430"]
    assert [(f["value"]["margin"], f["value"]["unit"]) for f in found] == [(b.margin, "m") for b in made.bounds]
    assert all(f["verdict"] == "proved" and f["severity"] == "note" for f in found)
    error, margin = start.error, start.margin
    assert f"rounding at most {upward(error, 3)} m, at the latest {upward(margin, 3)} m beyond" in show(made)
    assert (
        f"rounding at most {upward(error, 2)}, jumps at the latest {upward(margin, 2)} beyond"
        in emit(lower(made))["raft.c"]
    )


def test_bounds_are_rounded_up_where_they_are_shown() -> None:
    assert [upward(v, 2) for v in (0.0, 9.54e-7, 1.0001, 1.0, 9.99e-8)] == ["0", "9.6e-07", "1.1", "1", "1e-07"]
    dice = random.Random(9)
    assert all(
        float(upward(v, 3)) >= v for v in (dice.uniform(0, 1) * 10.0 ** dice.randint(-30, 30) for _ in range(2000))
    )


def test_integers_are_exact_numbers_of_the_analysis() -> None:
    fmt = FORMATS["float32"]
    many = Ref(RefKind.STATE, "many", INT)
    leaves = {(RefKind.STATE, "many"): (Fraction(0), Fraction(2**31 - 1))}
    found = whole(op("to_real", op("imul", many, many)), Domain(fmt, leaves, {}, {}, {}))
    assert found.error[0] >= 2.0**37


def test_a_function_in_a_rate_of_a_fixed_point_law_has_an_interval() -> None:
    """`check` once stopped with a KeyError here: fixed point has no units in the last place."""
    text = """
        law: swell
        step: 100 ms
        number: fixed32
        inputs: {u: {range: [0, 1]}}
        states: {x: {range: [-3, 3], limit: true}}
        flow: {map: {x: "sin(u) / (1 s)"}, method: euler}
        outputs: {y: {value: x}}
        """
    assert check(law_of(text)).ok
