"""Every float through every float32 function: `python -m tests.kernels.every_float [NAME ...]`.

The C that a law gets, against the C library's double functions (general-purpose reference, errors below one unit of a double);
the two functions of two arguments on 2**30 pairs. A few minutes on two cores.
"""

from __future__ import annotations

import subprocess
import sys
import tempfile
from pathlib import Path

import hybgen
from hybgen.kernels.errors import ULP
from hybgen.kernels.word import ELEMENTARY
from tests.conftest import law_of

REFERENCES = {"wrap": "turned"}
_TURNED = (
    "static inline double turned(double x) { return fabs(x) <= 3.14159265358979323846 ? x : atan2(sin(x), cos(x)); }\n"
)
COUNT = {1: 2**32, 2: 2**30}


def course() -> hybgen.Law:
    """A law that uses every function."""
    rows = [f"o_{n}: {{value: '{n}({'x' if arity == 1 else 'x, z'})'}}" for n, arity in ELEMENTARY.items()]
    return law_of(f"""
        law: course
        step: 1 s
        inputs: {{x: {{range: [-1, 1]}}, z: {{range: [-1, 1]}}}}
        outputs: {{{", ".join(rows)}}}
    """)


def worst(name: str, stride: int = 1) -> tuple[float, int]:
    """(largest error in units of the last place, number of arguments); each `stride`-th float."""
    harness = Path(__file__).with_name("harness.c").read_text()
    count = COUNT[ELEMENTARY[name]] // stride
    with tempfile.TemporaryDirectory() as folder:
        for file, text in {
            **hybgen.generate(course()),
            "harness.c": harness.replace("static double ulps", _TURNED + "static double ulps"),
        }.items():
            (Path(folder) / file).write_text(text)
        macros = {
            "FUNCTION": f"course_{name}",
            "REFERENCE": REFERENCES.get(name, name),
            "PAIRS": int(ELEMENTARY[name] == 2),
            "COUNT": count,
            "STRIDE": f"{stride}u",
        }
        flags = [f"-D{k}={v}" for k, v in macros.items()]
        command = ["gcc", "-std=gnu11", "-O2", "-fopenmp", "-w", *flags, "harness.c", "-o", "harness", "-lm"]
        subprocess.run(command, cwd=folder, check=True)
        done = subprocess.run([f"{folder}/harness"], capture_output=True, text=True, check=True)
    return float(done.stdout.split()[0]), count


def main(names: list[str]) -> int:
    """Prints one row for each function; 1 if one is beyond its stated bound."""
    bad = 0
    print(f"{'function':10s}{'arguments':>12s}{'worst ulp':>12s}{'stated':>9s}")
    for name in names or list(ELEMENTARY):
        found, count = worst(name)
        stated = ULP["float32"][name]
        bad += found > stated
        print(f"{name:10s}{count:12d}{found:12.4f}{stated:9.3f}{'  BEYOND' if found > stated else ''}", flush=True)
    return int(bad > 0)


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))
