"""Law -> StepLaw: the only place where continuous time becomes steps and real numbers become a number format."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass, replace
from fractions import Fraction

from hybgen.diag.finding import Findings
from hybgen.expr.core import REAL, Kind, Node, Op, Ref, RefKind, refs
from hybgen.expr.fold import decide
from hybgen.law.model import Assign, Jump, Law, Output, State, StateKind, Value
from hybgen.numbers.bounds import Bounds, Key, Range, exact_range
from hybgen.numbers.format import FIXED32, NUMBERS, Format
from hybgen.numbers.rounding import Domain
from hybgen.step import declare
from hybgen.step.chain import longest
from hybgen.step.fixed import in_fixed_point
from hybgen.step.integrate import integrate
from hybgen.step.margin import Margins
from hybgen.step.model import Definition, Rule, StepAssign, StepJump, StepLaw, StepOutput
from hybgen.step.normal import Normalizer, watched
from hybgen.step.tables import table_range, tables
from hybgen.step.translate import Translator, component, constants_of, timers_of


def build(law: Law, *, step: Fraction | None = None, number: str | None = None) -> StepLaw:
    """One step of the law at its own step and number format, or at others for what-if runs.

    Raises LawError where a constant is beyond the format or the method does not fit.
    """
    fmt = NUMBERS[number or law.number]
    findings = Findings()
    translator = Translator(law, fmt, step or law.step, findings, constants_of(law), timers_of(law), _local_names(law))
    step_law = _Builder(law, fmt, translator, findings, Margins.of(law, translator)).built()
    findings.stop()
    return replace(step_law, notes=findings.sorted())


def conditions(law: Law, *, step: Fraction, number: str) -> list[Node]:
    """The jump conditions in a number format, term by term as the author wrote them: without margins."""
    names = _local_names(law)
    translator = Translator(law, NUMBERS[number], step, Findings(), constants_of(law), timers_of(law), names)
    return [translator.translate(j.condition) for j in law.jumps]


def domain(law: Law, *, step: Fraction, number: str) -> tuple[Translator, Domain]:
    """What the leaves of the law's expressions can be, for questions about intervals; the translator folds its constants."""
    names = _local_names(law)
    translator = Translator(law, NUMBERS[number], step, Findings(), constants_of(law), timers_of(law), names)
    return translator, Margins.of(law, translator).domain


def _local_names(law: Law) -> dict[tuple[str, int | None], str]:
    taken: set[str] = {t.name for t in law.terms}
    names: dict[tuple[str, int | None], str] = {}
    for term in law.terms:
        if term.size is None:
            names[(term.name, None)] = term.name
            continue
        for i in range(term.size):
            name = component(term.name, i)
            while name in taken:
                name += "_"
            taken.add(name)
            names[(term.name, i)] = name
    return names


@dataclass(frozen=True, slots=True)
class _Builder:
    """The parts of a step law, each made once."""

    law: Law
    format: Format
    translator: Translator
    findings: Findings
    margins: Margins

    def built(self) -> StepLaw:
        law = self.law
        flowing = integrate(law, self.translator)
        leaves = self._leaves()
        bounds = Bounds(self.format, leaves, self._table_ranges())
        definitions, opposites = self._normalized([*self._terms(), *flowing.definitions], bounds, leaves)
        normalizer = Normalizer(bounds, opposites)
        jumps = self._jumps(normalizer, bounds)
        condition = self._condition(normalizer)
        outputs = tuple(o for output in law.outputs for o in self._output(output, bounds))
        flow = tuple(self._assign(a, e, bounds) for a, e in flowing.updates)
        sample = tuple(self._assign(a, self._value(a), bounds) for a in law.sample)
        most = law.jumps_per_step or longest(jumps, definitions) or max(1, len(jumps))
        made = StepLaw(
            law,
            self.format,
            self.translator.step,
            flowing.method,
            most,
            declare.inputs(law, self.translator),
            declare.parameters(law, self.translator),
            self._rules(normalizer),
            declare.states(law, self.translator),
            tables(law, self.translator),
            tuple(definitions),
            _alarms([*(j.condition for j in jumps), *([condition] if condition else [])]),
            jumps,
            condition,
            outputs,
            flow,
            sample,
            bounds=tuple(dict.fromkeys(self.margins.records)),
        )
        made = _flagged(_pruned(made))
        if self.format is FIXED32:
            self.findings.stop()
            made = _pruned(in_fixed_point(made, bounds, self.findings))
        return made

    def _terms(self) -> list[Definition]:
        local = self.translator.local
        return [
            Definition(local[(t.name, i if t.size is not None else None)], self.translator.translate(e), t.span, t.text)
            for t in self.law.terms
            for i, e in enumerate(t.exprs)
        ]

    def _condition(self, normalizer: Normalizer) -> Node | None:
        condition = self.law.flow.condition
        return None if condition is None else normalizer.normal(self.translator.translate(condition))

    def _leaves(self) -> dict[Key, Range]:
        leaves: dict[Key, Range] = {}
        for u in self.law.inputs:
            if u.low is not None and u.high is not None:
                ends = [Fraction(u.low), Fraction(u.high), Fraction(u.initial), Fraction(u.substitute or u.low)]
                leaves[(RefKind.INPUT, u.name)] = exact_range(min(ends), max(ends))
        for p in self.law.tunables:
            if p.low is not None and p.high is not None:
                leaves[(RefKind.PARAMETER, p.name)] = exact_range(p.low, p.high)
        for x in self.law.states:
            if found := declare.state_range(x, self.translator):
                leaves[(RefKind.STATE, x.name)] = exact_range(*found)
        return leaves

    def _table_ranges(self) -> dict[str, Range]:
        return {t.name: table_range(t) for t in self.law.tables}

    def _normalized(
        self, definitions: Iterable[Definition], bounds: Bounds, leaves: dict[Key, Range]
    ) -> tuple[list[Definition], dict[str, str]]:
        """Definitions with their ranges noted; boolean ones in normal form, with an opposite of their own where
        a number that is not finite must make neither true."""
        made: list[Definition] = []
        opposites: dict[str, str] = {}
        names: set[str] = set()
        for d in definitions:
            if d.expr.type.kind is not Kind.BOOL:
                leaves[(RefKind.LOCAL, d.name)] = bounds.of(d.expr)
                made.append(d)
                names.add(d.name)
                continue
            normalizer = Normalizer(bounds, opposites)
            expr = normalizer.normal(d.expr)
            made.append(replace(d, expr=expr))
            if watched(expr) or any(r.name in opposites for r in refs(expr, RefKind.LOCAL)):
                opposites[d.name] = f"not {d.name}"
                made.append(Definition(f"not {d.name}", normalizer.normal(d.expr, False), d.span, f"not ({d.text})"))
        return made, opposites

    def _jumps(self, normalizer: Normalizer, bounds: Bounds) -> tuple[StepJump, ...]:
        return tuple(self._jump(i + 1, j, normalizer, bounds) for i, j in enumerate(self.law.jumps))

    def _jump(self, number: int, jump: Jump, normalizer: Normalizer, bounds: Bounds) -> StepJump:
        condition = decide(normalizer.normal(self.margins.condition(jump.name, jump.condition)))
        assigns = tuple(self._assign(a, self._value(a), bounds) for a in jump.assigns)
        return StepJump(jump.name, number, condition, assigns, False, jump.span, jump.text)

    def _value(self, assign: Assign) -> Node:
        state = self.law.state(assign.state)
        if state.kind is StateKind.TIMER:
            return self.translator.in_steps(assign.expr, state.unit)
        return self.translator.translate(assign.expr)

    def _assign(self, assign: Assign, expr: Node, bounds: Bounds) -> StepAssign:
        state = self.law.state(assign.state)
        guarded = expr.type == REAL and not bounds.finite(expr)
        return StepAssign(
            assign.state, assign.index, expr, guarded, self._clamp(state, expr, bounds), assign.span, assign.text
        )

    def _clamp(self, state: State, expr: Node, bounds: Bounds) -> tuple[Value, Value] | None:
        match state.kind:
            case StateKind.REAL if state.limit and state.low is not None and state.high is not None:
                ends: tuple[Value, Value] = self.translator.rounded(state.low), self.translator.rounded(state.high)
            case StateKind.TIMER | StateKind.COUNT:
                ends = 0, declare.maximum(state, self.translator)
            case _:
                return None
        return None if _stays(expr, ends, state, bounds) else ends

    def _output(self, output: Output, bounds: Bounds) -> Iterable[StepOutput]:
        ends: tuple[Value, Value] | None = None
        fallback: Value = Fraction(0)
        if output.low is not None and output.high is not None:
            low, high = self.translator.rounded(output.low), self.translator.rounded(output.high)
            fallback = min(max(Fraction(0), low), high)
            ends = (low, high) if output.limit else None
            if output.type.kind is Kind.INT and ends:
                ends = (int(output.low), int(output.high))
        for i, node in enumerate(output.exprs):
            expr = self.translator.translate(node)
            guarded = expr.type == REAL and not bounds.finite(expr)
            yield StepOutput(
                output.name,
                i if output.size is not None else None,
                expr,
                guarded,
                fallback if output.type == REAL else 0,
                ends,
                output.span,
                output.text,
            )

    def _rules(self, normalizer: Normalizer) -> tuple[Rule, ...]:
        rules = list(declare.range_rules(self.law, self.translator))
        for assumption in self.law.assume:
            used = list(refs(assumption.condition))
            if any(r.kind is RefKind.PARAMETER for r in used) and all(r.kind is RefKind.PARAMETER for r in used):
                condition = decide(normalizer.normal(self.translator.translate(assumption.condition)))
                if any(refs(condition)):
                    rules.append(Rule(condition, assumption.text, assumption.span))
        return tuple(rules)


def _stays(expr: Node, ends: tuple[Value, Value], state: State, bounds: Bounds) -> bool:
    """Is the value inside the ends without clamping?"""
    if isinstance(expr, Ref) and expr.kind is RefKind.STATE and expr.name == state.name:
        return True
    if isinstance(expr, Op) and expr.op == "select":
        return all(_stays(a, ends, state, bounds) for a in expr.args[1:])
    if not isinstance(expr, Ref | Op):
        return bool(ends[0] <= expr.value <= ends[1])
    return False


def _alarms(conditions: list[Node]) -> tuple[Node, ...]:
    """The expressions whose finiteness conditions ask, each once."""
    return tuple(dict.fromkeys(n for c in conditions for n in watched(c)))


def _pruned(made: StepLaw) -> StepLaw:
    """Without the definitions that nothing uses."""
    needed = {r.name for root in made.roots() for r in refs(root, RefKind.LOCAL)}
    kept: list[Definition] = []
    for d in reversed(made.definitions):
        if d.name in needed:
            kept.append(d)
            needed |= {r.name for r in refs(d.expr, RefKind.LOCAL)}
    return replace(made, definitions=tuple(reversed(kept)))


def _flagged(made: StepLaw) -> StepLaw:
    """Jumps that an expression asks about are flagged."""
    asked = {r.name for tree in made.trees() for r in refs(tree, RefKind.JUMPED)}
    return replace(made, jumps=tuple(replace(j, flagged=j.name in asked) for j in made.jumps))


__all__ = ["build"]
