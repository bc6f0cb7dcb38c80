"""Jumps that can never happen, conditions that always hold, logic values never entered or never left.

Conditions are taken as propositions over the values of the logic variables and their other atoms (comparisons,
booleans), each atom free: what comes out as constant here is constant whatever the numbers are. Contradictions
between numbers are a matter of proofs and not looked for here.
"""

from __future__ import annotations

import itertools
from collections.abc import Iterator
from dataclasses import dataclass

from hybgen.checks.report import error, warning
from hybgen.checks.view import View, logic_states, value_name, view
from hybgen.diag.finding import Finding
from hybgen.expr.core import COMPARISONS, OPPOSITE, Const, Kind, Node, Op, Ref, truth
from hybgen.expr.fold import fold
from hybgen.law.members import logic_ref, possible, values_of
from hybgen.law.model import Jump, Law, State

MOST_CASES = 4096
"""Cases looked at for one condition; and for a law:"""
MOST_IN_ALL = 10000


@dataclass(slots=True)
class Budget:
    """How many cases may still be looked at; a condition beyond it counts as undecided."""

    left: int = MOST_IN_ALL


def questions(law: Law) -> list[Finding]:
    """All findings on reachability that constants decide."""
    seen, budget = view(law), Budget()
    return [*_conditions(law, seen, budget), *_values(law, seen, budget)]


def _conditions(law: Law, seen: View, budget: Budget) -> Iterator[Finding]:
    states = logic_states(law)
    for jump in law.jumps:
        answers = outcomes(seen.of(jump.condition), states, budget)
        if answers == {False}:
            yield error(
                "HG301",
                "reach",
                jump.span,
                jump.name,
                f"jump '{jump.name}' can never happen: its condition is always false",
                "the parts of the condition contradict each other",
            )
        elif answers == {True}:
            yield error(
                "HG302",
                "reach",
                jump.span,
                jump.name,
                f"the condition of jump '{jump.name}' always holds",
                "compare each alternative with the variable: x == a or x == b",
            )
    if law.flow.condition is not None and outcomes(seen.of(law.flow.condition), states, budget) == {False}:
        yield error("HG301", "reach", law.flow.span, "flow", "the flow condition is always false: the law never flows")


def outcomes(condition: Node, states: list[State], budget: Budget) -> set[bool]:
    """The truth values that a condition can take as a proposition; both where there are too many cases."""
    axes: list[list[dict[Node, Const]]] = []
    cases = 1
    for state in states:
        if _asks(condition, state):
            axes.append([{logic_ref(state): v} for v in values_of(state)])
            cases *= len(axes[-1])
    for atom in dict.fromkeys(_atoms(condition, states)):
        axes.append([_decided(atom, False), _decided(atom, True)])
        cases *= 2
    if cases > min(MOST_CASES, budget.left):
        return {False, True}
    found: set[bool] = set()
    for case in itertools.product(*axes):
        budget.left -= 1
        answer = fold(condition, {k: v for part in case for k, v in part.items()})
        found |= {bool(answer.value)} if isinstance(answer, Const) else {False, True}
        if len(found) == 2:
            break
    return found


def _asks(node: Node, state: State) -> bool:
    if isinstance(node, Op):
        return any(_asks(a, state) for a in node.args)
    return node == logic_ref(state)


def _atoms(node: Node, states: list[State]) -> Iterator[Node]:
    """Boolean leaves and comparisons that logic values alone don't decide; opposites count once."""
    if isinstance(node, Op) and node.op in COMPARISONS and node.args[0].type.kind is not Kind.BOOL:
        if not _logical(node, states):
            yield node if node.op in ("ge", "gt", "eq") else Op(OPPOSITE[node.op], node.args, node.type)
    elif isinstance(node, Op) and (node.type.kind is Kind.BOOL):
        for arg in node.args:
            yield from _atoms(arg, states)
    elif isinstance(node, Ref) and node.type.kind is Kind.BOOL:
        yield node


def _logical(node: Node, states: list[State]) -> bool:
    if isinstance(node, Op):
        return all(_logical(a, states) for a in node.args)
    return isinstance(node, Const) or any(node == logic_ref(s) for s in states)


def _decided(atom: Node, value: bool) -> dict[Node, Const]:
    known: dict[Node, Const] = {atom: truth(value)}
    if isinstance(atom, Op) and atom.op in OPPOSITE:
        known[Op(OPPOSITE[atom.op], atom.args, atom.type)] = truth(not value)
    return known


@dataclass(frozen=True, slots=True)
class _Change:
    """A jump that sets a logic variable: its condition and the values it may set (None: any)."""

    jump: Jump
    condition: Node
    values: list[Const] | None


def _values(law: Law, seen: View, budget: Budget) -> Iterator[Finding]:
    states = logic_states(law)
    for state in states:
        changes = [
            _Change(j, seen.of(j.condition), possible(seen.of(a.expr), states))
            for j in law.jumps
            for a in j.assigns
            if a.state == state.name
        ]
        for value in values_of(state):
            name = value_name(state, value)
            entered = value.value == state.initial[0] or any(c.values is None or value in c.values for c in changes)
            if not entered:
                yield warning(
                    "HG303",
                    "reach",
                    state.span,
                    state.name,
                    f"'{name}' of {state.name} is never entered: no jump sets it",
                    "set it in a jump's map, or take it out",
                )
            elif len(state.values) > 1 and not any(_leaves(c, state, value, states, budget) for c in changes):
                yield warning(
                    "HG304",
                    "reach",
                    state.span,
                    state.name,
                    f"'{name}' of {state.name} is never left",
                    "add a jump out of it, if that is not meant to last until restart",
                )


def _leaves(change: _Change, state: State, value: Const, states: list[State], budget: Budget) -> bool:
    """May this jump be taken at this value, and change it?"""
    if change.values is not None and all(v == value for v in change.values):
        return False
    return outcomes(fold(change.condition, {logic_ref(state): value}), states, budget) != {False}
