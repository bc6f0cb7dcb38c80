"""The C read back: every file proves, and every planted fault is found."""

from __future__ import annotations

import random
import re
from collections.abc import Iterator
from pathlib import Path

import pytest

from hybgen.diag.finding import LawError
from hybgen.emit import emit
from hybgen.law import load, read
from hybgen.lower import lower
from hybgen.pipeline import generate
from hybgen.reread import Mismatch, reread
from hybgen.step import StepLaw, build
from tests.conftest import SPECS, law_of
from tests.strategies import law_text

EVERYTHING = """
    law: every
    step: 100 ms
    inputs:
      u: {range: [0, 1], invalid: clamp}
      n: {type: integer, range: [-5, 20], invalid: 3}
      v: {vector: 2, range: [-1, 1]}
      go: {type: bool}
    parameters: {k: {value: 0.3, range: [0, 1], tunable: true}, rest: {value: 0.5 s, range: [0 s, 2 s], tunable: true}}
    states:
      mode: {logic: [idle, run, stop]}
      side: {logic: [-1, 3]}
      since: {timer: 2 s}
      tries: {count: 7}
      x: {range: [-3, 3], limit: true}
      y: {range: [-3, 3]}
    tables:
      curve: {x: [0, 0.5, 1], y: [1, 3, 2]}
      map: {x: [0, 0.5, 1], y: [-1, 2], z: [[1, 3], [2, 0.5], [4, 0.1]]}
    terms: {e: u - k * x, hot: e > 0.1}
    flow:
      set: mode != stop or go
      map:
        x:
          - when: mode == run
            is: "(curve(u) - map(u, v[1]) * x) / (2 s)"
          - otherwise: 0
        y: y * y * k / (1 s)
    sample: {tries: "choose(jumped(begin), tries + 1, tries)"}
    jumps:
      begin: {set: mode == idle and hot and since >= rest, map: {mode: run, since: 0 s, y: x, x: y}}
      end: {set: mode == run and 0.1 * side < floor(3 * e) / u, map: {mode: stop, side: "-1"}}
      again: {set: mode == stop and not hot and n > tries, map: {mode: idle, side: 3, y: "max(abs(e), sign(x) * v[0])"}}
    outputs:
      a: {value: y / u, range: [0, 5], limit: true}
      b: {type: bool, value: jumped(end) or valid(u)}
      c: {value: mode}
      d: {type: integer, value: "clamp(abs(n) - min(n, 2), 0, 9)"}
"""

LAWS = [*(build(load(p)) for p in SPECS), build(law_of(EVERYTHING)), build(law_of(EVERYTHING), number="float64")]


@pytest.mark.parametrize("made", LAWS, ids=lambda m: f"{m.law.name}_{m.format.name}")
def test_the_c_is_the_step_law(made: StepLaw) -> None:
    assert reread(made, emit(lower(made))) == ()


SWAPS = {
    "+": "-",
    "-": "+",
    "*": "/",
    "/": "*",
    "<": "<=",
    "<=": "<",
    ">": ">=",
    ">=": ">",
    "==": "!=",
    "!=": "==",
    "&&": "||",
    "||": "&&",
}


def code_lines(text: str) -> Iterator[tuple[int, str]]:
    """Start and text of each line of code, comments and directives left out."""
    at = 0
    for line in text.split("\n"):
        if not line.lstrip().startswith(("/*", "*", "#")):
            yield at, line.split("/*")[0]
        at += len(line) + 1


def mutants(text: str) -> Iterator[tuple[str, str]]:
    """Each operator exchanged, each constant changed, each assignment dropped, each member's name exchanged."""
    members = sorted(set(re.findall(r"->(\w+)", text)))
    for at, line in code_lines(text):
        for m in re.finditer(r" (\+|-|\*|/|<=|>=|<|>|==|!=|&&|\|\|) ", line):
            yield line, text[: at + m.start(1)] + SWAPS[m[1]] + text[at + m.end(1) :]
        for m in re.finditer(r"\b\d+(\.\d+)?(e[-+]\d+)?", line):
            changed = repr(2 * float(m[0]) + 1.0) if "." in m[0] else str(int(m[0]) + 1)
            yield line, text[: at + m.start()] + changed + text[at + m.end() :]
        if re.match(r"\s+\S+ \|?= .*;$", line):
            yield line, text[:at] + text[at + len(line) :]
        if m2 := re.search(r"!(\w|\()", line):
            yield line, text[: at + m2.start()] + text[at + m2.start() + 1 :]
        for m in re.finditer(r"->(\w+)", line):
            other = members[(members.index(m[1]) + 1) % len(members)]
            if other != m[1]:
                yield line, text[: at + m.start(1)] + other + text[at + m.end(1) :]


def caught(made: StepLaw, files: dict[str, str]) -> bool:
    """Is the file refused?"""
    return reread(made, files) != ()


@pytest.mark.parametrize("made", [LAWS[0], LAWS[3], LAWS[4]], ids=lambda m: str(m.law.name))
def test_every_planted_fault_is_found(made: StepLaw) -> None:
    files = emit(lower(made))
    name = f"{made.law.name}.c"
    missed, total = [], 0
    for line, text in mutants(files[name]):
        total += 1
        if not caught(made, {**files, name: text}):
            missed.append(line.strip())
    assert total > 100
    assert missed == []


def test_exchanged_statements_are_found_where_they_matter() -> None:
    made = LAWS[4]
    files = emit(lower(made))
    lines = files["every.c"].split("\n")
    stores = [i for i, line in enumerate(lines) if re.match(r"\s+self->\w+ = .*;$", line)]
    found = 0
    for i in stores:
        for j in stores:
            if i < j < i + 4 and lines[i] != lines[j]:
                other = lines.copy()
                other[i], other[j] = lines[j], lines[i]
                found += caught(made, {**files, "every.c": "\n".join(other)})
    assert found > 0


def test_a_missing_branch_or_function_is_found() -> None:
    made = LAWS[4]
    files = emit(lower(made))
    text = files["every.c"]
    for start in [m.start() for m in re.finditer(r"    case \w+:\n", text)]:
        end = text.index("break;", start)
        assert caught(made, {**files, "every.c": text[:start] + text[end + 6 :]})
    assert caught(made, {**files, "every.c": text.replace("every_watch", "every_look")})
    header = files["every.h"]
    assert caught(made, {**files, "every.h": header.replace("EVERY_MODE_RUN = 1", "EVERY_MODE_RUN = 2")})
    assert caught(made, {**files, "every.h": header.replace("EVERY_STATUS_STUCK 4u", "EVERY_STATUS_STUCK 8u")})


def test_random_laws_all_prove() -> None:
    count = 0
    for seed in range(400):
        try:
            made = build(read(law_text(random.Random(seed)).encode(), "law.yaml"))
        except LawError:
            continue
        assert reread(made, emit(lower(made))) == (), seed
        count += 1
    assert count > 380


def test_a_wrong_file_is_not_written(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    from hybgen.cli.main import main

    real = emit

    def planted(program: object) -> dict[str, str]:
        return {n: t.replace(">=", ">") for n, t in real(program).items()}  # type: ignore[arg-type]

    monkeypatch.setattr("hybgen.pipeline.emit", planted)
    assert main(["generate", str(SPECS[0]), "--to", str(tmp_path / "c")]) == 3
    assert "is not its step law" in capsys.readouterr().err and not (tmp_path / "c").exists()


def test_what_is_not_proved_is_not_given(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("hybgen.pipeline.reread", lambda *_: (Mismatch("due", "answer", decided=False),))
    with pytest.raises(LawError) as caught:
        generate(load(SPECS[0]))
    assert [f.code for f in caught.value.findings] == ["HG605"] and caught.value.findings[0].where.line > 0
