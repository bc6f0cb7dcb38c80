"""The structs of a program: members with their comments, enumerations, names."""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction

from hybgen.expr.core import Kind, RefKind, refs
from hybgen.expr.units import Unit
from hybgen.ir.model import Enum, Member
from hybgen.law.model import Input, Output, Parameter, State, StateKind
from hybgen.lower.names import LOCALS, Namer
from hybgen.lower.values import Values
from hybgen.step.model import StepGrid, StepInput, StepLaw, StepParameter, StepTable


@dataclass(frozen=True, slots=True)
class Structs:
    """Every struct's members, and the names behind them."""

    enums: tuple[Enum, ...]
    inputs: tuple[Member, ...]
    parameters: tuple[Member, ...]
    outputs: tuple[Member, ...]
    states: tuple[Member, ...]
    now: tuple[Member, ...]
    values: Values
    macros: tuple[str, ...]
    held: dict[str, str]


def structs(made: StepLaw, namer: Namer) -> Structs:
    """The structs of a law."""
    prefix = made.law.name
    enums, known = _enums(made, namer)
    fields = Namer(namer.taken | _fields(made))
    macros = tuple(fields.unique(f"{prefix}_JUMP_{j.name}".upper()) for j in made.jumps)
    namer.taken.update(macros)
    tables = {t.name: namer.family(f"{prefix}_{t.name}", _arrays(t)) for t in made.tables}
    names, now = _now(made)
    locals_ = _locals(made, namer)
    values = Values(known, names, locals_, tables)
    held = {u.name: f"held_{u.name}" for u in made.inputs if u.held}
    law = made.law
    states = [Member(x.name, values.type(x.type), x.size, _state_note(law.state(x.name), made)) for x in made.states]
    states += [
        Member(held[u.name], values.type(u.type), u.size, f"last good sample of {u.name}")
        for u in made.inputs
        if u.held
    ]
    return Structs(
        tuple(enums),
        tuple(_member(u, _input_note(law.input(u.name), made), RefKind.INPUT, values, made) for u in made.inputs),
        tuple(
            _member(p, _parameter_note(law.parameter(p.name), made), RefKind.PARAMETER, values, made)
            for p in made.parameters
        ),
        tuple(_member(o, _output_note(o, made), RefKind.OUTPUT, values, made) for o in law.outputs),
        tuple(states),
        now,
        values,
        macros,
        held,
    )


def _arrays(table: StepTable | StepGrid) -> tuple[str, ...]:
    """Endings of the names of a table's arrays."""
    return ("_x", "_y", "_slope") if isinstance(table, StepTable) else ("_x", "_y", "_z", "_per_x", "_per_y")


def _enums(made: StepLaw, namer: Namer) -> tuple[list[Enum], dict[str, tuple[str, tuple[str, ...]]]]:
    """The enumeration types, and for each logic variable its type's name and enumerators."""
    enums: list[Enum] = []
    known: dict[str, tuple[str, tuple[str, ...]]] = {}
    for state in made.states:
        if state.type.kind is Kind.ENUM:
            name = namer.unique(f"{made.law.name}_{state.name}")
            words = tuple(namer.unique(f"{made.law.name}_{state.name}_{v}".upper()) for v in state.values)
            known[state.name] = (name, words)
            enums.append(Enum(name, words, f"values of {state.name}"))
    return enums, known


def _now(made: StepLaw) -> tuple[dict[tuple[RefKind, str], str], tuple[Member, ...]]:
    """What one step knows: the sampled inputs, which of them were good, which jumps were taken (where asked)."""
    namer = Namer({u.name for u in made.inputs})
    names: dict[tuple[RefKind, str], str] = {}
    asked = {r.name for node in made.trees() for r in refs(node, RefKind.VALID)}
    members = [Member(u.name, str(u.type.kind), u.size, "") for u in made.inputs]
    for u in made.inputs:
        if u.name in asked:
            names[(RefKind.VALID, u.name)] = namer.unique(f"{u.name}_valid")
            members.append(Member(names[(RefKind.VALID, u.name)], "bool", None, f"was the sample of {u.name} good?"))
    for jump in made.jumps:
        if jump.flagged:
            names[(RefKind.JUMPED, jump.name)] = namer.unique(f"jumped_{jump.name}")
            members.append(
                Member(names[(RefKind.JUMPED, jump.name)], "bool", None, f"was {jump.name} taken in this step?")
            )
    return names, tuple(members)


def _fields(made: StepLaw) -> set[str]:
    """The members that bear the author's names: a macro of that name would change them."""
    return {row.name for rows in (made.inputs, made.parameters, made.states, made.law.outputs) for row in rows}


def _locals(made: StepLaw, others: Namer) -> dict[str, str]:
    namer = Namer(set(LOCALS) | others.taken)
    return {d.name: namer.unique(d.name.replace(" ", "_")) for d in made.definitions}


def _unit(unit: Unit) -> str:
    return "" if unit.plain else str(unit)


def _range(low: Fraction | None, high: Fraction | None) -> str:
    return "" if low is None or high is None else f"{float(low):.9g} .. {float(high):.9g}"


def _joined(*parts: str) -> str:
    return "; ".join(p for p in parts if p)


def _member(row: StepInput | StepParameter | Output, note: str, kind: RefKind, values: Values, made: StepLaw) -> Member:
    return Member(row.name, values.type(row.type), row.size, note, made.places.get((kind, row.name)))


def _scale(made: StepLaw, kind: RefKind, name: str, unit: Unit) -> str:
    """Fixed point: how many bits stand before and after the point, and what the last one is worth."""
    places = made.places.get((kind, name))
    return "" if places is None else f"Q{31 - places}.{places}, resolution {2.0**-places:.3g} {_unit(unit)}".rstrip()


def _input_note(u: Input, made: StepLaw) -> str:
    return _joined(_unit(u.unit), _range(u.low, u.high), _scale(made, RefKind.INPUT, u.name, u.unit), u.about)


def _output_note(o: Output, made: StepLaw) -> str:
    return _joined(_unit(o.unit), _range(o.low, o.high), _scale(made, RefKind.OUTPUT, o.name, o.unit), o.about)


def _parameter_note(p: Parameter, made: StepLaw) -> str:
    return _joined(_unit(p.unit), _range(p.low, p.high), _scale(made, RefKind.PARAMETER, p.name, p.unit), p.about)


def _state_note(x: State, made: StepLaw) -> str:
    match x.kind:
        case StateKind.TIMER:
            top = next(s.maximum for s in made.states if s.name == x.name)
            return _joined(f"steps of {float(made.step):.9g} s, holds at {top}", x.about)
        case StateKind.COUNT:
            return _joined(f"holds at {x.maximum}", x.about)
        case StateKind.REAL:
            return _joined(_unit(x.unit), _range(x.low, x.high), _scale(made, RefKind.STATE, x.name, x.unit), x.about)
        case _:
            return x.about
