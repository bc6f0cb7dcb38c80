"""The helper functions: one piece of C for each operation that is no operator. Semantics: the table OPS."""

from __future__ import annotations

from fractions import Fraction

from hybgen.emit.grids import grid
from hybgen.emit.text import comment, real_literal
from hybgen.ir.model import Grid, Program, Table

_PAIR = "static {type} {name}({type} a, {type} b)\n{{\n    return (b {sign} a) ? b : a;\n}}"
_CLAMP = (
    "static {type} {name}({type} x, {type} low, {type} high)\n{{\n"
    "    return (x < low) ? low : ((x > high) ? high : x);\n}}"
)
_SIGN = "static {type} {name}({type} a)\n{{\n    return (a > {zero}) ? {one} : ((a < {zero}) ? -{one} : {zero});\n}}"
_TEMPLATES: dict[str, str] = {
    "abs": "static {type} {name}({type} a)\n{{\n    return (a < {zero}) ? -a : a;\n}}",
    "iabs": "static {type} {name}({type} a)\n{{\n    return (a < 0) ? -a : a;\n}}",
    "min": _PAIR,
    "max": _PAIR,
    "imin": _PAIR,
    "imax": _PAIR,
    "clamp": _CLAMP,
    "iclamp": _CLAMP,
    "sign": _SIGN,
    "isign": _SIGN,
    "finite": "/* false for infinities and for what is no number */\nstatic bool {name}({type} a)\n{{\n"
    "    return (a >= -{largest}) && (a <= {largest});\n}}",
    "floor": "/* from {whole} on every number is whole */\nstatic {type} {name}({type} a)\n{{\n    {type} down = a;\n\n"
    "    if ((a > -{whole}) && (a < {whole})) {{\n        down = ({type})({long})a;\n        if (down > a) {{\n"
    "            down = down - {one};\n        }}\n    }}\n    return down;\n}}",
    "to_steps": "/* whole steps, rounded up; a few units in the last place above a whole number are that number */\n"
    "static int32_t {name}({type} a)\n{{\n    int32_t steps = 0;\n\n    if (a >= {top}) {{\n        steps = 2147483647;\n"
    "    }} else if (a > {zero}) {{\n        steps = (int32_t)a;\n"
    "        if ((a - ({type})steps) > (a * {near})) {{\n            steps = steps + 1;\n        }}\n    }} else {{\n"
    "        /* no time */\n    }}\n    return steps;\n}}",
}


def helper(op: str, program: Program) -> str:
    """The C of one helper function."""
    whole = op.startswith("i") and op != "finite"

    def text(value: Fraction | int) -> str:
        return str(value) if whole else real_literal(Fraction(value), program)

    exact = 2 ** (program.precision - 1)
    top = 2**31 if program.precision == 24 else 2**31 - 1
    return _TEMPLATES[op].format(
        name=f"{program.name}_{op}",
        type="int32_t" if whole else program.real,
        zero=text(0),
        one=text(1),
        sign="<" if op.endswith("min") else ">",
        largest=real_literal(program.largest, program),
        whole=real_literal(Fraction(exact), program),
        long="int32_t" if program.precision == 24 else "int64_t",
        top=real_literal(Fraction(top), program),
        near=real_literal(Fraction(8, 2**program.precision), program),
    )


_LOOKUP = """/* {note} */
static const {type} {name}_x[{n}] = {{ {x} }};
static const {type} {name}_y[{n}] = {{ {y} }};
static const {type} {name}_slope[{m}] = {{ {slope} }};

static {type} {name}({type} x)
{{
{index}    {type} y;

    if (x <= {name}_x[0]) {{
        y = {name}_y[0];
    }} else if (x >= {name}_x[{m}]) {{
        y = {name}_y[{m}];
    }} else {{
{search}        y = {name}_y[{at}] + ({name}_slope[{at}] * (x - {name}_x[{at}]));
    }}
    return y;
}}"""
_INDEX = "    uint32_t i = 0u;\n"
_SEARCH = """        while ((i < {last}u) && (x >= {name}_x[i + 1u])) {{
            i++;
        }}
"""


def lookups(program: Program, used: frozenset[str]) -> list[str]:
    """The C of the tables that are used."""
    made = []
    for t in program.tables:
        if t.name in used and isinstance(t, Grid):
            made.append(grid(t, program))
        elif t.name in used and isinstance(t, Table):
            rows = {k: ", ".join(real_literal(v, program) for v in getattr(t, k)) for k in ("x", "y", "slope")}
            n = len(t.x)
            search = _SEARCH.format(name=t.name, last=n - 2) if n > 2 else ""
            made.append(
                _LOOKUP.format(
                    name=t.name,
                    type=program.real,
                    n=n,
                    m=n - 1,
                    note=comment(t.note),
                    index=_INDEX if search else "",
                    search=search,
                    at="i" if search else "0",
                    **rows,
                )
            )
    return made
