"""A program as text, for people."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from fractions import Fraction
from typing import assert_never

from hybgen.ir.model import (
    INFIX,
    PREFIX,
    Answer,
    Apply,
    Constant,
    Field,
    Grid,
    If,
    Let,
    Local,
    Member,
    Note,
    Program,
    Raise,
    Statement,
    Store,
    Switch,
    Table,
    Value,
)


def show(program: Program) -> str:
    """Structs and functions, one line a statement."""
    return "\n".join(_lines(program)) + "\n"


def _lines(program: Program) -> Iterator[str]:
    yield f"program {program.name}: {program.number}, step {program.step}, at most {program.jumps_per_step} jumps in one step"
    for enum in program.enums:
        yield f"enum {enum.name}: {', '.join(enum.values)}"
    for word, members in (
        ("inputs", program.inputs),
        ("parameters", program.parameters),
        ("outputs", program.outputs),
        ("self", program.states),
        ("now", program.now),
    ):
        yield f"struct {word}: {', '.join(_member(m) for m in members) or 'nothing'}"
    for table in program.tables:
        yield f"table {table.name}: {', '.join(_points(table))}"
    for function in program.functions:
        yield f"{function.name}: {function.about}"
        yield from _block(function.body, 1)


def _points(table: Table | Grid) -> Iterator[str]:
    """(x, y) of a curve, (x, y, z) of a table of two inputs, row by row."""
    if isinstance(table, Table):
        yield from (f"({float(x):.9g}, {float(y):.9g})" for x, y in zip(table.x, table.y, strict=True))
        return
    for x, row in zip(table.x, table.z, strict=True):
        yield from (f"({float(x):.9g}, {float(y):.9g}, {float(z):.9g})" for y, z in zip(table.y, row, strict=True))


def _member(m: Member) -> str:
    return f"{m.name}: {m.type}{'' if m.size is None else f'[{m.size}]'}"


def _block(body: Sequence[Statement], depth: int) -> Iterator[str]:
    pad = "  " * depth
    for statement in body:
        match statement:
            case Note():
                yield f"{pad}# {statement.place} {statement.text}"
            case Let():
                yield f"{pad}let {statement.name}: {statement.type} = {_value(statement.value)}"
            case Store():
                yield f"{pad}{_value(statement.target)} := {_value(statement.value)}"
            case Raise():
                yield f"{pad}raise {statement.bit}"
            case Answer():
                yield f"{pad}answer {_value(statement.value)}"
            case If():
                yield f"{pad}if {_value(statement.condition)}"
                yield from _block(statement.then, depth + 1)
                if statement.orelse:
                    yield f"{pad}else"
                    yield from _block(statement.orelse, depth + 1)
            case Switch():
                yield f"{pad}switch {_value(statement.subject)}"
                for labels, block in statement.cases:
                    yield f"{pad}case {', '.join(_value(label) for label in labels)}"
                    yield from _block(block, depth + 1)
            case _:
                assert_never(statement)


def _value(value: Value) -> str:
    match value:
        case Constant():
            return (
                f"{float(value.value):.17g}"
                if isinstance(value.value, Fraction)
                else str(value.value).lower()
                if isinstance(value.value, bool)
                else str(value.value)
            )
        case Local():
            return value.name
        case Field():
            return f"{value.base}.{value.name}{'' if value.index is None else f'[{value.index}]'}"
        case Apply():
            args = [_value(a) for a in value.args]
            if value.op in INFIX:
                return f"({f' {INFIX[value.op]} '.join(args)})"
            if value.op in PREFIX:
                return f"{PREFIX[value.op]}{args[0]}"
            return f"{value.table or value.op}({', '.join(args)})"
        case _:
            assert_never(value)
