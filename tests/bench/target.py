"""Size and executed instructions of the laws' C on emulated cores; outputs, states and status are compared with the reference.

python -m tests.bench.target [--compiler zig|gcc] [LAW ...]
"""

from __future__ import annotations

import argparse
import statistics
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

import hybgen
from hybgen.diag.finding import LawError
from hybgen.law.model import Law
from hybgen.numbers.format import FORMATS
from hybgen.reference import Reference
from hybgen.sil import Chip
from hybgen.sil.chip import Library, _places
from hybgen.sil.lockstep import compared
from hybgen.sil.vectors import Stimulus
from hybgen.step import build as step_law
from hybgen.step.model import StepLaw
from tests.bench.cores import COMPILERS, CORES, DATA, OPTIMISATIONS, Board, MissingTool, build, check_core, sizes

ROOT = Path(__file__).resolve().parent.parent.parent
LANES, STEPS = 32, 128
"""Half of the lanes begin at the law's start, half at any state."""
NUMBERS = tuple(dict.fromkeys([*FORMATS, "fixed32"]))
ABOUT = f"""code, constants: bytes of NAME.c; runtime: bytes of the compiler's library that it pulls in; stack: bytes
mean, most: executed instructions of a step over {LANES * STEPS} steps ({LANES // 2} runs from the start, {LANES // 2} from any state)"""


@dataclass(slots=True)
class Lanes:
    """The instances of a law on a board; stands where the function of a loaded shared object would."""

    name: str
    board: Board
    counts: list[int]
    """Executed instructions of each step."""

    def __call__(
        self,
        state: NDArray[Any],
        parameters: NDArray[Any],
        u: NDArray[Any],
        y: NDArray[Any],
        status: NDArray[Any],
        lanes: int,
        steps: int,
    ) -> None:
        """Steps in a row, as the C of `sil.chip` does it."""
        assert steps == 1
        arrays = (state, parameters, u, y)
        places, place = [], DATA
        for array in arrays:
            self.board.write(place, array.tobytes())
            places.append(place)
            place += (array.nbytes + 7) // 8 * 8
        answers = status.reshape(-1)
        for lane in range(lanes):
            before = self.board.instructions
            at = [start + lane * array.dtype.itemsize for start, array in zip(places, arrays, strict=True)]
            answers[lane] = self.board.call(f"{self.name}_step", *at)
            self.counts.append(self.board.instructions - before)
        for start, array in ((places[0], state), (places[3], y)):
            array.reshape(-1)[...] = np.frombuffer(self.board.read(start, array.nbytes), array.dtype)


def places(made: StepLaw) -> tuple[str, list[int]]:
    """C of a table with sizes and offsets of the structs, and what numpy takes them for."""
    text, values = _places(made)
    include = f'#include <stddef.h>\n#include "{made.law.name}.h"\n'
    return f"{include}extern const uint32_t bench_places[];\nconst uint32_t bench_places[] = {{ {text} }};\n", values


def compare(made: StepLaw, lanes: Lanes) -> None:
    """Runs board and reference in lock-step; a difference is an AssertionError."""
    chip = Chip(made, lanes=LANES, library=Library(lanes, lambda _, array: array))
    reference = Reference(made, lanes=LANES)
    stimulus = Stimulus.of(made, 6)
    for name, array in stimulus.states(LANES // 2).items():
        for machine in (chip, reference):
            machine.fields[name][LANES // 2 :] = array
    samples = stimulus.inputs(STEPS, LANES)
    for k in range(STEPS):
        now = {n: a[k] for n, a in samples.items()}
        wrong = compared(reference, chip, reference._advance(now), chip._advance(now))
        assert wrong is None, f"{made.law.name}, step {k}: reference and emulated core differ: {wrong}"


def row(law: Law, made: StepLaw, number: str, core: str, opt: str, compiler: str) -> str:
    """One line of the table."""
    text, values = places(made)
    sources = {**hybgen.generate(law, number=number), "places.c": text}
    elf = build(sources, core, opt, compiler=compiler)
    lanes = Lanes(law.name, Board(elf, core), [])
    table = lanes.board.read(elf.symbols["bench_places"], 4 * len(values))
    assert np.frombuffer(table, "<u4").tolist() == values, f"the structs of {law.name} lie differently on {core}"
    compare(made, lanes)
    own = sizes(elf, law.name)
    return (
        f"{law.name:<12} {number:<8} {core:<11} {opt:<4} {own.code:6} {own.constants:10} {elf.runtime:8} "
        f"{lanes.board.stack:6} {statistics.fmean(lanes.counts):9.1f} {max(lanes.counts):6}"
    )


def rows(path: Path, compiler: str) -> Iterator[str]:
    """The lines of one law; a number format that can't be had is named."""
    law = hybgen.load(path)
    for number in NUMBERS:
        try:
            made = step_law(law, number=number)
        except LawError as error:
            yield f"{law.name:<12} {number:<8} not available: {error.findings[0].message}"
            continue
        except KeyError:
            assert number not in FORMATS
            yield f"{law.name:<12} {number:<8} not available: no number format of this version"
            continue
        for core in CORES:
            for opt in OPTIMISATIONS:
                yield row(law, made, number, core, opt, compiler)


def main() -> None:
    """Prints the table. Ends with a message where a tool is missing."""
    parser = argparse.ArgumentParser(prog="python -m tests.bench.target", description=ABOUT)
    parser.add_argument("laws", nargs="*", type=Path, default=sorted((ROOT / "specs").glob("*.yaml")))
    parser.add_argument("--compiler", choices=COMPILERS, default="zig")
    options = parser.parse_args()
    try:
        for core in CORES:
            check_core(core, compiler=options.compiler)
    except MissingTool as error:
        raise SystemExit(str(error)) from None
    print(ABOUT)
    print(
        f"{'law':<12} {'number':<8} {'core':<11} {'':<4} {'code':>6} {'constants':>10} {'runtime':>8} "
        f"{'stack':>6} {'mean':>9} {'most':>6}"
    )
    for path in options.laws:
        for line in rows(path, options.compiler):
            print(line, flush=True)


if __name__ == "__main__":
    main()
