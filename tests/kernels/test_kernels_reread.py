"""Faults planted into the C of the elementary functions are found when it is read back."""

from __future__ import annotations

import re
from collections.abc import Iterator
from dataclasses import replace

import pytest

import hybgen
from hybgen.kernels.floats import kernel
from hybgen.kernels.word import ELEMENTARY, closure
from hybgen.reread.kernels import wrong
from hybgen.reread.source import Source, parse
from tests.kernels.every_float import course

OTHERS = {"+": "-", "-": "+", "*": "+", "/": "*", "<<": ">>", ">>": "<<", "&": "|", "|": "&", "^": "|", "<": "<=", ">": ">=",
          "<=": "<", ">=": ">", "==": "!=", "!=": "==", "&&": "||", "||": "&&"}  # fmt: skip
TYPES = {"uint32_t": "int32_t", "int32_t": "uint32_t", "uint64_t": "uint32_t"}


def mutants(text: str) -> Iterator[str]:
    """Each operator, constant, type and name exchanged, each `!` and each statement left out."""
    names = list(dict.fromkeys(re.findall(r"const \w+ (\w+) =", text)))
    for m in re.finditer(r" (<<|>>|<=|>=|==|!=|&&|\|\||[-+*/&|^<>]) ", text):
        yield text[: m.start(1)] + OTHERS[m[1]] + text[m.end(1) :]
    for m in re.finditer(r"(?<![\w.])(0x[0-9A-F]+|\d+)", text):
        yield text[: m.start(1)] + str(int(m[1], 0) + 1) + text[m.end(1) :]
    for m in re.finditer(r"\b(u?int\d+_t)\b", text):
        yield text[: m.start(1)] + TYPES[m[1]] + text[m.end(1) :]
    for m in re.finditer(r"(?<![\w.])(\w+)\b", text):
        if m[1] in names and len(names) > 1:
            yield text[: m.start(1)] + names[names.index(m[1]) - 1] + text[m.end(1) :]
    for m in re.finditer(r"!(?=\w|\()|^    (const|return|if).*\n", text, re.M):
        yield text[: m.start()] + text[m.end() :]


def caught(text: str, whole: Source, number: str, name: str) -> bool:
    """Is the file with this text for one function refused, because of that function?"""
    try:
        function = parse("", text).functions
    except ValueError:
        return True
    return f"course_{name}" in wrong("course", number, replace(whole, functions=whole.functions | function))


@pytest.mark.parametrize("number", ["float32", "float64"])
def test_every_planted_fault_in_a_function_is_found(number: str) -> None:
    files = hybgen.generate(course(), number=number)
    text = files["course.c"]
    whole = parse(files["course.h"], text)
    assert list(wrong("course", number, whole)) == []
    total, missed = 0, []
    for expected in closure([kernel(n, number) for n in ELEMENTARY]):
        found = re.search(rf"^static \w+ course_{expected.name}\(.*?^}}\n", text, re.M | re.S)
        assert found is not None
        for i, mutant in enumerate(mutants(found[0])):
            if i % 5 == 0:
                total += 1
                if not caught(mutant, whole, number, expected.name):
                    missed.append(mutant)
    assert total > 500
    assert missed == []


def test_a_changed_table_and_a_changed_union_are_found() -> None:
    files = hybgen.generate(course())
    text = files["course.c"]
    for good, bad in (
        ("0xA2F9836Eu", "0xA2F9836Fu"),
        ("float number; uint32_t bits;", "float number; uint64_t bits;"),
        ("p.number = number;", ""),
    ):
        assert text.count(good) >= 1
        assert list(wrong("course", "float32", parse(files["course.h"], text.replace(good, bad, 1)))) != []
