"""A law file -> Law. Structure first, then declarations, then expressions; each stage reports all it finds, then stops."""

from __future__ import annotations

import hashlib
import os
from collections.abc import Callable
from dataclasses import replace
from fractions import Fraction
from pathlib import Path
from typing import Any, TypeVar, assert_never

from hybgen.diag.finding import Findings, LawError
from hybgen.diag.span import Span
from hybgen.expr.core import Kind, RefKind
from hybgen.expr.scope import Lookup, Scope, Symbol
from hybgen.law import shape, structure
from hybgen.law.behaviour import Behaviour, read_terms
from hybgen.law.context import Context
from hybgen.law.declarations import read_input, read_parameter, read_state
from hybgen.law.document import MOST_BYTES, Mapping, Scalar, Sequence, read_document
from hybgen.law.model import Flow, Grid, Input, Law, Output, Parameter, State, StateKind, Table
from hybgen.law.naming import LONGEST, check_law_name, macro_of
from hybgen.law.promises import read_assumptions, read_claim
from hybgen.law.tables import read_table

MOST_NAMES = 1000
_Item = TypeVar("_Item")


class UnreadableFile(LawError):
    """The operating system does not give the file."""


def load(path: str | os.PathLike[str]) -> Law:
    """The law in a file. Raises LawError with all findings, UnreadableFile where the file can't be opened."""
    where = Path(path)
    name = where.name or str(where)
    findings = Findings()
    try:
        with where.open("rb") as file:
            data = file.read(MOST_BYTES + 1)
    except IsADirectoryError:
        findings.error("HG102", Span(name, 1, 1), "this is a folder, not a law file", hint="give the file itself")
        raise UnreadableFile(findings.sorted()) from None
    except (OSError, ValueError) as error:
        reason = getattr(error, "strerror", None) or str(error)
        findings.error("HG101", Span(name, 1, 1), f"this file can't be opened: {reason}", hint="is the path right?")
        raise UnreadableFile(findings.sorted()) from None
    return read(data, name)


def read(data: bytes, name: str) -> Law:
    """The law in a file's bytes; `name` is the file's name for messages. Raises LawError with all findings."""
    document = read_document(data, name)
    findings = Findings()
    structure.check(document, shape.LAW, "a law", findings)
    findings.stop()
    return _Reader(document, Context(findings)).law(name, hashlib.sha256(data).hexdigest())


class _Reader:
    """Reads one document whose structure is right."""

    def __init__(self, document: Mapping, context: Context) -> None:
        self.document = document
        self.context = context

    def group(self, key: str) -> Mapping:
        node = self.document.get(key)
        return node if isinstance(node, Mapping) else Mapping((), self.document.span)

    def each(self, key: str, read_one: Callable[[Scalar, Any], _Item | None]) -> tuple[_Item, ...]:
        found = [read_one(k, v) for k, v in self.group(key).entries]
        return tuple(f for f in found if f is not None)

    def word(self, key: str, default: str) -> str:
        node = self.document.get(key)
        return node.text if isinstance(node, Scalar) else default

    def law(self, file: str, digest: str) -> Law:
        self.header()
        self.unique_names()
        law = self.declared(file, digest)
        self.context.findings.stop()
        return self.behaving(law)

    def declared(self, file: str, digest: str) -> Law:
        """The law with its declarations; it does nothing yet."""
        context, document = self.context, self.document
        return Law(
            name=self.word("law", ""),
            about=context.text(document, "about"),
            step=context.time(document.get("step"), "the step") or Fraction(1),
            number=self.word("number", "float32"),
            thresholds=self.word("thresholds", "safe"),
            prefer=self.word("prefer", "jump"),
            jumps_per_step=context.whole(document, "jumps_per_step"),
            inputs=self.each("inputs", lambda k, v: read_input(context, k, v)),
            parameters=self.each("parameters", lambda k, v: read_parameter(context, k, v)),
            states=self.each("states", lambda k, v: read_state(context, k, v)),
            tables=self.each("tables", lambda k, v: read_table(context, k, v)),
            terms=(),
            flow=Flow(None, "", self.law_span(), (), "auto"),
            sample=(),
            jumps=(),
            outputs=(),
            claims=(),
            assume=(),
            file=file,
            digest=digest,
        )

    def behaving(self, law: Law) -> Law:
        """The law with all its expressions."""
        context = self.context
        names = tuple(k.text for k, _ in self.group("jumps").entries)
        tables = {t.name: _lookup(t) for t in law.tables}
        scope = Scope(_symbols(law.inputs, law.parameters, law.states), tables, names)
        scope, terms = read_terms(context, scope, law.states, self.group("terms"))
        context.findings.stop()
        behaviour = Behaviour(context, scope, law.states)
        flow = behaviour.flow(self.group("flow"), self.law_span())
        sample = behaviour.sample(self.group("sample"), flow)
        jumps = self.each("jumps", behaviour.jump)
        outputs = self.each("outputs", behaviour.output)
        wider = replace(scope, symbols={**_output_symbols(outputs), **scope.symbols})
        promising = Behaviour(context, wider, law.states)
        claims = self.each("claims", lambda k, v: read_claim(promising, k, v, outputs, names))
        listed = self.document.get("assume")
        assume = tuple(read_assumptions(behaviour, listed)) if isinstance(listed, Sequence) else ()
        context.findings.stop()
        return replace(
            law, terms=terms, flow=flow, sample=sample, jumps=jumps, outputs=outputs, claims=claims, assume=assume
        )

    def law_span(self) -> Span:
        key = self.document.get("flow") or self.document.get("law")
        return key.span if key is not None else self.document.span

    def header(self) -> None:
        name = self.document.get("law")
        if isinstance(name, Scalar):
            check_law_name(name, self.context.findings)
        if self.word("prefer", "jump") == "flow" and self.group("flow").get("set") is None:
            node = self.document.key("prefer")
            assert node is not None
            self.context.error("HG121", node.span, "prefer: flow needs a flow condition", "give flow: set:")

    def unique_names(self) -> None:
        """Names are shared by inputs, parameters, states, terms, tables and outputs."""
        seen: dict[str, Scalar] = {}
        law = self.document.get("law")
        for section in ("inputs", "parameters", "states", "terms", "tables", "outputs"):
            for key, _ in self.group(section).entries:
                if (first := seen.get(key.text)) is not None:
                    self.context.findings.error(
                        "HG503",
                        key.span,
                        f"the name '{key.text[:LONGEST]}' is used twice",
                        hint="give one of them another name",
                        related=((first.span, "first used here"),),
                    )
                seen.setdefault(key.text, key)
                if isinstance(law, Scalar) and macro_of(law.text, key.text):
                    self.context.findings.error(
                        "HG502",
                        key.span,
                        f"'{key.text}' can't be a name here: the generated header uses it",
                        hint="choose another name",
                    )
        if len(seen) + len(self.group("jumps").entries) > MOST_NAMES:
            self.context.error("HG139", self.document.span, f"a law has at most {MOST_NAMES} names")
            self.context.findings.stop()


def _symbols(
    inputs: tuple[Input, ...], parameters: tuple[Parameter, ...], states: tuple[State, ...]
) -> dict[str, Symbol]:
    made = (
        [_input_symbol(u) for u in inputs]
        + [_parameter_symbol(p) for p in parameters]
        + [_state_symbol(x) for x in states]
    )
    return {s.name: s for s in made}


def _lookup(table: Table | Grid) -> Lookup:
    match table:
        case Table():
            return Lookup(table.name, (table.x_unit,), table.y_unit)
        case Grid():
            return Lookup(table.name, (table.x_unit, table.y_unit), table.z_unit)
        case _:
            assert_never(table)


def _input_symbol(u: Input) -> Symbol:
    bounds = (u.low, u.high) if u.type.kind is Kind.INT and u.low is not None and u.high is not None else None
    return Symbol(RefKind.INPUT, u.name, u.type, () if u.size is None else (u.size,), u.unit, bounds=bounds)


def _parameter_symbol(p: Parameter) -> Symbol:
    bounds = None
    if p.type.kind is Kind.INT:
        value = Fraction(p.value[0])
        bounds = (p.low, p.high) if p.low is not None and p.high is not None else (value, value)
    return Symbol(RefKind.PARAMETER, p.name, p.type, p.shape, p.unit, None if p.tunable else p.value, bounds)


def _output_symbols(outputs: tuple[Output, ...]) -> dict[str, Symbol]:
    return {
        o.name: Symbol(RefKind.OUTPUT, o.name, o.type, () if o.size is None else (o.size,), o.unit) for o in outputs
    }


def _state_symbol(x: State) -> Symbol:
    bounds: tuple[Fraction, Fraction] | None = None
    values: tuple[int, ...] = ()
    if x.kind is StateKind.COUNT and x.maximum is not None:
        bounds = Fraction(0), x.maximum
    elif x.kind is StateKind.LOGIC and x.type.kind is Kind.INT:
        whole = tuple(int(v) for v in x.values)
        bounds, values = (Fraction(min(whole)), Fraction(max(whole))), whole
    return Symbol(
        RefKind.STATE,
        x.name,
        x.type,
        () if x.size is None else (x.size,),
        x.unit,
        bounds=bounds,
        timer=x.kind is StateKind.TIMER,
        values=values,
    )
