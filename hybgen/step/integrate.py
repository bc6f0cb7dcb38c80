"""The flow of one step: integration methods as expressions.

euler, heun, rk4: the usual explicit formulas with the inputs held (E. Hairer, S. P. Norsett, G. Wanner, Solving
Ordinary Differential Equations I, 2nd ed. 1993, ch. II.1; from memory). exact: the matrix exponential, for rates that
are affine in the flowing states with constant coefficients, case by case. States that act on each other are
integrated together; a rate that no flowing state acts on gives the same formula with every method.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace
from fractions import Fraction

from hybgen.expr.core import REAL, Const, Node, Op, Ref, RefKind, op, real, rebuild, refs, walk
from hybgen.expr.fold import fold
from hybgen.law.model import Assign, Law
from hybgen.numbers.expm import discretise
from hybgen.step.affine import ONE_NODE, Affine, Form, Key, NotAffine, Split, decided
from hybgen.step.model import Definition
from hybgen.step.translate import Translator, component

MOST_CASES = 64
MOST_SPLITS = 8
MOST_TOGETHER = 24


@dataclass(frozen=True, slots=True)
class Integrated:
    """New values of the flowing states, the definitions they use, the method in effect."""

    updates: tuple[tuple[Assign, Node], ...]
    definitions: tuple[Definition, ...]
    method: str


@dataclass(frozen=True, slots=True)
class _Flow:
    """What integration needs to know about a flow map."""

    translator: Translator
    h: Fraction
    rates: Mapping[Key, Node]
    assigns: Mapping[Key, Assign]
    terms: Mapping[Key, Node]
    moving: frozenset[Key]
    """Terms that change while flowing."""
    acts: Mapping[Key, frozenset[Key]]
    """For each flowing state: the flowing states that its rate depends on."""


def integrate(law: Law, translator: Translator) -> Integrated:
    """One step of the flow map."""
    flow = _prepared(law, translator)
    news: dict[Key, Node] = {}
    definitions: list[Definition] = []
    methods: set[str] = set()
    for group in _groups(flow):
        method = law.flow.method
        if method in ("auto", "exact"):
            exact = _exact(flow, group)
            if exact is not None:
                news.update(exact)
                methods.add("exact")
                continue
            if method == "exact":
                _refuse_exact(flow, group)
            method = "rk4"
        news.update(_explicit(flow, group, method, definitions, [MOST_SPLITS]))
        methods.add(method)
    updates = tuple((flow.assigns[k], news[k]) for k in flow.rates)
    return Integrated(updates, tuple(definitions), "+".join(sorted(methods)) or "none")


def _prepared(law: Law, translator: Translator) -> _Flow:
    assigns = {(a.state, a.index): a for a in law.flow.rates}
    rates = {k: translator.exact(a.expr) for k, a in assigns.items()}
    terms: dict[Key, Node] = {}
    reads: dict[Key, frozenset[Key]] = {}
    for term in law.terms:
        for i, expr in enumerate(term.exprs):
            key = (term.name, i if term.size is not None else None)
            terms[key] = translator.exact(expr)
            reads[key] = _states_read(terms[key], frozenset(rates), reads)
    moving = frozenset(k for k, states in reads.items() if states)
    acts = {k: _states_read(rate, frozenset(rates), reads) for k, rate in rates.items()}
    return _Flow(translator, translator.step, rates, assigns, terms, moving, acts)


def _states_read(node: Node, flowing: frozenset[Key], terms: Mapping[Key, frozenset[Key]]) -> frozenset[Key]:
    found: set[Key] = set()
    for ref in refs(node, RefKind.STATE, RefKind.TERM):
        key = (ref.name, ref.index)
        if ref.kind is RefKind.TERM:
            found |= terms.get(key, frozenset())
        elif key in flowing:
            found.add(key)
    return frozenset(found)


def _groups(flow: _Flow) -> list[list[Key]]:
    """The flowing states in groups that act on each other in either direction, in the listed order."""
    groups: list[list[Key]] = []
    for key in flow.rates:
        touching = [g for g in groups if any(key in flow.acts[k] or k in flow.acts[key] for k in g)]
        groups = [g for g in groups if g not in touching] + [[k for g in touching for k in g] + [key]]
    order = list(flow.rates)
    return sorted((sorted(g, key=order.index) for g in groups), key=lambda g: order.index(g[0]))


def _refuse_exact(flow: _Flow, group: list[Key]) -> None:
    names = ", ".join(component(*k) for k in group)
    flow.translator.findings.error(
        "HG402",
        flow.assigns[group[0]].span,
        f"the flow of {names} is not affine with constant coefficients: no exact step",
        hint="use method: rk4, or make the coefficients constants (not tunable)",
    )


def _state(key: Key) -> Ref:
    return Ref(RefKind.STATE, key[0], REAL, key[1])


def _by_cases(node: Node, leaf: Callable[[Node], Node]) -> Node:
    if isinstance(node, Op) and node.op == "select":
        asked, yes, no = node.args
        return Op("select", (asked, _by_cases(yes, leaf), _by_cases(no, leaf)), node.type, "", node.span)
    return leaf(node)


def _along(flow: _Flow, key: Key) -> Node:
    """x + h * rate; by cases, each for itself; where the rate is 0 the state stays."""
    state = _state(key)
    h = real(flow.translator.rounded(flow.h))

    def leaf(rate: Node) -> Node:
        if isinstance(rate, Const) and rate.value == 0:
            return state
        return op("add", state, op("mul", h, rate, span=rate.span), span=rate.span)

    return _by_cases(flow.translator.translate(flow.rates[key]), leaf)


def _exact(flow: _Flow, group: list[Key]) -> dict[Key, Node] | None:
    """New values by the matrix exponential, or None where the flow is not affine (or has too many cases)."""
    if len(group) > MOST_TOGETHER:
        return None
    budget = [MOST_CASES]
    try:
        return _cases(flow, group, {}, budget)
    except NotAffine:
        return None
    except OverflowError as beyond:
        flow.translator.findings.error("HG403", flow.assigns[group[0]].span, str(beyond), hint="use a shorter step")
        return {k: _state(k) for k in group}


def _cases(flow: _Flow, group: list[Key], known: Mapping[Node, Const], budget: list[int]) -> dict[Key, Node]:
    affine = Affine(frozenset(flow.rates), flow.terms, flow.moving, known, {})
    try:
        forms = [affine.form(flow.rates[k]) for k in group]
    except Split as split:
        yes = _cases(flow, group, decided(known, split.condition, True), budget)
        no = _cases(flow, group, decided(known, split.condition, False), budget)
        asked = flow.translator.translate(split.condition)
        return {k: yes[k] if yes[k] == no[k] else op("select", asked, yes[k], no[k]) for k in group}
    budget[0] -= 1
    if budget[0] < 0:
        raise NotAffine
    return _solved(flow, group, forms)


def _solved(flow: _Flow, group: list[Key], forms: list[Form]) -> dict[Key, Node]:
    matrix = tuple(tuple(form.states.get(k, Fraction(0)) for k in group) for form in forms)
    phi, gamma = discretise(matrix, flow.h)
    atoms = list(dict.fromkeys(n for form in forms for n in form.atoms))
    news = {}
    for i, key in enumerate(group):
        parts: list[tuple[Fraction, Node]] = [(phi[i][j], _state(k)) for j, k in enumerate(group)]
        for atom in atoms:
            weight = sum((gamma[i][j] * form.atoms.get(atom, Fraction(0)) for j, form in enumerate(forms)), Fraction(0))
            parts.append((weight, atom))
        news[key] = _sum(flow.translator, parts)
    return news


def _sum(translator: Translator, parts: list[tuple[Fraction, Node]]) -> Node:
    """The sum of weight * node from left to right, without the parts of weight 0."""
    total: Node | None = None
    for weight, atom in parts:
        if weight == 0:
            continue
        negative = weight < 0 and total is not None
        size = -weight if negative else weight
        if atom == ONE_NODE:
            piece: Node = real(translator.rounded(size))
        elif size == 1:
            piece = translator.translate(atom)
        else:
            piece = op("mul", real(translator.rounded(size)), translator.translate(atom), span=atom.span)
        total = piece if total is None else op("sub" if negative else "add", total, piece, span=atom.span)
    return total if total is not None else real(0)


@dataclass(frozen=True, slots=True)
class _Stage:
    """One evaluation of the rates of a group: at the state itself (1) or at a state on the way.

    Names of definitions have blanks, so that no name of the author can be the same.
    """

    flow: _Flow
    number: int
    group: list[Key]
    definitions: list[Definition]
    tag: str
    """Tells the names of one case from those of another."""

    def rates(self) -> dict[Key, Node]:
        """Defines the rates at this stage; references to them."""
        found: dict[Key, Node] = {}
        for key in self.group:
            expr = self._placed(self.flow.rates[key])
            name = f"{component(*key)} k{self.number}{self.tag}"
            assign = self.flow.assigns[key]
            text = f"rate of {component(*key)}, evaluation {self.number}"
            self.definitions.append(Definition(name, self.flow.translator.translate(expr), assign.span, text))
            found[key] = Ref(RefKind.LOCAL, name, REAL)
        return found

    def _placed(self, node: Node) -> Node:
        """The expression at this stage's state."""
        if self.number == 1:
            return node

        def change(here: Node) -> Node:
            if isinstance(here, Ref) and (here.name, here.index) in self.group and here.kind is RefKind.STATE:
                return Ref(
                    RefKind.LOCAL,
                    f"{component(here.name, here.index)} at{self.number}{self.tag}",
                    REAL,
                    None,
                    here.span,
                )
            if isinstance(here, Ref) and here.kind is RefKind.TERM and (here.name, here.index) in self.flow.moving:
                return self._term(here)
            return here

        return rebuild(node, change)

    def _term(self, ref: Ref) -> Node:
        name = f"{component(ref.name, ref.index)} at{self.number}{self.tag}"
        if all(d.name != name for d in self.definitions):
            expr = self._placed(self.flow.terms[(ref.name, ref.index)])
            self.definitions.append(
                Definition(
                    name, self.flow.translator.translate(expr), ref.span, f"{ref.name}, evaluation {self.number}"
                )
            )
        return Ref(RefKind.LOCAL, name, ref.type, None, ref.span)

    def move(self, number: int, share: Fraction, rates: Mapping[Key, Node]) -> _Stage:
        """The next stage, at state + share * h * rate."""
        h = real(self.flow.translator.rounded(self.flow.h * share))
        for key in self.group:
            expr = op("add", _state(key), op("mul", h, rates[key]))
            self.definitions.append(
                Definition(
                    f"{component(*key)} at{number}{self.tag}",
                    expr,
                    self.flow.assigns[key].span,
                    f"{component(*key)} for evaluation {number}",
                )
            )
        return _Stage(self.flow, number, self.group, self.definitions, self.tag)


def _explicit(
    flow: _Flow, group: list[Key], method: str, definitions: list[Definition], budget: list[int]
) -> dict[Key, Node]:
    """New values by an explicit formula; where the rates have cases that do not move, each case for itself (a few
    of them: beyond that the choices stay inside the stages)."""
    if method == "euler" or not any(flow.acts[k] for k in group):
        return {k: _along(flow, k) for k in group}
    asked = next((c for k in group if (c := _held_choice(flow, flow.rates[k])) is not None), None)
    if asked is None or budget[0] <= 0:
        return _staged(flow, group, method, definitions)
    budget[0] -= 1
    branches = []
    for value in (True, False):
        known = decided({}, asked, value)
        rates = {k: fold(r, known) if k in group else r for k, r in flow.rates.items()}
        acts = {k: flow.acts[k] if k not in group or _moves(flow, rates[k]) else frozenset[Key]() for k in rates}
        branches.append(_explicit(replace(flow, rates=rates, acts=acts), group, method, definitions, budget))
    yes, no = branches
    condition = flow.translator.translate(asked)
    return {k: yes[k] if yes[k] == no[k] else op("select", condition, yes[k], no[k]) for k in group}


def _moves(flow: _Flow, node: Node) -> bool:
    """Does the expression change while flowing?"""
    return any(
        (r.name, r.index) in (flow.rates if r.kind is RefKind.STATE else flow.moving)
        for r in refs(node, RefKind.STATE, RefKind.TERM)
    )


def _held_choice(flow: _Flow, node: Node) -> Node | None:
    """The condition of a choice in the expression that does not change while flowing."""
    for here in walk(node):
        if isinstance(here, Op) and here.op == "select" and not _moves(flow, here.args[0]):
            return here.args[0]
    return None


def _staged(flow: _Flow, group: list[Key], method: str, definitions: list[Definition]) -> dict[Key, Node]:
    """New values by an explicit Runge-Kutta formula."""
    h = flow.h
    taken = sum(d.name.startswith(f"{component(*group[0])} k1") for d in definitions)
    first = _Stage(flow, 1, group, definitions, f" case{taken + 1}" if taken else "")
    one = first.rates()
    if method == "heun":
        two = first.move(2, Fraction(1), one).rates()
        weight = real(flow.translator.rounded(h / 2))
        return {k: op("add", _state(k), op("mul", weight, op("add", one[k], two[k]))) for k in group}
    assert method == "rk4"
    two = first.move(2, Fraction(1, 2), one).rates()
    three = first.move(3, Fraction(1, 2), two).rates()
    four = first.move(4, Fraction(1), three).rates()
    weight, double = real(flow.translator.rounded(h / 6)), real(2)
    news: dict[Key, Node] = {}
    for k in group:
        total = op("add", one[k], op("mul", double, two[k]))
        total = op("add", op("add", total, op("mul", double, three[k])), four[k])
        news[k] = op("add", _state(k), op("mul", weight, total))
    return news
