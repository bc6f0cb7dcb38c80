"""Kernels as C: one static function each, named words as constants, early answers as returns."""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from typing import assert_never

from hybgen.emit.text import INDENT, wrapped
from hybgen.ir.model import Program
from hybgen.kernels.table import kernel
from hybgen.kernels.word import Exit, Kernel, Let, Word, closure

_TYPES = {"u32": "uint32_t", "i32": "int32_t", "u64": "uint64_t", "i64": "int64_t", "bool": "bool"}
_LITERALS = {"u32": "{}u", "u64": "UINT64_C({})", "i32": "{}", "i64": "INT64_C({})"}


def functions(used: Iterable[str], program: Program) -> list[str]:
    """The C of the kernels that are used, with what they need, each once."""
    kernels = closure([kernel(name, program.number) for name in used])
    if not kernels:
        return []
    text = _Text(program.name, program.real)
    tables = {n: (t, words) for k in kernels for n, t, words in k.tables}
    punning = [text.punning()] if program.number != "fixed32" else []
    return [*punning, *(text.table(n, *row) for n, row in tables.items()), *map(text.function, kernels)]


class _Text:
    """Writes kernels of one law."""

    def __init__(self, law: str, real: str) -> None:
        self.law, self.real = law, real

    def type(self, type_: str) -> str:
        return self.real if type_ == "real" else _TYPES[type_]

    def punning(self) -> str:
        """The functions between a float and its bits."""
        word = "uint32_t" if self.real == "float" else "uint64_t"
        union = f"typedef union {{ {self.real} number; {word} bits; }} {self.law}_punned;\n\n"
        there = f"static {word} {self.law}_bits({self.real} number)\n{{\n    {self.law}_punned p;\n\n"
        back = f"static {self.real} {self.law}_real({word} bits)\n{{\n    {self.law}_punned p;\n\n"
        return (
            f"/* the elementary functions: integer operations between the bits of numbers, the same on every core */\n"
            f"{union}{there}    p.number = number;\n    return p.bits;\n}}\n\n{back}    p.bits = bits;\n"
            "    return p.number;\n}"
        )

    def table(self, name: str, type_: str, words: tuple[int, ...]) -> str:
        lines = "".join(
            f"{INDENT}{', '.join(self.constant(w, type_) for w in words[i : i + 4])}{',' if i + 4 < len(words) else ''}\n"
            for i in range(0, len(words), 4)
        )
        return f"static const {self.type(type_)} {self.law}_{name}[{len(words)}] = {{\n{lines}}};"

    def function(self, kernel_: Kernel) -> str:
        """The C of one kernel."""
        parameters = ", ".join(f"{self.type(t)} {n}" for n, t in kernel_.parameters)
        head = f"static {self.type(kernel_.answer.type)} {self.law}_{kernel_.name}({parameters})"
        body = [piece for line in self.lines(kernel_) for piece in wrapped(line)]
        return "\n".join([f"/* {kernel_.about} */", head, "{", *body, "}"])

    def lines(self, kernel_: Kernel) -> Iterator[str]:
        for item in kernel_.items:
            match item:
                case Let():
                    yield f"{INDENT}const {self.type(item.value.type)} {item.name} = {self.outer(item.value)};"
                case Exit():
                    yield f"{INDENT}if ({self.outer(item.condition)}) {{"
                    yield f"{INDENT * 2}return {self.outer(item.value)};"
                    yield f"{INDENT}}}"
                case _:
                    assert_never(item)
        yield f"{INDENT}return {self.outer(kernel_.answer)};"

    def constant(self, value: int, type_: str) -> str:
        text = f"0x{value:X}" if value > 255 else str(value)
        literal = _LITERALS[type_].format(text)
        return literal if value >= 0 else f"({literal})"

    def outer(self, word: Word) -> str:
        """A word, the outermost operation without parentheses."""
        text = self.inner(word)
        return text[1:-1] if text.startswith("(") and _closed(text) else text

    def inner(self, word: Word) -> str:
        """A word as an operand."""
        match word.op:
            case "const":
                return (
                    ("true" if word.value else "false") if word.type == "bool" else self.constant(word.value, word.type)
                )
            case "name":
                return word.name
            case "call" | "bits" | "real":
                arguments = ", ".join(self.outer(a) for a in word.args)
                return f"{self.law}_{word.name if word.op == 'call' else word.op}({arguments})"
            case "table":
                return f"{self.law}_{word.name}[{self.outer(word.args[0])}]"
            case "cast":
                return f"({self.type(word.type)}){self.inner(word.args[0])}"
            case "not":
                return f"!{self.inner(word.args[0])}"
            case "?":
                asked, yes, no = (self.inner(a) for a in word.args)
                return f"({asked} ? {yes} : {no})"
        left, right = (self.inner(a) for a in word.args)
        if word.op == "<<" and word.args[0].op == "const" and word.type == "u32":
            left = f"({self.type(word.type)}){left}"
        return f"({left} {word.op} {right})"


def _closed(text: str) -> bool:
    """Does the first parenthesis close at the end, around an operation (not a cast's type or a negative number)?"""
    depth = 0
    for i, sign in enumerate(text):
        depth += (sign == "(") - (sign == ")")
        if depth == 0:
            return i == len(text) - 1 and " " in text
    return False
