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
    "/": lambda a, b: np.floor_divide(a, np.maximum(b, b.dtype.type(1))),
    "<<": np.left_shift,
    ">>": np.right_shift,
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
    "not": np.logical_not,
    "?": np.where,
}


def function(kernel: Kernel, real: np.dtype[Any] | None = None) -> Function:
    """The kernel as a numpy function on arrays (or scalars) of one shape; `real`: the type of its floats, if it has any.

    Lanes that have an early answer are computed on, and not used.
    """
    calls = {k.name: function(k, real) for k in kernel.calls}
    plan = _Plan(kernel, calls, real)
    constants, steps, size = plan.constants, tuple(plan.steps), plan.size
    exits, last, parameters = tuple(reversed(plan.exits)), plan.answer, range(len(kernel.parameters))

    def answer(*args: Any) -> Array:
        slots: list[Any] = [None] * size
        for at in parameters:
            slots[at] = np.asarray(args[at])
        for at, value in constants:
            slots[at] = value
        with np.errstate(all="ignore"):
            for at, work, places in steps:
                slots[at] = work(*[slots[p] for p in places])
        found = slots[last]
        for condition, value in exits:
            found = np.where(slots[condition], slots[value], found)
        return np.asarray(found)

    return answer


class _Plan:
    """A kernel as a list of array operations: (slot, function, slots of its arguments); the first slots are the parameters."""

    def __init__(self, kernel: Kernel, calls: Mapping[str, Function], real: np.dtype[Any] | None) -> None:
        self.calls, self.real = calls, real
        self.tables: dict[str, Array] = {n: np.array(w, _DTYPES[t]) for n, t, w in kernel.tables}
        self.names = {n: i for i, (n, _) in enumerate(kernel.parameters)}
        self.size = len(self.names)
        self.constants: list[tuple[int, Any]] = []
        self.steps: list[tuple[int, Function, tuple[int, ...]]] = []
        self.exits: list[tuple[int, int]] = []
        for item in kernel.items:
            if isinstance(item, Let):
                self.names[item.name] = self.slot(item.value)
            else:
                self.exits.append((self.slot(item.condition), self.slot(item.value)))
        self.answer = self.slot(kernel.answer)

    def slot(self, word: Word) -> int:
        """Where the value of a word will be."""
        if word.op == "name":
            return self.names[word.name]
        places = tuple(self.slot(a) for a in word.args)
        at, self.size = self.size, self.size + 1
        if word.op == "const":
            self.constants.append((at, _DTYPES[word.type](word.value)))
        else:
            self.steps.append((at, self.work(word), places))
        return at

    def work(self, word: Word) -> Function:
        """The array function of an operation."""
        match word.op:
            case "bits":
                return lambda a: a.view(_WORDS[a.dtype])
            case "real":
                real = self.real
                assert real is not None, "a kernel of floats needs their type"
                return lambda a: np.asarray(a).view(real)
            case "call":
                return self.calls[word.name]
            case "table":
                table = self.tables[word.name]
                return lambda i: table.take(i, mode="clip")
            case "cast":
                wanted = _DTYPES[word.type]
                return lambda a: a.astype(wanted)
        return _NUMPY[word.op]


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
