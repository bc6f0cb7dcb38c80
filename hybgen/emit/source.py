"""Program -> NAME.h and NAME.c, laid out by the templates."""

from __future__ import annotations

import textwrap
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from functools import cache
from pathlib import Path
from typing import Any

from hybgen.emit.helpers import helper, lookups
from hybgen.emit.kernels import functions
from hybgen.emit.text import Writer, comment, constant, ctype
from hybgen.ir.model import LOOKUPS, Apply, Function, Member, Program
from hybgen.ir.walk import all_values

STATUS = (
    ("INVALID_INPUT", 1, "a sample was bad: not finite or out of range"),
    ("JUMP_LIMIT", 2, "one more jump is due; it is taken in the next step"),
    ("STUCK", 4, "neither flow nor jump is allowed: the state stays"),
    ("NON_FINITE", 8, "a computed value was not finite and was not taken"),
    ("PARAMETER", 16, "the parameters break a rule: the defaults were used"),
)
CAUTIONS = (
    "Caution: this code can move machines. It was checked against its law in simulation, and simulation is not a "
    "safety case. Local codes, functional-safety standards and a qualified review decide whether it may be used."
)
_FIXED = (
    "Numbers are raw: value * 2^n as int32_t, with n as given for each member (Qm.n), rounded half to even and",
    "held at the ends; INT32_MIN means no number.",
)
_ORDER = ("self", "p", "u", "now", "y")


def templates_folder() -> Path:
    """Where the templates lie: inside the installed package, or at the top of a clone."""
    package = Path(__file__).resolve().parent.parent
    inside = package / "templates"
    return inside if inside.is_dir() else package.parent / "templates"


@cache
def _environment() -> Any:
    import jinja2  # only where text is made

    loader = jinja2.FileSystemLoader(str(templates_folder()))
    return jinja2.Environment(
        loader=loader,
        trim_blocks=True,
        lstrip_blocks=True,
        keep_trailing_newline=True,
        undefined=jinja2.StrictUndefined,
        autoescape=False,
    )


def emit(program: Program, conversions: bool = False) -> dict[str, str]:
    """The two files, by name; `conversions`: with functions between physical and raw values (fixed point)."""
    pages = _Pages(program, Writer(program), conversions)
    return {
        f"{program.name}.h": render("law.h.jinja", pages.header()),
        f"{program.name}.c": render("law.c.jinja", pages.source()),
    }


def render(template: str, values: Mapping[str, Any]) -> str:
    """A template laid out."""
    text: str = _environment().get_template(template).render(values)
    return text


def common(program: Program) -> dict[str, Any]:
    """What the heads of all C files have in common, and their guards against flags that change results."""
    return {
        "name": program.name,
        "upper": program.name.upper(),
        "facts": [
            f"Made by hybgen {program.version} from {comment(program.origin)}, SHA-256",
            f"  {program.digest}",
            f"step {program.step}, numbers {program.number}, integration {program.method}",
            *(_FIXED if program.number == "fixed32" else ()),
            "Compile as C99 (or C++) with -ffp-contract=off, without -ffast-math.",
        ],
        "cautions": textwrap.wrap(CAUTIONS, 100),
        "excess": " && (__FLT_EVAL_METHOD__ != 1)" if program.real == "double" else "",
    }


@dataclass(frozen=True, slots=True)
class _Pages:
    """What the templates lay out."""

    program: Program
    writer: Writer
    conversions: bool

    def header(self) -> dict[str, Any]:
        program = self.program
        about = textwrap.wrap(comment(f"{program.name}: {program.about}" if program.about else program.name), 100)
        return {
            **common(program),
            "conversions": list(self.converted()) if self.conversions else [],
            "guard": f"{program.name.upper()}_H",
            "about": about,
            "step": program.step,
            "status": [{"name": n, "value": v, "note": note} for n, v, note in STATUS],
            "jumps": program.jumps,
            "enums": [
                {
                    "name": e.name,
                    "note": e.note,
                    "rows": [
                        {"name": v, "number": i, "comma": "," if i + 1 < len(e.values) else ""}
                        for i, v in enumerate(e.values)
                    ],
                }
                for e in program.enums
            ],
            "structs": self.structs(),
            "rules": [f"{i}: {comment(r)}" for i, r in enumerate(program.rules, 1)] or ["(there is none)"],
        }

    def structs(self) -> list[dict[str, Any]]:
        program, name = self.program, self.program.name
        last = (
            Member("last_jump", "word", None, "number of the last jump"),
            Member("jumps", "word", None, "count of jumps, wraps"),
        )
        rows = (
            ("inputs", program.inputs, "the samples of one step"),
            ("parameters", program.parameters, "what may be tuned at run time"),
            ("outputs", program.outputs, "what a step gives"),
        )
        made = [
            {"name": f"{name}_{word}", "note": note, "members": self.members(members, word)}
            for word, members, note in rows
        ]
        return [
            *made,
            {"name": name, "note": "one instance", "members": self.members((*program.states, *last), "states")},
        ]

    def members(self, members: Sequence[Member], word: str) -> list[dict[str, str]]:
        if not members:
            return [{"text": f"uint8_t none; /* this law has no {word} */"}]
        return [{"text": self.member(m)} for m in members]

    def converted(self) -> Iterator[dict[str, str]]:
        """The members that are scaled, each name once, with the factor 2**places."""
        taken = {t.name for t in self.program.tables}
        for m in (*self.program.inputs, *self.program.parameters, *self.program.outputs):
            if m.places is not None:
                names = {}
                for word in ("raw", "physical"):
                    name = f"{self.program.name}_{word}_{m.name}"
                    while name in taken:
                        name += "_"
                    taken.add(name)
                    names[word] = name
                yield {**names, "factor": f"{2.0**m.places!r}", "inverse": f"{2.0**-m.places!r}"}

    def member(self, m: Member) -> str:
        size = "" if m.size is None else f"[{m.size}]"
        note = f" /* {comment(m.note)} */" if m.note else ""
        return f"{ctype(m.type, self.program)} {m.name}{size};{note}"

    def source(self) -> dict[str, Any]:
        program = self.program
        inner = [f for f in program.functions if f.name not in ("init", "rules")]
        tables = frozenset(
            v.table for f in program.functions for v in all_values(f.body) if isinstance(v, Apply) and v.table
        )
        helpers = [helper(h, program) for h in program.helpers if h not in LOOKUPS]
        helpers += [*functions(program.kernels, program), *lookups(program, tables)]
        return {
            **common(program),
            "now": [{"text": self.member(m)} for m in program.now],
            "defaults": self.defaults(),
            "helpers": helpers,
            "functions": [self.function(f) for f in inner],
            "init": list(self.writer.block(program.function("init").body, 1)),
            "rules": list(self.rules()),
            "step": list(self.step()),
            "jump_name": list(self.jump_name()),
        }

    def defaults(self) -> list[str]:
        if not self.program.parameters:
            return ["0u"]
        rows = []
        for member, row in zip(self.program.parameters, self.program.defaults, strict=True):
            text = ", ".join(constant(c, self.program) for c in row)
            rows.append(f"{{ {text} }}" if member.size is not None else text)
        return [
            f"{row}{',' if i + 1 < len(rows) else ''} /* {m.name} */"
            for i, (row, m) in enumerate(zip(rows, self.program.parameters, strict=True))
        ]

    def arguments(self, f: Function) -> list[str]:
        """The parameters that a function takes, in a fixed order."""
        found = [b for b in _ORDER if b in f.uses | f.writes or (f.name == "take" and b == "self")]
        return [*found, "jump"] if f.name == "take" or (f.name == "advance" and self.program.flow_asked) else found

    def function(self, f: Function) -> dict[str, Any]:
        name = self.program.name
        types = {
            "self": name,
            "p": f"{name}_parameters",
            "u": f"{name}_inputs",
            "now": f"{name}_now",
            "y": f"{name}_outputs",
        }
        written = f.writes | ({"self"} if f.name == "take" else set())
        signature = [
            ("uint32_t jump" if a == "jump" else f"{'' if a in written else 'const '}{types[a]} *{a}")
            for a in self.arguments(f)
        ]
        lines = list(self.body(f))
        returns = "uint32_t" if f.status or f.name == "due" else "void"
        return {
            "name": f.name,
            "about": f.about,
            "returns": returns,
            "signature": ", ".join(signature) or "void",
            "lines": lines,
        }

    def body(self, f: Function) -> Iterator[str]:
        if f.status:
            yield "    uint32_t status = 0u;"
            yield ""
        if f.name == "due":
            yield "    uint32_t answer = 0u;"
            yield ""
        yield from self.writer.block(f.body, 1)
        if f.name == "take":
            yield "    self->last_jump = jump;"
            yield "    self->jumps = self->jumps + 1u;"
        if f.status:
            yield "    return status;"
        if f.name == "due":
            yield "    return answer;"

    def rules(self) -> Iterator[str]:
        yield "    uint32_t answer = 0u;"
        yield ""
        if self.program.has("rules"):
            yield from self.writer.block(self.program.function("rules").body, 1)
        else:
            yield "    (void)p;"
        yield "    return answer;"

    def call(self, name: str) -> str:
        f = self.program.function(name)
        args = ["&now" if a == "now" else "used" if a == "p" else a for a in self.arguments(f)]
        call = f"{self.program.name}_{name}({', '.join(args)})"
        return f"status |= {call};" if f.status else f"jump = {call};" if name == "due" else f"{call};"

    def step(self) -> Iterator[str]:
        program, law = self.program, self.program.name
        calls = [f for f in program.functions if f.name not in ("init", "rules")]
        taken = {a for f in calls for a in self.arguments(f)}
        jumping = program.has("due")
        if "p" in taken or program.has("rules"):
            yield f"    const {law}_parameters *used = p;"
        if program.now:
            yield f"    {law}_now now;"
        yield "    uint32_t status = 0u;"
        if jumping or program.flow_asked:
            yield "    uint32_t jump = 0u;" if not jumping else "    uint32_t jump;"
        if jumping and program.jumps_per_step > 1:
            yield "    uint32_t taken;"
        yield ""
        yield from (
            f"    (void){a};"
            for a in ("self", "p", "u", "y")
            if a not in taken and not (a == "p" and program.has("rules"))
        )
        yield from self.checked("p" in taken)
        for name in ("read", "watch"):
            if program.has(name):
                yield f"    {self.call(name)}"
        if jumping:
            yield from self.jumping()
        if program.has("give"):
            yield f"    {self.call('give')}"
        if program.has("advance"):
            yield f"    {self.call('advance')}"
        yield "    return status;"

    def checked(self, needed: bool) -> Iterator[str]:
        name = self.program.name
        if self.program.has("rules"):
            yield f"    if ({name}_check_parameters(p) != 0u) {{"
            if needed:
                yield f"        used = &{name}_defaults;"
            yield f"        status |= {name.upper()}_STATUS_PARAMETER;"
            yield "    }"
            if not needed:
                yield "    (void)used;"

    def jumping(self) -> Iterator[str]:
        most = self.program.jumps_per_step
        upper = self.program.name.upper()
        yield f"    {self.call('due')}"
        head = (
            "    if (jump != 0u) {"
            if most == 1
            else f"    for (taken = 0u; (jump != 0u) && (taken < {most}u); taken++) {{"
        )
        yield head
        yield f"        {self.call('take')}"
        yield f"        {self.call('due')}"
        yield "    }"
        yield "    if (jump != 0u) {"
        yield f"        status |= {upper}_STATUS_JUMP_LIMIT;"
        yield "    }"

    def jump_name(self) -> Iterator[str]:
        if not self.program.jumps:
            yield "    (void)jump;"
            return
        yield "    switch (jump) {"
        for jump in self.program.jumps:
            yield f"    case {jump.macro}:"
            yield f'        text = "{jump.name}";'
            yield "        break;"
        yield "    default:"
        yield "        break;"
        yield "    }"


__all__ = ["common", "emit", "render", "templates_folder"]
