"""Which jump is due: conditions in order, by logic variable where that saves work."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass

from hybgen.expr.core import FALSE, TRUE, Const, Kind, Node, Ref, RefKind, walk
from hybgen.expr.fold import decide
from hybgen.ir.model import Answer, Apply, Constant, If, Note, Statement, Switch, Value
from hybgen.lower.values import Values
from hybgen.step.model import StepJump, StepLaw, StepState

Statements = tuple[Statement, ...]
Chain = tuple[tuple[StepJump, Node], ...]
"""Jumps that may be due, with what is left of their conditions."""


@dataclass(frozen=True, slots=True)
class Due:
    """Builds the decision of one law."""

    made: StepLaw
    values: Values
    macros: Sequence[str]
    note: Callable[[StepJump], Note]

    def body(self) -> Statements:
        """Statements that answer with the number of the jump that is due."""
        whole = tuple((j, j.condition) for j in self.made.jumps)
        best, switch = _cost(whole), None
        for state in self.made.states:
            if state.kind == "logic" and len(state.values) > 1:
                cases = self._cases(state, whole)
                cost = 2 + sum(_cost(chain) for _, chain in cases)
                if cost < best or (switch is None and cost <= best):
                    best, switch = cost, (state, cases)
        inner = self._chain(whole) if switch is None else self._switch(*switch)
        if self.made.law.prefer == "flow" and self.made.flow_condition is not None:
            return (If(_not(self.made.flow_condition, self.values), inner),)
        return inner

    def _cases(self, state: StepState, whole: Chain) -> list[tuple[tuple[Const, ...], Chain]]:
        """For each value of a logic variable the jumps that may be due; equal ones together."""
        ref = Ref(RefKind.STATE, state.name, state.type)
        codes = range(len(state.values)) if state.type.kind is Kind.ENUM else [int(v) for v in state.values]
        members = [Const(code, state.type) for code in codes]
        found: list[tuple[tuple[Const, ...], Chain]] = []
        for member in members:
            chain = _reduced((j, decide(c, {ref: member})) for j, c in whole)
            at = next((i for i, (_, other) in enumerate(found) if other == chain), None)
            if at is None:
                found.append(((member,), chain))
            else:
                found[at] = ((*found[at][0], member), chain)
        return found

    def _switch(self, state: StepState, cases: list[tuple[tuple[Const, ...], Chain]]) -> Statements:
        subject = self.values.of(Ref(RefKind.STATE, state.name, state.type))
        live = [(labels, chain) for labels, chain in cases if chain]
        if len(state.values) == 2 and len(live) == 1 and len(live[0][0]) == 1:
            label = self.values.of(live[0][0][0])
            return (If(Apply("eq", (subject, label), "bool"), self._chain(live[0][1])),)
        rows = tuple((tuple(_label(self.values.of(m)) for m in labels), self._chain(chain)) for labels, chain in live)
        return (Switch(subject, rows),) if rows else ()

    def _chain(self, chain: Chain) -> Statements:
        """if … else if …: the first that holds."""
        body: Statements = ()
        for jump, condition in reversed(chain):
            answer: Statements = (self.note(jump), Answer(Constant(self.macros[jump.number - 1], "word")))
            body = answer if condition == TRUE else (If(self.values.of(condition), answer, body),)
        return body


def _reduced(chain: Iterable[tuple[StepJump, Node]]) -> Chain:
    kept: list[tuple[StepJump, Node]] = []
    for jump, condition in chain:
        if condition != FALSE:
            kept.append((jump, condition))
        if condition == TRUE:
            break
    return tuple(kept)


def _cost(chain: Chain) -> int:
    return sum(1 for _, condition in chain for _ in walk(condition))


def _label(value: Value) -> Constant:
    assert isinstance(value, Constant)
    return value


def _not(condition: Node, values: Values) -> Value:
    return Apply("not", (values.of(condition),), "bool")
