"""Programs of integer operations on words: the form in which an elementary function is written down once.

A kernel is straight-line code with early answers: named words, each computed once, and conditions under which the
answer is already known. Every operation is exact (unsigned ones modulo 2**bits), so any compiler and core gives the
same bits. Shift counts are always inside the word where the value is used, signed operations never overflow there:
`run.exact` asserts it.
"""

from __future__ import annotations

from dataclasses import dataclass, field

ELEMENTARY = {
    "sqrt": 1,
    "sin": 1,
    "cos": 1,
    "tan": 1,
    "asin": 1,
    "acos": 1,
    "atan2": 2,
    "exp": 1,
    "log": 1,
    "tanh": 1,
    "hypot": 2,
    "wrap": 1,
}
"""The elementary functions: name -> number of arguments."""

BITS = {"u32": 32, "i32": 32, "u64": 64, "i64": 64}
COMPARISONS = frozenset({"<", "<=", ">", ">=", "==", "!="})


@dataclass(frozen=True, slots=True)
class Word:
    """A value: `op` is `const` (value), `name` (name), `table` (name, args: index), `call` (name, args), `cast`,
    `bits` and `real` (a float's bits and back), `?` (choice), `not`, or an infix operator of C."""

    op: str
    type: str
    """u32 | i32 | u64 | i64 | bool | real"""
    args: tuple[Word, ...] = ()
    name: str = ""
    value: int = 0

    def _with(self, op: str, other: Word | int, type_: str | None = None) -> Word:
        other = number(other, self.type) if isinstance(other, int) else other
        assert other.type == self.type, (op, self, other)
        return Word(op, type_ or self.type, (self, other))

    def _unsigned(self, op: str, other: Word | int) -> Word:
        assert self.type[0] == "u", (op, self)
        return self._with(op, other)

    def __add__(self, other: Word | int) -> Word:
        if isinstance(other, Word) and other.op == "const" and other.value == 0:
            return self
        return self._with("+", other)

    def __sub__(self, other: Word | int) -> Word:
        return self._with("-", other)

    def __mul__(self, other: Word | int) -> Word:
        return self._with("*", other)

    def __floordiv__(self, other: Word | int) -> Word:
        return self._unsigned("/", other)

    def __and__(self, other: Word | int) -> Word:
        return self._with("&&" if self.type == "bool" else "&", other)

    def __or__(self, other: Word | int) -> Word:
        return self._with("||" if self.type == "bool" else "|", other)

    def __xor__(self, other: Word | int) -> Word:
        return self._unsigned("^", other)

    def __invert__(self) -> Word:
        assert self.type == "bool"
        return Word("not", "bool", (self,))

    def _shift(self, op: str, count: Word | int) -> Word:
        """Counts are u32."""
        count = number(count, "u32") if isinstance(count, int) else count
        assert self.type[0] == "u" and count.type == "u32", (op, self, count)
        return Word(op, self.type, (self, count))

    def __lshift__(self, count: Word | int) -> Word:
        return self._shift("<<", count)

    def __rshift__(self, count: Word | int) -> Word:
        return self._shift(">>", count)

    def __lt__(self, other: Word | int) -> Word:
        return self._with("<", other, "bool")

    def __le__(self, other: Word | int) -> Word:
        return self._with("<=", other, "bool")

    def __gt__(self, other: Word | int) -> Word:
        return self._with(">", other, "bool")

    def __ge__(self, other: Word | int) -> Word:
        return self._with(">=", other, "bool")

    def equals(self, other: Word | int) -> Word:
        """self == other"""
        return self._with("==", other, "bool")

    def differs(self, other: Word | int) -> Word:
        """self != other"""
        return self._with("!=", other, "bool")

    def to(self, type_: str) -> Word:
        """The same number as another type (modulo 2**bits for unsigned ones; a signed one has to hold it)."""
        if self.type == type_:
            return self
        if self.type == "bool":
            return choose(self, number(1, type_), 0)
        if self.op == "const":
            return number(self.value, type_)
        return Word("cast", type_, (self,))


def number(value: int, type_: str) -> Word:
    """A constant; modulo 2**bits for unsigned types."""
    if type_[0] == "u":
        value %= 1 << BITS[type_]
    return Word("const", type_, value=value)


FALSE = Word("const", "bool")
"""The condition that never holds."""


def choose(condition: Word, yes: Word | int, no: Word | int) -> Word:
    """`yes` where the condition holds, else `no`."""
    if isinstance(yes, int):
        assert isinstance(no, Word)
        yes = number(yes, no.type)
    if isinstance(no, int):
        no = number(no, yes.type)
    assert yes.type == no.type and condition.type == "bool", (condition, yes, no)
    return Word("?", yes.type, (condition, yes, no))


@dataclass(frozen=True, slots=True)
class Let:
    """A named word."""

    name: str
    value: Word


@dataclass(frozen=True, slots=True)
class Exit:
    """Where the condition holds, the value is the answer and nothing after it is computed."""

    condition: Word
    value: Word


@dataclass(frozen=True, slots=True)
class Kernel:
    """A function of words (or of floats, type `real`, taken apart by `bits`)."""

    name: str
    about: str
    parameters: tuple[tuple[str, str], ...]
    """(name, type)"""
    items: tuple[Let | Exit, ...]
    answer: Word
    tables: tuple[tuple[str, str, tuple[int, ...]], ...]
    """(name, type, words)"""
    calls: tuple[Kernel, ...]
    """The kernels that this one calls, each once."""


@dataclass(slots=True)
class Builder:
    """A kernel in the making."""

    name: str
    about: str
    parameters: list[tuple[str, str]] = field(default_factory=list)
    items: list[Let | Exit] = field(default_factory=list)
    tables: dict[str, tuple[str, tuple[int, ...]]] = field(default_factory=dict)
    calls: dict[str, Kernel] = field(default_factory=dict)
    taken: set[str] = field(default_factory=set)

    def parameter(self, name: str, type_: str) -> Word:
        """The next parameter."""
        self.parameters.append((name, type_))
        self.taken.add(name)
        return Word("name", type_, name=name)

    def let(self, name: str, value: Word) -> Word:
        """A named word; constants and names are left as they are."""
        if value.op in ("const", "name"):
            return value
        free, count = name, 2
        while free in self.taken:
            free, count = f"{name}{count}", count + 1
        self.taken.add(free)
        self.items.append(Let(free, value))
        return Word("name", value.type, name=free)

    def exit(self, condition: Word, value: Word) -> None:
        """An early answer."""
        self.items.append(Exit(condition, value))

    def table(self, name: str, type_: str, words: tuple[int, ...], index: Word | int) -> Word:
        """An entry of a table of constants."""
        self.tables[name] = (type_, words)
        if isinstance(index, int):
            return number(words[index], type_)
        return Word("table", type_, (index,), name)

    def call(self, kernel: Kernel, *args: Word) -> Word:
        """Another kernel's answer."""
        assert tuple(a.type for a in args) == tuple(t for _, t in kernel.parameters), (kernel.name, args)
        self.calls[kernel.name] = kernel
        return Word("call", kernel.answer.type, args, kernel.name)

    def made(self, answer: Word) -> Kernel:
        """The kernel, without the words that nothing uses."""
        items: list[Let | Exit] = []
        used = list(walk(answer))
        for item in reversed(self.items):
            if isinstance(item, Exit) or any(w.op == "name" and w.name == item.name for w in used):
                items.append(item)
                used += [w for v in item_values(item) for w in walk(v)]
        names = {(w.op, w.name) for w in used}
        return Kernel(
            self.name,
            self.about,
            tuple(self.parameters),
            tuple(reversed(items)),
            answer,
            tuple((n, t, w) for n, (t, w) in self.tables.items() if ("table", n) in names),
            tuple(k for k in self.calls.values() if ("call", k.name) in names),
        )


def item_values(item: Let | Exit) -> tuple[Word, ...]:
    """The values in an item."""
    return (item.value,) if isinstance(item, Let) else (item.condition, item.value)


def walk(word: Word) -> list[Word]:
    """A word and everything in it."""
    return [word, *(w for a in word.args for w in walk(a))]


def closure(kernels: list[Kernel]) -> list[Kernel]:
    """The kernels and what they call, callees first, each once."""
    found: dict[str, Kernel] = {}

    def add(kernel: Kernel) -> None:
        for callee in kernel.calls:
            add(callee)
        found.setdefault(kernel.name, kernel)

    for kernel in kernels:
        add(kernel)
    return list(found.values())
