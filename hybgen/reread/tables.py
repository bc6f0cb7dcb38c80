"""The tables of the C: their numbers, and their functions, which have loops and are compared with the one right text."""

from __future__ import annotations

from collections.abc import Iterator
from fractions import Fraction
from typing import Any

from hybgen.reread.source import Source, function_of, numbers
from hybgen.step.model import StepGrid, StepLaw, StepTable

_CURVE = """static {real} {name}({real} x)
{{
    {index}
    {real} y;
    if (x <= {name}_x[0]) {{ y = {name}_y[0]; }}
    else if (x >= {name}_x[{last}]) {{ y = {name}_y[{last}]; }}
    else {{ {search} y = {name}_y[{i}] + ({name}_slope[{i}] * (x - {name}_x[{i}])); }}
    return y;
}}"""
_SEARCH = "while ((i < {before}u) && (x >= {name}_x[i + 1u])) {{ i++; }}"
_GRID = """static {real} {name}({real} x, {real} y)
{{
    uint32_t i = 0u; uint32_t j = 0u; uint32_t i_next; uint32_t j_next;
    {real} s = {zero}; {real} t = {zero}; {real} low; {real} high;
    while ((i < {last_x}u) && (x >= {name}_x[i + 1u])) {{ i++; }}
    i_next = i;
    if ((i < {last_x}u) && !(x <= {name}_x[0])) {{ i_next = i + 1u; s = (x - {name}_x[i]) * {name}_per_x[i]; }}
    while ((j < {last_y}u) && (y >= {name}_y[j + 1u])) {{ j++; }}
    j_next = j;
    if ((j < {last_y}u) && !(y <= {name}_y[0])) {{ j_next = j + 1u; t = (y - {name}_y[j]) * {name}_per_y[j]; }}
    low = {name}_z[i][j] + (s * ({name}_z[i_next][j] - {name}_z[i][j]));
    high = {name}_z[i][j_next] + (s * ({name}_z[i_next][j_next] - {name}_z[i][j_next]));
    return low + (t * (high - low));
}}"""


def names(made: StepLaw, source: Source) -> dict[str, str]:
    """Name of a table's function in C, without the law's prefix -> the table (its name, `_` added where it was taken)."""
    prefix = f"{made.law.name}_"
    found = [f.removeprefix(prefix) for f in source.functions if {f"{f}_slope", f"{f}_z"} & source.arrays.keys()]
    known = {t.name for t in made.tables}
    return {c: c if c in known else c.rstrip("_") for c in found}


def wrong(made: StepLaw, source: Source) -> Iterator[str]:
    """Names of the arrays and functions of tables that are not what they have to be."""
    real = "float" if made.format.precision == 24 else "double"
    for c_name, table_name in names(made, source).items():
        name = f"{made.law.name}_{c_name}"
        table = next(t for t in made.tables if t.name == table_name)
        for part, values in _parts(table).items():
            if not _holds(source, f"{name}_{part}", values, real, made):
                yield f"{name}_{part}"
        if _tree(source.functions[name]) != _tree(function_of(_text(table, name, real))):
            yield name


_Values = tuple[Fraction, ...] | tuple[tuple[Fraction, ...], ...]


def _parts(table: StepTable | StepGrid) -> dict[str, _Values]:
    if isinstance(table, StepTable):
        return {"x": table.x, "y": table.y, "slope": table.slope}
    return {"x": table.x, "y": table.y, "z": table.z, "per_x": table.per_x, "per_y": table.per_y}


def _holds(source: Source, name: str, values: _Values, real: str, made: StepLaw) -> bool:
    """Is the array of this type, with these lengths, and has it these numbers, row by row?"""
    lengths = (len(values), *((len(values[0]),) if isinstance(values[0], tuple) else ()))
    found: list[Any] = [numbers(item, made.format) for item in source.initial[name].exprs]
    wanted = [list(v) if isinstance(v, tuple) else [v] for v in values]
    return source.arrays[name] == (real, lengths) and found == wanted


def _text(table: StepTable | StepGrid, name: str, real: str) -> str:
    last = len(table.x) - 1
    if isinstance(table, StepGrid):
        zero = "0.0f" if real == "float" else "0.0"
        return _GRID.format(real=real, name=name, zero=zero, last_x=last, last_y=len(table.y) - 1)
    search, index, i = (
        (_SEARCH.format(before=last - 1, name=name), "uint32_t i = 0u;", "i") if last > 1 else ("", "", "0")
    )
    return _CURVE.format(real=real, name=name, last=last, search=search, index=index, i=i)


def _tree(node: Any) -> Any:
    """All of a syntax tree but its places."""
    if isinstance(node, list | tuple):
        return [_tree(item) for item in node]
    if node is None or isinstance(node, str | int):
        return node
    parts = [(slot, getattr(node, slot)) for slot in node.__slots__ if slot not in ("coord", "__weakref__")]
    return type(node).__name__, [(slot, _tree(value)) for slot, value in parts]
