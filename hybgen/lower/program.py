"""StepLaw -> Program: naming, sharing, partial evaluation by mode, dead code. Values are preserved bit for bit."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator, Sequence, Set
from dataclasses import dataclass, replace
from fractions import Fraction

from hybgen.diag.span import Span
from hybgen.expr.core import BOOL, INT, REAL, Node, Ref, RefKind, integer, op
from hybgen.ir.model import (
    HELPERS,
    Answer,
    Apply,
    Constant,
    Field,
    Function,
    Grid,
    If,
    Jump,
    Let,
    Local,
    Note,
    Program,
    Raise,
    Statement,
    Store,
    Switch,
    Table,
    Value,
)
from hybgen.ir.verify import verify
from hybgen.ir.walk import all_values, statements
from hybgen.kernels.integers import MOST
from hybgen.kernels.table import ARITY
from hybgen.lower.blocks import Assignment, Lets, Statements, chosen, merged, ordered, pruned
from hybgen.lower.due import Due
from hybgen.lower.names import LOCALS, Namer, reserved
from hybgen.lower.structs import Structs, converted, structs
from hybgen.step.model import StepAssign, StepGrid, StepInput, StepJump, StepLaw, StepOutput, StepTable
from hybgen.step.translate import component
from hybgen.version import VERSION

TRUE = Constant(True, "bool")


_REALS = {"float32": "float", "float64": "double", "fixed32": "int32_t"}


def lower(made: StepLaw, *, conversions: bool = False) -> Program:
    """The program of a step law, verified; in fixed point with functions from and to physical numbers, if asked."""
    namer = Namer(reserved(made.law.name))
    parts = structs(made, namer)
    builder = _Builder(made, parts)
    program = builder.program()
    if conversions and made.places:
        nearest = namer.unique(f"{made.law.name}_nearest")
        program = replace(program, nearest=nearest, conversions=tuple(converted(made, namer)))
    verify(program)
    return program


@dataclass(frozen=True, slots=True)
class _Builder:
    """Builds the functions of one program."""

    made: StepLaw
    parts: Structs

    def program(self) -> Program:
        made, law, parts = self.made, self.made.law, self.parts
        functions = tuple(f for f in self._functions() if f is not None)
        defaults = tuple(tuple(parts.values.constant(v, p.type) for v in p.default) for p in made.parameters)
        return Program(
            law.name,
            law.about,
            law.file,
            law.digest,
            VERSION,
            f"{float(made.step):.9g} s",
            made.format.name,
            made.method,
            _REALS[made.format.name],
            made.format.precision,
            made.format.max,
            parts.enums,
            parts.inputs,
            parts.parameters,
            parts.outputs,
            parts.states,
            parts.now,
            defaults,
            tuple(r.text for r in made.rules),
            tuple(Jump(j.number, m, j.name) for j, m in zip(made.jumps, parts.macros, strict=True)),
            made.jumps_per_step,
            tuple(_table(t, parts.values.tables[t.name]) for t in made.tables),
            _used(functions, HELPERS),
            _used(functions, ARITY.keys()),
            functions,
            made.flow_condition is not None,
        )

    def _functions(self) -> Iterator[Function | None]:
        yield self._function("init", "the state after start", tuple(self._init()))
        if self.made.rules:
            yield self._function("rules", "the first rule that the parameters break, 0 if none", tuple(self._rules()))
        if self.made.inputs or any(j.flagged for j in self.made.jumps):
            yield self._function("read", "takes the snapshot: a bad sample becomes what the law says", self._read())
        if self.made.alarms:
            yield self._function("watch", "reports values in conditions that are not finite", tuple(self._watch()))
        if self.made.jumps:
            yield self._function("due", "the jump that is due, 0 if none", self._due())
            yield self._function("take", "takes a jump: every new value from the old ones", self._take())
        if self.made.outputs:
            yield self._function("give", "the outputs", self._outputs())
        advance = self._advance()
        if advance:
            yield self._function("advance", "flows for one step", advance)

    def _function(self, name: str, about: str, body: Statements) -> Function:
        lets = Lets(tuple(self._lets()))
        body = lets.placed(pruned(body))
        used = {v.base for v in all_values(body) if isinstance(v, Field)}
        written = {s.target.base for s in statements(body) if isinstance(s, Store)}
        status = any(isinstance(s, Raise) for s in statements(body))
        return Function(name, about, body, frozenset(used | written), frozenset(written), status)

    def _lets(self) -> Iterator[tuple[Note, Let]]:
        for d in self.made.definitions:
            value = self._value(d.expr)
            yield (
                self._note(d.span, d.text if " " in d.name else f"{d.name}: {d.text}"),
                Let(self.parts.values.locals[d.name], value.type, value),
            )

    def _value(self, node: Node) -> Value:
        return self.parts.values.of(node)

    def _note(self, span: Span, text: str) -> Note:
        return Note(_place(span), text)

    def _init(self) -> Iterator[Statement]:
        values = self.parts.values
        for x in self.made.states:
            for i, value in enumerate(x.initial):
                index = i if x.size is not None else None
                yield Store(Field("self", x.name, index, values.type(x.type)), values.constant(value, x.type))
        for u in self.made.inputs:
            if u.held:
                for index in _indexes(u.size):
                    yield Store(self._held(u, index), values.constant(u.initial, u.type))

    def _held(self, u: StepInput, index: int | None) -> Field:
        return Field("self", self.parts.held[u.name], index, str(u.type.kind))

    def _rules(self) -> Iterator[Statement]:
        body: Statements = ()
        for number, rule in reversed(list(enumerate(self.made.rules, 1))):
            broken = Apply("not", (self._value(rule.condition),), "bool")
            answer = (self._note(rule.span, rule.text), Answer(Constant(number, "word")))
            body = (If(broken, answer, body),)
        yield from body

    def _read(self) -> Statements:
        body: list[Statement] = []
        for u in self.made.inputs:
            body.append(self._note(u.span, u.name))
            body += self._sample(u)
        for jump in self.made.jumps:
            if jump.flagged:
                body.append(Store(self._flag(jump), Constant(False, "bool")))
        return tuple(body)

    def _watch(self) -> Iterator[Statement]:
        for alarm in self.made.alarms:
            bad = Apply("not", (Apply("finite", (self._value(alarm),), "bool"),), "bool")
            yield If(bad, (Raise("NON_FINITE"),))

    def _flag(self, jump: StepJump) -> Field:
        return Field("now", self.parts.values.names[(RefKind.JUMPED, jump.name)], None, "bool")

    def _sample(self, u: StepInput) -> Iterator[Statement]:
        """Statements that sample one input."""
        type_ = str(u.type.kind)
        indexes = _indexes(u.size)
        raw = [Field("u", u.name, i, type_) for i in indexes]
        seen = [Field("now", u.name, i, type_) for i in indexes]
        if u.type == BOOL:
            yield from (Store(n, r) for n, r in zip(seen, raw, strict=True))
            return
        good = [self._good(u, r) for r in raw]
        whole = good[0] if len(good) == 1 else Apply("and", tuple(a for g in good for a in g.args), "bool")
        name = self.parts.values.names.get((RefKind.VALID, u.name))
        asked: Value = whole
        if name is not None:
            flag = Field("now", name, None, "bool")
            yield Store(flag, whole)
            asked = flag
        if u.invalid == "clamp" and u.size is not None:
            for r, n, g, i in zip(raw, seen, good, indexes, strict=True):
                yield If(g, self._taken(u, [r], [n], [i]), self._replaced(u, [r], [n], [i]))
            return
        yield If(asked, self._taken(u, raw, seen, indexes), self._replaced(u, raw, seen, indexes))

    def _good(self, u: StepInput, raw: Field) -> Apply:
        low, high = (self.parts.values.constant(v, u.type) for v in (u.low, u.high))
        return Apply("and", (Apply("ge", (raw, low), "bool"), Apply("le", (raw, high), "bool")), "bool")

    def _taken(
        self, u: StepInput, raw: Sequence[Field], seen: Sequence[Field], indexes: Sequence[int | None]
    ) -> Statements:
        made: list[Statement] = [Store(n, r) for n, r in zip(seen, raw, strict=True)]
        if u.held:
            made += [Store(self._held(u, i), r) for i, r in zip(indexes, raw, strict=True)]
        return tuple(made)

    def _replaced(
        self, u: StepInput, raw: Sequence[Field], seen: Sequence[Field], indexes: Sequence[int | None]
    ) -> Statements:
        constant = self.parts.values.constant
        made: list[Statement] = []
        for r, n, i in zip(raw, seen, indexes, strict=True):
            match u.invalid:
                case "hold":
                    made.append(Store(n, self._held(u, i)))
                case "value":
                    made.append(Store(n, constant(u.substitute, u.type)))
                case _:
                    made.append(self._clamped(u, r, n, i))
        return (*made, Raise("INVALID_INPUT"))

    def _clamped(self, u: StepInput, raw: Field, seen: Field, index: int | None) -> Statement:
        """A finite sample to the nearest end; others as hold."""
        low, high = (self.parts.values.constant(v, u.type) for v in (u.low, u.high))
        inside = Store(seen, Apply("iclamp", (raw, low, high), "int"))
        if u.type == INT and not u.scaled:
            return inside
        held = Store(seen, self._held(u, index))
        if u.scaled:
            return If(Apply("ge", (raw, Constant(-MOST, "int")), "bool"), (inside,), (held,))
        return If(Apply("finite", (raw,), "bool"), (Store(seen, Apply("clamp", (raw, low, high), "real")),), (held,))

    def _due(self) -> Statements:
        due = Due(
            self.made,
            self.parts.values,
            self.parts.macros,
            lambda j: self._note(j.span, j.text + self.made.rounding(j.name)),
        )
        return due.body()

    def _take(self) -> Statements:
        cases = []
        for jump, macro in zip(self.made.jumps, self.parts.macros, strict=True):
            body = self._ordered(jump.assigns)
            if jump.flagged:
                body = (*body, Store(self._flag(jump), TRUE))
            cases.append(((Constant(macro, "word"),), (self._note(jump.span, f"{jump.name}: {jump.text}"), *body)))
        return (Switch(Constant("jump", "word"), tuple(cases)),)

    def _ordered(self, assigns: Iterable[StepAssign], extra: Sequence[Assignment] = ()) -> Statements:
        definitions = {d.name: d.expr for d in self.made.definitions}
        return ordered([*(self._assignment(a) for a in assigns), *extra], definitions, self._value)

    def _assignment(self, a: StepAssign) -> Assignment:
        state = next(x for x in self.made.states if x.name == a.state)
        target = Field("self", a.state, a.index, self.parts.values.type(state.type))
        name = self._new(a.state, a.index)

        def store(value: Value) -> Statements:
            if value == target:
                return ()
            if not a.guarded or isinstance(value, Constant | Field):
                return (Store(target, self._held_inside(value, a.clamp)),)
            if isinstance(value, Local):
                return self._guarded(target, value, a.clamp)
            return (Let(name, value.type, value), *self._guarded(target, Local(name, value.type), a.clamp))

        return Assignment(
            (a.state, a.index), a.expr, self._note(a.span, f"{component(a.state, a.index)}: {a.text}"), store, name
        )

    def _new(self, name: str, index: int | None) -> str:
        """A local for a new value until it is stored."""
        return Namer(set(LOCALS) | set(self.parts.values.locals.values())).unique(f"new_{component(name, index)}")

    def _guarded(
        self, target: Field, value: Local, clamp: tuple[Fraction | int | bool, Fraction | int | bool] | None
    ) -> Statements:
        finite = Apply("finite", (value,), "bool")
        return (If(finite, (Store(target, self._held_inside(value, clamp)),), (Raise("NON_FINITE"),)),)

    def _held_inside(self, value: Value, clamp: tuple[Fraction | int | bool, Fraction | int | bool] | None) -> Value:
        if clamp is None:
            return value
        type_ = REAL if value.type == "real" else INT
        if isinstance(value, Constant) and not isinstance(value.value, str):
            return self.parts.values.constant(min(max(value.value, clamp[0]), clamp[1]), type_)
        low, high = (self.parts.values.constant(c, type_) for c in clamp)
        return Apply("clamp" if value.type == "real" else "iclamp", (value, low, high), value.type)

    def _outputs(self) -> Statements:
        made: list[Statement] = []
        for o in self.made.outputs:
            made += self._output(o)
        return merged(tuple(made))

    def _output(self, o: StepOutput) -> Statements:
        note = self._note(o.span, f"{component(o.name, o.index)}: {o.text}")
        return (note, *chosen(o.expr, self._giver(o), self._value))

    def _giver(self, o: StepOutput) -> Callable[[Value], Statements]:
        target = Field("y", o.name, o.index, self.parts.values.type(self.made.law.outputs[self._position(o)].type))
        name = self._new(o.name, o.index)

        def store(value: Value) -> Statements:
            if not o.guarded or isinstance(value, Constant | Field):
                return (Store(target, self._held_inside(value, o.clamp)),)
            lets: Statements = () if isinstance(value, Local) else (Let(name, value.type, value),)
            local = Local(name, value.type) if lets else value
            fallback = self.parts.values.constant(o.fallback, REAL)
            kept = (Store(target, self._held_inside(local, o.clamp)),)
            return (*lets, If(Apply("finite", (local,), "bool"), kept, (Store(target, fallback), Raise("NON_FINITE"))))

        return store

    def _position(self, o: StepOutput) -> int:
        return next(i for i, out in enumerate(self.made.law.outputs) if out.name == o.name)

    def _advance(self) -> Statements:
        timers = [self._timer(x.name, x.maximum or 0, x.span) for x in self.made.states if x.kind == "timer"]
        flowing = self._ordered((*self.made.flow, *self.made.sample), timers)
        if self.made.flow_condition is None:
            return flowing
        due = Apply("eq", (Constant("jump", "word"), Constant(0, "word")), "bool")
        still = (*self._ordered(self.made.sample), If(due, (Raise("STUCK"),)))
        return (
            self._note(self.made.law.flow.span, f"flow: {self.made.law.flow.text}"),
            If(self._value(self.made.flow_condition), flowing, still),
        )

    def _timer(self, name: str, top: int, span: Span) -> Assignment:
        """One step more, holding at the top."""
        field = Field("self", name, None, "int")
        plus = Apply("iadd", (field, Constant(1, "int")), "int")
        count = If(Apply("lt", (field, Constant(top, "int")), "bool"), (Store(field, plus),))
        ref = Ref(RefKind.STATE, name, INT)
        return Assignment(
            (name, None),
            op("iadd", ref, integer(1)),
            self._note(span, f"{name} counts steps"),
            lambda _: (count,),
            name,
        )


def _indexes(size: int | None) -> list[int | None]:
    return [None] if size is None else list(range(size))


def _table(t: StepTable | StepGrid, name: str) -> Table | Grid:
    note = _place(t.span)
    if isinstance(t, StepTable):
        return Table(name, t.x, t.y, t.slope, note)
    return Grid(name, t.x, t.y, t.z, t.per_x, t.per_y, note)


def _place(span: Span) -> str:
    return f"{span.file}:{span.line}"


def _used(functions: Iterable[Function], operations: Set[str]) -> tuple[str, ...]:
    return tuple(sorted({v.op for f in functions for v in all_values(f.body) if isinstance(v, Apply)} & operations))
