"""Tables of one and of two inputs: exact at the points, linear between them, held beyond, never far from their values."""

from __future__ import annotations

import math
import random
from collections.abc import Iterator
from fractions import Fraction
from typing import Any

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.interpolate import RegularGridInterpolator

from hybgen.diag.finding import LawError
from hybgen.emit import emit
from hybgen.law import read
from hybgen.law.model import Grid
from hybgen.lower import lower
from hybgen.numbers.format import FORMATS
from hybgen.reference.ops import lookup
from hybgen.reread import reread
from hybgen.step import StepLaw, build
from hybgen.step.model import Status, StepGrid, StepTable
from hybgen.step.tables import table_range
from tests.conftest import law_of, run_both
from tests.test_reread import mutants

Array = NDArray[Any]
NUMBERS = sorted(FORMATS)

THRUST = """
    law: thruster
    step: 100 ms
    inputs:
      speed: {unit: m/s, range: [-9, 9]}
      battery: {unit: V, range: [0, 20]}
    tables:
      thrust:
        x: [0, 0.5, 2]
        y: [10, 12, 12.6, 14]
        z: [[10, 20, 25, 27], [8, 17, 22, 23], [0, 3, 5, 6]]
        x_unit: m/s
        y_unit: V
        z_unit: N
    outputs: {push: {value: "thrust(speed, battery)", unit: N}}
"""


def test_what_a_law_says_of_a_table_of_two_inputs() -> None:
    (table,) = law_of(THRUST).tables
    assert isinstance(table, Grid)
    assert (len(table.x), len(table.y), int(table.z[1][2]), str(table.z_unit)) == (3, 4, 22, "N")
    assert table.y[2] == Fraction(63, 5)


@pytest.mark.parametrize("number", NUMBERS)
def test_by_hand(number: str) -> None:
    """Worked out with pencil: points, the middle of a cell, both ends, corners."""
    rows: list[tuple[float, float, float]] = [
        (0, 10, 10),
        (0.5, 12, 17),
        (2, 14, 6),
        (0.25, 11, 13.75),
        (1.25, 11, (12.5 + 1.5) / 2),
    ]
    rows += [(-5, 11, 15), (9, 14, 6), (9, 20, 6), (1.25, 0, 4), (0, 13.3, 26), (0.5, 20, 23), (-9, 0, 10)]
    speed, battery, push = (np.array(c) for c in zip(*rows, strict=True))
    found, _, _ = run_both(law_of(THRUST), {"speed": speed, "battery": battery}, number=number)
    assert np.abs(found["push"] - push).max() <= 1e-5 * (number == "float32") + 1e-13
    exact = [0, 1, 2, 3, 4, 5, 6, 7, 8, 10, 11]  # only 13.3 V lies in a cell whose width is no number of the format
    assert found["push"][exact].tolist() == push[exact].tolist()


def random_points(dice: random.Random, count: int) -> list[float]:
    scale = 10.0 ** dice.uniform(-6, 6)
    return sorted({round(scale * dice.uniform(-1, 1), 12) for _ in range(count + 1)})[:count]


def random_value(dice: random.Random) -> float:
    size = math.exp(dice.uniform(-20, 20))
    return dice.choice([0.0, 1.0, dice.uniform(-1, 1), size, -size])


def random_tables(number: str, count: int) -> Iterator[tuple[StepLaw, StepTable | StepGrid]]:
    """Tables of any size, width of cells and size of values, in the format."""
    dice = random.Random(7)
    for _ in range(count):
        x, y = (random_points(dice, dice.randint(2, 7)) for _ in range(2))
        z = [[random_value(dice) for _ in y] for _ in x]
        text = f"law: lone\nstep: 1 s\ntables:\n  map: {{x: {x}, y: {y}, z: {z}}}\n  curve: {{x: {x}, y: {z}}}\n"
        text = text.replace(f"y: {z}}}", f"y: {[row[0] for row in z]}}}")
        made = build(read(text.encode(), "lone.yaml"), number=number)
        yield from ((made, t) for t in made.tables)


def numbers(values: tuple[Fraction, ...]) -> Array:
    return np.array([float(v) for v in values])


def around(points: Array, dice: np.random.Generator, dtype: Any, count: int) -> Array:
    """Numbers inside the points, more of them next to the points."""
    low, high = points[0], points[-1]
    near = np.concatenate([np.nextafter(points.astype(dtype), dtype.type(to)) for to in (math.inf, -math.inf)])
    inside: Array = np.concatenate([dice.uniform(low, high, count).astype(dtype), near])
    return dice.permutation(inside[(inside >= low) & (inside <= high)])[:count]


@pytest.mark.parametrize("number", NUMBERS)
def test_exact_at_every_point_and_held_beyond(number: str) -> None:
    fmt = FORMATS[number]
    real = fmt.dtype.type
    for _, t in random_tables(number, 60):
        if isinstance(t, StepTable):
            continue
        look = lookup(t, fmt)
        x, y = numbers(t.x).astype(real), numbers(t.y).astype(real)
        z = np.stack([numbers(row) for row in t.z]).astype(real)
        assert (look(x[:, None], y[None, :]) == z).all()
        for u, i in ((-math.inf, 0), (math.inf, -1), (x[0] - abs(x[0]) - 1, 0), (x[-1] + abs(x[-1]) + 1, -1)):
            assert (look(np.full_like(y, u), y) == z[i]).all()
        for v, j in ((-math.inf, 0), (math.inf, -1), (y[0] - abs(y[0]) - 1, 0), (y[-1] + abs(y[-1]) + 1, -1)):
            assert (look(x, np.full_like(x, v)) == z[:, j]).all()
        for one, other in ((math.nan, 0.0), (0.0, math.nan), (math.nan, math.inf), (math.nan, math.nan)):
            with np.errstate(invalid="ignore"):
                assert np.isnan(look(real(one), real(other)))


@pytest.mark.parametrize("number", NUMBERS)
def test_random_tables_are_bilinear_and_stay_near_their_corners(number: str) -> None:
    """Against scipy's RegularGridInterpolator over the rounded points; and inside the hull of the four corners but for
    the 8 units that StepGrid states."""
    fmt = FORMATS[number]
    dice, unit, seen = np.random.default_rng(3), 2.0**-fmt.precision, 0
    for _, t in random_tables(number, 200):
        if isinstance(t, StepTable):
            continue
        x, y, z = numbers(t.x), numbers(t.y), np.stack([numbers(row) for row in t.z])
        u, v = (around(p, dice, fmt.dtype, 200) for p in (x, y))
        count = min(len(u), len(v))
        u, v = u[:count], v[:count]
        found = lookup(t, fmt)(u, v).astype(float)
        wanted = RegularGridInterpolator((x, y), z)(np.column_stack([u, v]))
        i, j = (np.clip(np.searchsorted(p, w, side="right") - 1, 0, len(p) - 2) for p, w in ((x, u), (y, v)))
        corners = np.stack([z[i, j], z[i + 1, j], z[i, j + 1], z[i + 1, j + 1]])
        size = np.abs(corners).max(axis=0)
        # s and t are off by 4 units each (three roundings), which counts twice where corners have opposite signs
        allowed = (8 + 2 * 4 * 2) * unit + 16 * 2.0**-53  # the last for scipy, which computes in float64
        assert (np.abs(found - wanted) <= allowed * size).all()
        assert (found <= corners.max(axis=0) + 8 * unit * size).all()
        assert (found >= corners.min(axis=0) - 8 * unit * size).all()
        seen += count
    assert seen > 5000


@pytest.mark.parametrize("number", NUMBERS)
def test_every_value_is_in_the_range_that_guards_count_on(number: str) -> None:
    fmt, dice = FORMATS[number], np.random.default_rng(4)
    for made, t in random_tables(number, 200):
        known = table_range(next(d for d in made.law.tables if d.name == t.name))
        samples = [
            around(numbers(points), dice, fmt.dtype, 100) for points in (t.x, t.y)[: 1 + isinstance(t, StepGrid)]
        ]
        found = lookup(t, fmt)(*(s[: min(map(len, samples))] for s in samples)).astype(float)
        assert len(found) > 50 and known.low <= found.min() and found.max() <= known.high


@pytest.mark.parametrize("number", NUMBERS)
def test_equal_corners_give_exactly_their_value(number: str) -> None:
    fmt, dice = FORMATS[number], np.random.default_rng(5)
    text = (
        b"law: flat\nstep: 1 s\ntables: {map: {x: [-1, 0.3, 7], y: [0.1, 2], z: [[0.7, 0.7], [0.7, 0.7], [1e9, -3]]}}\n"
    )
    (t,) = build(read(text, "flat.yaml"), number=number).tables
    u, v = dice.uniform(-3, 0.29, 5000).astype(fmt.dtype), dice.uniform(-1, 3, 5000).astype(fmt.dtype)
    assert (lookup(t, fmt)(u, v) == fmt.dtype.type(0.7)).all()


@pytest.mark.parametrize("number", NUMBERS)
def test_no_part_of_the_way_exceeds_it(number: str) -> None:
    """The constants of every table, also of the widest cells of the format (whose inverses are subnormal)."""
    fmt = FORMATS[number]
    huge = 10.0 ** (38 if number == "float32" else 307)
    texts = [
        f"law: wide\nstep: 1 s\ntables: {{map: {{x: [{-k * huge}, 0, {k * huge}], y: [0, {k / 3 * huge}], z: [[0, 1], [1, 3], [2, 5]]}}}}\n"
        for k in (0.9, 1.1, 1.3, 1.5, 1.69)
    ]
    made = [build(read(text.encode(), "wide.yaml"), number=number) for text in texts]
    tables = [*(t for _, t in random_tables(number, 100)), *(t for m in made for t in m.tables)]
    for t in tables:
        if isinstance(t, StepGrid):
            rows = [(t.x, t.per_x, [Fraction(1)] * len(t.per_x)), (t.y, t.per_y, [Fraction(1)] * len(t.per_y))]
        else:
            rows = [(t.x, t.slope, [b - a for a, b in zip(t.y, t.y[1:], strict=False)])]
        for points, slopes, rises in rows:
            for a, b, slope, rise in zip(points, points[1:], slopes, rises, strict=False):
                width, top = fmt.round(b - a), fmt.round(abs(rise))
                assert fmt.holds(slope) and slope * rise >= 0
                assert top * (1 - Fraction(8, 2**fmt.precision)) <= fmt.round(abs(slope) * width) <= top or width > huge


def test_a_value_that_could_be_zero_by_rounding_is_guarded() -> None:
    """From 1e6 to 1e-3 the last operation of a look-up can round to zero; so 1 / curve is watched."""
    law = """
        law: steep
        step: 1 s
        inputs: {u: {range: [-3, 0]}, v: {range: [-3, 0]}}
        tables:
          curve: {x: [-3, 0], y: [1e6, 1e-3]}
          map: {x: [-3, 0], y: [-3, 0], z: [[1e6, 1e-3], [1e-3, 1e-3]]}
          calm: {x: [-3, 0], y: [-3, 0], z: [[1, 2], [3, 4]]}
        outputs: {a: {value: 1 / curve(u)}, b: {value: "1 / map(u, v)"}, c: {value: "1 / calm(u, v)"}}
    """
    made = build(law_of(law))
    assert [o.guarded for o in made.outputs] == [True, True, False]
    near = {"u": np.array([-1e-9], np.float32), "v": np.array([-3.0], np.float32)}
    curve, steep = (lookup(t, made.format) for t in made.tables[:2])
    assert curve(near["u"]) == [0] and steep(near["u"], near["v"]) == [0]
    found, reference, _ = run_both(law_of(law), near)
    assert found["a"].tolist() == [0] and found["b"].tolist() == [0] and reference.status == Status.NON_FINITE


@pytest.mark.parametrize(
    ("table", "number", "code"),
    [
        ("{x: [0, 1], y: [0, 1], z: [[-2e38, 2e38], [0, 1]]}", "float32", "HG401"),
        ("{x: [0, 1], y: [0, 1], z: [[-2e38, 2e38], [0, 1]]}", "float64", None),
        ("{x: [-3e38, 3e38], y: [0, 1], z: [[0, 1], [0, 1]]}", "float32", "HG401"),
        ("{x: [0, 1e-40], y: [0, 1], z: [[0, 1], [0, 1]]}", "float32", "HG401"),
        ("{x: [0, 1], y: [1, 1.00000001], z: [[0, 1], [0, 1]]}", "float32", "HG405"),
        ("{x: [0, 1], y: [1, 1.00000001], z: [[0, 1], [0, 1]]}", "float64", None),
        ("{x: [0, 10], y: [-2e38, 2e38]}", "float32", "HG401"),
    ],
)
def test_what_a_format_can_not_hold(table: str, number: str, code: str | None) -> None:
    law = read(f"law: lone\nstep: 1 s\ntables: {{map: {table}}}\n".encode(), "lone.yaml")
    if code is None:
        assert build(law, number=number).tables
        return
    with pytest.raises(LawError) as caught:
        build(law, number=number)
    assert {f.code for f in caught.value.findings} == {code}


@pytest.mark.parametrize(
    ("table", "codes"),
    [
        ("{x: [0, 1], y: [0, 1], z: [[1, 2], [3]]}", ["HG122"]),
        ("{x: [0, 1], y: [0, 1], z: [1, 2]}", ["HG133"]),
        ("{x: [0, 1], y: [0, 1], z: 3}", ["HG133"]),
        ("{x: [0, 1], y: [0, 1, 2], z: [[1, 2], [3, 4], [5, 6]]}", ["HG133"]),
        ("{x: [0, 0], y: [1, 0], z: [[1, 2], [3, 4]]}", ["HG133", "HG133"]),
        ("{x: [0], y: [1, 2], z: [[1, 2]]}", ["HG133"]),
        ("{x: 0, y: [[1, 2]], z: [[1, 2]]}", ["HG133", "HG133"]),
        ("{x: [0, 1], y: [0, 1], z: [[1, 2], [3, [4]]]}", ["HG122"]),
        ("{x: [0, 1], y: [0, 1], z_unit: V}", ["HG121"]),
        ("{x: [0, 1], z: [[1, 2], [3, 4]]}", ["HG121"]),
        ("{x: [0 V, 1 m], y: [0, 1], z: [[1, 2], [3, 4]], x_unit: V}", ["HG202"]),
        ("{x: [0, 1], y: [0, 1], z: [[1 V, 2], [3, 4]], z_unit: m}", ["HG202"]),
    ],
)
def test_mistakes_in_a_table(table: str, codes: list[str]) -> None:
    with pytest.raises(LawError) as caught:
        read(f"law: lone\nstep: 1 s\ntables: {{map: {table}}}\n".encode(), "lone.yaml")
    assert [f.code for f in caught.value.findings] == codes, [f.message for f in caught.value.findings]


def test_points_and_values_may_have_units_of_their_own() -> None:
    text = b"law: lone\nstep: 1 s\ntables: {map: {x: [0, 20 cm], y: [0, 1], z: [[1 V, 2], [3, 4]], x_unit: m, z_unit: mV}}\n"
    (table,) = read(text, "lone.yaml").tables
    assert isinstance(table, Grid) and [*map(float, table.x)] == [0, 0.2] and [*map(float, table.z[0])] == [1000, 2]


def swapped(text: str, name: str) -> Iterator[str]:
    """The function with a type, an index, a row or a declaration exchanged."""
    start = text.index(f"static float {name}(float x, float y)")
    end = text.index("\n}\n", start)
    body = text[start:end]
    for old, new in (
        ("float s", "double s"),
        ("float x, float y", "float y, float x"),
        ("float x, float y", "double x, float y"),
        ("i_next][j]", "i_next][j_next]"),
        ("[i][j_next]", "[i][j]"),
        ("j_next = j;", "j_next = i;"),
        ("per_y[j]", "per_x[j]"),
        ("        i++;", "        i++;\n        i++;"),
        ("!(x <=", "(x >"),
        ("    low = ", "    { float s = 0.5f; low = s; }\n    low = "),
        ("return low", "return high"),
    ):
        assert old in body, old
        yield text[:start] + body.replace(old, new, 1) + text[end:]
    yield text.replace(f"static const float {name}_y[4]", f"static const double {name}_y[4]")
    yield text.replace("{ 10.0f, 20.0f, 25.0f, 27.0f },\n    { 8.0f, ", "{ 10.0f, 20.0f, 25.0f, 27.0f, 8.0f },\n    { ")


def test_a_fault_in_the_function_or_its_numbers_is_found() -> None:
    made = build(law_of(THRUST))
    files = emit(lower(made))
    text = files["thruster.c"]
    assert reread(made, files) == ()
    other = list(swapped(text, "thruster_thrust"))
    other += [changed for line, changed in mutants(text) if "thrust_" in line or "low" in line or "++" in line]
    assert len(other) > 60 and all(changed != text for changed in other)
    assert [o for o in other if reread(made, {**files, "thruster.c": o}) == ()] == []
