"""NAME_selftest.c: operations on operands, then steps of the law, each compared bit for bit."""

from __future__ import annotations

import textwrap
from collections.abc import Iterator
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

from hybgen.emit.source import common, render
from hybgen.emit.text import INDENT, wrapped
from hybgen.ir.model import Member, Program
from hybgen.law.model import Law
from hybgen.lower import lower
from hybgen.lower.names import Namer, reserved
from hybgen.selftests.arithmetic import Test, tests
from hybgen.selftests.choice import SALT, Vectors, vectors
from hybgen.selftests.columns import Columns, members
from hybgen.sil.vectors import generator
from hybgen.step import StepLaw, build

_WORDS = (Member("last_jump", "word", None, ""), Member("jumps", "word", None, ""))


def selftest(law: Law | StepLaw, *, step: Fraction | None = None, number: str | None = None) -> dict[str, str]:
    """NAME_selftest.c of a law, by file name; at its own step (seconds) and number format, or at others.

    The C is C99 without I/O or library: `uint32_t NAME_selftest(void)` gives 0, or 1 and more for the first check that found
    another bit than the reference; the head of the file says what each number means. It goes with the NAME.h and NAME.c that
    `generate` makes of the same law, step and format. Raises LawError where the law does not fit the format or the method.
    """
    made = build(law, step=step, number=number) if isinstance(law, Law) else law
    program = lower(made)
    names = Namer(reserved(program.name) | _declared(program))
    arithmetic = tests(program, names, generator(made, SALT + 1))
    page = _Page(program, names, vectors(made), arithmetic.bits, arithmetic.real)
    return {f"{program.name}_selftest.c": render("selftest.c.jinja", page.values(arithmetic.pieces, arithmetic.tests))}


def _declared(program: Program) -> set[str]:
    """The names that NAME.h declares from what the author wrote."""
    enums = {name for e in program.enums for name in (e.name, *e.values)}
    return enums | {j.macro for j in program.jumps}


@dataclass(frozen=True, slots=True)
class _Page:
    """What the template lays out."""

    program: Program
    names: Namer
    steps: Vectors
    bits: str
    real: str

    @property
    def stem(self) -> str:
        return f"{self.program.name}_selftest"

    def values(self, pieces: list[tuple[str, str]], arithmetic: list[Test]) -> dict[str, Any]:
        names = {n: self.names.unique(f"{self.stem}_{n}") for n in ("state", "law")}
        columns = Columns(self.stem, self.names, self.bits, self.real)
        state = [*self.state(columns)]
        law = [*self.law(columns, names["state"])]
        head = common(self.program)
        text = "\n".join((*state, *law, *(line for t in arithmetic for line in t.lines)))
        return {
            **head,
            "facts": head["facts"][:3],
            "meaning": [*self.meaning(arithmetic)],
            "told": textwrap.wrap(self.told(), 100),
            "pieces": [piece for name, piece in pieces if name in text],
            "tests": [{"about": t.about, "name": t.name, "table": t.table, "lines": t.lines} for t in arithmetic],
            "columns": columns.lines,
            "state": {"name": names["state"], "lines": _long(state)},
            "law": {"name": names["law"], "lines": _long(law)},
            "calls": [*self.calls(arithmetic, names["law"])],
        }

    def meaning(self, arithmetic: list[Test]) -> Iterator[str]:
        first = 1
        for t in arithmetic:
            yield f"{first} .. {first + t.rows - 1}: {t.about}"
            first += t.rows
        run, last = self.steps.run, len(self.steps.status)
        yield f"{first}: the state after {self.program.name}_init"
        yield f"{first + 1} .. {first + run}: steps 1 .. {run} of the law, from there on"
        if last > run:
            yield f"{first + run + 1} .. {first + last}: one step of the law each, from a state that is placed"

    def told(self) -> str:
        steps, program = self.steps, self.program
        taken = (
            f"takes {len(steps.jumps)} of the {len(program.jumps)} jumps of the law"
            if program.jumps
            else "has no jumps"
        )
        missed = ", ".join(j.name for j in program.jumps if j.name not in steps.jumps)
        return (
            f"It {taken}{f' (not {missed})' if missed else ''}. Of {steps.mutants} small changes of the law (another "
            f"comparison, a constant or an end of a range by one unit in the last place) its steps tell {steps.told} from the law."
        )

    def calls(self, arithmetic: list[Test], law: str) -> Iterator[str]:
        """Each part in order, with what its numbers begin after."""
        before = 0
        for name, rows in [*((t.name, t.rows) for t in arithmetic), (law, 0)]:
            pad = INDENT if before == 0 else INDENT * 2
            if before:
                yield f"{INDENT}if (answer == 0u) {{"
            yield f"{pad}answer = {name}();"
            if before:
                yield f"{pad}answer = (answer != 0u) ? (answer + {before}u) : 0u;"
                yield f"{INDENT}}}"
            before += rows

    def state(self, columns: Columns) -> Iterator[str]:
        """Is the state that of the row?"""
        yield "    bool answer = true;"
        yield ""
        told = []
        for place, name, _, values in members((*self.program.states, *_WORDS), self.steps.states):
            told += [
                f"    if ({columns.differs(f'self->{place}', f'x_{name}', values, 'i')}) {{",
                "        answer = false;",
                "    }",
            ]
        yield from told
        if not any("[i]" in line for line in told):
            yield "    (void)i;"
        yield "    return answer;"

    def law(self, columns: Columns, state: str) -> Iterator[str]:
        program, steps, law = self.program, self.steps, self.program.name
        yield f"    {law} used;"
        yield f"    {law} *volatile now = &used;"
        yield f"    {law} *const self = now; /* no compiler knows what it points at: nothing is computed beforehand */"
        yield f"    {law}_inputs u;"
        yield f"    {law}_outputs y;"
        yield "    uint32_t status;"
        yield "    uint32_t answer = 0u;"
        yield "    uint32_t i;"
        yield ""
        yield f"    {law}_init(self);"
        yield f"    if (!{state}(self, 0u)) {{"
        yield "        answer = 1u;"
        yield "    }"
        yield f"    for (i = 0u; (answer == 0u) && (i < {len(steps.status)}u); i++) {{"
        yield f"        if (i >= {steps.run}u) {{"
        index = f"i - {steps.run}u"
        for place, name, type_, values in members((*program.states, *_WORDS), steps.placed):
            yield f"            {columns.stored(f'self->{place}', type_, f'from_{name}', values, index)}"
        yield "        }"
        for place, name, type_, values in members(program.inputs, steps.inputs):
            yield f"        {columns.stored(f'u.{place}', type_, f'u_{name}', values, 'i')}"
        if not program.inputs:
            yield "        u.none = 0u;"
        yield f"        status = {law}_step(self, &{law}_defaults, &u, &y);"
        yield from self.compared(columns, state)
        yield "    }"
        yield "    return answer;"

    def compared(self, columns: Columns, state: str) -> Iterator[str]:
        wrong = [columns.differs("status", "status", self.steps.status, "i")]
        for place, name, _, values in members(self.program.outputs, self.steps.outputs):
            wrong.append(columns.differs(f"y.{place}", f"y_{name}", values, "i"))
        for condition in (*wrong, f"!{state}(self, i + 1u)"):
            yield f"        if ({condition}) {{"
            yield "            answer = i + 2u;"
            yield "        }"


def _long(lines: list[str]) -> list[str]:
    return [piece for line in lines for piece in wrapped(line)]
