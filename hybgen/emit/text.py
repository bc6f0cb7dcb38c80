"""Values and statements as C."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import assert_never

import numpy as np

from hybgen.ir.model import (
    INFIX,
    PREFIX,
    Answer,
    Apply,
    Constant,
    Field,
    If,
    Let,
    Local,
    Note,
    Program,
    Raise,
    Statement,
    Store,
    Switch,
    Value,
)

INDENT = "    "
WIDTH = 110


def ctype(type_: str, program: Program) -> str:
    """The C type of a type of the program."""
    return {"real": program.real, "int": "int32_t", "bool": "bool", "word": "uint32_t"}.get(type_, type_)


def real_literal(value: Fraction, program: Program) -> str:
    """The shortest decimal that gives the number's bits, as a literal of the format."""
    number = np.float32(float(value)) if program.real == "float" else np.float64(float(value))
    assert Fraction(float(number)) == value, value
    text = (
        np.format_float_scientific(number, unique=True, trim="0")
        if value and not 1e-4 <= abs(float(value)) < 1e7
        else (np.format_float_positional(number, unique=True, trim="0"))
    )
    return text + ("f" if program.real == "float" else "")


def constant(value: Constant, program: Program) -> str:
    """A constant."""
    match value.value:
        case bool():
            return "true" if value.value else "false"
        case Fraction():
            return real_literal(value.value, program)
        case int():
            return f"{value.value}{'u' if value.type == 'word' else ''}"
        case str():
            return value.value


@dataclass(frozen=True, slots=True)
class Writer:
    """Writes the statements of a program."""

    program: Program

    def value(self, value: Value) -> str:
        """A value, outermost operation without parentheses."""
        text = self.inner(value)
        wrapped = isinstance(value, Apply) and (value.op in INFIX or value.op in ("select", "neg", "ineg"))
        return text[1:-1] if wrapped else text

    def inner(self, value: Value) -> str:
        """A value as an operand."""
        match value:
            case Constant():
                text = constant(value, self.program)
                return f"({text})" if text.startswith("-") else text
            case Local():
                return value.name
            case Field():
                joint = "." if value.base == "now." else "->"
                index = "" if value.index is None else f"[{value.index}]"
                return f"{value.base}{joint}{value.name}{index}"
            case Apply():
                return self._operation(value)
            case _:
                assert_never(value)

    def _operation(self, value: Apply) -> str:
        args = value.args
        if value.op in INFIX:
            pieces = [self.inner(a) for a in args]
            if value.op in ("eq", "ne") and isinstance(args[0], Apply) and args[0].op == "not":
                pieces[0] = f"({pieces[0]})"  # compilers take !a == b for a slip
            return f"({f' {INFIX[value.op]} '.join(pieces)})"
        if value.op in PREFIX:
            return (
                f"{PREFIX[value.op]}{self.inner(args[0])}"
                if value.op == "not"
                else f"({PREFIX[value.op]}{self.inner(args[0])})"
            )
        if value.op == "select":
            return f"({self.inner(args[0])} ? {self.inner(args[1])} : {self.inner(args[2])})"
        if value.op == "to_real":
            return f"({self.program.real}){self.inner(args[0])}"
        name = value.table or f"{self.program.name}_{value.op}"
        return f"{name}({', '.join(self.value(a) for a in args)})"

    def block(self, body: Sequence[Statement], depth: int) -> Iterator[str]:
        """The lines of a body."""
        for statement in body:
            for line in self.statement(statement, depth):
                yield from wrapped(line)

    def statement(self, statement: Statement, depth: int) -> Iterator[str]:
        """The lines of one statement."""
        pad = INDENT * depth
        match statement:
            case Note():
                yield f"{pad}/* {comment(statement.place)}  {comment(statement.text)} */"
            case Let():
                yield f"{pad}const {ctype(statement.type, self.program)} {statement.name} = {self.value(statement.value)};"
            case Store():
                yield f"{pad}{self.inner(statement.target)} = {self.value(statement.value)};"
            case Raise():
                yield f"{pad}status |= {self.program.name.upper()}_STATUS_{statement.bit};"
            case Answer():
                yield f"{pad}answer = {constant(statement.value, self.program)};"
            case If():
                yield from self._if(statement, depth)
            case Switch():
                yield from self._switch(statement, depth)
            case _:
                assert_never(statement)

    def _if(self, statement: If, depth: int) -> Iterator[str]:
        pad = INDENT * depth
        condition = self.value(statement.condition)
        then, orelse = statement.then, statement.orelse
        if not then:
            condition, then, orelse = f"!{self.inner(statement.condition)}", orelse, ()
        yield f"{pad}if ({condition}) {{"
        yield from self.block(then, depth + 1)
        while orelse:
            if len(orelse) == 1 and isinstance(orelse[0], If) and orelse[0].then:
                yield f"{pad}}} else if ({self.value(orelse[0].condition)}) {{"
                yield from self.block(orelse[0].then, depth + 1)
                orelse = orelse[0].orelse
            else:
                yield f"{pad}}} else {{"
                yield from self.block(orelse, depth + 1)
                orelse = ()
        yield f"{pad}}}"

    def _switch(self, statement: Switch, depth: int) -> Iterator[str]:
        pad = INDENT * depth
        yield f"{pad}switch ({self.value(statement.subject)}) {{"
        for labels, body in statement.cases:
            for label in labels:
                yield f"{pad}case {constant(label, self.program)}:"
            yield from self._case(body, depth)
            yield f"{pad}{INDENT}break;"
        yield f"{pad}default:"
        yield from self._case(statement.default, depth)
        yield f"{pad}{INDENT}break;"
        yield f"{pad}}}"

    def _case(self, body: Sequence[Statement], depth: int) -> Iterator[str]:
        """The body of a case; in braces where it declares something."""
        if any(isinstance(s, Let) for s in body):
            yield f"{INDENT * (depth + 1)}{{"
            yield from self.block(body, depth + 2)
            yield f"{INDENT * (depth + 1)}}}"
        else:
            yield from self.block(body, depth + 1)


_BREAKS = (" || ", " && ", " ? ", " : ", " + ", " - ", " * ", ", ")


def wrapped(line: str) -> Iterator[str]:
    """A long line of code in pieces, broken before an operator (or after a comma) where the parentheses are fewest."""
    pad = " " * (len(line) - len(line.lstrip())) + INDENT
    while len(line) > WIDTH and not line.lstrip().startswith(("/*", "#")):
        cut = _cut(line)
        if cut is None:
            break
        yield line[:cut].rstrip()
        line = pad + line[cut:].lstrip()
    yield line


def _cut(line: str) -> int | None:
    """Where to break: the last place before the width with the fewest open parentheses."""
    first = len(line) - len(line.lstrip()) + 8
    best: tuple[int, int] | None = None
    depth = 0
    for i, sign in enumerate(line[:WIDTH]):
        depth += (sign == "(") - (sign == ")")
        mark = next((b for b in _BREAKS if line.startswith(b, i)), None)
        if mark is not None and i > first:
            at = i + 2 if mark == ", " else i + 1
            if best is None or depth <= best[0]:
                best = depth, at
    return best[1] if best is not None else None


def comment(text: str) -> str:
    """A text that can't end or upset a comment."""
    safe = "".join(c if c.isascii() and c.isprintable() else "?" for c in " ".join(text.split()))
    for bad, good in (("\\", "/"), ("*/", "* /"), ("/*", "/ *"), ("??", "? ?")):
        while bad in safe:
            safe = safe.replace(bad, good)
    return safe if len(safe) <= 240 else f"{safe[:237]}..."
