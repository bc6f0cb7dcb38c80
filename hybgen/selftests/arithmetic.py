"""The C of the operations: a table of operands and expected bits for each, and the function that compares them."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hybgen.emit.kernels import functions
from hybgen.emit.text import real_literal, wrapped
from hybgen.ir.model import Apply, Program
from hybgen.ir.walk import all_values
from hybgen.lower.names import Namer
from hybgen.numbers.format import FORMATS
from hybgen.selftests.columns import table, whole_literal, word
from hybgen.selftests.kernels import rows as kernel_rows
from hybgen.selftests.operands import Group, Operands, basics, groups

# Operands pass a volatile variable, so that no compiler computes with them beforehand. The tables are not volatile
# themselves: compilers then put them into RAM.
# Local names are among those that no law may have (law/naming.py).
_PUNNED = "typedef union {{ {real} number; {word} bits; }} {punned};"
_BITS = """static {word} {bits}({real} x)
{{
    {punned} p;

    p.number = x;
    return p.bits;
}}"""
_MAKE = """/* by way of a volatile variable: nothing is computed beforehand */
static {real} {make}({word} x)
{{
    volatile {word} now = x;
    {punned} p;

    p.bits = now;
    return p.number;
}}"""
_WHOLE = """/* by way of a volatile variable: nothing is computed beforehand */
static int32_t {whole}(int32_t x)
{{
    volatile int32_t now = x;

    return now;
}}"""


@dataclass(frozen=True, slots=True)
class Test:
    """One operation: its table and function."""

    about: str
    name: str
    rows: int
    table: list[str]
    lines: list[str]


@dataclass(frozen=True, slots=True)
class Arithmetic:
    """The tests, and the C that they and the steps of the law may need: (name, text), to be written where the name is used."""

    pieces: list[tuple[str, str]]
    tests: list[Test]
    bits: str
    real: str


def tests(program: Program, names: Namer, random: np.random.Generator) -> Arithmetic:
    """The tests of the operations that a program uses."""
    words = ("punned", "bits", "real", "whole")
    punned, bits, make, whole = (names.unique(f"{program.name}_selftest_{w}") for w in words)
    pieces = [(whole, _WHOLE.format(whole=whole))]
    if program.number == "fixed32":
        copies, found = _copies(program, names, whole, random)
        return Arithmetic([*pieces, *((op, text) for op, text in copies)], found, bits, make)
    size = 32 if program.real == "float" else 64
    terms = {"real": program.real, "word": f"uint{size}_t", "punned": punned, "bits": bits, "make": make}
    pieces += [(make, _PUNNED.format(**terms)), (bits, _BITS.format(**terms)), (make, _MAKE.format(**terms))]
    found = [*_Floating(program, names, bits, make, whole, size).tests(random)]
    return Arithmetic(pieces, found, bits, make)


@dataclass(frozen=True, slots=True)
class _Floating:
    """Writes the tests of floating point."""

    program: Program
    names: Namer
    bits: str
    make: str
    whole: str
    size: int

    def tests(self, random: np.random.Generator) -> Iterator[Test]:
        operands = Operands(FORMATS[self.program.number], random)
        for group in groups(basics(_operations(self.program))):
            rows = operands.rows(group)
            yield self.test(group, rows, operands.expected(group, rows))

    def test(self, group: Group, rows: NDArray[Any], expected: NDArray[Any]) -> Test:
        name = self.names.unique(f"{self.program.name}_selftest_{group.name}")
        stem = self.names.unique(f"{name}_rows")
        type_ = f"uint{self.size}_t"
        results = [word(int(v), self.size) for v in expected]
        n = len(rows)
        if group.whole:
            given = self.names.unique(f"{name}_of")
            lines = table("int32_t", given, f"[{n}]", [whole_literal(int(v)) for (v,) in rows])
            lines += table(type_, stem, f"[{n}]", results)
            operands, wanted = [f"const int32_t x = {self.whole}({given}[i]);"], f"{stem}[i]"
        else:
            words = [[word(int(b), self.size) for b in row] for row in rows.view(np.dtype(f"u{self.size // 8}"))]
            pieces = [f"{{ {', '.join((*row, result))} }}" for row, result in zip(words, results, strict=True)]
            lines = table(type_, stem, f"[{n}][{group.arity + 1}]", pieces)
            operands = [
                f"const {self.program.real} {x} = {self.make}({stem}[i][{i}]);"
                for i, x in enumerate("xyab"[: group.arity])
            ]
            wanted = f"{stem}[i][{group.arity}]"
        return Test(group.about, name, n, lines, _loop(n, operands, f"{self.text(group)} != {wanted}"))

    def text(self, group: Group) -> str:
        largest = real_literal(self.program.largest, self.program)
        return group.text.format(real=self.program.real, word=f"uint{self.size}_t", bits=self.bits, largest=largest)


def _loop(rows: int, operands: list[str], differs: str) -> list[str]:
    lines = [
        "    uint32_t answer = 0u;",
        "    uint32_t i;",
        "",
        f"    for (i = 0u; (answer == 0u) && (i < {rows}u); i++) {{",
        *(f"        {line}" for line in operands),
        *([""] if operands else []),
        f"        if ({differs}) {{",
        "            answer = i + 1u;",
        "        }",
        "    }",
        "    return answer;",
    ]
    return [piece for line in lines for piece in wrapped(line)]


def _operations(program: Program) -> Iterator[str]:
    return (v.op for f in program.functions for v in all_values(f.body) if isinstance(v, Apply))


def _copies(
    program: Program, names: Namer, whole: str, random: np.random.Generator
) -> tuple[list[tuple[str, str]], list[Test]]:
    """Copies of the kernels of fixed point (those of the law are static), and their tests."""
    stem = f"{program.name}_selftest_kernel"
    while any(name.startswith(f"{stem}_") for name in names.taken):
        stem += "_"
    found: list[Test] = []
    for op in program.kernels:
        kernel, rows = kernel_rows(op, program, random)
        name = names.unique(f"{program.name}_selftest_of_{op}")
        given = names.unique(f"{name}_rows")
        arity = len(kernel.parameters)
        pieces = [f"{{ {', '.join(whole_literal(v) for v in row)} }}" for row in rows]
        arguments = ", ".join(f"{whole}({given}[i][{i}])" for i in range(arity))
        lines = _loop(len(rows), [], f"{stem}_{op}({arguments}) != {given}[i][{arity}]")
        listed = table("int32_t", given, f"[{len(rows)}][{arity + 1}]", pieces)
        found.append(Test(f"{op}, {kernel.about}", name, len(rows), listed, lines))
    return [(stem, text) for text in functions(program.kernels, replace(program, name=stem))], found
