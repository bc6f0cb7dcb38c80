"""Operations on operands for which a wrong compiler, flag or core gives other bits, and the bits that IEEE 754 wants.

Every result is one of numpy's, each operation rounded once in the format; none is NaN, whose bits IEEE 754 leaves open.
Source of the cases: IEEE 754-2019, 4.3.1 (ties to even), 3.4 (subnormal numbers), 6.3 (sign of zero).
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hybgen.numbers.format import Format

Array = NDArray[Any]
Row = tuple[float, ...]
RANDOM = 6
"""Rows of random operands in each group."""


@dataclass(frozen=True, slots=True)
class Group:
    """One operation, or a few together, on many operands."""

    name: str
    about: str
    needs: tuple[frozenset[str], ...]
    """The law has to use an operation of each set."""
    arity: int
    text: str
    """C on x, y, a, b; a format text with `real` (the type), `word`, `bits` and `largest`."""
    work: Callable[..., Any]
    """numpy on x, y, a, b: numbers, or whole numbers that C stores as a word."""
    whole: bool = False
    """Are the operands int32_t?"""


def _set(words: str) -> frozenset[str]:
    return frozenset(words.split())


ADD, SUB, MUL, DIV, SUMS = _set("add"), _set("sub"), _set("mul"), _set("div"), _set("add sub")


def _order(x: Array, y: Array) -> Array:
    return np.asarray((x < y) + 2 * (x <= y) + 4 * (x > y) + 8 * (x >= y))


def _mixed(x: Array, y: Array, z: Array, w: Array) -> Array:
    word = np.dtype(f"u{x.dtype.itemsize}")
    first, second, third = ((a / w).view(word) for a in (x, y, z))
    return np.asarray(first ^ (second << word.type(1)) ^ (third << word.type(2)))


GROUPS = (
    Group("order", "x < y, <=, >, >= (bits 1, 2, 4, 8)", (_set("order"),), 2, "(({word})((x < y) ? 1 : 0) | "
          "({word})((x <= y) ? 2 : 0) | ({word})((x > y) ? 4 : 0) | ({word})((x >= y) ? 8 : 0))", _order),
    Group("finite", "x is finite", (_set("finite"),), 1, "({word})(((x >= -{largest}) && (x <= {largest})) ? 1 : 0)",
          lambda x: np.isfinite(x) * 1),
    Group("add", "x + y", (ADD,), 2, "{bits}(x + y)", np.add),
    Group("sub", "x - y", (SUB,), 2, "{bits}(x - y)", np.subtract),
    Group("mul", "x * y", (MUL,), 2, "{bits}(x * y)", np.multiply),
    Group("div", "x / y", (DIV,), 2, "{bits}(x / y)", np.divide),
    Group("to_real", "a whole number as a real one", (_set("to_real"),), 1, "{bits}(({real})x)", lambda x: x, True),
    Group("truncated", "a real number as a whole one", (_set("truncated"),), 1, "({word})(uint32_t)(int32_t)x",
          lambda x: x.astype(np.int32)),
    Group("zero", "x + 0 (other if the sign of zero is lost)", (ADD,), 1, "{bits}(x + ({real})0)",
          lambda x: x + x.dtype.type(0)),
    Group("fused", "(x * y) + a (other if fused)", (MUL, ADD), 3, "{bits}((x * y) + a)", lambda x, y, z: x * y + z),
    Group("fused_less", "(x * y) - a (other if fused)", (MUL, SUB), 3, "{bits}((x * y) - a)", lambda x, y, z: x * y - z),
    Group("fused_from", "a - (x * y) (other if fused)", (MUL, SUB), 3, "{bits}(a - (x * y))", lambda x, y, z: z - x * y),
    Group("regrouped", "(x + y) - x (other if regrouped or in excess precision)", (SUMS,), 2, "{bits}((x + y) - x)",
          lambda x, y: (x + y) - x),
    Group("cancelled", "(x * y) / x (other if regrouped or in excess precision)", (MUL, DIV), 2, "{bits}((x * y) / x)",
          lambda x, y: x * y / x),
    Group("quotients", "x / b, y / b, a / b together (other if 1 / b is computed once)", (DIV,), 4,
          "({bits}(x / b) ^ ({bits}(y / b) << 1) ^ ({bits}(a / b) << 2))", _mixed),
    Group("tenth", "x / 10 (other if multiplied by 1 / 10)", (DIV,), 1, "{bits}(x / ({real})10)",
          lambda x: x / x.dtype.type(10)),
)  # fmt: skip
USES = {
    "add": "add", "sub": "sub", "mul": "mul", "div": "div", "lookup": "add sub mul", "lookup2": "add sub mul",
    "to_real": "to_real", "floor": "to_real truncated sub", "to_steps": "to_real truncated sub mul", "finite": "finite",
}  # fmt: skip
"""Operations of a program -> the basic ones in them."""


def basics(used: Iterator[str]) -> frozenset[str]:
    """The basic operations of floating point behind the operations that a law uses; samples are always compared."""
    return frozenset({"order", *(basic for name in used for basic in USES.get(name, "").split())})


def groups(used: frozenset[str]) -> list[Group]:
    """The groups of the basic operations that are used."""
    return [g for g in GROUPS if all(need & used for need in g.needs)]


@dataclass(frozen=True, slots=True)
class Operands:
    """The operands of the groups in a format."""

    format: Format
    random: np.random.Generator

    def rows(self, group: Group) -> Array:
        """Operands, of shape (rows, arity)."""
        if group.whole:
            return np.array([[v] for v in self._whole()], np.int32)
        found = [*self._chosen(group.name), *self._random(group)]
        return np.array(found, self.format.dtype).reshape(-1, group.arity)

    def expected(self, group: Group, rows: Array) -> Array:
        """The result of each row as a word."""
        word = np.dtype(f"u{self.format.dtype.itemsize}")
        with np.errstate(all="ignore"):
            found = np.asarray(group.work(*(np.ascontiguousarray(column) for column in rows.T)))
        if group.whole:
            found = found.astype(self.format.dtype)
        if found.dtype.kind == "f":
            assert not np.isnan(found).any(), group.name
            return found.view(word)
        return (found.astype(np.int64) & 0xFFFFFFFF).astype(word) if found.dtype != word else found

    def _chosen(self, name: str) -> list[Row]:
        match name:
            case "order":
                return self._pairs_to_compare()
            case "finite":
                return [(v,) for v in (0.0, self.most, -self.most, np.inf, -np.inf, np.nan)]
            case "add":
                return self._sums()
            case "sub":
                return [(x, -y) for x, y in self._sums()]
            case "mul":
                return self._products()
            case "div":
                return self._ratios()
            case "truncated":
                half = self.format.whole / 2 if self.format.precision == 24 else 2.0**30
                sizes = (0.0, self.tiny, 0.5, 1 - self.unit / 2, 2.5, 3.75, half - 0.5, half + 0.5)
                return [(sign * v,) for v in sizes for sign in (1.0, -1.0)]
            case "zero":
                return [(-0.0,), (0.0,), (self.tiny,), (-self.tiny,)]
            case "tenth":
                return [(1.0,), (3.0,), (7.0,), (-9.0,), (self.least,), (self.tiny * 35,)]
            case "regrouped":
                u = self.unit
                return [(1.0, u / 4), (1.0, 0.75 * u), (-1.0, -u / 2), (1 + u, u / 2), (4 / u, 1.0), (-3.0, 1 / 3)]
            case "quotients":
                return [(1.0, 2.0, 5.0, 3.0), (1.0, 7.0, -9.0, 10.0), (2.0, 3.0, 4.0, 49.0)]
            case _:
                return []

    @property
    def unit(self) -> float:
        """From 1 to the next number."""
        return 2.0 ** (1 - self.format.precision)

    @property
    def tiny(self) -> float:
        """The smallest subnormal number."""
        return 2.0**self.format.least

    @property
    def least(self) -> float:
        """The smallest normal number."""
        return 2.0 ** (self.format.least + self.format.precision - 1)

    @property
    def most(self) -> float:
        """The largest finite number."""
        return float(self.format.max)

    def _whole(self) -> list[int]:
        sizes = [0, 1, 2**24 - 1, 2**24 + 1, 2**24 + 3, 2**25 + 2, 2**25 + 6, 2**30 + 65, 2**31 - 1]
        return [*sizes, *(-s for s in sizes[1:]), -(2**31)]

    def _pairs_to_compare(self) -> list[Row]:
        tiny, inf, nan, above = self.tiny, np.inf, np.nan, 1 + self.unit
        return [
            (tiny, 0.0), (-tiny, 0.0), (-tiny, tiny), (-0.0, 0.0), (1.0, above), (above, 1.0), (-1.0, -above), (1.0, 1.0),
            (self.least, self.least - tiny), (nan, 1.0), (1.0, nan), (nan, nan), (inf, self.most), (-inf, -self.most),
            (inf, inf),
        ]  # fmt: skip

    def _sums(self) -> list[Row]:
        u, tiny, least, most = self.unit, self.tiny, self.least, self.most
        return [
            (1.0, u / 2), (1 + u, u / 2), (-1.0, -u / 2), (-1 - u, -u / 2), (1.0, u / 2 * (1 + u)), (1.0, u / 4), (-1.0, -u / 4),
            (2 - u, u / 2), (tiny, tiny), (least, -tiny), (-least, tiny), (least + tiny, -least), (-0.0, -0.0), (0.0, -0.0),
            (1.0, -1.0), (most, most * (u / 4)), (most, -most * (u / 4)), (most, most), (-most, -most),
        ]  # fmt: skip

    def _products(self) -> list[Row]:
        u, tiny, least, most = self.unit, self.tiny, self.least, self.most
        return [
            (1 + u, 1.5), (1 + 3 * u, 1.5), (-1 - u, 1.5), (-1 - 3 * u, 1.5), (1 + u, 1 + u), (1 + u, -1 - u), (1 + u, 1 - u / 2),
            (least, 0.5), (least + tiny, 0.5), (least + 3 * tiny, -0.5), (tiny, 1.0), (tiny, 0.5), (3 * tiny, 0.5), (-tiny, 0.5),
            (tiny, 1 / u), (0.0, -1.0), (-0.0, -1.0), (most, 2.0), (most, -2.0),
        ]  # fmt: skip

    def _ratios(self) -> list[Row]:
        tiny, least, most = self.tiny, self.least, self.most
        return [
            (1.0, 3.0), (-1.0, 3.0), (2.0, 3.0), (5.0, 3.0), (1.0, 10.0), (9.0, 10.0), (1 + self.unit, 7.0), (least, 2.0),
            (least, 3.0), (tiny, 2.0), (3 * tiny, 2.0), (tiny, 1.0), (1.0, most), (most, 0.5), (1.0, -0.0), (0.0, -1.0),
        ]  # fmt: skip

    def _random(self, group: Group) -> Iterator[Row]:
        """Full significands near 1; for products with a sum, z takes all of the rounded product away."""
        real = self.format.dtype.type
        if group.name in ("order", "finite", "zero", "truncated"):
            return
        for k in range(RANDOM):
            sizes = self.random.uniform(0.5, 2.0, 4) * np.where(self.random.random(4) < 0.5, -1, 1)
            x, y, z, w = (real(v) for v in sizes)
            if group.name.startswith("fused") and k % 2 == 0:
                z = -(x * y) if group.name == "fused" else x * y
            yield tuple(float(v) for v in (x, y, z, w)[: group.arity])
