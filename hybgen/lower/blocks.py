"""Assignments -> statements: an order without hazards, choices as if and switch, intermediate values where needed.

Nothing here changes a value: only where and when it is computed.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, replace

from hybgen.expr.core import Kind, Node, Op, Ref, RefKind, refs
from hybgen.ir.model import Apply, Constant, Field, If, Let, Local, Note, Statement, Store, Switch, Value
from hybgen.ir.walk import blocks, own, statements, values

Cell = tuple[str, int | None]
Statements = tuple[Statement, ...]


@dataclass(frozen=True, slots=True)
class Assignment:
    """A new value for one component of a state.

    `store` gives the statements that store a value; `early` a local that holds it until it may be stored.
    """

    cell: Cell
    expr: Node
    note: Note
    store: Callable[[Value], Statements]
    early: str


def reads(node: Node, definitions: Mapping[str, Node], memo: dict[str, frozenset[Cell]]) -> frozenset[Cell]:
    """The states' components that an expression reads, through definitions."""
    found: set[Cell] = set()
    for ref in refs(node, RefKind.STATE, RefKind.LOCAL):
        if ref.kind is RefKind.STATE:
            found.add((ref.name, ref.index))
            continue
        if ref.name not in memo:
            memo[ref.name] = reads(definitions[ref.name], definitions, memo)
        found |= memo[ref.name]
    return frozenset(found)


def ordered(
    assignments: Sequence[Assignment], definitions: Mapping[str, Node], value: Callable[[Node], Value]
) -> Statements:
    """The assignments in an order in which each sees the old values; locals only where there is no such order."""
    memo: dict[str, frozenset[Cell]] = {}
    left = [(a, reads(a.expr, definitions, memo)) for a in assignments if not _stays(a)]
    made: list[Statement] = []
    late: list[Statement] = []
    while left:
        needed = [any(a.cell in r for j, (_, r) in enumerate(left) if j != i) for i, (a, _) in enumerate(left)]
        free = needed.index(False) if False in needed else None
        a, _ = left.pop(free or 0)
        made.append(a.note)
        if free is not None:
            made += chosen(a.expr, a.store, value)
        else:
            computed = value(a.expr)
            made.append(Let(a.early, computed.type, computed))
            late += a.store(Local(a.early, computed.type))
    return merged((*made, *late))


def _stays(a: Assignment) -> bool:
    return isinstance(a.expr, Ref) and a.expr.kind is RefKind.STATE and (a.expr.name, a.expr.index) == a.cell


def chosen(expr: Node, store: Callable[[Value], Statements], value: Callable[[Node], Value]) -> Statements:
    """A choice at the root of an expression as if statements that store the leaves."""
    if isinstance(expr, Op) and expr.op == "select" and expr.type.kind is not Kind.BOOL:
        asked, yes, no = expr.args
        return (If(value(asked), chosen(yes, store, value), chosen(no, store, value)),)
    return store(value(expr))


def merged(body: Statements) -> Statements:
    """Neighbouring choices on the same condition become one; chains of == on one subject become a switch."""
    made: list[Statement] = []
    pending: list[Statement] = []
    for statement in body:
        if isinstance(statement, Note):
            pending.append(statement)
            continue
        last = made[-1] if made else None
        if (
            isinstance(statement, If)
            and isinstance(last, If)
            and last.condition == statement.condition
            and _outside(last, statement)
        ):
            notes = tuple(pending)
            made[-1] = If(
                last.condition,
                (*last.then, *_noted(notes, statement.then)),
                (*last.orelse, *_noted(notes, statement.orelse)),
            )
        else:
            made += _hung(statement, pending)
        pending = []
    return tuple(_switched(_inner(s)) for s in (*made, *pending))


def _hung(statement: Statement, notes: list[Statement]) -> list[Statement]:
    """A choice takes its notes inside, so that a later one can join it."""
    if isinstance(statement, If) and notes:
        return [If(statement.condition, _noted(tuple(notes), statement.then), _noted(tuple(notes), statement.orelse))]
    return [*notes, statement]


def _noted(notes: Statements, body: Statements) -> Statements:
    return (*notes, *body) if body else ()


def _outside(last: If, statement: If) -> bool:
    """Does the first choice leave the condition of the second alone?"""
    stored = {(s.target.name, s.target.index) for s in statements((last,)) if isinstance(s, Store)}
    asked = {(v.name, v.index) for v in values(statement.condition) if isinstance(v, Field)}
    return not stored & asked


def _inner(statement: Statement) -> Statement:
    if isinstance(statement, If):
        return If(statement.condition, merged(statement.then), merged(statement.orelse))
    return statement


def _switched(statement: Statement) -> Statement:
    """if (x == a) … else if (x == b) … else … -> switch (x)"""
    if not isinstance(statement, If):
        return statement
    cases: list[tuple[tuple[Constant, ...], Statements]] = []
    here: Statements = (statement,)
    subject: Value | None = None
    while True:
        inner = [s for s in here if not isinstance(s, Note)]
        only = inner[0] if len(inner) == 1 else None
        label = _label(only, subject)
        if label is None or not isinstance(only, If):
            break
        subject = only.condition.args[0]  # type: ignore[union-attr]
        notes = tuple(s for s in here if isinstance(s, Note)) if cases else ()
        cases.append(((label,), _noted(notes, only.then)))
        here = only.orelse
    labels = [c[0][0] for c in cases]
    if subject is None or len(cases) < 2 or len(set(labels)) != len(labels):
        return statement
    return Switch(subject, tuple(cases), here)


def _label(statement: Statement | None, subject: Value | None) -> Constant | None:
    if isinstance(statement, Switch):
        return None
    if isinstance(statement, If) and isinstance(statement.condition, Apply) and statement.condition.op == "eq":
        left, right = statement.condition.args
        if isinstance(right, Constant) and not isinstance(left, Apply) and subject in (None, left):
            return right
    return None


def pruned(body: Statements) -> Statements:
    """The body without choices that do nothing, whatever is chosen."""
    kept: list[Statement] = []
    for statement in body:
        match statement:
            case If():
                statement = If(statement.condition, pruned(statement.then), pruned(statement.orelse))
            case Switch():
                cases = tuple((labels, pruned(block)) for labels, block in statement.cases)
                statement = replace(statement, cases=cases, default=pruned(statement.default))
        idle = isinstance(statement, If | Switch) and not any(b for b in blocks(statement))
        if not idle:
            kept.append(statement)
    return tuple(kept) if any(not isinstance(s, Note) for s in kept) else ()


@dataclass(frozen=True, slots=True)
class Lets:
    """The definitions as lets, in their order."""

    lets: tuple[tuple[Note, Let], ...]

    def needed(self, body: Statements) -> frozenset[str]:
        """The definitions that a body uses, through others."""
        return self._closure(
            {v.name for s in statements(body) for o in own(s) for v in values(o) if isinstance(v, Local)}
        )

    def _closure(self, names: set[str]) -> frozenset[str]:
        for _, let in reversed(self.lets):
            if let.name in names:
                names |= {v.name for v in values(let.value) if isinstance(v, Local)}
        return frozenset(names & {let.name for _, let in self.lets})

    def placed(self, body: Statements) -> Statements:
        """The body with each definition computed once, in the innermost block that holds all its uses."""
        direct = {v.name for s in body for o in own(s) for v in values(o) if isinstance(v, Local)}
        inner = [self.needed(block) for s in body for block in blocks(s) if block]
        shared = {
            n
            for i, names in enumerate(inner)
            for n in names
            if any(n in other for j, other in enumerate(inner) if j != i)
        }
        here = self._closure(direct | shared)
        rest = Lets(tuple((note, let) for note, let in self.lets if let.name not in here))
        made: list[Statement] = []
        for note, let in self.lets:
            if let.name in here:
                made += (note, let)
        return (*made, *(rest._into(s) for s in body))

    def _into(self, statement: Statement) -> Statement:
        match statement:
            case If():
                return If(statement.condition, self.placed(statement.then), self.placed(statement.orelse))
            case Switch():
                cases = tuple((labels, self.placed(block)) for labels, block in statement.cases)
                return replace(statement, cases=cases, default=self.placed(statement.default))
            case _:
                return statement
