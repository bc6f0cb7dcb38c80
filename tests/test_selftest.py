"""The self-test of the target: it answers 0 where the C is right, and something else where compiler, flags, core or law are not."""

from __future__ import annotations

import json
import random
import re
import subprocess
import textwrap
from collections import Counter
from collections.abc import Iterator, Mapping
from functools import cache
from pathlib import Path

import numpy as np
import pytest

from hybgen.cli.main import main
from hybgen.diag.finding import LawError
from hybgen.emit import emit
from hybgen.law import Law, load, read
from hybgen.lower import lower
from hybgen.selftests import selftest
from hybgen.sil import board
from hybgen.sil.toolchain import WARNINGS
from hybgen.step import build
from tests.conftest import ROOT, SPECS, law_of
from tests.generated import COLLIDING, SMALLEST
from tests.strategies import law_text

NUMBERS = ("float32", "float64", "fixed32")
PLAIN = ("-std=c99", "-O2", "-ffp-contract=off", "-fPIC", "-shared")
STRICT = (*PLAIN, *WARNINGS)
BLEND = """
    law: blend
    step: 100 ms
    number: {number}
    inputs: {{a: {{range: [-10, 10]}}, b: {{range: [1, 10]}}}}
    parameters: {{k: {{value: 0.37, range: [0, 1], tunable: true}}}}
    states: {{x: {{range: [-100, 100]}}}}
    sample: {{x: k * x + b * a}}
    outputs: {{y: {{value: a * b - x}}, z: {{value: a / b}}}}
"""
EVERYTHING = """
    law: raft
    step: 20 ms
    number: {number}
    inputs:
      course: {{range: [-3, 3], invalid: hold}}
      speed: {{range: [0, 2], unit: m/s, invalid: 0.5}}
      battery: {{range: [9, 15], unit: V, invalid: clamp}}
      wind: {{range: [-4, 4], vector: 2}}
      count: {{type: integer, range: [0, 900]}}
      armed: {{type: bool}}
    parameters:
      gain: {{value: 0.7, range: [0.1, 2], tunable: true}}
      wait: {{value: 0.07 s, range: [0 s, 1 s], tunable: true}}
    tables:
      trim: {{x: [-3, 0, 1, 3], y: [0.5, 0.25, 0.125, 0.75]}}
      thrust:
        x: [0, 0.5, 2]
        y: [10, 12, 14]
        z: [[10, 20, 27], [8, 17, 23], [0, 3, 6]]
        x_unit: m/s
        y_unit: V
    states:
      mode: {{logic: [rest, sail, turn]}}
      side: {{logic: [-1, 1]}}
      idle: {{timer: 10 s}}
      laps: {{count: 5}}
      drift: {{range: [-9, 9], vector: 2, limit: true}}
      mean: {{range: [-5, 5], limit: true}}
    jumps:
      go: {{set: armed and mode == rest and idle >= wait, map: {{mode: sail, laps: laps + 1}}, keep: [idle]}}
      tack: {{set: mode == sail and sin(course) > 0.5, map: {{mode: turn, side: -side, idle: 0 s}}}}
      stop: {{set: mode != rest and (not armed or not valid(speed)), map: {{mode: rest, idle: 0 s}}}}
    flow:
      map: {{"drift": "wind / (2 s)", "mean": "(trim(course) - mean) / (3 s)"}}
    outputs:
      push: {{value: "gain * thrust(speed, battery)"}}
      heading: {{value: "atan2(drift[0], 1 + drift[1] * drift[1])"}}
      steady: {{value: "floor(mean) + count"}}
      shown: {{value: mode}}
      drift_now: {{value: drift}}
"""


@cache
def files_of(law: Law, number: str) -> Mapping[str, str]:
    """NAME.h, NAME.c and NAME_selftest.c."""
    made = build(law, number=number)
    return {**emit(lower(made)), **selftest(made)}


@cache
def spec(stem: str) -> Law:
    return load(ROOT / "specs" / f"{stem}.yaml")


def ranges(text: str) -> dict[str, range]:
    """What the numbers of the head mean: words -> numbers."""
    rows = re.findall(r"^ \*   (\d+)(?: \.\. (\d+))?: (.*)$", text, re.MULTILINE)
    return {words: range(int(first), int(last or first) + 1) for first, last, words in rows}


def meaning(text: str, number: int) -> str:
    """What one number means."""
    return next(words for words, numbers in ranges(text).items() if number in numbers)


# ---------------------------------------------------------------------------------------------------- right C


@pytest.mark.parametrize("number", NUMBERS)
@pytest.mark.parametrize("path", SPECS, ids=lambda p: p.stem)
@pytest.mark.parametrize(
    ("compiler", "flags"),
    [
        ("gcc", ("-O0",)),
        ("gcc", ("-O2",)),
        ("gcc", ("-O3", "-flto", "-march=native")),
        ("clang", ("-O2",)),
        ("g++ -std=c++11 -x c++", ("-O2",)),
    ],
    ids=lambda v: "".join(v).replace(" ", ""),
)
def test_right_c_answers_zero_and_no_compiler_warns(
    path: Path, number: str, compiler: str, flags: tuple[str, ...], monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setenv("CC", compiler)
    language = () if "c++" in compiler else ("-std=c99",)
    files = files_of(spec(path.stem), number)
    assert board.answer(files, path.stem, (*language, *STRICT[2:], *flags)) == 0


@pytest.mark.parametrize("number", NUMBERS)
def test_a_law_with_everything(number: str) -> None:
    law = law_of(EVERYTHING.format(number=number))
    files = files_of(law, number)
    assert board.answer(files, "raft", STRICT) == 0
    assert "takes 3 of the 3 jumps" in files["raft_selftest.c"]


@pytest.mark.parametrize("text", [COLLIDING, SMALLEST, SMALLEST.replace("smallest", "k")], ids=["names", "small", "k"])
def test_names_do_not_collide(text: str) -> None:
    law = law_of(text)
    assert board.answer(files_of(law, law.number), law.name, STRICT) == 0


def test_a_state_may_be_called_selftest() -> None:
    law = law_of("""
        law: raft
        step: 1 s
        inputs: {u: {range: [0, 1]}}
        states: {selftest: {logic: [bits, real]}, selftest_bits: {logic: [u, law]}}
        jumps: {go: {set: selftest == bits and u > 0.5, map: {selftest: real, selftest_bits: law}}}
        outputs: {y: {value: 2 * u + 0.3}}
        """)
    assert board.answer(files_of(law, "float32"), "raft", STRICT) == 0


def test_random_laws() -> None:
    count = 0
    for seed in range(14):
        try:
            law = read(law_text(random.Random(seed), "any_law").encode(), "any_law.yaml")
            files = files_of(law, NUMBERS[seed % 2])
        except LawError:
            continue
        count += 1
        assert board.answer(files, "any_law", PLAIN) == 0, seed
    assert count >= 11


@pytest.mark.parametrize("number", NUMBERS)
def test_it_needs_nothing_but_the_law(number: str, tmp_path: Path) -> None:
    """No header but the law's, no function but the law's; the same bytes twice; the tables are in flash."""
    files = files_of(spec("winch"), number)
    text = files["winch_selftest.c"]
    assert re.findall(r"#include (.*)", text) == ['"winch.h"']
    assert selftest(spec("winch"), number=number) == {"winch_selftest.c": text}
    for name in files:
        (tmp_path / name).write_text(files[name], encoding="ascii")
    subprocess.run(["gcc", "-std=c99", "-Os", "-c", "winch_selftest.c"], cwd=tmp_path, check=True)
    listed = subprocess.run(["nm", "winch_selftest.o"], cwd=tmp_path, check=True, capture_output=True, text=True).stdout
    kinds = [line.split()[-2:] for line in listed.splitlines()]
    assert {name for kind, name in kinds if kind == "U"} == {"winch_defaults", "winch_init", "winch_step"}
    assert {kind for kind, _ in kinds} == {"U", "T", "t", "r"}
    assert [name for kind, name in kinds if kind == "T"] == ["winch_selftest"]


def test_the_numbers_of_the_head_are_without_a_gap() -> None:
    for number in NUMBERS:
        found = [*ranges(files_of(spec("charger"), number)["charger_selftest.c"]).values()]
        assert [r.start for r in found] == [1, *(r.stop for r in found[:-1])]


# ---------------------------------------------------------------------------------------------------- wrong flags


def bare(files: Mapping[str, str]) -> dict[str, str]:
    """The C without its guards, so that wrong flags are not refused beforehand."""
    return {n: re.sub(r"^#pragma .*\n|^#error .*\n", "", t, flags=re.MULTILINE) for n, t in files.items()}


def wrong(files: Mapping[str, str], *flags: str) -> str:
    """What the self-test finds with these flags."""
    number = board.answer(files, "blend", ("-std=c99", "-O2", "-fPIC", "-shared", *flags))
    return "" if number == 0 else meaning(files["blend_selftest.c"], number)


@pytest.mark.parametrize("number", ["float32", "float64"])
@pytest.mark.parametrize("compiler", ["gcc", "clang"])
@pytest.mark.parametrize(
    ("flags", "found"),
    [
        ("-ffp-contract=fast -mfma", "fused"),
        ("-fassociative-math -fno-signed-zeros -fno-trapping-math", "regrouped|sign of zero"),
        ("-fno-signed-zeros", "sign of zero"),
        ("-freciprocal-math", "1 / b is computed once|multiplied by 1 / 10"),
        ("-ffast-math", "."),
    ],
)
def test_flags_that_change_bits_are_found(
    flags: str, found: str, number: str, compiler: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setenv("CC", compiler)
    files = files_of(law_of(BLEND.format(number=number)), number)
    # -ffast-math at linking would change this process
    assert re.search(found, wrong(bare(files), *flags.split(), "-nostartfiles"))


def test_the_pragma_keeps_gcc_from_fusing_and_not_clang(monkeypatch: pytest.MonkeyPatch) -> None:
    """clang lets -ffp-contract=fast win over the pragma, and says so nowhere: only the self-test sees it."""
    files = files_of(law_of(BLEND.format(number="float32")), "float32")
    for compiler, found in (("gcc", ""), ("clang", "(x * y) + a (other if fused)")):
        monkeypatch.setenv("CC", compiler)
        assert wrong(files, "-ffp-contract=fast", "-mfma") == found


CORE = """#include <stdint.h>
#include <stdio.h>
#include <xmmintrin.h>

uint32_t blend_selftest(void);

int main(void)
{{
    _mm_setcsr({control}u | 0x1F80u);
    printf("%lu\\n", (unsigned long)blend_selftest());
    return 0;
}}
"""


@pytest.mark.parametrize("number", ["float32", "float64"])
@pytest.mark.parametrize(
    ("control", "found"),
    [
        ("0x0000", None),
        ("0x8000", r"x \+ y"),
        ("0x0040", "x < y"),
        ("0x8040", "x < y"),
        ("0x2000", r"x \+ y"),
        ("0x4000", r"x \+ y"),
        ("0x6000", r"x \+ y"),
    ],
    ids="right flush denormals both down up zero".split(),
)
def test_a_core_with_other_arithmetic_is_found(control: str, found: str | None, number: str, tmp_path: Path) -> None:
    """Flushed results, flushed operands, other rounding: as the control register of SSE sets them."""
    files = files_of(law_of(BLEND.format(number=number)), number)
    for name, text in {**files, "main.c": CORE.format(control=control)}.items():
        (tmp_path / name).write_text(text, encoding="ascii")
    command = "gcc -std=c99 -O2 main.c blend.c blend_selftest.c -o core".split()
    subprocess.run(command, cwd=tmp_path, check=True)
    answer = int(subprocess.run(["./core"], cwd=tmp_path, check=True, capture_output=True, text=True).stdout)
    if found is None:
        assert answer == 0
    else:
        assert answer != 0 and re.match(found, meaning(files["blend_selftest.c"], answer))


# ---------------------------------------------------------------------------------------------------- wrong C

OTHER = {"<=": "<", "<": "<=", ">=": ">", ">": ">=", "==": "!=", "!=": "=="}


def code_of(text: str) -> Iterator[tuple[int, int]]:
    """Where the code of the step stands: helpers and functions, without the check of the parameters."""
    first = text.index("\nstatic ")
    last = text.index("_check_parameters(const")
    body = text[:last]
    comments = [m.span() for m in re.finditer(r"/\*.*?\*/", body, re.DOTALL)]
    starts = [first, *(end for _, end in comments if end > first)]
    yield from zip(starts, [*(start for start, _ in comments if start > first), last], strict=True)


def changed(text: str, number: str) -> Iterator[tuple[str, str]]:
    """(what, NAME.c with one comparison or constant changed)"""
    for first, last in code_of(text):
        for m in re.finditer(r" (<=|<|>=|>|==|!=) ", text[first:last]):
            at = first + m.start(1)
            yield f"{m[1]} in {line(text, at)}", text[:at] + OTHER[m[1]] + text[at + len(m[1]) :]
        for m in re.finditer(r"(?<![\w.])\d+\.\d+(?:e[+-]?\d+)?(?=f?\b)", text[first:last]):
            near = np.dtype(number).type(float(m[0]) * (1 + 2**-10) or 2**-10)
            at = first + m.start()
            sign = "-" if text[at - 1] == "-" else ""
            yield f"{sign}{m[0]} in {line(text, at)}", text[:at] + str(near) + text[at + len(m[0]) :]


def line(text: str, at: int) -> str:
    return text[text.rindex("\n", 0, at) + 1 : text.index("\n", at)].strip()


EQUAL = {
    "": {
        "< in return (x < low) ? low : ((x > high) ? high : x);",
        "> in return (x < low) ? low : ((x > high) ? high : x);",
    },
    "winch": {
        f"{end} in {line}"
        for end in ("24.0", "-24.0")
        for line in (
            "const float given = winch_clamp(asked, (-24.0f), 24.0f);",
            "y->drive = winch_clamp(given, (-24.0f), 24.0f);",
            "y->drive = winch_clamp(now->hand, (-24.0f), 24.0f);",
            "+ (0.02f * (((p->gain * error) / p->reset_time) + ((given - asked) / 0.2f))), (-24.0f), 24.0f);",
        )
    },
    "charger": {
        f"{end} in y->voltage = charger_clamp({word}, 0.0f, 16.0f);"
        for end in ("0.0", "16.0")
        for word in ("goal", "hold")
    }
    | {f"{what} in if ((now->battery - goal) >= 1.0705294e-06f) {{" for what in (">=", "1.0705294e-06")},
    "heater": {
        f"{what} in && (((now->box - (p->target + p->band)) >= 9.536745e-07f) || !now->enabled)) {{"
        for what in (">=", "9.536745e-07")
    }
    | {
        f"{what} in && ((now->box - (p->target - p->band)) <= (-9.536745e-07f))) {{" for what in ("<=", "-9.536745e-07")
    },
}
"""Changes that change nothing, at their first place: at the end of a range its end is given in either case; winch: the drive
is held in two ways at once, `hand` is no larger, and tracking keeps the integral inside; charger: with the default
parameters the voltage is never near 0 V or 16 V; margins: differences of numbers of that size are whole units in their last place, of
which none lies at the margin."""


@pytest.mark.parametrize("path", SPECS, ids=lambda p: p.stem)
def test_a_changed_comparison_or_constant_is_found(path: Path, tmp_path: Path) -> None:
    """Every one that changes what the law does; comparisons by their equality, constants by a thousandth."""
    name, survivors, seen = path.stem, set(), Counter[str]()
    files = files_of(spec(name), "float32")
    main_ = (
        f"#include <stdint.h>\nuint32_t {name}_selftest(void);\nint main(void) {{ return {name}_selftest() != 0u; }}\n"
    )
    for file, text in {**files, "main.c": main_}.items():
        (tmp_path / file).write_text(text, encoding="ascii")
    subprocess.run(["gcc", "-std=c99", "-c", "main.c", f"{name}_selftest.c"], cwd=tmp_path, check=True)
    build_ = ["gcc", "-std=c99", "main.o", f"{name}_selftest.o", f"{name}.c", "-o", "changed"]
    for what, text in changed(files[f"{name}.c"], "float32"):
        seen[what] += 1
        (tmp_path / f"{name}.c").write_text(text, encoding="ascii")
        subprocess.run(build_, cwd=tmp_path, check=True)
        if subprocess.run(["./changed"], cwd=tmp_path, check=False).returncode == 0:
            survivors.add(what if seen[what] == 1 else f"{what} (again)")
    assert seen.total() >= 10
    assert survivors - EQUAL[""] == EQUAL.get(name, set())


# ---------------------------------------------------------------------------------------------------- commands


def test_generate_writes_it(tmp_path: Path) -> None:
    pump = ROOT / "specs" / "bilge_pump.yaml"
    assert main(["generate", str(pump), "--selftest", "--number", "float64", "--to", str(tmp_path), "--quiet"]) == 0
    assert sorted(p.name for p in tmp_path.iterdir()) == ["bilge_pump.c", "bilge_pump.h", "bilge_pump_selftest.c"]
    written = {p.name: p.read_text(encoding="ascii") for p in tmp_path.iterdir()}
    assert board.answer(written, "bilge_pump") == 0
    assert "numbers float64" in written["bilge_pump_selftest.c"]


def test_preflight_runs_it_and_a_failure_is_a_finding(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    """clang fuses in spite of the pragma where it is told to on the command line."""
    law = tmp_path / "blend.yaml"
    law.write_text(textwrap.dedent(BLEND.format(number="float32")).lstrip(), encoding="ascii")
    to = tmp_path / "evidence"
    flags = ("-std=c99", "-O2", "-mfma", "-ffp-contract=fast", "-fPIC", "-shared")
    monkeypatch.setattr(board.answer, "__defaults__", (flags,))
    monkeypatch.setenv("CC", "clang")
    assert main(["preflight", str(law), "--to", str(to)]) == 1
    told = capsys.readouterr().out
    assert "FAILED  selftest" in told and "error HG604: blend_selftest() answers" in told
    findings = json.loads((to / "findings.json").read_text(encoding="utf-8"))
    assert not findings["ok"] and [f["code"] for f in findings["findings"]].count("HG604") == 1
    assert (to / "blend_selftest.c").exists()
    assert "NOT passed" in (to / "summary.md").read_text(encoding="utf-8")
