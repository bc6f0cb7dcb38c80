"""Fixed point: scales, raw and physical values, findings; the laws of the raft in fixed32."""

from __future__ import annotations

import math
import subprocess
from pathlib import Path

import numpy as np
import pytest

from hybgen import Reference, check, compile, generate
from hybgen.diag.finding import LawError
from hybgen.emit import emit
from hybgen.expr.core import RefKind
from hybgen.law import load
from hybgen.law.model import Law
from hybgen.lower import lower
from hybgen.reference.machine import to_raw
from hybgen.reread import reread
from hybgen.sil import Chip, lockstep
from hybgen.step import build
from hybgen.step.model import Status
from tests.conftest import SPECS, law_of, run_both

TANK = """
    law: tank
    step: 100 ms
    number: fixed32
    inputs: {level: {unit: m, range: [0, 0.6], rate: 0.05 m/s}, pull: {vector: 2, unit: N, range: [-9, 9]}}
    parameters: {high: {value: 0.3 m, range: [0.2 m, 0.5 m], tunable: true}}
    states:
      pump: {logic: [off, on]}
      sum: {unit: m*s, range: [-4, 4]}
      mean: {unit: m, range: [0, 0.6], limit: true, initial: 0.1 m}
    flow: {map: {sum: level, mean: (level - mean) / (2 s)}}
    jumps:
      start: {set: pump == off and level >= high, map: {pump: on}, keep: [sum, mean]}
      stop: {set: pump == on and level <= 0.1 m, map: {pump: off}, keep: [sum, mean]}
    outputs:
      drive: {type: bool, value: pump == on}
      force: {unit: N, value: "pull[0] + pull[1]"}
"""


@pytest.mark.parametrize("path", SPECS, ids=lambda p: p.stem)
def test_the_laws_of_the_raft(path: object) -> None:
    made = build(load(path), number="fixed32")  # type: ignore[arg-type]
    assert lockstep.run(made, lanes=64, steps=300, injections=4).equal
    assert reread(made, emit(lower(made))) == ()


def smooth(law: Law, steps: int) -> dict[str, np.ndarray]:
    """Slow sines through the ranges of the inputs; switches that change rarely."""
    found: dict[str, np.ndarray] = {}
    for i, u in enumerate(law.inputs):
        wave = np.sin(2 * np.pi * np.arange(steps) * (i + 1) / 1777 + i)
        if u.type.kind == "real":
            assert u.low is not None and u.high is not None
            found[u.name] = float(u.low + u.high) / 2 + wave * float(u.high - u.low) * 0.49
        else:
            found[u.name] = wave > -0.8
    return found


@pytest.mark.parametrize("path", SPECS, ids=lambda p: p.stem)
def test_the_same_jumps_as_in_float64(path: object) -> None:
    """Up to one step: a threshold may be met one sample later in one of the formats."""
    law = load(path)  # type: ignore[arg-type]
    inputs = smooth(law, 6000)
    trails = []
    for number in ("float64", "fixed32"):
        chip = Chip(build(law, number=number))
        taken = []
        for k in range(6000):
            before = chip.jumps
            chip.step({n: a[k] for n, a in inputs.items()})
            if chip.jumps != before:
                taken.append((k, chip.last_jump))
        trails.append(taken)
    assert len(trails[0]) == len(trails[1]) > 0
    for (k, name), (other, same) in zip(*trails, strict=True):
        assert name == same and abs(k - other) <= 1


def test_scales_follow_from_ranges_and_are_shown() -> None:
    law = law_of(TANK)
    places = build(law).places
    assert places[(RefKind.INPUT, "level")] == 31 and places[(RefKind.INPUT, "pull")] == 27
    assert places[(RefKind.STATE, "sum")] == 27  # room for twice the range
    assert places[(RefKind.PARAMETER, "high")] == 31 and places[(RefKind.OUTPUT, "force")] == 26
    header = generate(law)["tank.h"]
    assert "int32_t level; /* m; 0 .. 0.6; Q0.31, resolution 4.66e-10 m */" in header
    assert "int32_t pull[2]; /* N; -9 .. 9; Q4.27, resolution 7.45e-09 N */" in header
    assert "float" not in header.replace("floating", "") and "double" not in generate(law)["tank.c"]


def test_physical_and_raw_values() -> None:
    law = law_of(TANK)
    twin, chip = Reference(law, parameters={"high": 0.25}), compile(law, parameters={"high": 0.25})
    assert twin.step({"level": 0.26, "pull": [1.5, -0.25]}) == chip.step({"level": 0.26, "pull": [1.5, -0.25]})
    assert chip.state["pump"] == "on" and chip.state["mean"] == pytest.approx(0.1 + 0.16 * 0.05, abs=1e-3)
    answer = chip.step({"level": round(0.3 * 2**31), "pull": [2**27, 2**26]}, raw=True)
    assert answer == {"drive": True, "force": 2**26 + 2**25}
    chip.state["mean"] = 0.5
    assert chip.state["mean"] == 0.5 and int(chip.fields["mean"][0]) == 2**30
    found, _, _ = run_both(law, {"level": np.linspace(0, 0.6, 50), "pull": np.ones((50, 2))})
    assert found["force"].dtype == np.float64 and set(found["force"]) == {2.0}
    assert (
        chip.run({"level": np.zeros(3, np.int32), "pull": np.ones((3, 2), np.int32)}, raw=True)["force"].dtype
        == np.int32
    )


@pytest.mark.parametrize("bad", [math.nan, math.inf, -math.inf, 0.7, -0.1, 1e300])
def test_what_is_no_sample_is_no_sample(bad: float) -> None:
    chip = Chip(law_of(TANK))
    chip.step({"level": 0.2, "pull": [0, 0]})
    assert not chip.status & Status.INVALID_INPUT
    chip.step({"level": bad, "pull": [0, 0]})
    assert chip.status & Status.INVALID_INPUT and chip.state["pump"] == "off"


def test_a_state_without_limit_is_held_where_32_bits_end() -> None:
    chip = Chip(law_of(TANK))
    chip.state["sum"] = 15.99
    for _ in range(3):
        chip.step({"level": 0.6, "pull": [0, 0]})
    assert chip.state["sum"] == (2**31 - 1) / 2**27


@pytest.mark.parametrize(
    ("old", "new", "code"),
    [
        ("range: [0, 0.6], rate", "range: [0, 1e25], rate", "HG421"),
        ("pull[0] + pull[1]", "pull[0] * 1 N / pull[1]", "HG422"),
        ("(level - mean) / (2 s)", "1 m/s * log(level / (1 m))", "HG422"),
        ("(level - mean) / (2 s)", "1 m/s * tan(9 * level / (1 m))", "HG422"),
    ],
)
def test_what_can_not_be_done_in_fixed_point_is_refused(old: str, new: str, code: str) -> None:
    assert old in TANK
    with pytest.raises(LawError) as caught:
        build(law_of(TANK.replace(old, new)))
    assert {f.code for f in caught.value.findings} == {code}
    assert all(f.where.line > 0 and f.hint for f in caught.value.findings)


COARSE = """
    law: coarse
    step: 100 ms
    number: fixed32
    inputs: {{level: {{unit: m, range: [0, {top} m], noise: {noise}}}}}
    states:
      pump: {{logic: [off, on]}}
      sum: {{unit: m*s, range: [-{wide}, {wide}]}}
    flow: {{map: {{sum: 0.001 * level}}}}
    jumps:
      start: {{set: pump == off and level >= {high} m, map: {{pump: on}}, keep: [sum]}}
      stop: {{set: pump == on and level <= 0.1 m, map: {{pump: off}}, keep: [sum]}}
    outputs: {{drive: {{type: bool, value: pump == on}}, total: {{unit: m*s, value: sum}}}}
"""


@pytest.mark.parametrize(
    ("values", "codes"),
    [
        ({"top": "0.6", "noise": "1 mm", "wide": "4", "high": "0.3"}, []),
        ({"top": "0.6", "noise": "1 mm", "wide": "1e6", "high": "0.3"}, ["HG423"]),
        ({"top": "1e6", "noise": "1e-4 m", "wide": "4", "high": "0.3"}, ["HG424"]),
        ({"top": "0.6", "noise": "1 mm", "wide": "4", "high": "0.100000001"}, ["HG425"]),
    ],
)
def test_what_the_resolution_is_too_coarse_for_is_said_with_numbers(values: dict[str, str], codes: list[str]) -> None:
    law = law_of(COARSE.format(**values))
    found = [f for f in check(law).findings if f.code in ("HG423", "HG424", "HG425")]
    assert [f.code for f in found] == codes
    assert all(f.value is not None and f.value["resolution"] > 0 and f.severity == "warning" for f in found)
    assert not [f for f in check(law, number="float64").findings if f.code in ("HG423", "HG424", "HG425")]


def test_check_speaks_of_the_format_asked_for() -> None:
    law = law_of(TANK.replace("level >= high", "(level + mean) / 2 >= high"))
    found = [f for f in check(law).findings if f.code == "HG430"]
    assert len(found) == 1 and found[0].value is not None and 0 < found[0].value["margin"] < 1e-8


@pytest.mark.parametrize("compiler", ["gcc -std=c99", "g++ -x c++", "clang -std=c99"])
def test_conversions_on_request(compiler: str, tmp_path: Path) -> None:
    """In C as in Python: nearest, ties to even, held, no number for what is not finite."""
    law = law_of(TANK)
    assert "_raw_level" not in generate(law)["tank.h"]
    files = generate(law, conversions=True)
    values = [
        0.0,
        0.3,
        -0.1,
        1e300,
        -1e300,
        0.75,
        1.5 * 2.0**-31,
        2.5 * 2.0**-31,
        -0.5 * 2.0**-31,
        -1.5 * 2.0**-31,
        1.0,
    ]
    rows = ", ".join(f"{v!r}" for v in values)
    main = f"""#include "tank.h"
#include <stdio.h>
int main(void)
{{
    static const double zero = 0.0;
    const double values[] = {{ {rows}, 1.0 / zero, -1.0 / zero, zero / zero }};
    int i;
    for (i = 0; i < {len(values) + 3}; i++) {{ printf("%d ", (int)tank_raw_level(values[i])); }}
    printf("%.17g %.17g\\n", tank_physical_level(123456789), tank_physical_force(-5));
    return 0;
}}
"""
    for name, text in {**files, "main.c": main}.items():
        (tmp_path / name).write_text(text)
    command = [*compiler.split(), "-O2", "-Wall", "-Wextra", "-Wno-div-by-zero", "main.c", "tank.c", "-o", "main"]
    subprocess.run(command, cwd=tmp_path, check=True, capture_output=True)
    *raws, level, force = subprocess.run(
        [f"{tmp_path}/main"], capture_output=True, text=True, check=True
    ).stdout.split()
    assert [int(r) for r in raws] == to_raw([*values, math.inf, -math.inf, math.nan], 31).tolist()
    assert (float(level), float(force)) == (123456789 / 2**31, -5 / 2**26)
    assert generate(law, number="float32", conversions=True) == generate(law, number="float32")
