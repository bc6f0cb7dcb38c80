"""The text of a generated C file -> pycparser's tree, without a preprocessor.

Only what the generator writes is understood: object-like macros of a number, and conditional blocks that hold nothing
but #error and #pragma (or C++'s extern "C").
"""

from __future__ import annotations

import re
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

from hybgen.numbers.format import Format

_TYPES = """typedef _Bool bool; typedef int int32_t; typedef unsigned int uint32_t; typedef unsigned char uint8_t;
typedef long long int64_t; typedef unsigned long long uint64_t; typedef unsigned long size_t;
"""


@dataclass(frozen=True, slots=True)
class Source:
    """The functions (by name), constants arrays and macros of a file."""

    functions: dict[str, Any]
    initial: dict[str, Any]
    """Initialisers of constants, by name."""
    arrays: dict[str, tuple[str, tuple[int, ...]]]
    """Type and declared lengths of constant arrays, by name."""
    structs: dict[str, list[tuple[str, str, int | None]]]
    """Members of the structs: name, type, length of an array."""
    macros: dict[str, int]
    enumerators: dict[str, tuple[str, int]]
    """Enumerator -> (type name, code)."""


def parse(header: str, body: str) -> Source:
    """Parses NAME.h and NAME.c. Raises ValueError for anything else than C."""
    from pycparser import c_ast, c_parser

    macros: dict[str, int] = {}
    text = _TYPES + _bare(header, macros) + _bare(body, macros)
    try:
        unit = c_parser.CParser().parse(text)
    except c_parser.ParseError as error:
        raise ValueError(str(error)) from None
    functions = {n.decl.name: n for n in unit.ext if isinstance(n, c_ast.FuncDef)}
    initial = {n.name: n.init for n in unit.ext if isinstance(n, c_ast.Decl) and n.init is not None}
    arrays = {
        n.name: _array(n.type) for n in unit.ext if isinstance(n, c_ast.Decl) and isinstance(n.type, c_ast.ArrayDecl)
    }
    structs: dict[str, list[tuple[str, str, int | None]]] = {}
    enumerators: dict[str, tuple[str, int]] = {}
    for node in unit.ext:
        if isinstance(node, c_ast.Typedef) and isinstance(node.type.type, c_ast.Struct | c_ast.Union):
            structs[node.name] = [_member(m) for m in node.type.type.decls]
        if isinstance(node, c_ast.Typedef) and isinstance(node.type.type, c_ast.Enum):
            for row in node.type.type.values.enumerators:
                enumerators[row.name] = (node.name, int(row.value.value))
    return Source(functions, initial, arrays, structs, macros, enumerators)


def _array(node: Any) -> tuple[str, tuple[int, ...]]:
    """Type and lengths of an array of arrays."""
    if type(node).__name__ != "ArrayDecl":
        return " ".join(node.type.names), ()
    inner, lengths = _array(node.type)
    return inner, (int(node.dim.value), *lengths)


def _member(node: Any) -> tuple[str, str, int | None]:
    """Name, type and length of a struct's member."""
    array = type(node.type).__name__ == "ArrayDecl"
    inner = node.type.type if array else node.type
    return node.name, " ".join(inner.type.names), int(node.type.dim.value) if array else None


def _bare(text: str, macros: dict[str, int]) -> str:
    """The text without comments and directives; macros of numbers are noted."""
    text = re.sub(r"/\*.*?\*/", lambda m: "\n" * m[0].count("\n"), text, flags=re.DOTALL)
    kept: list[str] = []
    foreign = 0
    for line in text.split("\n"):
        stripped = line.strip()
        if stripped.startswith("#"):
            if found := re.match(r"#define (\w+) (\d+)u\b", stripped):
                macros[found[1]] = int(found[2])
            if stripped == "#ifdef __cplusplus":
                foreign = 1
            elif foreign and stripped == "#endif":
                foreign = 0
            kept.append("")
        else:
            kept.append("" if foreign else line)
    return "\n".join(kept)


def body_of(statements: str, law: str) -> Any:
    """The syntax tree of some statements, as the body of a function."""
    from pycparser import c_parser

    text = f"{_TYPES}typedef int {law}_parameters; typedef int {law}_now; typedef int {law}_punned; void f(void) {{ {statements} }}"
    return c_parser.CParser().parse(text).ext[-1].body


_FIRST = {"used": "p", "status": "0u", "jump": "0u", "text": '""'}


def same(found: Any, wanted: Any) -> bool:
    """Equal syntax trees; declarations may stand in the found one if they start as they have to."""
    return bool(_shape(found) == _shape(wanted))


def _shape(node: Any) -> Any:
    if node is None or isinstance(node, str | int):
        return node
    if isinstance(node, list):
        kept = []
        for item in node:
            kind = type(item).__name__
            if kind == "Decl":
                start = getattr(item.init, "name", getattr(item.init, "value", None))
                if item.init is not None and start != _FIRST.get(item.name):
                    kept.append(f"{item.name} starts as {start}")
            elif kind != "Cast":
                kept.append(_shape(item))
        return kept
    kind = type(node).__name__
    parts = [(slot, getattr(node, slot)) for slot in node.__slots__ if slot not in ("coord", "__weakref__")]
    return kind, [(slot, _shape(list(value) if isinstance(value, tuple) else value)) for slot, value in parts]


def function_of(text: str) -> Any:
    """The syntax tree of a function of plain types."""
    from pycparser import c_parser

    return c_parser.CParser().parse(_TYPES + text).ext[-1]


def numbers(node: Any, fmt: Format) -> list[Fraction]:
    """The constants of an initialiser, nested lists flattened."""
    match type(node).__name__:
        case "InitList":
            return [v for item in node.exprs for v in numbers(item, fmt)]
        case "UnaryOp":
            return [-v for v in numbers(node.expr, fmt)]
        case "ID":
            return [Fraction(node.name == "true")]
        case _:
            text = node.value
            value = Fraction(text.rstrip("fu"))
            return [fmt.round(value) if node.type in ("float", "double") else value]
