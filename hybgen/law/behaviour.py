"""Terms, flow, sample, jumps, outputs: nodes -> typed trees."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace
from fractions import Fraction

from hybgen.diag.span import Span
from hybgen.diag.suggest import nearest
from hybgen.expr.core import BOOL, INT, REAL, Kind, RefKind, Type
from hybgen.expr.core import Node as Tree
from hybgen.expr.extent import children
from hybgen.expr.scope import Scope, Symbol
from hybgen.expr.tree import Expr, Name
from hybgen.expr.typed import Typed, Want, typed
from hybgen.expr.units import ONE, SECOND, Unit
from hybgen.law.context import Context
from hybgen.law.declarations import difference_unit
from hybgen.law.document import Mapping, Node, Scalar, Sequence
from hybgen.law.members import possible
from hybgen.law.model import Assign, Flow, Jump, Output, State, StateKind, Term
from hybgen.law.naming import check_name

_ALL = frozenset(RefKind) - {RefKind.LOCAL, RefKind.OUTPUT}
_BEFORE = _ALL - {RefKind.JUMPED}


@dataclass(frozen=True, slots=True)
class Behaviour:
    """Reads the parts of a law that have expressions."""

    context: Context
    scope: Scope
    states: tuple[State, ...]

    def typed(self, node: Node, want: Want | None, allow: frozenset[RefKind], place: str) -> tuple[Typed, str] | None:
        """A checked expression and its text."""
        expr = self.context.expression(node)
        if expr is None:
            return None
        found = typed(expr, replace(self.scope, allow=allow, place=place), want, self.context.findings)
        if found is None:
            return None
        self.context.spend(found.nodes, node.span)
        return found, self.context.written(node, expr)

    def condition(self, node: Node, place: str, allow: frozenset[RefKind] = _BEFORE) -> tuple[Tree, str] | None:
        """A checked condition and its text."""
        found = self.typed(node, Want(BOOL, what="a condition"), allow, place)
        return None if found is None else (found[0].nodes[0], found[1])

    def state(self, key: Scalar) -> State | None:
        """The state a key names; a finding if there is none."""
        found = next((s for s in self.states if s.name == key.text), None)
        if found is None:
            close = nearest(key.text, [s.name for s in self.states])
            self.context.error(
                "HG201", key.span, f"'{key.text[:40]}' is no state", f"did you mean '{close}'?" if close else None
            )
        return found

    def assigns(self, key: Scalar, node: Node, allow: frozenset[RefKind], place: str) -> Iterator[Assign]:
        """The new values of a state, one for each component."""
        state = self.state(key)
        if state is None:
            return
        want = Want(
            state.type,
            () if state.size is None else (state.size,),
            state.unit,
            f"state '{state.name}'",
            timer=state.kind is StateKind.TIMER,
        )
        found = self.typed(node, want, allow, place)
        if found is None:
            return
        self._member(state, found[0], node)
        for i, tree in enumerate(found[0].nodes):
            yield Assign(state.name, i if state.size is not None else None, tree, node.span, found[1])

    def _member(self, state: State, found: Typed, node: Node) -> None:
        """Is the new value of an integer logic variable one of its values?"""
        if state.kind is not StateKind.LOGIC or state.type != INT:
            return
        logic = [s for s in self.states if s.kind is StateKind.LOGIC]
        values = possible(found.nodes[0], logic, spend=lambda n: self.context.work.spend(n // 4, node.span))
        allowed = set(state.values)
        if values is None or any(v.value not in allowed for v in values):
            words = ", ".join(map(str, state.values))
            bad = "" if values is None else f": it may become {next(v.value for v in values if v.value not in allowed)}"
            self.context.error(
                "HG138",
                node.span,
                f"'{state.name}' has to stay one of {words}{bad}",
                "use constants, choose(), or an expression of logic variables only",
            )

    def flow(self, group: Mapping, span: Span) -> Flow:
        """The flow condition, the rates and the method."""
        rates: list[Assign] = []
        inner = group.get("map")
        for key, node in inner.entries if isinstance(inner, Mapping) else ():
            rates += self._rates(key, node)
        method = group.get("method")
        word = method.text if isinstance(method, Scalar) else "auto"
        condition, where = None, group.get("set")
        if where is not None:
            condition = self.condition(where, "in the flow condition")
            span = where.span
        text = condition[1] if condition else ""
        return Flow(condition[0] if condition else None, text, span, tuple(rates), word)

    def _rates(self, key: Scalar, node: Node) -> Iterator[Assign]:
        state = self.state(key)
        if state is None:
            return
        if state.kind is not StateKind.REAL:
            hint = "it counts time by itself" if state.kind is StateKind.TIMER else "only real states flow"
            self.context.error("HG135", key.span, f"'{state.name}' has no rate: {hint}", "take it out of flow: map:")
            return
        want = Want(
            REAL,
            () if state.size is None else (state.size,),
            difference_unit(state.unit) / SECOND,
            f"the rate of '{state.name}'",
        )
        found = self.typed(node, want, _ALL, "in a rate")
        if found is not None:
            for i, tree in enumerate(found[0].nodes):
                yield Assign(state.name, i if state.size is not None else None, tree, node.span, found[1])

    def sample(self, group: Mapping, flow: Flow) -> tuple[Assign, ...]:
        """The states that are taken at the end of each step."""
        made: list[Assign] = []
        flowing = {r.state for r in flow.rates}
        for key, node in group.entries:
            if key.text in flowing:
                self.context.error(
                    "HG135", key.span, f"'{key.text}' is sampled and flows: it can't do both", "keep one of the two"
                )
            elif any(s.name == key.text and s.kind is StateKind.TIMER for s in self.states):
                self.context.error(
                    "HG135", key.span, f"'{key.text}' is a timer: it counts by itself and can't be sampled"
                )
            else:
                made += self.assigns(key, node, _ALL, "in sample")
        return tuple(made)

    def jump(self, key: Scalar, group: Mapping) -> Jump | None:
        """One jump."""
        check_name(key, "a jump", self.context.findings, word=True)
        where = group.get("set")
        if where is None:
            return None
        condition = self.condition(where, "in a jump condition")
        assigns: list[Assign] = []
        inner = group.get("map")
        for name, node in inner.entries if isinstance(inner, Mapping) else ():
            assigns += self.assigns(name, node, _BEFORE, "in a jump map")
        keep = self._keep(group, {a.state for a in assigns})
        if condition is None:
            return None
        return Jump(
            key.text,
            condition[0],
            condition[1],
            where.span,
            key.span,
            tuple(assigns),
            keep,
            self.context.text(group, "note"),
        )

    def _keep(self, group: Mapping, assigned: set[str]) -> tuple[str, ...]:
        node = group.get("keep")
        names: list[str] = []
        for word in node.items if isinstance(node, Sequence) else ():
            assert isinstance(word, Scalar)
            if self.state(word) is None:
                continue
            if word.text in assigned or word.text in names:
                other = "set by map and kept" if word.text in assigned else "kept twice"
                self.context.error("HG136", word.span, f"'{word.text}' is {other}", "keep one of the two")
            names.append(word.text)
        return tuple(names)

    def output(self, key: Scalar, node: Node) -> Output | None:
        """One output."""
        check_name(key, "an output", self.context.findings)
        context = self.context
        group = node if isinstance(node, Mapping) else Mapping((), node.span)
        value = node.get("value") if isinstance(node, Mapping) else node
        if value is None:
            return None
        found = self._output_value(key, group, value)
        if found is None:
            return None
        typed_value, text = found
        unit = typed_value.unit if typed_value.type == REAL else ONE
        ends, limit = self._output_range(key, group, typed_value.type, unit)
        low, high = ends if ends is not None else (None, None)
        size = typed_value.shape[0] if typed_value.shape else None
        return Output(
            key.text,
            typed_value.type,
            size,
            unit,
            typed_value.nodes,
            low,
            high,
            limit,
            context.text(group, "about"),
            value.span,
            text,
        )

    def _output_range(
        self, key: Scalar, group: Mapping, type_: Type, unit: Unit
    ) -> tuple[tuple[Fraction, Fraction] | None, bool]:
        """The declared range of an output, and whether it is limited to it."""
        context, ends = self.context, None
        if (node := group.get("range")) is not None:
            if type_ in (REAL, INT):
                ends = context.pair(node, unit)
            else:
                message = f"output '{key.text}' is no number: it has no range"
                context.error("HG124", node.span, message, "take 'range' out")
        limit = context.flag(group, "limit")
        if limit and group.get("range") is None and (word := group.key("limit")) is not None:
            message = f"output '{key.text}' needs a range to be limited to"
            context.error("HG132", word.span, message, "such as range: [0, 1]")
        return ends, limit

    def _output_value(self, key: Scalar, group: Mapping, value: Node) -> tuple[Typed, str] | None:
        node = group.get("type")
        word = node.text if isinstance(node, Scalar) else ""
        what = f"output '{key.text}'"
        if word in ("bool", "integer"):
            return self.typed(value, Want(BOOL if word == "bool" else INT, what=what), _ALL, "in an output")
        found = self.typed(value, None, _ALL, "in an output")
        if (
            found is None
            or found[0].type.kind in (Kind.BOOL, Kind.ENUM)
            or (found[0].type == INT and group.get("unit") is None and word == "")
        ):
            return self._vector(key, value, found)
        declared = group.get("unit")
        unit = self.context.unit(group) if declared is not None else found[0].unit if not found[0].zero else ONE
        fitted = self.typed(value, Want(REAL, found[0].shape, unit, what), _ALL, "in an output")
        return self._vector(key, value, fitted)

    def _vector(self, key: Scalar, value: Node, found: tuple[Typed, str] | None) -> tuple[Typed, str] | None:
        if found is not None and len(found[0].shape) > 1:
            self.context.error(
                "HG208", value.span, f"output '{key.text}' can't be a matrix", "give its rows one by one"
            )
            return None
        return found


@dataclass(frozen=True, slots=True)
class Draft:
    """A term before it is typed."""

    key: Scalar
    value: Node
    expr: Expr
    unit: Unit | None
    about: str


def read_terms(
    context: Context, scope: Scope, states: tuple[State, ...], group: Mapping
) -> tuple[Scope, tuple[Term, ...]]:
    """The terms in an order in which each uses only earlier ones, and the scope with them."""
    drafts = {d.key.text: d for key, node in group.entries if (d := _draft(context, key, node)) is not None}
    terms: list[Term] = []
    for name in _ordered(context, drafts):
        term, symbol = _term(context, scope, states, drafts[name])
        if term is None or symbol is None:
            continue
        terms.append(term)
        scope = replace(scope, symbols={**scope.symbols, name: symbol})
    return scope, tuple(terms)


def _draft(context: Context, key: Scalar, node: Node) -> Draft | None:
    check_name(key, "a term", context.findings)
    group = node if isinstance(node, Mapping) else Mapping((), node.span)
    value = node.get("value") if isinstance(node, Mapping) else node
    if value is None:
        return None
    expr = context.expression(value)
    unit = context.unit(group) if group.get("unit") is not None else None
    return None if expr is None else Draft(key, value, expr, unit, context.text(group, "about"))


def _ordered(context: Context, drafts: dict[str, Draft]) -> list[str]:
    """The names in order of use; a finding for each circle, whose members (and what needs them) are left out."""
    uses = {name: [n for n in names_in(d.expr) if n in drafts] for name, d in drafts.items()}
    order: dict[str, None] = {}
    trail: dict[str, Iterator[str]] = {}
    broken: set[str] = set()
    for first in drafts:
        if first not in order and first not in broken:
            trail[first] = iter(uses[first])
        while trail:
            name = next(reversed(trail))
            used = next((u for u in trail[name] if u not in order), None)
            if used is None:
                order[name] = None
                del trail[name]
            elif used in trail or used in broken:
                if used in trail:
                    _circle(context, drafts, [*list(trail)[list(trail).index(used) :], used])
                broken |= trail.keys()
                trail.clear()
            else:
                trail[used] = iter(uses[used])
    return list(order)


def _circle(context: Context, drafts: dict[str, Draft], names: list[str]) -> None:
    context.error(
        "HG134",
        drafts[names[0]].value.span,
        f"these terms need each other in a circle: {' -> '.join(names)}",
        "put a state in between, or write one of them without the other",
    )


def names_in(expr: Expr) -> list[str]:
    """The names in a surface tree, in order."""
    found: list[str] = []
    todo: list[Expr] = [expr]
    while todo:
        here = todo.pop()
        if isinstance(here, Name):
            found.append(here.name)
        todo += reversed(children(here))
    return list(dict.fromkeys(found))


def _term(context: Context, scope: Scope, states: tuple[State, ...], draft: Draft) -> tuple[Term | None, Symbol | None]:
    inner = replace(scope, allow=_ALL, place="in a term")
    found = typed(draft.expr, inner, None, context.findings)
    if found is not None and draft.unit is not None:
        want = Want(REAL, found.shape, draft.unit, f"term '{draft.key.text}'")
        found = typed(draft.expr, inner, want, context.findings)
    if found is None:
        return None, None
    context.spend(found.nodes, draft.value.span)
    if found.type.kind is Kind.ENUM or len(found.shape) > 1:
        context.error(
            "HG204", draft.value.span, f"term '{draft.key.text}' has to be a number, a vector, or true or false"
        )
        return None, None
    name, size = draft.key.text, found.shape[0] if found.shape else None
    text = context.written(draft.value, draft.expr)
    term = Term(name, found.type, size, found.unit, found.nodes, draft.value.span, text)
    symbol = Symbol(
        RefKind.TERM, name, found.type, found.shape, found.unit, bounds=found.bounds, jumped=found.uses_jumped
    )
    return term, symbol
