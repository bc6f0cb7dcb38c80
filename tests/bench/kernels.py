"""What the elementary functions of generated C cost on emulated cores, beside those of newlib: bytes, instructions, errors.

python -m tests.bench.kernels [FUNCTION ...]
"""

from __future__ import annotations

import argparse
import math

import hybgen
from hybgen.emit.kernels import functions
from hybgen.kernels.errors import RELATIVE, ULP
from hybgen.kernels.word import ELEMENTARY
from hybgen.law import Law
from hybgen.lower import lower
from hybgen.step import build
from tests.bench.cores import CORES, Counted, MissingTool, build_newlib, check_core, count_function, measure
from tests.bench.newlib import arguments, words
from tests.conftest import law_of

ABOUT = """bytes: all that one function links, runtime included; mean: instructions of a call, over 1000 calls; /newlib: share of newlib's
(gcc's soft arithmetic); error: the stated bound, in units in the last place (fixed32: half a unit of the result's resolution and this share)"""
PLACES = 20
"""Fixed point: places of the arguments and of the result."""


def law(name: str, number: str) -> Law:
    """A law that uses one function."""
    call = f"{name}(u)" if ELEMENTARY[name] == 1 else f"{name}(u, v)"
    return law_of(f"""
        law: one
        step: 1 s
        number: {number}
        inputs: {{u: {{range: [0.1, 0.9]}}, v: {{range: [0.1, 0.9]}}}}
        outputs: {{y: {{value: "{call}"}}}}
    """)


def source(name: str, number: str) -> tuple[str, str]:
    """(C of the function with a global wrapper that takes and gives words, the wrapper's name)."""
    program = lower(build(law(name, number)))
    count = ELEMENTARY[name]
    operation = name if number != "fixed32" else f"fixed_{name}"
    text = "\n\n".join(functions([operation], program))
    if number == "fixed32":
        parameters = ", ".join(f"uint32_t a{i}" for i in range(count))
        raws = ", ".join([f"(int32_t)a{i}" for i in range(count)] + [str(PLACES)] * (count + 1))
        wrapper = f"uint32_t called({parameters})\n{{\n    return (uint32_t)one_{operation}({raws});\n}}"
    elif number == "float32":
        parameters = ", ".join(f"uint32_t a{i}" for i in range(count))
        values = ", ".join(f"one_real(a{i})" for i in range(count))
        wrapper = f"uint32_t called({parameters})\n{{\n    return one_bits(one_{name}({values}));\n}}"
    else:
        parameters = ", ".join(f"uint32_t a{i}, uint32_t b{i}" for i in range(count))
        values = ", ".join(f"one_real(((uint64_t)b{i} << 32) | a{i})" for i in range(count))
        wrapper = f"uint64_t called({parameters})\n{{\n    return one_bits(one_{name}({values}));\n}}"
    head = "#include <stdbool.h>\n#include <stdint.h>\n\n"
    first = wrapper.partition("\n")[0]
    return f"{head}{text}\n\n{first};\n{wrapper}\n", "called"


def calls(name: str, number: str) -> list[list[int]]:
    """The arguments as words: those of the benchmark of newlib."""
    rows = (
        arguments("sin" if name == "wrap" else name if number == "float64" else f"{name}f")
        if name != "wrap"
        else arguments("sinf")
    )
    if number == "fixed32":
        return [[math.floor(v * 2**PLACES) % 2**32 for v in row] for row in rows]
    return [words(row, number == "float32") for row in rows]


def newlib(name: str, number: str, core: str) -> Counted | None:
    """What newlib's function costs; there is no wrap, and nothing in fixed point."""
    if name == "wrap" or number == "fixed32":
        return None
    function = name if number == "float64" else f"{name}f"
    elf = build_newlib(function, core, "-O2")
    return measure(elf, f"bench_{function}", calls(name, number), core)[0]


def row(name: str, number: str, core: str) -> str:
    """One line of the table."""
    text, symbol = source(name, number)
    cost = count_function(text, symbol, calls(name, number), core, "-O2")
    other = newlib(name, number, core)
    error = f"{ULP[number][name]:.2f}" if number != "fixed32" else f"2^{math.log2(RELATIVE[name]):.0f}"
    shares = f"{cost.bytes / other.bytes:8.2f} {cost.mean / other.mean:8.2f}" if other else f"{'-':>8} {'-':>8}"
    return f"{name:<7} {number:<8} {core:<11} {cost.bytes:6} {cost.mean:8.0f} {cost.most:6} {shares} {error:>6}"


def main() -> None:
    """Prints the table. Ends with a message where a tool is missing."""
    parser = argparse.ArgumentParser(prog="python -m tests.bench.kernels", description=ABOUT)
    parser.add_argument(
        "functions", nargs="*", default=list(ELEMENTARY), metavar="FUNCTION", help=", ".join(ELEMENTARY)
    )
    options = parser.parse_args()
    if unknown := set(options.functions) - set(ELEMENTARY):
        parser.error(f"unknown: {', '.join(sorted(unknown))}; there are {', '.join(ELEMENTARY)}")
    try:
        for core in CORES:
            check_core(core)
        print(f"hybgen {hybgen.__version__}. {ABOUT}")
        heads = ("bytes", "mean", "most", "/newlib", "/newlib", "error")
        print(
            f"{'':<7} {'':<8} {'':<11} {heads[0]:>6} {heads[1]:>8} {heads[2]:>6} {heads[3]:>8} {heads[4]:>8} {heads[5]:>6}"
        )
        for name in options.functions:
            for number in ("float32", "float64", "fixed32"):
                for core in CORES:
                    print(row(name, number, core), flush=True)
    except MissingTool as missing:
        raise SystemExit(str(missing)) from None


if __name__ == "__main__":
    main()
