"""Is a program well formed? A problem here is a fault in hybgen: an assertion."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from fractions import Fraction

from hybgen.ir.model import (
    LOOKUPS,
    OPS,
    Answer,
    Apply,
    Constant,
    Field,
    Grid,
    Let,
    Local,
    Member,
    Program,
    Statement,
    Store,
    Table,
    Value,
)
from hybgen.ir.walk import blocks, own, values
from hybgen.kernels.table import ARITY

_ARITY = {
    "select": 3,
    "clamp": 3,
    "iclamp": 3,
    "neg": 1,
    "ineg": 1,
    "not": 1,
    "abs": 1,
    "iabs": 1,
    "sign": 1,
    "isign": 1,
    "floor": 1,
    "lookup": 1,
    "to_steps": 1,
    "to_real": 1,
    "finite": 1,
    **ARITY,
}


Known = Mapping[tuple[str, str], Member]


def verify(program: Program) -> None:
    """Raises AssertionError: an operation that does not exist, a name used before it is made or made twice, a member
    that no struct has, operands of different types."""
    members = {
        "self": program.states,
        "p": program.parameters,
        "u": program.inputs,
        "now": program.now,
        "y": program.outputs,
    }
    known = {(base, m.name): m for base, rows in members.items() for m in rows}
    for function in program.functions:
        _block(function.body, frozenset(), known, program)


def _block(body: Sequence[Statement], scope: frozenset[str], known: Known, program: Program) -> None:
    for statement in body:
        for value in own(statement):
            for piece in values(value):
                _value(piece, scope, known, program)
        if isinstance(statement, Let):
            assert statement.name not in scope, statement
            assert statement.value.type == statement.type, statement
            scope |= {statement.name}
        elif isinstance(statement, Store):
            _value(statement.target, scope, known, program)
            assert statement.target.type == statement.value.type, statement
        elif isinstance(statement, Answer):
            assert isinstance(statement.value, Constant)
        for block in blocks(statement):
            _block(block, scope, known, program)


def _value(value: Value, scope: frozenset[str], known: Known, program: Program) -> None:
    match value:
        case Local():
            assert value.name in scope, value
        case Field():
            member = known[(value.base, value.name)]
            assert member.type == value.type, (member, value)
            assert (member.size is None) == (value.index is None), value
            assert value.index is None or value.index < (member.size or 0), value
        case Apply():
            assert value.op in OPS, value
            if value.op in ("and", "or"):
                assert all(a.type == "bool" for a in value.args), value
                return
            assert len(value.args) == _ARITY.get(value.op, 2), value
            compared = value.args[1:] if value.op == "select" else value.args
            assert len({a.type for a in compared}) == 1, value
            assert (value.op in LOOKUPS) == bool(value.table), value
            assert not value.table or isinstance(_table(value.table, program), LOOKUPS[value.op]), value
        case Constant():
            assert isinstance(value.value, Fraction | bool | int | str)


def _table(name: str, program: Program) -> Table | Grid | None:
    return next((t for t in program.tables if t.name == name), None)
