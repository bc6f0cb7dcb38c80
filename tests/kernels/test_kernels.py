"""The elementary functions: stated errors against mpmath, special values, one meaning in numpy and exact integers."""

from __future__ import annotations

import math
import subprocess
import sys
from collections.abc import Callable
from typing import Any

import mpmath
import numpy as np
import pytest
from numpy.typing import NDArray

from hybgen.expr.core import OPS
from hybgen.kernels.errors import ULP
from hybgen.kernels.floats import LAYOUTS, MAKERS, kernel
from hybgen.kernels.run import exact, function
from hybgen.kernels.word import ELEMENTARY, closure
from tests.conftest import ROOT
from tests.kernels.every_float import worst

Array = NDArray[Any]
FORMATS = ("float32", "float64")
WORDS: dict[str, Any] = {"float32": np.uint32, "float64": np.uint64}


def turned(x: Any) -> Any:
    return x - 2 * mpmath.pi * mpmath.nint(x / (2 * mpmath.pi))


REFERENCES: dict[str, Callable[..., Any]] = {n: getattr(mpmath, n, turned) for n in ELEMENTARY}
DOMAINS = {"sqrt": (0, 1e9), "asin": (-1, 1), "acos": (-1, 1), "log": (0, 1e6), "exp": (-80, 80)}

# Arguments that are hardest to round or to reduce. sin, cos, tan: next to multiples of pi / 2; 6381956970095103 * 2**797 is the double nearest to
# one (J.-M. Muller, Elementary Functions, ch. on range reduction; from memory), 16367173 * 2**72 the float (from memory);
# exp, log: next to 0 and 1, where the result is next to 1 or 0.
HARD = [
    6381956970095103.0 * 2.0**797, 16367173.0 * 2.0**72, 11.0, 22.0, 355.0, 103993.0, 1e22, 1e300, math.pi, math.pi / 2, math.pi / 4,
    3 * math.pi / 4, 2 * math.pi, 1e-3, 1e-8, 1e-300, 5e-324, 1.0, 1 - 2**-53, 1 + 2**-52, 1 - 2**-24, 1 + 2**-23, 2**-0.5, 2**0.5,
    0.5, 0.7071, 2.0, 709.78, -745.1, 88.72, -103.97, 0.3465, 0.3466, 1e-45, 3e38,
]  # fmt: skip


def arguments(name: str, number: str) -> list[Array]:
    """Uniform, spread over exponents, close to 1, hard; as many columns as the function has arguments."""
    dice = np.random.default_rng(seed_of(name, number))
    real, count = np.dtype(number).type, 500
    low, high = DOMAINS.get(name, (-40, 40))
    columns: list[Array] = []
    for _ in range(ELEMENTARY[name]):
        deep = 30 if number == "float32" else 60
        spread = 2.0 ** dice.uniform(-deep, 3 if name in ("exp", "tanh") else 20, count) * dice.choice([-1, 1], count)
        close = 1 + dice.uniform(-1, 1, count) * 2.0 ** -dice.uniform(0, 24, count)
        with np.errstate(over="ignore"):
            whole = np.concatenate([dice.uniform(low, high, count), spread, close, HARD, np.negative(HARD)]).astype(
                real
            )
        if name in ("sqrt", "log"):
            whole = np.abs(whole)
        if name in ("asin", "acos"):
            with np.errstate(all="ignore"):
                whole = np.where(np.abs(whole) > 1, 1 / whole, whole)
        whole = whole[np.isfinite(whole)]
        columns.append(whole if not columns else dice.permutation(whole))
    return columns


def seed_of(*texts: str) -> int:
    """A seed that is the same in every run."""
    return int.from_bytes("".join(texts).encode(), "big") % 2**32


def units(got: Any, wanted: Any, number: str) -> float:
    """The error in units in the last place of the exact result."""
    places, least = (24, -149) if number == "float32" else (53, -1074)
    top = float(np.finfo(number).max)
    if abs(wanted) > mpmath.mpf(top) * (1 + mpmath.ldexp(1, -places - 1)):
        return 0.0 if math.isinf(got) and (got > 0) == (wanted > 0) else math.inf
    if wanted == 0 or not math.isfinite(got):
        return 0.0 if got == wanted else math.inf
    return float(abs(mpmath.mpf(float(got)) - wanted) / mpmath.ldexp(1, max(mpmath.frexp(wanted)[1] - places, least)))


# mpmath (a general-purpose library) at 1200 bits, which is enough for the reduction of the largest doubles.
@pytest.mark.parametrize("number", FORMATS)
@pytest.mark.parametrize("name", ELEMENTARY)
def test_errors_are_below_the_stated_bounds(name: str, number: str) -> None:
    columns = arguments(name, number)
    found = function(kernel(name, number), np.dtype(number))(*columns)
    with mpmath.workprec(1200 if name in ("sin", "cos", "tan", "wrap") else 250):
        for row, got in zip(zip(*columns, strict=True), found, strict=True):
            if all(row) or name in ("exp", "cos", "acos"):
                wanted = REFERENCES[name](*(mpmath.mpf(float(v)) for v in row))
                assert units(got, wanted, number) <= ULP[number][name], (name, row, got)


@pytest.mark.parametrize("number", FORMATS)
@pytest.mark.parametrize("name", ELEMENTARY)
def test_numpy_is_the_exact_integers_and_c_defines_every_operation(name: str, number: str) -> None:
    word = WORDS[number]
    dice = np.random.default_rng(3)
    noise = [
        dice.integers(0, np.iinfo(word).max, 300, word, endpoint=True).view(number) for _ in range(ELEMENTARY[name])
    ]
    columns = [np.concatenate([c[::9], n]) for c, n in zip(arguments(name, number), noise, strict=True)]
    found = function(kernel(name, number), np.dtype(number))(*columns).view(word)
    for row, got in zip(zip(*(c.view(word) for c in columns), strict=True), found, strict=True):
        assert exact(kernel(name, number), *map(int, row)) == int(got), (name, row)


# IEEE 754-2019, sections 5.4.1, 5.10 and 9.2.1, and ISO C annex F for atan2 and hypot (from memory).
SPECIAL: dict[str, list[tuple[tuple[float, ...], float]]] = {
    "sqrt": [((0.0,), 0.0), ((-0.0,), -0.0), ((-1.0,), math.nan), ((math.inf,), math.inf), ((4.0,), 2.0), ((-math.inf,), math.nan)],
    "sin": [((0.0,), 0.0), ((-0.0,), -0.0), ((math.inf,), math.nan), ((-math.inf,), math.nan)],
    "cos": [((0.0,), 1.0), ((-0.0,), 1.0), ((math.inf,), math.nan)],
    "tan": [((0.0,), 0.0), ((-0.0,), -0.0), ((math.inf,), math.nan)],
    "asin": [((0.0,), 0.0), ((-0.0,), -0.0), ((1.0,), math.pi / 2), ((-1.0,), -math.pi / 2), ((1.5,), math.nan), ((-math.inf,), math.nan)],
    "acos": [((1.0,), 0.0), ((-1.0,), math.pi), ((0.0,), math.pi / 2), ((1.5,), math.nan)],
    "exp": [((0.0,), 1.0), ((-0.0,), 1.0), ((math.inf,), math.inf), ((-math.inf,), 0.0), ((1e9,), math.inf), ((-1e9,), 0.0)],
    "log": [((1.0,), 0.0), ((0.0,), -math.inf), ((-0.0,), -math.inf), ((-1.0,), math.nan), ((math.inf,), math.inf)],
    "tanh": [((0.0,), 0.0), ((-0.0,), -0.0), ((math.inf,), 1.0), ((-math.inf,), -1.0), ((50.0,), 1.0)],
    "wrap": [((0.0,), 0.0), ((-0.0,), -0.0), ((3.0,), 3.0), ((-3.0,), -3.0), ((math.inf,), math.nan)],
    "atan2": [((0.0, 1.0), 0.0), ((-0.0, 1.0), -0.0), ((0.0, -1.0), math.pi), ((-0.0, -1.0), -math.pi), ((0.0, 0.0), 0.0), ((0.0, -0.0), math.pi), ((-0.0, -0.0), -math.pi), ((1.0, 0.0), math.pi / 2), ((-1.0, -0.0), -math.pi / 2), ((math.inf, math.inf), math.pi / 4), ((math.inf, -math.inf), 3 * math.pi / 4), ((1.0, math.inf), 0.0), ((-1.0, -math.inf), -math.pi), ((math.inf, 1.0), math.pi / 2), ((math.nan, 1.0), math.nan), ((1.0, math.nan), math.nan), ((1.0, 1.0), math.pi / 4)],
    "hypot": [((0.0, -0.0), 0.0), ((3.0, -4.0), 5.0), ((math.inf, math.nan), math.inf), ((1.0, -math.inf), math.inf), ((math.nan, 1.0), math.nan), ((-2.0, 0.0), 2.0)],
}  # fmt: skip


@pytest.mark.parametrize("number", FORMATS)
@pytest.mark.parametrize("name", ELEMENTARY)
def test_special_values(name: str, number: str) -> None:
    work, word = function(kernel(name, number), np.dtype(number)), WORDS[number]
    nan = LAYOUTS[number].nan
    real = np.dtype(number).type
    assert int(work(*[real(math.nan)] * ELEMENTARY[name]).view(word)) == nan
    for row, wanted in SPECIAL[name]:
        bits = int(work(*map(real, row)).view(word))
        assert bits == (nan if math.isnan(wanted) else int(real(wanted).view(word))), (name, row)


@pytest.mark.parametrize("number", FORMATS)
def test_square_roots_are_those_of_the_processor(number: str) -> None:
    dice = np.random.default_rng(8)
    values = dice.integers(0, LAYOUTS[number].infinity, 200_000).astype(WORDS[number]).view(number)
    assert np.array_equal(function(kernel("sqrt", number), np.dtype(number))(values), np.sqrt(values))


@pytest.mark.parametrize("number", FORMATS)
def test_wrapped_angles_stay_and_are_inside(number: str) -> None:
    dice = np.random.default_rng(9)
    work, real = function(kernel("wrap", number), np.dtype(number)), np.dtype(number).type
    angles = np.concatenate([dice.uniform(-1e4, 1e4, 20_000), np.arange(-40, 41) * math.pi]).astype(real)
    around = work(np.concatenate([angles, np.nextafter(angles, real(9e9)), np.nextafter(angles, real(-9e9))]))
    with mpmath.workprec(120):
        assert float(around.max()) < +mpmath.pi
        assert float(around.min()) > -mpmath.pi
    assert np.array_equal(work(around), around)


def test_a_sample_of_every_float() -> None:
    """The whole is `python -m tests.kernels.every_float`."""
    for name in ELEMENTARY:
        found, count = worst(name, 1009)
        assert count > 10**6
        assert 0.4 < found <= ULP["float32"][name], name


def test_coefficients_and_constants_are_what_their_commands_print() -> None:
    for command, module in (("minimax", "coefficients"), ("constants", "constants")):
        done = subprocess.run(
            [sys.executable, "-m", f"tests.kernels.{command}"], cwd=ROOT, capture_output=True, text=True, check=True
        )
        assert done.stdout == (ROOT / "hybgen" / "kernels" / f"{module}.py").read_text()


def test_the_tables_of_functions_agree() -> None:
    assert set(MAKERS) == set(ELEMENTARY) == set(ULP["float32"]) == set(ULP["float64"])
    for name, count in ELEMENTARY.items():
        assert OPS[name].takes == ("real",) * count
    for number in FORMATS:
        names = [k.name for k in closure([kernel(n, number) for n in ELEMENTARY])]
        assert len(set(names)) == len(names)
