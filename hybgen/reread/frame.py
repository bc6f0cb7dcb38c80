"""What surrounds the functions of a law in the C: macros, defaults, tables, helper functions, the order of calls.

Helper functions are executed symbolically and compared with the meaning of their operation; the few functions with loops
are compared, as syntax trees, with the only text that is right.
"""

from __future__ import annotations

from collections.abc import Iterator
from fractions import Fraction

from hybgen.expr.core import INT, REAL, Kind, Node, Op, Ref, RefKind, Type, integer, op, real
from hybgen.numbers.format import LARGEST_COUNT, Format
from hybgen.reread import conversions, kernels, tables
from hybgen.reread.execute import Executor, NotUnderstood, State
from hybgen.reread.interned import Judge
from hybgen.reread.source import Source, body_of, numbers, same
from hybgen.step.model import Status, StepLaw

_ORDER = ("read", "watch", "due", "take", "give", "advance")


def wrong(made: StepLaw, source: Source, executor: Executor, judge: Judge) -> Iterator[str]:
    """Names of what is wrong around the functions of the law."""
    name = made.law.name
    macros = {f"{name.upper()}_STATUS_{s.name}": int(s) for s in Status}
    yield from (m for m, value in macros.items() if source.macros.get(m) != value)
    numbers = [v for m, v in source.macros.items() if m not in macros]
    if numbers != [j.number for j in made.jumps]:
        yield "the numbers of the jumps"
    if not _enums(made, source):
        yield "the enumerations"
    yield from _structs(made, source)
    if not _defaults(made, source):
        yield f"{name}_defaults"
    yield from tables.wrong(made, source)
    yield from _helpers(made, source, executor, judge)
    yield from kernels.wrong(name, made.format.name, source)
    yield from conversions.wrong(made, source)
    if not same(source.functions[f"{name}_jump_name"].body, body_of(_names_text(made, source), name)):
        yield f"{name}_jump_name"
    if not same(source.functions[f"{name}_step"].body, body_of(_step_text(made, source), name)):
        yield f"{name}_step"


def _enums(made: StepLaw, source: Source) -> bool:
    """As many enumerators for each logic variable as it has values, numbered from 0, named after the value."""
    found: dict[str, list[tuple[str, int]]] = {}
    for enumerator, (type_, code) in source.enumerators.items():
        found.setdefault(type_, []).append((enumerator, code))
    logic = [x for x in made.states if x.type.kind is Kind.ENUM]
    return len(found) == len(logic) and all(
        [c for _, c in rows] == list(range(len(x.values)))
        and all(f"_{v}".upper() in e for (e, _), v in zip(rows, x.values, strict=True))
        for rows, x in zip(found.values(), logic, strict=True)
    )


def _structs(made: StepLaw, source: Source) -> Iterator[str]:
    """The structs whose members are not the law's, in order, of its types and sizes."""
    law = made.law.name
    logic = [x.name for x in made.states if x.type.kind is Kind.ENUM]
    enums = dict(zip(logic, dict.fromkeys(t for t, _ in source.enumerators.values()), strict=True))
    real_type = "float" if made.format.precision == 24 else "double"

    def row(name: str, type_: Type, size: int | None) -> tuple[str, str, int | None]:
        names = {Kind.REAL: real_type, Kind.INT: "int32_t", Kind.BOOL: "bool"}
        return name, enums[type_.owner] if type_.kind is Kind.ENUM else names[type_.kind], size

    words = [("last_jump", "uint32_t", None), ("jumps", "uint32_t", None)]
    held = [row(f"held_{u.name}", u.type, u.size) for u in made.inputs if u.held]
    wanted = {
        f"{law}_inputs": [row(u.name, u.type, u.size) for u in made.inputs],
        f"{law}_parameters": [row(p.name, p.type, p.size) for p in made.parameters],
        f"{law}_outputs": [row(o.name, o.type, o.size) for o in made.law.outputs],
        law: [*(row(x.name, x.type, x.size) for x in made.states), *held, *words],
    }
    for name, members in wanted.items():
        if source.structs.get(name) != (members or [("none", "uint8_t", None)]):
            yield f"the struct {name}"
    now = source.structs.get(f"{law}_now", [])
    if now[: len(made.inputs)] != wanted[f"{law}_inputs"] or any(
        m[1:] != ("bool", None) for m in now[len(made.inputs) :]
    ):
        yield f"the struct {law}_now"


def _defaults(made: StepLaw, source: Source) -> bool:
    wanted = [Fraction(v) for p in made.parameters for v in p.default]
    return numbers(source.initial[f"{made.law.name}_defaults"], made.format) == (wanted or [Fraction(0)])


def _meaning(name: str, a: list[Node], fmt: Format) -> Node:
    """What a helper function gives for its arguments: the meaning of the operation, written out."""
    whole = name.startswith("i")
    zero: Node = integer(0) if whole else real(0)
    one, minus = (integer(1), integer(-1)) if whole else (real(1), real(-1))
    match name.removeprefix("i") if whole else name:
        case "abs":
            return op("select", op("lt", a[0], zero), op("ineg" if whole else "neg", a[0]), a[0])
        case "min":
            return op("select", op("lt", a[1], a[0]), a[1], a[0])
        case "max":
            return op("select", op("gt", a[1], a[0]), a[1], a[0])
        case "clamp":
            return op("select", op("lt", a[0], a[1]), a[1], op("select", op("gt", a[0], a[2]), a[2], a[0]))
        case "sign":
            return op("select", op("gt", a[0], zero), one, op("select", op("lt", a[0], zero), minus, zero))
        case "finite":
            return op("and", op("ge", a[0], real(-fmt.max)), op("le", a[0], real(fmt.max)))
        case "floor":
            edge = real(fmt.whole)
            down = op("to_real", _truncated(a[0]))
            inner = op("select", op("gt", down, a[0]), op("sub", down, one), down)
            return op("select", op("and", op("gt", a[0], real(-fmt.whole)), op("lt", a[0], edge)), inner, a[0])
        case "to_steps":
            steps = _truncated(a[0])
            beyond = op(
                "gt", op("sub", a[0], op("to_real", steps)), op("mul", a[0], real(Fraction(8, 2**fmt.precision)))
            )
            counted = op("select", beyond, op("iadd", steps, integer(1)), steps)
            top = real(fmt.round(Fraction(LARGEST_COUNT)))
            inside = op("select", op("gt", a[0], real(0)), counted, integer(0))
            return op("select", op("ge", a[0], top), integer(LARGEST_COUNT), inside)
    raise NotUnderstood(f"helper {name}")


def _truncated(node: Node) -> Node:
    return Op("truncate", (node,), INT)


_ARITY = {"abs": 1, "min": 2, "max": 2, "clamp": 3, "sign": 1, "finite": 1, "floor": 1, "to_steps": 1}


def _helpers(made: StepLaw, source: Source, executor: Executor, judge: Judge) -> Iterator[str]:
    """Helper functions that do not do what their operation means."""
    prefix = f"{made.law.name}_"
    lookups = tables.names(made, source)
    for full, function in source.functions.items():
        name = full.removeprefix(prefix)
        plain = name[1:] if name.startswith("i") and name[1:] in _ARITY else name
        if plain not in _ARITY or name in lookups:
            continue
        type_: Type = INT if plain != name else REAL
        words = [p.name for p in function.decl.type.args.params]
        args: list[Node] = [judge.interner.leaf(Ref(RefKind.LOCAL, w, type_)) for w in words]
        state = State(locals=dict(zip(words, args, strict=True)))
        try:
            executor.body(full, state)
            right = judge.equivalent(judge.interner.of(_meaning(name, args, made.format)), state.locals["return"])
        except (NotUnderstood, KeyError, AssertionError):
            right = False
        if not right or len(args) != _ARITY[plain]:
            yield full


def _call(name: str, source: Source, law: str) -> str:
    """A call of NAME_<name>, with the arguments that its parameters ask for."""
    function = source.functions[f"{law}_{name}"]
    params = function.decl.type.args.params if function.decl.type.args else []
    words = [p.name for p in params if p.name]
    passed = {"now": "&now", "p": "used"}
    call = f"{law}_{name}({', '.join(passed.get(w, w) for w in words)})"
    answers = getattr(function.decl.type.type.type, "names", ["void"]) != ["void"]
    return f"jump = {call};" if name == "due" else f"status |= {call};" if answers else f"{call};"


def _step_text(made: StepLaw, source: Source) -> str:
    """The statements of NAME_step, declarations left out."""
    law, upper = made.law.name, made.law.name.upper()
    there = [n for n in _ORDER if f"{law}_{n}" in source.functions]
    calls = {n: _call(n, source, law) for n in there}
    lines = []
    if made.rules:
        used = f"used = &{law}_defaults;" if any("used" in c for c in calls.values()) else ""
        lines.append(f"if ({law}_check_parameters(p) != 0u) {{ {used} status |= {upper}_STATUS_PARAMETER; }}")
    lines += [calls[n] for n in ("read", "watch") if n in calls]
    if made.jumps:
        head = "if (jump != 0u)"
        if made.jumps_per_step > 1:
            head = f"for (taken = 0u; (jump != 0u) && (taken < {made.jumps_per_step}u); taken++)"
        lines += [calls["due"], f"{head} {{ {calls['take']} {calls['due']} }}"]
        lines.append(f"if (jump != 0u) {{ status |= {upper}_STATUS_JUMP_LIMIT; }}")
    lines += [calls[n] for n in ("give", "advance") if n in calls]
    return "\n".join([*lines, "return status;"])


def _names_text(made: StepLaw, source: Source) -> str:
    """The statements of NAME_jump_name, declarations left out."""
    macros = [m for m in source.macros if not m.startswith(f"{made.law.name.upper()}_STATUS_")]
    rows = " ".join(f'case {m}: text = "{j.name}"; break;' for m, j in zip(macros, made.jumps, strict=True))
    return f"switch (jump) {{ {rows} default: break; }} return text;" if rows else "return text;"
