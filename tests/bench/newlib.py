"""What the elementary functions of newlib cost on emulated cores, and how far their answers are off: a yardstick.

python -m tests.bench.newlib [FUNCTION ...]
"""

from __future__ import annotations

import argparse
import math
import struct
from collections.abc import Sequence

import mpmath
import numpy as np

from tests.bench.cores import CORES, MissingTool, build_newlib, check_core, measure

CALLS = 1000
DOMAINS: dict[str, tuple[tuple[float, float], ...]] = {
    "sin": ((-10.0, 10.0),),
    "cos": ((-10.0, 10.0),),
    "tan": ((-10.0, 10.0),),
    "asin": ((-1.0, 1.0),),
    "acos": ((-1.0, 1.0),),
    "exp": ((-20.0, 20.0),),
    "log": ((0.001, 1000.0),),
    "tanh": ((-5.0, 5.0),),
    "sqrt": ((0.0, 1000.0),),
    "atan2": ((-10.0, 10.0), (-10.0, 10.0)),
    "hypot": ((-10.0, 10.0), (-10.0, 10.0)),
}
"""Where the arguments lie, evenly spread."""
ABOUT = f"""code, constants: bytes of all that is linked: soft arithmetic too, and for most functions a record of about 1 KB for errno
mean, most: instructions of a call; ulp: largest error of {CALLS} calls, in units in the last place"""
FUNCTIONS = tuple(f"{name}{suffix}" for suffix in ("f", "") for name in DOMAINS)


def arguments(function: str) -> list[tuple[float, ...]]:
    """The arguments of the calls, as numbers of the function's format."""
    single = function not in DOMAINS
    random = np.random.Generator(np.random.PCG64(1))
    columns = [random.uniform(low, high, CALLS) for low, high in DOMAINS[function.removesuffix("f")]]
    return [tuple(float(np.float32(v)) if single else float(v) for v in row) for row in zip(*columns, strict=True)]


def words(values: Sequence[float], single: bool) -> list[int]:
    """The bits of numbers as 32-bit words, the lower one first."""
    packed = struct.pack(f"<{len(values)}{'f' if single else 'd'}", *values)
    return list(struct.unpack(f"<{len(packed) // 4}I", packed))


def error(function: str, values: tuple[float, ...], answer: tuple[int, int], single: bool) -> float:
    """Units in the last place between the answer and the exact value (mpmath at 40 digits)."""
    given = (
        struct.unpack("<f", struct.pack("<I", answer[0]))[0]
        if single
        else struct.unpack("<d", struct.pack("<2I", *answer))[0]
    )
    with mpmath.workdps(40):
        exact = getattr(mpmath, function.removesuffix("f"))(*map(mpmath.mpf, values))
        digits = 24 if single else 53
        return float(abs(mpmath.mpf(given) - exact) / mpmath.ldexp(1, math.frexp(float(exact))[1] - digits))


def row(function: str, core: str) -> str:
    """One line of the table. An answer that is far off is an AssertionError: then it was not the function that ran."""
    single = function not in DOMAINS
    calls = arguments(function)
    elf = build_newlib(function, core, "-O2")
    cost, answers = measure(elf, f"bench_{function}", [words(v, single) for v in calls], core)
    worst = max(error(function, v, a, single) for v, a in zip(calls, answers, strict=True))
    assert worst < 4, f"{function} on {core} is {worst} units off"
    return f"{function:<8} {core:<11} {elf.linked.code:6} {elf.linked.constants:10} {cost.mean:9.1f} {cost.most:6} {worst:7.2f}"


def main() -> None:
    """Prints the table. Ends with a message where a tool is missing."""
    parser = argparse.ArgumentParser(prog="python -m tests.bench.newlib", description=ABOUT)
    parser.add_argument("functions", nargs="*", default=FUNCTIONS, metavar="FUNCTION", help=", ".join(FUNCTIONS))
    options = parser.parse_args()
    if unknown := set(options.functions) - set(FUNCTIONS):
        parser.error(f"unknown: {', '.join(sorted(unknown))}; there are {', '.join(FUNCTIONS)}")
    try:
        for core in CORES:
            check_core(core, compiler="gcc")
        print(ABOUT)
        print(f"{'function':<8} {'core':<11} {'code':>6} {'constants':>10} {'mean':>9} {'most':>6} {'ulp':>7}")
        for function in options.functions:
            for core in CORES:
                print(row(function, core), flush=True)
    except MissingTool as missing:
        raise SystemExit(str(missing)) from None


if __name__ == "__main__":
    main()
