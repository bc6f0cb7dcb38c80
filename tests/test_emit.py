"""The generated C as a text and under compilers: warnings, symbols, names, comments, determinism."""

from __future__ import annotations

import os
import re
import subprocess
import sys
from fractions import Fraction
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from hybgen.diag.finding import LawError
from hybgen.emit.text import comment
from hybgen.law import load, read
from hybgen.pipeline import generate
from hybgen.sil import lockstep
from hybgen.sil.toolchain import WARNINGS, CompilerRefused, run
from hybgen.step import build
from tests.conftest import ROOT, SPECS, law_of
from tests.generated import COLLIDING, HOSTILE, bilge_pump, generated, laws, written

ZIG = (sys.executable, "-m", "ziglang", "cc")
COMPILERS = {
    "gcc c99": ("gcc", "-std=c99"),
    "gcc c11": ("gcc", "-std=c11"),
    "clang c99": ("clang", "-std=c99"),
    "zig c99": (*ZIG, "-std=c99"),
    "g++ 11": ("g++", "-x", "c++", "-std=c++11"),
    "g++ 17": ("g++", "-x", "c++", "-std=c++17"),
    "clang++ 11": ("clang++", "-x", "c++", "-std=c++11"),
    "clang++ 17": ("clang++", "-x", "c++", "-std=c++17"),
}


def code(text: str) -> str:
    """C without comments and texts."""
    return re.sub(r'"[^"\n]*"', '""', re.sub(r"/\*.*?\*/", "", text, flags=re.DOTALL))


# ---------------------------------------------------------------------------------------------------- compilers


@pytest.mark.parametrize("number", ["float32", "float64"])
@pytest.mark.parametrize("compiler", COMPILERS)
def test_no_compiler_has_a_warning(compiler: str, number: str, tmp_path: Path) -> None:
    sources = written(generated(number), tmp_path)
    # zig makes an object of the first source only, without a word
    for some in [[s] for s in sources] if "zig" in compiler else [sources]:
        run([*COMPILERS[compiler], "-O2", "-ffp-contract=off", *WARNINGS, "-c", *some], tmp_path)
    objects = {p.stem for p in tmp_path.glob("*.o")}
    assert objects == {law.name for law in laws()}


def test_clang_has_nothing_to_say_with_all_its_warnings_on(tmp_path: Path) -> None:
    style = (
        "unknown-warning-option",
        "padded",
        "declaration-after-statement",
        "covered-switch-default",
        "switch-default",
        "switch-enum",
        "bad-function-cast",
        "unsafe-buffer-usage",
    )
    sources = written(generated("float32"), tmp_path)
    run(
        ["clang", "-std=c99", "-O2", "-Weverything", "-Werror", *(f"-Wno-{s}" for s in style), "-c", *sources], tmp_path
    )
    assert len(list(tmp_path.glob("*.o"))) == len(laws())


def test_a_warning_would_be_seen(tmp_path: Path) -> None:
    """The control: each of these lines has to be refused."""
    planted = (
        "float bad(float a) { return a * 2.5; }",
        "int bad(double a, double b) { return a == b; }",
        "int bad(long long a) { return a; }",
        "static int bad(void) { return 0; }",
    )
    for line in planted:
        for compiler in ("gcc c99", "clang c99"):
            (tmp_path / "bad.c").write_text(f"{line}\n", encoding="ascii")
            with pytest.raises(CompilerRefused):
                run([*COMPILERS[compiler], "-O2", *WARNINGS, "-c", "bad.c"], tmp_path)


@pytest.mark.parametrize(
    ("compiler", "flags"),
    [
        ("gcc", "-ffast-math"),
        ("gcc", "-Ofast"),
        ("gcc", "-ffinite-math-only"),
        ("gcc", "-funsafe-math-optimizations"),
        ("gcc", "-freciprocal-math"),
        ("gcc", "-fno-signed-zeros"),
        ("clang", "-ffast-math"),
        ("clang", "-ffinite-math-only"),
    ],
)
def test_flags_that_change_results_are_refused(compiler: str, flags: str, tmp_path: Path) -> None:
    sources = written(bilge_pump(), tmp_path)
    with pytest.raises(CompilerRefused, match="bilge_pump: compile without"):
        run([compiler, "-std=c99", flags, "-c", *sources], tmp_path)


def test_excess_precision_is_refused(tmp_path: Path) -> None:
    """By the macro alone, so that the test runs on every host."""
    sources = written(bilge_pump(), tmp_path)
    with pytest.raises(CompilerRefused, match="excess precision"):
        run(["gcc", "-std=c99", "-U__FLT_EVAL_METHOD__", "-D__FLT_EVAL_METHOD__=2", "-c", *sources], tmp_path)


# ---------------------------------------------------------------------------------------------------- symbols


def symbols(folder: Path, name: str) -> tuple[set[str], set[str]]:
    """(global symbols, missing symbols) of an object file."""
    done = subprocess.run(["nm", "-g", f"{name}.o"], cwd=folder, capture_output=True, text=True, check=True)
    rows = [line.split() for line in done.stdout.splitlines()]
    return {r[-1] for r in rows if r[-2] != "U"}, {r[-1] for r in rows if r[-2] == "U"}


@pytest.mark.parametrize("optimised", ["-O0", "-O2", "-Os"])
def test_an_object_has_the_api_and_needs_nothing(optimised: str, tmp_path: Path) -> None:
    sources = written(generated("float32"), tmp_path)
    run(["gcc", "-std=c99", "-ffreestanding", "-ffp-contract=off", optimised, "-c", *sources], tmp_path)
    for law in laws():
        words = ("defaults", "init", "step", "check_parameters", "jump_name")
        made, missing = symbols(tmp_path, law.name)
        assert made == {f"{law.name}_{word}" for word in words}
        assert missing <= {"memcpy", "memset"}, "gcc may ask for these two in any freestanding program"
        assert missing == set(), law.name


def test_the_names_of_jumps_can_be_compiled_out(tmp_path: Path) -> None:
    sources = written(bilge_pump(), tmp_path)
    run(["gcc", "-std=c99", "-DBILGE_PUMP_NO_NAMES", *WARNINGS, "-c", *sources], tmp_path)
    assert "bilge_pump_jump_name" not in symbols(tmp_path, "bilge_pump")[0]
    assert b"lost" not in (tmp_path / "bilge_pump.o").read_bytes()


CALLER = """
#include "bilge_pump.h"
#include <stdio.h>

int main(void)
{
    bilge_pump one, two;
    bilge_pump_inputs u = { 0.31f, true };
    bilge_pump_outputs y, z;
    uint32_t status;

    bilge_pump_init(&one);
    bilge_pump_init(&two);
    status = bilge_pump_step(&one, &bilge_pump_defaults, &u, &y);
    u.level = 0.2f;
    status |= bilge_pump_step(&two, &bilge_pump_defaults, &u, &z);
    printf("%u %d %d %s '%s' %u %u\\n", (unsigned)status, (int)y.drive, (int)z.drive, bilge_pump_jump_name(one.last_jump),
           bilge_pump_jump_name(two.last_jump), (unsigned)one.jumps, (unsigned)(one.pump == BILGE_PUMP_PUMP_ON));
    return one.last_jump == BILGE_PUMP_JUMP_START ? 0 : 1;
}
"""


@pytest.mark.parametrize(("compiler", "suffix"), [("gcc", "c"), ("g++", "cpp"), ("clang++", "cpp")])
def test_c_and_cpp_programs_can_use_two_instances(compiler: str, suffix: str, tmp_path: Path) -> None:
    written(bilge_pump(), tmp_path)
    (tmp_path / f"main.{suffix}").write_text(CALLER, encoding="ascii")
    run(["gcc", "-std=c99", "-c", "bilge_pump.c"], tmp_path)
    run([compiler, f"main.{suffix}", "bilge_pump.o", "-o", "main"], tmp_path)
    done = subprocess.run(["./main"], cwd=tmp_path, capture_output=True, text=True, check=False)
    assert (done.returncode, done.stdout) == (0, "0 1 0 start '' 1 1\n")


# ---------------------------------------------------------------------------------------------------- text

FORBIDDEN = {
    "a numbered temporary": r"\b(tmp|temp|var|val)\d*\b",
    "an allocation": r"\b(malloc|calloc|realloc|free|alloca)\b",
    "another header": r"#include\s+(?!<std(int|bool|def)\.h>|\"\")",
    "a jump": r"\b(goto|setjmp|longjmp)\b",
    "a hidden state": r"^static (?!const\b)[^(]*(=|;)",
    "a line comment": r"//",
    "a trigraph": r"\?\?[=/'()!<>-]",
    "a cast to a pointer": r"\(\s*\w+\s*\*\s*\)",
    "a volatile": r"\bvolatile\b",
    "a tab or a trailing space": r"\t| +$",
}


@pytest.mark.parametrize("what", FORBIDDEN)
def test_forbidden(what: str) -> None:
    for name, text in {**generated("float32"), **generated("float64")}.items():
        found = re.search(FORBIDDEN[what], code(text) if what != "a tab or a trailing space" else text, re.MULTILINE)
        assert found is None, (name, found)


def test_numbers_are_of_the_format() -> None:
    number = r"(?<![\w.])(\d+\.\d*(?:e[+-]?\d+)?|\d+e[+-]?\d+)(f?)\b"
    single, double = (" ".join(code(t) for t in generated(n).values()) for n in ("float32", "float64"))
    assert not re.search(r"\bdouble\b", single) and " float " not in double
    assert {suffix for _, suffix in re.findall(number, single)} == {"f"}
    assert {suffix for _, suffix in re.findall(number, double)} == {""}
    assert not re.search(r"0x[0-9A-Fa-f.]*p", single + double)


def test_a_constant_is_as_short_as_it_can_be() -> None:
    assert "    0.3f, /* high */\n    0.1f /* low */\n" in bilge_pump()["bilge_pump.c"]


def test_every_name_at_file_level_carries_the_name_of_the_law() -> None:
    for law in laws():
        text = code(generated("float32")[f"{law.name}.c"])
        names = re.findall(r"^(?:static )?(?:const )?\w+ \*?(\w+)(?:\(|\[| =)", text, re.MULTILINE)
        assert len(names) >= 4
        assert all(n.startswith(f"{law.name}_") for n in names), names


def test_empty_structs_have_a_member() -> None:
    header = generated("float32")["smallest.h"]
    assert header.count("uint8_t none;") == 3
    assert "uint32_t last_jump;" in header and "uint32_t jumps;" in header


@pytest.mark.parametrize("path", SPECS, ids=lambda p: p.stem)
def test_each_condition_and_output_shows_where_it_comes_from(path: Path) -> None:
    law = load(path)
    text = generate(law)[f"{law.name}.c"]
    lines = path.read_text(encoding="utf-8").splitlines()
    for item in law.jumps:
        place = re.search(rf"/\* {path.name}:(\d+)  {re.escape(item.text)}(?:; rounding at most [^*]*)? \*/", text)
        assert place is not None, item.name
        assert item.text in lines[int(place[1]) - 1]
    for place in re.finditer(rf"/\* {path.name}:(\d+)  ", text):
        assert 1 <= int(place[1]) <= len(lines)


def test_the_header_says_what_it_is() -> None:
    law = load(ROOT / "specs" / "bilge_pump.yaml")
    for text in bilge_pump().values():
        flowing = re.sub(r"\n \* +", " ", text)
        for words in (
            "from bilge_pump.yaml, SHA-256 " + law.digest,
            "Made by hybgen ",
            "step 0.1 s, numbers float32",
            "integration none",
            "with -ffp-contract=off, without -ffast-math",
            "simulation is not a safety case",
        ):
            assert words in flowing
        assert not re.search(r"20\d\d-\d\d|/home|/root|/tmp|/work|\\", text)


def test_no_loop_where_one_jump_is_enough() -> None:
    law = law_of("""
        law: latch
        step: 1 s
        jumps_per_step: 1
        inputs: {set: {type: bool}}
        states: {held: {type: bool}}
        jumps: {up: {set: set and not held, map: {held: true}}}
        outputs: {out: {type: bool, value: held}}
        """)
    text = code(generate(law)["latch.c"])
    assert not re.search(r"\b(for|while|do)\b", text)
    assert "LATCH_STATUS_JUMP_LIMIT" in text
    assert re.search(r"\bfor \(taken = 0u; \(jump != 0u\) && \(taken < 2u\); taken\+\+\)", bilge_pump()["bilge_pump.c"])


def test_dead_conditions_are_gone_in_each_mode() -> None:
    """In `due` of the pump no condition asks again for the mode that the switch has settled."""
    body = re.search(r"bilge_pump_due\(.*?\n}\n", bilge_pump()["bilge_pump.c"], re.DOTALL)
    assert body is not None
    text = code(body[0])
    assert text.count("self->pump") == 1 and "switch (self->pump)" in text
    off, on = text.split("case BILGE_PUMP_PUMP_ON:")
    assert "JUMP_START" in off and "JUMP_STOP" not in off and "JUMP_LOST" not in off
    assert "idle" not in on and "JUMP_START" not in on


# ---------------------------------------------------------------------------------------------------- names, comments


def test_names_that_collide_change_no_value() -> None:
    for number in ("float32", "float64"):
        report = lockstep.run(law_of(COLLIDING), lanes=64, steps=400, number=number)
        assert report.equal, report.first_difference
        assert all(count > 0 for count in report.jumps.values()), report.jumps


@pytest.mark.parametrize("name", ["u", "p", "y", "now", "status", "jump", "a", "x", "low", "steps", "new_level"])
def test_a_law_can_not_be_named_like_a_local(name: str) -> None:
    with pytest.raises(LawError, match="HG502"):
        law_of(f"law: {name}\nstep: 1 s\n")


@pytest.mark.parametrize("name", ["T_H", "T_NO_NAMES", "T_STATUS_STUCK"])
def test_no_member_can_be_named_like_a_macro_of_the_header(name: str) -> None:
    with pytest.raises(LawError, match="HG502"):
        law_of(f"law: t\nstep: 1 s\ninputs: {{{name}: {{range: [0, 1]}}}}\n")


@given(st.text(st.sampled_from("*/\\? \n\t=a'()!<>-.\u00e9"), max_size=40) | st.text(max_size=300))
def test_no_text_gets_out_of_a_comment(text: str) -> None:
    shown = comment(text)
    assert shown.isascii() and (shown.isprintable() or shown == "")
    assert not any(bad in shown for bad in ("*/", "/*", "??", "\\"))
    assert len(shown) <= 240


def test_a_hostile_file_name_stays_in_its_comment(tmp_path: Path) -> None:
    law = read(HOSTILE.replace("\n    ", "\n").lstrip().encode(), "*/x/*??/\\.yaml")
    sources = written(generate(law), tmp_path)
    run(["gcc", "-std=c99", "-trigraphs", *WARNINGS, "-c", *sources], tmp_path)
    assert symbols(tmp_path, "hostile")[0] == {
        f"hostile_{w}" for w in ("defaults", "init", "step", "check_parameters", "jump_name")
    }


# ---------------------------------------------------------------------------------------------------- same bytes

AGAIN = """
import sys
from hybgen.pipeline import generate
from hybgen.law import load
for path in sys.argv[1:]:
    for name, text in generate(load(path)).items():
        sys.stdout.write(name + text)
"""


def test_same_law_same_bytes_whatever_the_hash_seed_and_folder(tmp_path: Path) -> None:
    here = "".join(n + t for path in SPECS for n, t in generate(load(path)).items())
    for seed, folder in (("1", tmp_path), ("77", ROOT)):
        environment = {**os.environ, "PYTHONHASHSEED": seed, "PYTHONPATH": str(ROOT), "TZ": f"UTC+{seed[0]}"}
        done = subprocess.run(
            [sys.executable, "-c", AGAIN, *map(str, SPECS)],
            cwd=folder,
            env=environment,
            capture_output=True,
            text=True,
            check=True,
        )
        assert done.stdout == here


def test_step_and_number_can_be_overridden() -> None:
    law = load(ROOT / "specs" / "bilge_pump.yaml")
    header = generate(law, step=Fraction(1, 20), number="float64")["bilge_pump.h"]
    assert "double level;" in header and "step 0.05 s, numbers float64" in header
    assert build(law, step=Fraction(1, 20)).states[1].maximum == 1200
