"""Reading laws: what declarations mean, what stays bounded, and that no file gives anything but a law or findings."""

from __future__ import annotations

import re
import time
from fractions import Fraction
from pathlib import Path

import pytest
import yaml
from hypothesis import given
from hypothesis import strategies as st

from hybgen.diag.codes import CODES
from hybgen.diag.finding import MOST, Finding, Findings, LawError, Severity, Verdict
from hybgen.diag.render import render, summary
from hybgen.diag.span import Span
from hybgen.diag.suggest import nearest
from hybgen.expr import extent
from hybgen.law import Law, context, document, read
from hybgen.law.declarations import MOST_ENTRIES
from hybgen.law.document import Mapping, Scalar, read_document
from hybgen.law.model import StateKind
from hybgen.law.reader import MOST_NAMES
from tests.conftest import ROOT, SPECS, law_of

HEAD = "law: tank\nstep: 100 ms\n"
RAFT = (
    HEAD
    + """inputs:
  level: {unit: m, range: [0, 1], rate: 1 m/s}
  go: {type: bool}
  ticks: {type: integer, range: [0, 5]}
states:
  side: {logic: [-1, 1]}
  pump: {logic: [off, on]}
  idle: {timer: 60 s}
  starts: {count: 5}
  depth: {unit: m, range: [0, 1]}
  box: {unit: degC, range: [-20, 90]}
  trim: {vector: 2, range: [0, 1]}
"""
)
OUT = "outputs: {y: {value: depth}}\n"


def found(text: str) -> list[Finding]:
    """The findings of a text that is no law."""
    with pytest.raises(LawError) as caught:
        read(text.encode(), "law.yaml")
    return list(caught.value.findings)


def codes(text: str) -> list[str]:
    return [f.code for f in found(text)]


# --- what declarations mean -------------------------------------------------------------------------------------


def test_what_an_input_is_when_little_is_said() -> None:
    law = law_of(
        HEAD
        + "inputs:\n  box: {unit: degC, range: [-20, 80], rate: 30 K/min}\n  n: {type: integer, range: [-3, 4]}\n"
        + "  b: {type: bool}\n  away: {unit: mm, range: [1 m, 2 m], noise: 1 cm, invalid: 1.5 m}\n"
    )
    box, n, b, away = law.inputs
    assert [box.noise, box.resolution, box.rate, box.invalid] == [0, 0, Fraction(1, 2), "hold"]
    assert (box.initial, n.initial, b.initial) == (30, 0, False)  # (-3 + 4) / 2 rounded down
    assert [away.low, away.high, away.noise, away.substitute, away.initial] == [1000, 2000, 10, 1500, 1500]


def test_the_forms_of_a_parameter() -> None:
    law = law_of(
        HEAD
        + "parameters:\n  rest: 1 min\n  flag: true\n  gains: [1 V/m, 200 mV/m]\n  grid: {value: [[1, 2], [3, 4]]}\n"
        + "  n: {type: integer, value: 3, range: [1, 5], tunable: true}\n  free: {value: true, tunable: true}\n"
    )
    assert [p.shape for p in law.parameters] == [(), (), (2,), (2, 2), (), ()]
    assert [p.value for p in law.parameters] == [(1,), (True,), (1, Fraction(1, 5)), (1, 2, 3, 4), (3,), (True,)]
    assert [p.name for p in law.tunables] == ["n", "free"]
    assert str(law.parameter("rest").unit) == "min" and type(law.parameter("n").value[0]) is int


def test_the_kinds_of_states() -> None:
    law = law_of(RAFT + OUT)
    assert [s.kind for s in law.states] == [
        *(StateKind.LOGIC, StateKind.LOGIC, StateKind.TIMER, StateKind.COUNT),
        *(StateKind.REAL, StateKind.REAL, StateKind.REAL),
    ]
    assert law.state("side").initial == (-1,) and law.state("pump").initial == (0,)
    assert law.state("trim").initial == (0, 0) and law.state("idle").maximum == 60


def test_a_time_needs_a_unit() -> None:
    assert codes("law: tank\nstep: 100\n") == ["HG202"]
    jump = "jumps: {start: {set: go, map: {pump: on}}}\nclaims:\n  a: "
    assert codes(RAFT + OUT + jump + "{between: [start, start], at_least: 20}\n") == ["HG202"]
    assert codes(RAFT + OUT + jump + "{leaves: pump == on, within: 20}\n") == ["HG202"]
    assert law_of("law: tank\nstep: 1/4 * 2 s\n").step == Fraction(1, 2)


def test_terms_stand_in_the_order_of_use_and_all_circles_are_told() -> None:
    law = law_of(RAFT + "terms: {a: b + c, b: c * 2, c: level, d: a}\n" + OUT)
    assert [t.name for t in law.terms] == ["c", "b", "a", "d"]
    told = found(RAFT + "terms: {a: b, b: a, c: d + a, d: c, e: e, f: e + level}\n" + OUT)
    assert [f.code for f in told] == ["HG134"] * 3
    assert [f.message.rpartition(": ")[2] for f in told] == ["a -> b -> a", "c -> d -> c", "e -> e"]


def test_jumps_know_what_they_set_and_keep() -> None:
    law = law_of(
        RAFT
        + "jumps:\n  start: {set: go and pump == off, map: {pump: on, idle: 300 ms, trim: [level / (1 m), 0]}, keep: [depth]}\n"
        + OUT
    )
    (jump,) = law.jumps
    assert [(a.state, a.index) for a in jump.assigns] == [("pump", None), ("idle", None), ("trim", 0), ("trim", 1)]
    assert jump.keep == ("depth",) and jump.text == "go and pump == off"


@pytest.mark.parametrize("value", ["-side", "1", "side * side", "choose(level > 0.5 m, 1, -1)", "choose(go, side, 1)"])
def test_a_whole_numbered_logic_variable_takes_its_members(value: str) -> None:
    law_of(RAFT + f"jumps:\n  swap:\n    set: go\n    map: {{side: '{value}'}}\n" + OUT)


@pytest.mark.parametrize("value", ["side + 1", "ticks", "0", "side * 2", "choose(go, side, 0)"])
def test_a_whole_numbered_logic_variable_takes_nothing_else(value: str) -> None:
    assert codes(RAFT + f"jumps:\n  swap:\n    set: go\n    map: {{side: '{value}'}}\n" + OUT) == ["HG138"]


def test_a_member_is_never_guessed_from_a_part_of_the_cases() -> None:
    """Of 8000 cases only the last 400 leave the set."""
    logic = "".join(f"  q{i}: {{logic: {list(range(20))}}}\n" for i in range(3))
    jump = "jumps:\n  far: {set: go, map: {q0: 'q0 + max(q0 - 18, 0) + 0 * q1 + 0 * q2'}}\n"
    assert codes(HEAD + "inputs: {go: {type: bool}}\nstates:\n" + logic + jump + "outputs: {y: {value: q0}}\n") == [
        "HG138"
    ]


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("flow: {map: {idle: 1, pump: 1, starts: 1, side: 1}}\n", ["HG135"] * 4),
        ("flow: {map: {depth: 0.1 m, trim: [1 /s, 2 /s, 3 /s]}}\n", ["HG202", "HG208"]),
        ("flow: {map: {depth: 1 m/s}}\nsample: {depth: level, idle: 0 s}\n", ["HG135"] * 2),
        ("jumps: {a: {set: go, map: {depth: level}, keep: [depth, level, tiem]}}\n", ["HG136", "HG201", "HG201"]),
        ("jumps: {a: {set: jumped(a), map: {depth: level}}}\n", ["HG210"]),
        ("terms: {k: jumped(a)}\njumps: {a: {set: go, map: {pump: 'choose(k, on, off)'}}}\n", ["HG210"]),
        ("jumps: {a: {set: go, map: {starts: 1.5, idle: 3}}}\n", ["HG204", "HG202"]),
        ("assume: [level > 0.1 m, depth > 0.2 m]\n", ["HG210"]),
        ("claims: {c: {note: none}}\n", ["HG121"]),
        ("claims: {c: {always: go, within: 1 s}}\n", ["HG124"]),
        ("claims: {c: {between: [a], at_least: 1 s}}\n", ["HG122", "HG201"]),
        ("claims: {c: {bump: depth, at_most: 1 m}}\n", ["HG201"]),
    ],
)
def test_what_behaviour_may_not_do(text: str, expected: list[str]) -> None:
    assert codes(RAFT + OUT + text) == expected


# --- bounded ------------------------------------------------------------------------------------------------------


def _filled(head: str, piece: str, tail: str) -> str:
    return head + piece * (((1 << 20) - len(head) - len(tail)) // len(piece)) + tail


_VALUE = HEAD + 'outputs: {y: {value: "'
_ONES = str([1] * 64)
_MATRIX = HEAD + f"inputs: {{u: {{vector: 64, range: [0, 1]}}}}\nparameters: {{a: {[[1] * 64] * 64!s}}}\n"
_NAMES = HEAD + "inputs:\n" + "".join(f"  bilge_level_{i}: {{range: [0, 1]}}\n" for i in range(900))
HOSTILE = {
    "escapes": (_filled(_VALUE, "\\x41", '"}}\n'), "HG153"),
    "one long sum": (_filled(_VALUE + "1", "+1", '"}}\n'), "HG153"),
    "a sum that is too deep": (_VALUE + "+".join(["1"] * 480) + '"}}\n', "HG153"),
    "many long sums": (
        HEAD + "outputs:\n" + "".join(f"  y{i}: {{value: '{'+'.join(['1'] * 90)}'}}\n" for i in range(990)),
        "HG139",
    ),
    "powers of powers": (
        HEAD + "inputs: {u: {range: [0, 1]}}\noutputs: {y: {value: '" + "(" * 7 + "u" + ")**16" * 7 + "'}}\n",
        "HG153",
    ),
    "products of matrices": (_MATRIX + "outputs: {y: {value: '" + "a @ (" * 20 + "u" + ")" * 20 + "'}}\n", "HG153"),
    "many products": (
        _MATRIX + "terms:\n  t0: a @ u\n" + "".join(f"  t{i + 1}: a @ t{i}\n" for i in range(300)),
        "HG139",
    ),
    "a long table": (HEAD + f"tables: {{k: {{x: {list(range(9000))}, y: {list(range(9000))}}}}}\n", "HG139"),
    "many unknown names": (
        _NAMES
        + "outputs:\n"
        + "".join(
            f"  y{j}: {{value: '{'+'.join(f'blge_levl_{j * 40 + k}' for k in range(40))}'}}\n" for j in range(60)
        ),
        "HG201",
    ),
    "many cases of logic": (
        HEAD
        + "inputs: {go: {type: bool}}\nstates:\n"
        + "".join(f"  q{i}: {{logic: {list(range(64))}}}\n" for i in range(4))
        + "jumps:\n"
        + "".join(f"  j{i}: {{set: go, map: {{q0: 'clamp(q0+q1*q2+q3, 0, 63)'}}}}\n" for i in range(200)),
        "HG138",
    ),
    "a long alias": (
        HEAD + "terms:\n  t0: &e '" + "+".join(["1"] * 90) + "'\n" + "".join(f"  t{i}: *e\n" for i in range(1, 900)),
        "HG139",
    ),
    "a huge number": (HEAD + "parameters: {p: 1e999999999}\n", "HG154"),
    "a huge power": (HEAD + "parameters: {p: 10**9999999}\n", "HG216"),
    "unknown keys": (HEAD + "".join(f"abcdefgh{i}: 1\n" for i in range(9000)), "HG120"),
    "a unit without end": (_filled(HEAD + "inputs: {u: {unit: '", "m ", "', range: [0, 1]}}\n"), "HG214"),
}


@pytest.mark.parametrize("name", HOSTILE)
def test_no_file_takes_long(name: str) -> None:
    """Each of them took minutes, gigabytes or the stack of a reader without limits."""
    text, code = HOSTILE[name]
    assert len(text) <= document.MOST_BYTES
    begin = time.process_time()
    told = found(text)
    assert time.process_time() - begin < 8
    assert code in [f.code for f in told] and len(told) <= MOST


def test_a_line_is_kept_once_however_many_things_stand_on_it() -> None:
    top = read_document(b"a: [" + b", ".join([b"1"] * 5000) + b"]", "a.yaml")
    items = top.get("a").items  # type: ignore[union-attr]
    assert len({id(i.span.text) for i in items}) == 1


# --- places -------------------------------------------------------------------------------------------------------

_STYLES = {"plain": None, "single": "'", "double": '"', "folded": ">", "literal": "|"}


@given(
    st.text("abw012 <>=+*()\n\t'\"\\-é", min_size=1, max_size=60).map(str.strip).filter(bool),
    st.sampled_from(sorted(_STYLES)),
    st.integers(20, 80),
)
def test_every_character_is_found_in_the_file(value: str, style: str, width: int) -> None:
    text = yaml.safe_dump({"k": value}, default_style=_STYLES[style], width=width, allow_unicode=True)
    top = read_document(text.encode(), "a.yaml")
    (scalar,) = (v for _, v in top.entries)
    assert isinstance(top, Mapping) and isinstance(scalar, Scalar) and scalar.text.strip() == value
    locate = scalar.locator()
    spans = [locate(offset, 1) for offset, sign in enumerate(scalar.text) if not sign.isspace()]
    places = [(s.line, s.column) for s in spans]
    assert places == sorted(set(places)), text
    for sign, span in zip("".join(scalar.text.split()), spans, strict=True):
        shown = span.text[span.column - 1]
        assert shown == sign or (text[scalar.begin] == '"' and shown == "\\"), (text, sign, shown)


@given(st.binary(max_size=200))
def test_bytes_give_a_law_or_findings(data: bytes) -> None:
    _survives(data)


@given(st.data())
def test_damaged_laws_give_a_law_or_findings(data: st.DataObject) -> None:
    text = data.draw(st.sampled_from([p.read_text(encoding="utf-8") for p in SPECS]))
    lines = text.splitlines(keepends=True)
    for _ in range(data.draw(st.integers(1, 4))):
        at = data.draw(st.integers(0, len(lines) - 1))
        line = lines[at]
        first = data.draw(st.integers(0, len(line)))
        last = data.draw(st.integers(first, len(line)))
        put = data.draw(
            st.sampled_from(
                [
                    "",
                    " ",
                    "(",
                    ")",
                    "[",
                    "}",
                    ":",
                    ",",
                    "0",
                    "m",
                    "-1",
                    "- ",
                    "&a ",
                    "*a",
                    "é",
                    "'",
                    "\n",
                    "not ",
                    "**9",
                    " @ ",
                ]
            )
        )
        lines[at] = line[:first] + put + line[last:]
    _survives("".join(lines).encode())


def _survives(data: bytes) -> None:
    try:
        assert isinstance(read(data, "law.yaml"), Law)
    except LawError as error:
        assert error.findings
        for finding in error.findings:
            assert finding.where.line >= 1 and finding.where.column >= 1 and finding.where.file == "law.yaml"
            assert finding.code in render(finding)


@pytest.mark.parametrize("path", [*SPECS, *sorted((ROOT / "tests" / "bad").glob("*.yaml"))], ids=lambda p: p.stem)
def test_the_slow_yaml_reader_sees_the_same(path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Where the library comes without its C part, laws and findings are the same."""

    def seen() -> object:
        try:
            return read(path.read_bytes(), path.name)
        except LawError as error:
            return [(f.code, f.where.line) for f in error.findings]

    quick = seen()
    monkeypatch.setattr(document, "_LOADER", yaml.SafeLoader)
    assert seen() == quick


# --- findings -----------------------------------------------------------------------------------------------------


def test_a_suggestion_is_the_nearest_word() -> None:
    many = [f"bilge_level_{i}" for i in range(900)] + ["battery_voltage"]
    assert nearest("batery_voltage", many) == "battery_voltage"
    assert nearest("bilge_levle_417", many) == "bilge_level_417"
    assert nearest("zzz", many) is None and nearest("", []) is None


def test_a_long_line_is_cut_around_the_caret() -> None:
    line = "x" * 500 + "HERE" + "y" * 500
    shown = render(
        Finding("HG120", "language", Verdict.REFUTED, Severity.ERROR, Span("a.yaml", 3, 501, 4, line), "", "m")
    )
    text, marks = shown.splitlines()[1:3]
    assert len(text) < 130 and text[marks.index("^") : marks.rindex("^") + 1] == "HERE"


def test_a_tab_before_the_caret_keeps_it_in_place() -> None:
    shown = render(
        Finding(
            "HG120", "language", Verdict.REFUTED, Severity.ERROR, Span("a.yaml", 3, 4, 2, "a\t\tbc"), "", "m", hint="h"
        )
    )
    text, marks, hint = shown.splitlines()[1:4]
    assert text[marks.index("^") :] == "bc" and hint.strip() == "hint: h"


def test_a_summary_counts() -> None:
    assert summary(found(HEAD + "inputs: {1a: {type: bool}, b: {}}\n")) == "2 errors, 0 warnings, 0 open"


def test_a_stage_stops_at_very_many_findings() -> None:
    findings = Findings()
    with pytest.raises(LawError) as caught:
        for line in range(1, 1000):
            findings.error("HG120", Span("a.yaml", line, 1), "unknown")
    assert len(caught.value.findings) == MOST


def test_what_the_codes_say_of_limits_is_so() -> None:
    said = CODES["HG139"].meaning + CODES["HG153"].meaning
    limits = (context.MOST_LETTERS, context.MOST_WORK, context.MOST_TEXT, extent.LARGEST, extent.DEEPEST_TEXT)
    numbers = {int(n) for n in re.findall(r"\d+", said)}
    assert {*limits, MOST_NAMES, context.MOST_COMPONENTS, MOST_ENTRIES} == numbers
