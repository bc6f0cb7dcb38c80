"""Every operation of the table OPS, three ways: what the table says it means, the reference's numpy, and the generated C.

All three must give the same bits for every pair of special values and for random bit patterns; only the bits of a value
that is no number are left open (no law stores one).
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction
from functools import cache
from itertools import product
from typing import Any

import numpy as np
import pytest
from numpy.typing import NDArray

from hybgen.expr.core import BOOL, INT, OPS, REAL, Const, Node, Op, Ref, RefKind, Row, Type
from hybgen.expr.units import ONE
from hybgen.kernels.floats import kernel
from hybgen.kernels.run import exact
from hybgen.kernels.table import FIXED
from hybgen.kernels.table import kernel as table_kernel
from hybgen.kernels.word import ELEMENTARY
from hybgen.law import read
from hybgen.law.model import Output
from hybgen.numbers.format import FIXED32, FLOAT32, FORMATS, Format
from hybgen.reference.ops import lookup, operations
from hybgen.sil.chip import Chip, struct
from hybgen.step import build
from hybgen.step.model import StepGrid, StepLaw, StepOutput, StepTable

Tables = dict[str, StepTable | StepGrid]

Array = NDArray[Any]
Lanes = dict[str, Array]

BENCH = b"""law: bench
step: 1 s
tables:
  curve: {x: [-1, 0.1, 2.5, 7], y: [0.3, -2, 1e6, 0.7]}
  ramp: {x: [-1, 3], y: [0.3, 0.1]}
  map: {x: [-1, 0.1, 2.5, 7], y: [-3, 0.5, 1.5], z: [[0.3, -2, 1e6], [0.7, 0, 0.1], [1, 1, 1], [-1e-3, 5, 0.3]]}
  patch: {x: [-1, 3], y: [0.1, 2], z: [[0.3, 0.1], [-0.7, 2]]}
states:
  real_a: {range: [-1, 1]}
  real_b: {range: [-1, 1]}
  real_c: {range: [-1, 1]}
  int_a: {count: 5}
  int_b: {count: 5}
  int_c: {count: 5}
  small_a: {count: 5}
  small_b: {count: 5}
  small_c: {count: 5}
  bool_a: {type: bool}
  bool_b: {type: bool}
  bool_c: {type: bool}
  mode: {logic: [low, middle, high]}
outputs:
  none_yet: {value: 0}
"""
LETTERS = "abc"
BOUNDED = ("iadd", "isub", "imul")
"""Operations whose results the law reader keeps inside 32 bits: their operands here are small."""
NUMPY_NAMES = {1: ("a",), 2: ("a", "b")}
NAMES = {"clamp": ("x", "lo", "hi"), "iclamp": ("x", "lo", "hi"), "select": ("c", "a", "b")}


# ---------------------------------------------------------------------------------------------------- operands


def specials(fmt: Format) -> list[float]:
    """Values where arithmetic changes its behaviour."""
    real = fmt.dtype.type
    tiny, top = 2.0**fmt.least, float(fmt.max)
    normal, whole = float(np.finfo(fmt.dtype).tiny), float(fmt.whole)
    near = [float(np.nextafter(real(x), real(to))) for x in (1, 2, whole, 2.0**31, 0.5) for to in (0, math.inf)]
    positive = [
        0.0,
        tiny,
        3 * tiny,
        normal - tiny,
        normal,
        0.1,
        0.5,
        1.0,
        1.5,
        2.0,
        2.5,
        3.0,
        7.0,
        whole,
        2.0**31,
        1e6,
        top,
        *near,
    ]
    return [*positive, *(-x for x in positive), math.inf, -math.inf, math.nan]


@cache
def lanes(number: str) -> Lanes:
    """Values for the states of the bench: all pairs of specials, then random bit patterns."""
    fmt = FORMATS[number]
    dice = np.random.default_rng(20)
    pairs = np.array(list(product(specials(fmt), repeat=2)), fmt.dtype)
    bits = np.uint32 if fmt is FLOAT32 else np.uint64
    noise = dice.integers(0, np.iinfo(bits).max, (3000, 3), bits, endpoint=True).view(fmt.dtype)
    smooth = dice.uniform(-4, 4, (3000, 3)).astype(fmt.dtype)
    triples = np.concatenate([np.column_stack([pairs, dice.permutation(pairs[:, 0])]), noise, smooth])
    made = {f"real_{letter}": triples[:, i] for i, letter in enumerate(LETTERS)}
    count = len(triples)
    edges = np.array([0, 1, -1, 2, 7, 2**24 + 1, 2**24 + 3, -(2**24) - 1, 2**31 - 1, 1 - 2**31, 2**30, 2**31 - 65])
    for i, letter in enumerate(LETTERS):
        wide = dice.integers(1 - 2**31, 2**31, count)
        wide[: len(edges) ** 2] = np.array(list(product(edges, repeat=2)))[:, i % 2]
        made[f"int_{letter}"] = wide.astype(np.int32)
        made[f"small_{letter}"] = dice.integers(-19, 20, count).astype(np.int32)
        made[f"bool_{letter}"] = dice.integers(0, 2, count).astype(bool)
    made["mode"] = dice.integers(0, 3, count).astype(np.int32)
    return made


# ---------------------------------------------------------------------------------------------------- expressions


def rows_of(fmt: Format) -> list[Row]:
    """The rows of the table that a floating-point format has."""
    assert fmt in FORMATS.values()
    return [row for row in OPS.values() if row.name not in FIXED]


def kinds_of(row: Row) -> Iterator[tuple[str, ...]]:
    """The kinds of operands with which a row of the table can be used."""
    many = "*" in row.takes
    takes = tuple(t for t in row.takes if t != "*")
    choices = {"num": ("real", "int"), "discrete": ("int", "bool", "enum"), "any": ("real", "int", "bool", "enum")}
    open_ = next((choices[t] for t in takes if t in choices), ("",))
    for choice in open_:
        kinds = tuple(choice if t in choices else t for t in takes)
        if many:
            yield kinds * 2
            yield kinds * 3
        else:
            yield kinds


@dataclass(frozen=True)
class Bench:
    """A step law whose outputs are the expressions to be tried."""

    made: StepLaw

    @classmethod
    def of(cls, number: str) -> Bench:
        return cls(build(read(BENCH, "bench.yaml"), number=number))

    def operand(self, kind: str, position: int, small: bool) -> Node:
        letter = LETTERS[position]
        types: dict[str, Type] = {"real": REAL, "int": INT, "bool": BOOL}
        if kind == "enum":
            mode = next(x for x in self.made.states if x.name == "mode")
            return Ref(RefKind.STATE, "mode", mode.type) if position == 1 else Const(1, mode.type)
        return Ref(RefKind.STATE, f"{'small' if small and kind == 'int' else kind}_{letter}", types[kind])

    def apply(self, row: Row, args: tuple[Node, ...]) -> Op:
        gives = {"real": REAL, "int": INT, "bool": BOOL, "any": args[-1].type}[row.gives]
        return Op(row.name, args, gives, {"lookup": "curve", "lookup2": "map"}.get(row.name, ""))

    def direct(self) -> Iterator[Op]:
        """Each row on plain operands, in every kind that it takes; each table."""
        for row in rows_of(self.made.format):
            for kinds in kinds_of(row):
                small = row.name in BOUNDED
                enum_first = row.name in ("eq", "ne") and kinds[0] == "enum"
                places = (1, 0) if enum_first else range(len(kinds))
                yield self.apply(row, tuple(self.operand(k, i, small) for k, i in zip(kinds, places, strict=True)))
        yield Op("lookup", (self.operand("real", 0, False),), REAL, "ramp")
        yield Op("lookup2", (self.operand("real", 2, False), self.operand("real", 0, False)), REAL, "patch")

    def nested(self) -> Iterator[Op]:
        """Each row with each row as its first, second, third operand: what parentheses can break."""
        inner = [
            self.apply(row, tuple(self.operand(k, i, True) for i, k in enumerate(kinds)))
            for row in rows_of(self.made.format)
            for kinds in kinds_of(row)
            if kinds[0] != "enum" and kinds[-1] != "enum" and row.name != "to_steps"
        ]
        for row in rows_of(self.made.format):
            for kinds in kinds_of(row):
                for place, kind in enumerate(kinds):
                    for piece in inner:
                        if piece.type.kind == kind:
                            args = [self.operand(k, i, True) for i, k in enumerate(kinds)]
                            args[place] = piece
                            yield self.apply(row, tuple(args))

    def run(self, nodes: list[Node], values: Lanes) -> list[Array]:
        """What the generated C makes of the expressions, for all lanes."""
        law, span = self.made.law, self.made.law.outputs[0].span
        names = [f"y{i}" for i in range(len(nodes))]
        outputs = tuple(
            Output(n, e.type, None, ONE, (e,), None, None, False, "", span, n)
            for n, e in zip(names, nodes, strict=True)
        )
        rows = tuple(
            StepOutput(n, None, e, False, Fraction(0), None, span, n) for n, e in zip(names, nodes, strict=True)
        )
        made = replace(self.made, law=replace(law, outputs=outputs), outputs=rows)
        count = len(values["mode"])
        chip = Chip(made, lanes=count, flags=("-std=c99", "-O1", "-ffp-contract=off", "-fPIC", "-shared"))
        for name, array in values.items():
            chip.fields[name][...] = array
        y, _ = chip.many(np.zeros((1, count), struct(made, "inputs")))
        return [y[n][0] for n in names]


# ---------------------------------------------------------------------------------------------------- what they mean


def table_meaning(table: StepTable | StepGrid, fmt: Format) -> Callable[..., Any]:
    """What the step law says of a table, number by number."""
    real = fmt.dtype.type

    def exact(values: Sequence[Fraction]) -> list[Any]:
        return [real(float(v)) for v in values]

    def cell(points: list[Any], u: Any) -> int | None:
        """The last point that is not above u; None where the table holds its end."""
        outside = u <= points[0] or u >= points[-1]
        return None if outside else max((k for k in range(len(points)) if points[k] <= u), default=0)

    def curve(u: Any) -> Any:
        assert isinstance(table, StepTable)
        x, y, slope = exact(table.x), exact(table.y), exact(table.slope)
        if (i := cell(x, u)) is None:
            return y[0] if u <= x[0] else y[-1]
        return y[i] + slope[i] * (u - x[i])

    def part(points: list[Any], inverses: list[Any], u: Any) -> tuple[int, int, Any]:
        if (i := cell(points, u)) is None:
            end = 0 if u <= points[0] else len(points) - 1
            return end, end, real(0)
        return i, i + 1, (u - points[i]) * inverses[i]

    def grid(u: Any, v: Any) -> Any:
        assert isinstance(table, StepGrid)
        i, k, s = part(exact(table.x), exact(table.per_x), u)
        j, m, t = part(exact(table.y), exact(table.per_y), v)
        z = [exact(row) for row in table.z]
        low, high = z[i][j] + s * (z[k][j] - z[i][j]), z[i][m] + s * (z[k][m] - z[i][m])
        return low + t * (high - low)

    return curve if isinstance(table, StepTable) else grid


def special_meaning(name: str, fmt: Format) -> Callable[..., Any] | None:
    """Rows whose column `means` is prose: the same in Python, from the contract, number by number."""
    real, largest = fmt.dtype.type, float(fmt.max)

    def floor(a: Any) -> Any:
        return real(math.floor(a)) if abs(a) < fmt.whole else a

    def to_steps(a: Any) -> int:
        if not a > 0:
            return 0
        if a >= real(2**31 - 1):
            return 2**31 - 1
        return int(a) + bool(a - real(int(a)) > a * real(2.0 ** (3 - fmt.precision)))

    def elementary(*args: Any) -> Any:
        word = np.uint32 if fmt is FLOAT32 else np.uint64
        found = exact(kernel(name, fmt.name), *(int(np.asarray(a).view(word)) for a in args))
        return word(found).view(fmt.dtype)

    return {
        **dict.fromkeys(ELEMENTARY, elementary),
        "floor": floor,
        "to_steps": to_steps,
        "finite": lambda a: -largest <= a <= largest,
        "to_real": lambda a: real(float(fmt.round(Fraction(int(a))))),
        "and": lambda *a: all(a),
        "or": lambda *a: any(a),
    }.get(name)


def meaning(op: Op, fmt: Format, tables: Tables) -> Callable[..., Any]:
    """The function of an operation; from the table's own words wherever they are an expression."""
    special = table_meaning(tables[op.table], fmt) if op.table else special_meaning(op.op, fmt)
    if special is not None:
        return special
    words = OPS[op.op].means.split(",")[0].split(";")[0]
    names = NAMES.get(op.op) or NUMPY_NAMES[len(op.args)]
    return eval(f"lambda {', '.join(names)}: {words}", {})  # type: ignore[no-any-return]  # the table is our own


def bits(array: Any, like: np.dtype[Any]) -> Array:
    """Comparable bits; all values that are no number alike."""
    found: Array = np.asarray(array)
    assert found.dtype == like, (found.dtype, like)
    if like.kind != "f":
        return found
    clean = np.where(np.isnan(found), like.type(np.nan), found)
    return np.asarray(clean.view(np.uint32 if like.itemsize == 4 else np.uint64))


def first_difference(found: Array, wanted: Array, values: Lanes, op: Node) -> str:
    """Empty if equal; else the operands of the first lane that differs."""
    wrong = np.flatnonzero(bits(found, wanted.dtype) != bits(wanted, wanted.dtype))
    if not len(wrong):
        return ""
    lane = int(wrong[0])
    names = sorted({r.name for r in walk_refs(op)})
    return f"{op}: {[(n, values[n][lane]) for n in names]} gives {found[lane]!r}, not {wanted[lane]!r} ({len(wrong)} lanes)"


def walk_refs(node: Node) -> Iterator[Ref]:
    if isinstance(node, Ref):
        yield node
    elif isinstance(node, Op):
        for a in node.args:
            yield from walk_refs(a)


def dtype(type_: Type, fmt: Format) -> np.dtype[Any]:
    return {"real": fmt.dtype, "bool": np.dtype(bool)}.get(type_.kind, np.dtype(np.int32))


def in_numpy(node: Node, values: Lanes, fmt: Format, tables: Tables) -> Array:
    """An expression by the reference's operations."""
    count = len(values["mode"])
    if isinstance(node, Const):
        return np.full(count, node.value, dtype(node.type, fmt))
    if isinstance(node, Ref):
        return values[node.name]
    args = [in_numpy(a, values, fmt, tables) for a in node.args]
    function = lookup(tables[node.table], fmt) if node.table else operations(fmt)[node.op]
    return np.asarray(function(*args))


# ---------------------------------------------------------------------------------------------------- the tests


@pytest.mark.parametrize("number", sorted(FORMATS))
def test_every_operation_means_in_c_and_numpy_what_the_table_says(number: str) -> None:
    fmt, bench, values = FORMATS[number], Bench.of(number), lanes(number)
    tables = {t.name: t for t in bench.made.tables}
    nodes = list(bench.direct())
    assert {n.op for n in nodes} == {row.name for row in rows_of(fmt)}
    for op, found in zip(nodes, bench.run(list(nodes), values), strict=True):
        says = meaning(op, fmt, tables)
        few = slice(None, None, 17 if op.op in ELEMENTARY else 1)
        columns = [in_numpy(a, values, fmt, tables)[few] for a in op.args]
        with np.errstate(all="ignore"):
            wanted = np.array([says(*row) for row in zip(*columns, strict=True)]).astype(dtype(op.type, fmt))
            reference = in_numpy(op, values, fmt, tables)
        assert not first_difference(found, reference, values, op)
        assert not first_difference(reference[few], wanted, {n: v[few] for n, v in values.items()}, op)


@pytest.mark.parametrize("number", sorted(FORMATS))
def test_nested_operations_keep_the_order_of_the_tree(number: str) -> None:
    fmt, bench = FORMATS[number], Bench.of(number)
    tables = {t.name: t for t in bench.made.tables}
    values = {n: a[::7] for n, a in lanes(number).items()}
    nodes = list(bench.nested())
    assert len(nodes) > 500
    with np.errstate(all="ignore"):
        for op, found in zip(nodes, bench.run(list(nodes), values), strict=True):
            assert not first_difference(found, in_numpy(op, values, fmt, tables), values, op)


@pytest.mark.parametrize("number", sorted(FORMATS))
def test_literals_are_the_bits_of_their_constants(number: str) -> None:
    fmt = FORMATS[number]
    pool = np.concatenate(
        [lanes(number)["real_b"][::11], np.array(specials(fmt), fmt.dtype), np.array([0.1, 1e-4, 1e7, 0.3], fmt.dtype)]
    )
    constants = [Fraction(float(x)) for x in pool if np.isfinite(x)]
    values = {n: a[:1] for n, a in lanes(number).items()}
    found = Bench.of(number).run([Const(c, REAL) for c in constants], values)
    wrong = [(str(c), y[0]) for c, y in zip(constants, found, strict=True) if Fraction(float(y[0])) != c]
    assert len(constants) > 300
    assert wrong == []


def test_whole_numbers_at_the_ends_of_their_range() -> None:
    constants = [0, 1, -1, 2**31 - 1, 1 - 2**31, -(2**31)]
    found = Bench.of("float32").run([Const(c, INT) for c in constants], {n: a[:1] for n, a in lanes("float32").items()})
    assert [int(y[0]) for y in found] == constants


def fixed_rows() -> Iterator[tuple[str, list[Node]]]:
    """Operations of fixed point on the integers of the bench, with shifts inside their limits."""
    raws: list[Node] = [Ref(RefKind.STATE, f"int_{letter}", INT) for letter in "abc"]
    for name, count in FIXED.items():
        if name == "fixed_line":
            smaller: list[Node] = [Ref(RefKind.STATE, f"small_{letter}", INT) for letter in "ab"]
            yield name, [raws[0], raws[1], *smaller, Const(7, INT), Const(9, INT)]
            continue
        operands = {"fixed_floor": 1, "fixed_steps": 1, "fixed_scale": 1}.get(name, 2)
        if name.removeprefix("fixed_") in ELEMENTARY:
            operands = ELEMENTARY[name.removeprefix("fixed_")]
        for shift in (0, 3, 17, 30):
            yield name, [*raws[:operands], *(Const(shift, INT) for _ in range(count - operands))]


def test_fixed_point_operations_in_c_and_numpy_are_the_exact_integers() -> None:
    """What they mean is tested in tests/kernels/test_integers.py, against fractions and mpmath."""
    values = {n: v for n, v in lanes("float32").items() if not n.startswith("real")}
    nodes: list[Node] = [Op(name, tuple(args), INT) for name, args in fixed_rows()]
    assert {n.op for n in nodes if isinstance(n, Op)} == set(FIXED)
    few = slice(None, None, 61)
    for node, found in zip(nodes, Bench.of("fixed32").run(nodes, values), strict=True):
        assert isinstance(node, Op)
        columns = [in_numpy(a, values, FIXED32, {}) for a in node.args]
        reference = np.broadcast_to(operations(FIXED32)[node.op](*columns), found.shape)
        assert not first_difference(found, np.ascontiguousarray(reference), values, node)
        exactly = [
            exact(table_kernel(node.op, "fixed32"), *map(int, row))
            for row in zip(*(c[few] for c in columns), strict=True)
        ]
        assert exactly == [int(v) for v in reference[few]], node
