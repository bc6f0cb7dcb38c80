"""The generated C, read back: is it the step law, operation by operation, for all inputs at once?

Each function is executed symbolically and each member, status bit and answer compared with the tree that the step law
gives for it. The helper functions and the order of calls in NAME_step are compared with their own definitions.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from fractions import Fraction

from hybgen.expr.core import (
    BOOL,
    FALSE,
    INT,
    REAL,
    TRUE,
    Const,
    Kind,
    Node,
    Ref,
    RefKind,
    Type,
    integer,
    op,
    refs,
    truth,
)
from hybgen.kernels.integers import MOST
from hybgen.reread import frame, tables
from hybgen.reread.execute import Executor, NotUnderstood, Place, State
from hybgen.reread.interned import Interner, Judge, Undecided
from hybgen.reread.source import Source, parse
from hybgen.step.model import StepAssign, StepInput, StepLaw, StepOutput

Clamp = tuple[Fraction | int | bool, Fraction | int | bool] | None


@dataclass(frozen=True, slots=True)
class Mismatch:
    """Something in the C that is not what the step law says: `function` and `what`, such as `take 2: self->idle`."""

    function: str
    what: str
    decided: bool = True
    """False: there were too many cases to tell; nothing wrong was found."""


def reread(made: StepLaw, files: Mapping[str, str]) -> tuple[Mismatch, ...]:
    """What does not prove; empty if everything does. Reads NAME.h and NAME.c from `files`.

    C that the generator does not write proves nothing: it is a mismatch too.
    """
    name = made.law.name
    try:
        return tuple(_Prover(made, parse(files[f"{name}.h"], files[f"{name}.c"])).mismatches())
    except (
        NotUnderstood,
        Undecided,
        LookupError,
        ValueError,
        ArithmeticError,
        AttributeError,
        AssertionError,
    ) as reason:
        return (Mismatch("the file", f"is not understood ({reason})"),)


class _Prover:
    """Compares the functions of one file with one step law."""

    def __init__(self, made: StepLaw, source: Source) -> None:
        self.made = made
        self.source = source
        self.interner = Interner()
        self.types = {x.name: x.type for x in made.states}
        self.types |= {f"held_{u.name}": u.type for u in made.inputs} | {"last_jump": INT, "jumps": INT}
        self.inputs = {u.name: u.type for u in made.inputs}
        self.flags = _now_names(made)
        enums = self._enum_types()
        lookups = tables.names(made, source)
        self.executor = Executor(source, made.law.name, made.format, enums, self.interner, self.start, lookups)
        self.judge = Judge(self.interner, self._domains(), self._ends)
        self.names: dict[str, Node] = {}
        for d in made.definitions:
            self.names[d.name] = self.interner.of(d.expr, self.names)

    def _enum_types(self) -> dict[str, Type]:
        """Enum type names of the C, in order, are the logic variables with names, in order."""
        found = list(dict.fromkeys(t for t, _ in self.source.enumerators.values()))
        logic = [x.type for x in self.made.states if x.type.kind is Kind.ENUM]
        return dict(zip(found, logic, strict=True))

    def _domains(self) -> dict[Node, tuple[Const, ...]]:
        """The logic variables and their values."""
        found: dict[Node, tuple[Const, ...]] = {}
        for x in self.made.states:
            if x.kind == "logic":
                codes = range(len(x.values)) if x.type.kind is Kind.ENUM else [int(v) for v in x.values]
                found[self.start(("self", x.name, None))] = tuple(Const(c, x.type) for c in codes)
        return found

    def _ends(self, args: tuple[Node, ...]) -> bool:
        """A limited state, timer or count is always inside its own ends."""
        value, low, high = args
        if not isinstance(value, Ref) or value.kind is not RefKind.STATE:
            return False
        clamps = {a.clamp for a in (*self.made.flow, *self.made.sample) if a.state == value.name}
        clamps |= {a.clamp for j in self.made.jumps for a in j.assigns if a.state == value.name}
        return any(
            c is not None and isinstance(low, Const) and isinstance(high, Const) and (low.value, high.value) == c
            for c in clamps
        )

    def start(self, place: Place) -> Node:
        """A member before the function writes it. Raises KeyError for a member that there is not."""
        base, name, index = place
        match base:
            case "self":
                ref = Ref(RefKind.STATE, name, self.types[name], index)
            case "p":
                ref = Ref(RefKind.PARAMETER, name, {p.name: p.type for p in self.made.parameters}[name], index)
            case "u":
                ref = Ref(RefKind.INPUT, f"raw {name}", self.inputs[name], index)
            case "now" if name in self.flags:
                kind, of = self.flags[name]
                ref = Ref(kind, of, BOOL)
            case "now":
                ref = Ref(RefKind.INPUT, name, self.inputs[name], index)
            case _:
                ref = Ref(RefKind.OUTPUT, name, {o.name: o.type for o in self.made.law.outputs}[name], index)
        return self.interner.leaf(ref)

    def mismatches(self) -> Iterator[Mismatch]:
        for what in frame.wrong(self.made, self.source, self.executor, self.judge):
            yield Mismatch("the file", what)
        for function, wanted, found in self.comparisons():
            for what in {**wanted, **found}:
                pair = (m.get(what) or self.unchanged(what) for m in (wanted, found))
                try:
                    if not self.judge.equivalent(*pair):
                        yield Mismatch(function, what)
                except Undecided:
                    yield Mismatch(function, what, decided=False)

    def unchanged(self, what: str) -> Node:
        """What a member or status bit is where a function does not mention it."""
        base, arrow, rest = what.partition("->")
        if not arrow:
            return self.interner.leaf(FALSE)
        name, _, index = rest.partition("[")
        return self.start((base, name, int(index[:-1]) if index else None))

    def comparisons(self) -> Iterator[tuple[str, dict[str, Node], dict[str, Node]]]:
        """(function, what it has to give, what it gives)"""
        made = self.made
        for name, wanted in (("read", self.read()), ("watch", self.watch()), ("give", self.give())):
            yield name, wanted, self.run(name, wanted)
        if made.jumps:
            yield "due", self.due(), self.run("due", {}, answer=True)
        for jump in made.jumps:
            yield f"take {jump.name}", self.take(jump.number), self.run("take", {}, jump=jump.number)
        for jump_due in (0, 1) if made.flow_condition is not None else (None,):
            wanted = self.advance(jump_due)
            yield "advance", wanted, self.run("advance", wanted, jump=jump_due)
        yield "check_parameters", self.rules(), self.run("check_parameters", {}, answer=True)
        yield "init", self.init(), self.run("init", {})

    def run(
        self, name: str, wanted: Mapping[str, Node], jump: int | None = None, answer: bool = False
    ) -> dict[str, Node]:
        """What a function gives: members that it changes, status bits, its answer."""
        if f"{self.made.law.name}_{name}" not in self.source.functions:
            return {}
        state = self.executor.function(name, jump)
        return self._told(state, answer)

    def _told(self, state: State, answer: bool) -> dict[str, Node]:
        found = {_text(p): n for p, n in state.members.items() if n is not self.start(p)}
        found.update(state.bits)
        if answer:
            found["answer"] = state.locals["return"]
        return found

    def tree(self, node: Node) -> Node:
        """A tree of the step law, definitions written out."""
        return self.interner.of(node, self.names)

    def read(self) -> dict[str, Node]:
        wanted: dict[str, Node] = {}
        bad: list[Node] = []
        for u in self.made.inputs:
            bad += self._sample(u, wanted)
        for name, (kind, _) in self.flags.items():
            if kind is RefKind.JUMPED:
                wanted[f"now->{name}"] = FALSE
        if bad:
            wanted["INVALID_INPUT"] = bad[0] if len(bad) == 1 else op("or", *bad)
        return {k: self.tree(v) for k, v in wanted.items()}

    def _sample(self, u: StepInput, wanted: dict[str, Node]) -> list[Node]:
        """What the snapshot of an input is; the conditions under which the sample is bad."""
        indexes = [None] if u.size is None else list(range(u.size))
        raw = [Ref(RefKind.INPUT, f"raw {u.name}", u.type, i) for i in indexes]
        if u.type == BOOL:
            wanted |= {_text(("now", u.name, i)): r for i, r in zip(indexes, raw, strict=True)}
            return []
        low, high, substitute = (Const(v, u.type) for v in (u.low, u.high, u.substitute))
        good = [(op("ge", r, low), op("le", r, high)) for r in raw]
        whole = op("and", *(g for pair in good for g in pair))
        flag = next((n for n, (k, of) in self.flags.items() if (k, of) == (RefKind.VALID, u.name)), None)
        if flag is not None:
            wanted[f"now->{flag}"] = whole
        for i, r, pair in zip(indexes, raw, good, strict=True):
            fine = op("and", *pair) if u.invalid == "clamp" else whole
            held = Ref(RefKind.STATE, f"held_{u.name}", u.type, i)
            if u.invalid == "clamp" and u.scaled:
                other: Node = op("select", op("ge", r, integer(-MOST)), op("iclamp", r, low, high), held)
            elif u.invalid == "clamp" and u.type == INT:
                other = op("iclamp", r, low, high)
            elif u.invalid == "clamp":
                other = op("select", op("finite", r), op("clamp", r, low, high), held)
            else:
                other = held if u.invalid == "hold" else substitute
            wanted[_text(("now", u.name, i))] = op("select", fine, r, other)
            if u.held:
                wanted[_text(("self", f"held_{u.name}", i))] = op("select", fine, r, held)
        return [op("not", whole)]

    def watch(self) -> dict[str, Node]:
        bad = [op("not", op("finite", a)) for a in self.made.alarms]
        return {"NON_FINITE": self.tree(op("or", *bad, FALSE))} if bad else {}

    def due(self) -> dict[str, Node]:
        answer: Node = integer(0)
        for jump in reversed(self.made.jumps):
            answer = op("select", jump.condition, integer(jump.number), answer)
        if self.made.law.prefer == "flow" and self.made.flow_condition is not None:
            answer = op("select", self.made.flow_condition, integer(0), answer)
        return {"answer": self.tree(answer)}

    def take(self, number: int) -> dict[str, Node]:
        jump = self.made.jumps[number - 1]
        wanted, bad = self._assigned(jump.assigns)
        wanted["self->last_jump"] = integer(number)
        wanted["self->jumps"] = op("iadd", Ref(RefKind.STATE, "jumps", INT), integer(1))
        for name, (kind, of) in self.flags.items():
            if kind is RefKind.JUMPED and of == jump.name:
                wanted[f"now->{name}"] = TRUE
        return self._with_bits(wanted, {"NON_FINITE": bad})

    def _assigned(self, assigns: tuple[StepAssign, ...]) -> tuple[dict[str, Node], list[Node]]:
        """New values, and when one is not finite."""
        wanted: dict[str, Node] = {}
        bad: list[Node] = []
        for a in assigns:
            old = Ref(RefKind.STATE, a.state, self.types[a.state], a.index)
            value = _inside(a.expr, a.clamp)
            if a.guarded:
                bad.append(op("not", op("finite", a.expr)))
                value = op("select", op("finite", a.expr), value, old)
            wanted[_text(("self", a.state, a.index))] = value
        return {k: v for k, v in wanted.items() if not self._still(k, v)}, bad

    def _still(self, place: str, value: Node) -> bool:
        return (
            isinstance(value, Ref) and place == _text(("self", value.name, value.index)) and value.kind is RefKind.STATE
        )

    def _with_bits(self, wanted: dict[str, Node], bits: dict[str, list[Node]]) -> dict[str, Node]:
        for bit, when in bits.items():
            if when:
                wanted[bit] = op("or", *when, FALSE)
        return {k: self.tree(v) for k, v in wanted.items()}

    def give(self) -> dict[str, Node]:
        wanted: dict[str, Node] = {}
        bad: list[Node] = []
        for o in self.made.outputs:
            wanted[_text(("y", o.name, o.index))] = self._output(o, bad)
        return self._with_bits(wanted, {"NON_FINITE": bad})

    def _output(self, o: StepOutput, bad: list[Node]) -> Node:
        value = _inside(o.expr, o.clamp)
        if not o.guarded:
            return value
        bad.append(op("not", op("finite", o.expr)))
        return op("select", op("finite", o.expr), value, Const(o.fallback, REAL))

    def advance(self, jump: int | None) -> dict[str, Node]:
        """Flow, timers and sample; `jump` is the number still due (asked only where there is a flow condition)."""
        flow, flow_bad = self._assigned(self.made.flow)
        for x in self.made.states:
            if x.kind == "timer":
                timer = Ref(RefKind.STATE, x.name, INT)
                counted = op("iadd", timer, integer(1))
                flow[f"self->{x.name}"] = op("select", op("lt", timer, integer(x.maximum or 0)), counted, timer)
        sample, sample_bad = self._assigned(self.made.sample)
        condition = self.made.flow_condition
        if condition is None:
            return self._with_bits({**flow, **sample}, {"NON_FINITE": [*flow_bad, *sample_bad]})
        wanted = {k: op("select", condition, v, self._old(k)) for k, v in flow.items()} | sample
        bad = [*(op("and", condition, b) for b in flow_bad), *sample_bad]
        stuck: list[Node] = [op("not", condition)] if jump == 0 else []
        return self._with_bits(wanted, {"NON_FINITE": bad, "STUCK": stuck})

    def _old(self, place: str) -> Node:
        name, _, rest = place.removeprefix("self->").partition("[")
        return Ref(RefKind.STATE, name, self.types[name], int(rest[:-1]) if rest else None)

    def rules(self) -> dict[str, Node]:
        answer: Node = integer(0)
        for number, rule in reversed(list(enumerate(self.made.rules, 1))):
            answer = op("select", rule.condition, answer, integer(number))
        return {"answer": self.tree(answer)}

    def init(self) -> dict[str, Node]:
        wanted: dict[str, Node] = {"self->last_jump": integer(0), "self->jumps": integer(0)}
        for x in self.made.states:
            for i, value in enumerate(x.initial):
                index = i if x.size is not None else None
                exact = (
                    Const(Fraction(value), REAL)
                    if x.type == REAL
                    else truth(bool(value))
                    if x.type == BOOL
                    else Const(value, x.type)
                )
                wanted[_text(("self", x.name, index))] = exact
        for u in self.made.inputs:
            for index in [None] if u.size is None else range(u.size):
                if u.held:
                    wanted[_text(("self", f"held_{u.name}", index))] = Const(u.initial, u.type)
        return {k: self.tree(v) for k, v in wanted.items()}


def _inside(expr: Node, clamp: Clamp) -> Node:
    if clamp is None:
        return expr
    low, high = (Const(c, expr.type) for c in clamp)
    return op("clamp" if expr.type == REAL else "iclamp", expr, low, high)


def _text(place: Place) -> str:
    base, name, index = place
    return f"{base}->{name}" if index is None else f"{base}->{name}[{index}]"


def _now_names(made: StepLaw) -> dict[str, tuple[RefKind, str]]:
    """Members of what one step knows beside the samples: name in C -> what it means."""
    asked = {r.name for tree in made.trees() for r in refs(tree, RefKind.VALID)}
    taken = {u.name for u in made.inputs}
    found: dict[str, tuple[RefKind, str]] = {}
    wanted = [(f"{u.name}_valid", RefKind.VALID, u.name) for u in made.inputs if u.name in asked]
    wanted += [(f"jumped_{j.name}", RefKind.JUMPED, j.name) for j in made.jumps if j.flagged]
    for name, kind, of in wanted:
        while name in taken:
            name += "_"
        taken.add(name)
        found[name] = kind, of
    return found
