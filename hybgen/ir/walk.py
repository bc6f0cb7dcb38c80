"""Walking statements and values."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

from hybgen.ir.model import Answer, Apply, If, Let, Note, Raise, Statement, Store, Switch, Value


def values(value: Value) -> Iterator[Value]:
    """Every value in a value."""
    todo = [value]
    while todo:
        here = todo.pop()
        yield here
        if isinstance(here, Apply):
            todo.extend(reversed(here.args))


def own(statement: Statement) -> tuple[Value, ...]:
    """The values that a statement itself computes, without its blocks."""
    match statement:
        case Let() | Store():
            return (statement.value,)
        case If():
            return (statement.condition,)
        case Switch():
            return (statement.subject,)
        case Note() | Raise() | Answer():
            return ()


def blocks(statement: Statement) -> tuple[tuple[Statement, ...], ...]:
    """The blocks inside a statement."""
    match statement:
        case If():
            return (statement.then, statement.orelse)
        case Switch():
            return (*(body for _, body in statement.cases), statement.default)
        case _:
            return ()


def statements(body: Sequence[Statement]) -> Iterator[Statement]:
    """Every statement in a body, outer ones first."""
    for statement in body:
        yield statement
        for block in blocks(statement):
            yield from statements(block)


def all_values(body: Sequence[Statement]) -> Iterator[Value]:
    """Every value in a body."""
    for statement in statements(body):
        for value in own(statement):
            yield from values(value)
