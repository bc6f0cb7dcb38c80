"""Kernels evaluated: in numpy on arrays, and in exact integers with every rule of C checked."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hybgen.kernels.word import BITS, Exit, Kernel, Let, Word

Array = NDArray[Any]
Function = Callable[..., Array]

_DTYPES = {"u32": np.uint32, "i32": np.int32, "u64": np.uint64, "i64": np.int64, "bool": np.bool_}
_WORDS = {np.dtype(np.float32): np.uint32, np.dtype(np.float64): np.uint64}
_NUMPY: Mapping[str, Callable[..., Any]] = {
    "+": np.add,
    "-": np.subtract,
    "*": np.multiply,
    "&": np.bitwise_and,
    "|": np.bitwise_or,
    "^": np.bitwise_xor,
    "<": np.less,
    "<=": np.less_equal,
    ">": np.greater,
    ">=": np.greater_equal,
    "==": np.equal,
    "!=": np.not_equal,
    "&&": np.logical_and,
    "||": np.logical_or,
}


def function(kernel: Kernel, real: np.dtype[Any] | None = None) -> Function:
    """The kernel as a numpy function on arrays (or scalars) of one shape; `real`: the type of its floats, if it has any."""
    calls = {k.name: function(k, real) for k in kernel.calls}
    tables: dict[str, Array] = {name: np.array(words, _DTYPES[type_]) for name, type_, words in kernel.tables}
    run = _Run(kernel, calls, tables, real)
    return run.answer


class _Run:
    """One kernel's evaluation. Lanes that have an early answer are computed on, and not used."""

    def __init__(
        self, kernel: Kernel, calls: Mapping[str, Function], tables: Mapping[str, Array], real: np.dtype[Any] | None
    ) -> None:
        self.kernel, self.calls, self.tables, self.real = kernel, calls, tables, real

    def answer(self, *args: Any) -> Array:
        with np.errstate(all="ignore"):
            names = {n: np.asarray(a) for (n, _), a in zip(self.kernel.parameters, args, strict=True)}
            exits: list[tuple[Array, Array]] = []
            for item in self.kernel.items:
                if isinstance(item, Let):
                    names[item.name] = self.value(item.value, names)
                else:
                    exits.append((self.value(item.condition, names), self.value(item.value, names)))
            found = self.value(self.kernel.answer, names)
            for condition, value in reversed(exits):
                found = np.where(condition, value, found)
            return np.asarray(found)

    def value(self, word: Word, names: Mapping[str, Array]) -> Any:
        match word.op:
            case "const":
                return _DTYPES[word.type](word.value)
            case "name":
                return names[word.name]
            case "bits":
                raw = np.asarray(self.value(word.args[0], names))
                return raw.view(_WORDS[raw.dtype])
            case "real":
                return np.asarray(self.value(word.args[0], names)).view(self.real)
            case "?":
                return np.where(*(self.value(a, names) for a in word.args))
        args = [self.value(a, names) for a in word.args]
        match word.op:
            case "call":
                return self.calls[word.name](*args)
            case "table":
                table = self.tables[word.name]
                return table[np.minimum(args[0], np.uint32(len(table) - 1))]
            case "cast":
                return np.asarray(args[0]).astype(_DTYPES[word.type])
            case "not":
                return np.logical_not(args[0])
            case "<<" | ">>":
                shift = np.left_shift if word.op == "<<" else np.right_shift
                kind = _DTYPES[word.type]
                return shift(args[0], np.asarray(args[1]).astype(kind) & kind(BITS[word.type] - 1))
            case "/":
                return np.floor_divide(args[0], np.maximum(args[1], _DTYPES[word.type](1)))
        return _NUMPY[word.op](*args)


def exact(kernel: Kernel, *args: int) -> int:
    """The answer in Python integers; floats are given and returned as their bits.

    Raises AssertionError where C would not define the result.
    """
    names = {n: a for (n, _), a in zip(kernel.parameters, args, strict=True)}
    for item in kernel.items:
        match item:
            case Let():
                names[item.name] = _exact(item.value, names, kernel)
            case Exit():
                if _exact(item.condition, names, kernel):
                    return _exact(item.value, names, kernel)
    return _exact(kernel.answer, names, kernel)


def _exact(word: Word, names: Mapping[str, int], kernel: Kernel) -> int:
    match word.op:
        case "const":
            return word.value
        case "name":
            return names[word.name]
        case "bits" | "real":
            return _exact(word.args[0], names, kernel)
        case "?":
            return _exact(word.args[1 if _exact(word.args[0], names, kernel) else 2], names, kernel)
        case "&&" | "||":
            first = _exact(word.args[0], names, kernel)
            return first if bool(first) is (word.op == "||") else _exact(word.args[1], names, kernel)
    args = [_exact(a, names, kernel) for a in word.args]
    if word.op == "call":
        return exact(next(k for k in kernel.calls if k.name == word.name), *args)
    if word.op == "table":
        words = next(w for n, _, w in kernel.tables if n == word.name)
        assert 0 <= args[0] < len(words), (kernel.name, word.name, args)
        return words[args[0]]
    if word.op in ("<<", ">>"):
        assert 0 <= args[1] < BITS[word.type], (kernel.name, word, args)
    return _fitted(_EXACT[word.op](*args), word, kernel)


def _fitted(value: int, word: Word, kernel: Kernel) -> int:
    if word.type == "bool":
        return int(value)
    if word.type[0] == "u":
        return value % (1 << BITS[word.type])
    assert -(1 << (BITS[word.type] - 1)) <= value < 1 << (BITS[word.type] - 1), (kernel.name, word, value)
    return value


_EXACT: Mapping[str, Callable[..., int]] = {
    "+": lambda a, b: a + b,
    "-": lambda a, b: a - b,
    "*": lambda a, b: a * b,
    "/": lambda a, b: a // b,
    "&": lambda a, b: a & b,
    "|": lambda a, b: a | b,
    "^": lambda a, b: a ^ b,
    "<<": lambda a, b: a << b,
    ">>": lambda a, b: a >> b,
    "<": lambda a, b: a < b,
    "<=": lambda a, b: a <= b,
    ">": lambda a, b: a > b,
    ">=": lambda a, b: a >= b,
    "==": lambda a, b: a == b,
    "!=": lambda a, b: a != b,
    "cast": lambda a: a,
    "not": lambda a: not a,
}
