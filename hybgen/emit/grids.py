"""The C of tables of two inputs. Semantics: StepGrid of the step law."""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction

from hybgen.emit.text import comment, real_literal, wrapped
from hybgen.ir.model import Grid, Program

_GRID = """/* {note}; per: 1 / distance to the next point */
{arrays}

static {type} {name}({type} x, {type} y)
{{
    uint32_t i = 0u;
    uint32_t j = 0u;
    uint32_t i_next;
    uint32_t j_next;
    {type} s = {zero};
    {type} t = {zero};
    {type} low;
    {type} high;

{along_x}
{along_y}
    low = {name}_z[i][j] + (s * ({name}_z[i_next][j] - {name}_z[i][j]));
    high = {name}_z[i][j_next] + (s * ({name}_z[i_next][j_next] - {name}_z[i][j_next]));
    return low + (t * (high - low));
}}"""
_ALONG = """    while (({i} < {last}u) && ({x} >= {name}_{x}[{i} + 1u])) {{
        {i}++;
    }}
    {i}_next = {i};
    if (({i} < {last}u) && !({x} <= {name}_{x}[0])) {{
        {i}_next = {i} + 1u;
        {s} = ({x} - {name}_{x}[{i}]) * {name}_per_{x}[{i}];
    }}"""


def grid(table: Grid, program: Program) -> str:
    """The constants of a table of two inputs, and its function."""
    n, m = len(table.x), len(table.y)
    rows = [f"    {{ {_numbers(row, program)} }}{',' if k + 1 < n else ''}" for k, row in enumerate(table.z)]
    arrays = [
        _array(table, "x", table.x, program),
        _array(table, "y", table.y, program),
        f"static const {program.real} {table.name}_z[{n}][{m}] = {{",
        *rows,
        "};",
        _array(table, "per_x", table.per_x, program),
        _array(table, "per_y", table.per_y, program),
    ]
    text = _GRID.format(
        note=comment(table.note),
        arrays="\n".join(arrays),
        type=program.real,
        name=table.name,
        zero=real_literal(Fraction(0), program),
        along_x=_ALONG.format(i="i", x="x", s="s", last=n - 1, name=table.name),
        along_y=_ALONG.format(i="j", x="y", s="t", last=m - 1, name=table.name),
    )
    return "\n".join(piece for line in text.split("\n") for piece in wrapped(line))


def _numbers(values: Sequence[Fraction], program: Program) -> str:
    return ", ".join(real_literal(v, program) for v in values)


def _array(table: Grid, part: str, values: Sequence[Fraction], program: Program) -> str:
    return f"static const {program.real} {table.name}_{part}[{len(values)}] = {{ {_numbers(values, program)} }};"
