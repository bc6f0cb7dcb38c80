"""Memory that a jump leaves as it was although it is read afterwards: set it, or say keep."""

from __future__ import annotations

from collections.abc import Iterator

from hybgen.checks.report import warning
from hybgen.checks.view import View, logic_states, view
from hybgen.diag.finding import Finding, Severity, Verdict
from hybgen.expr.core import FALSE, Const, Kind, Node, Op, Ref, RefKind, refs
from hybgen.expr.fold import facts, fold
from hybgen.law.model import Jump, Law, State, StateKind

MOST_JUMPS = 64
_MODES = (StateKind.LOGIC, StateKind.BOOL)
_MEMORY = (StateKind.TIMER, StateKind.COUNT, StateKind.REAL)


def questions(law: Law) -> list[Finding]:
    """A warning for each jump and each timer, count or integrator it neither sets nor keeps although it is read then."""
    if len(law.jumps) > MOST_JUMPS:
        return [_undecided(law)]
    seen = view(law)
    sampled = {a.state for a in law.sample}
    memory = [s for s in law.states if s.kind in _MEMORY and s.name not in sampled]
    found = []
    for jump in law.jumps:
        if not any(law.state(a.state).kind in _MODES for a in jump.assigns):
            continue
        done = {a.state for a in jump.assigns} | set(jump.keep)
        read = _read_after(law, seen, jump)
        found += [_finding(law, jump, s, read[s.name]) for s in memory if s.name not in done and s.name in read]
    return found


def _undecided(law: Law) -> Finding:
    message = f"'reset' is not decided for a law of more than {MOST_JUMPS} jumps"
    return Finding("HG390", "reset", Verdict.OPEN, Severity.NOTE, law.flow.span, law.name, message)


def _finding(law: Law, jump: Jump, state: State, where: str) -> Finding:
    words = {StateKind.TIMER: "timer", StateKind.COUNT: "count"}.get(state.kind, "state")
    return warning(
        "HG310",
        "reset",
        jump.name_span,
        jump.name,
        f"jump '{jump.name}' neither sets nor keeps the {words} '{state.name}', which {where} reads afterwards",
        f"add {state.name} to the map of {jump.name}, or to its keep",
    )


def _read_after(law: Law, seen: View, jump: Jump) -> dict[str, str]:
    """The states that are read right after a jump, each with who reads it."""
    known = _known_after(law, seen, jump)
    found: dict[str, str] = {}
    for who, node in _readers(law, seen):
        left = fold(node, known)
        if left == FALSE:
            continue
        for ref in refs(left, RefKind.STATE):
            found.setdefault(ref.name, who)
    return found


def _readers(law: Law, seen: View) -> Iterator[tuple[str, Node]]:
    for jump in law.jumps:
        condition = seen.of(jump.condition)
        yield f"the condition of '{jump.name}'", condition
        for assign in jump.assigns:
            yield (
                f"the map of '{jump.name}'",
                Op("select", (condition, seen.of(assign.expr), _nothing(assign.expr)), assign.expr.type),
            )
    for rate in law.flow.rates:
        yield f"the flow of '{rate.state}'", seen.of(rate.expr)
    for assign in law.sample:
        yield f"the sample of '{assign.state}'", seen.of(assign.expr)
    for output in law.outputs:
        for node in output.exprs:
            yield f"output '{output.name}'", seen.of(node)


def _nothing(like: Node) -> Const:
    return Const(0, like.type)


def _known_after(law: Law, seen: View, jump: Jump) -> dict[Node, Const]:
    """Constants known right after the jump: what it sets, and the logic values it was taken at and left alone."""
    touched = {a.state for a in jump.assigns}
    logic = {s.name for s in logic_states(law)} | {s.name for s in law.states if s.kind is StateKind.BOOL}
    known: dict[Node, Const] = {
        k: v
        for k, v in facts(seen.of(jump.condition)).items()
        if isinstance(k, Ref) and k.kind is RefKind.STATE and k.name in logic - touched
    }
    for assign in jump.assigns:
        value = seen.of(assign.expr)
        if isinstance(value, Const) and value.type.kind in (Kind.BOOL, Kind.ENUM, Kind.INT):
            known[Ref(RefKind.STATE, assign.state, value.type, assign.index)] = value
    return known
