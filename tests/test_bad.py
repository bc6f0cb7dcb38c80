"""Each bad law gives exactly the finding that its comment says, on that line, and nothing else; and every way in which a
file can be unreadable has a finding of its own."""

from __future__ import annotations

import re
from pathlib import Path

import pytest

from hybgen.checks import check
from hybgen.diag.codes import CODES
from hybgen.diag.finding import Finding, LawError
from hybgen.diag.render import render
from hybgen.law import UnreadableFile, load, read
from tests.conftest import ROOT

BAD = sorted((ROOT / "tests" / "bad").glob("*.yaml"))
QUIET = {"HG200", "HG320", "HG390", "HG430"}


def findings_of(path: Path) -> list[Finding]:
    """What a law file gives, without the notes that every good law has."""
    try:
        found = check(load(path)).findings
    except LawError as error:
        found = error.findings
    return [f for f in found if f.code not in QUIET]


@pytest.mark.parametrize("path", BAD, ids=lambda p: p.stem)
def test_bad_law(path: Path) -> None:
    lines = path.read_text(encoding="utf-8").splitlines()
    expected = [(m[1], n) for n, line in enumerate(lines, 1) if (m := re.search(r"# expect: (HG\d+)", line))]
    assert len(expected) == 1 and path.stem.startswith(expected[0][0])
    found = findings_of(path)
    assert [(f.code, f.where.line) for f in found] == expected, [render(f) for f in found]
    shown = render(found[0])
    assert shown.startswith(f"{path.name}:{expected[0][1]}:") and found[0].code in shown and "^" in shown
    assert found[0].where.column >= 1 and found[0].message


def test_every_code_is_shown_by_a_bad_law_or_by_a_test() -> None:
    shown = {p.stem.split("_")[0] for p in BAD}
    here = {
        "HG101",
        "HG102",
        "HG103",
        "HG104",
        "HG106",
        "HG107",
        "HG110",
        "HG111",
        "HG113",
        "HG114",
        "HG153",
        "HG403",
        "HG605",
    }
    elsewhere = {  # test_sil.py, test_log.py, test_cli.py, test_reread.py
        "HG601",
        "HG602",
        "HG603",
        "HG604",
        "HG610",
        "HG611",
        "HG612",
        "HG613",
        "HG614",
        "HG901",
    }
    assert set(CODES) - shown - here - elsewhere == QUIET


def codes(data: bytes) -> list[str]:
    with pytest.raises(LawError) as caught:
        read(data, "law.yaml")
    assert all(render(f) for f in caught.value.findings)
    return [f.code for f in caught.value.findings]


BOMB = "a: &a [x, x, x, x, x, x, x, x, x]\n" + "".join(
    f"{b}: &{b} [{', '.join([f'*{a}'] * 9)}]\n" for a, b in zip("abcdefgh", "bcdefghi", strict=True)
)


@pytest.mark.parametrize(
    ("data", "code"),
    [
        (b"", "HG103"),
        (b"  \n# nothing\n", "HG114"),
        (b"x" * (10 << 20), "HG104"),
        (b"law: caf\xe9", "HG106"),
        (b"law: a\x07b", "HG107"),
        (b"law: a\xe2\x80\xa8b", "HG107"),
        (BOMB.encode(), "HG110"),
        (b"a: " + b"[" * 40 + b"]" * 40, "HG111"),
        (b"{a: " * 100, "HG111"),
        (b"? [a, b]\n: 1\n", "HG113"),
        (b"- law\n", "HG114"),
        (b"law", "HG114"),
        (b"a: *b\n", "HG108"),
        (b"law: a\n---\nlaw: b\n", "HG109"),
    ],
)
def test_files_that_are_no_law(data: bytes, code: str) -> None:
    assert codes(data) == [code]


def test_long_expressions_are_refused() -> None:
    head = 'law: tank\nstep: 1 s\noutputs:\n  y: {value: "'
    assert codes((head + "(" * 80 + "1" + ")" * 80 + '"}\n').encode()) == ["HG153"]
    assert codes((head + "1 + " * 3000 + '1"}\n').encode()) == ["HG153"]


def test_a_flow_that_is_too_fast_for_any_number() -> None:
    law = read(
        b'law: tank\nstep: 1 s\nstates: {x: {range: [0, 1]}}\nflow: {map: {x: "1e9 /s * x"}}\noutputs: {y: {value: x}}\n',
        "a.yaml",
    )
    assert [f.code for f in check(law).findings if f.severity == "error"] == ["HG403"]


def test_windows_line_ends_and_a_byte_order_mark_are_fine() -> None:
    data = (ROOT / "specs" / "bilge_pump.yaml").read_bytes()
    plain = read(data, "bilge_pump.yaml")
    other = read(b"\xef\xbb\xbf" + data.replace(b"\n", b"\r\n"), "bilge_pump.yaml")
    assert other.jumps == plain.jumps and other.states == plain.states


def test_the_operating_system_may_refuse(tmp_path: Path) -> None:
    for path, code in ((tmp_path / "lost.yaml", "HG101"), (tmp_path, "HG102"), (tmp_path / "a\0b", "HG101")):
        with pytest.raises(UnreadableFile) as caught:
            load(path)
        assert [f.code for f in caught.value.findings] == [code]


def test_all_mistakes_of_a_stage_are_reported_at_once() -> None:
    law = b"""law: tank
step: 100 ms
inputs: {u: {range: [0, 1]}, v: {range: [0, 1], unit: m}}
outputs:
  p: {value: u + v}
  q: {value: w}
  r: {type: bool, value: u == 0.5}
"""
    assert codes(law) == ["HG202", "HG201", "HG205"]


def test_places_in_folded_and_quoted_text() -> None:
    law = b"""law: tank
step: 100 ms
inputs: {u: {range: [0, 1]}}
outputs:
  p:
    type: bool
    value: >-
      u > 0.5
      and w > 0
  q: {type: bool, value: 'u > 0.5 and z > 0'}
"""
    with pytest.raises(LawError) as caught:
        read(law, "a.yaml")
    assert [(f.where.line, f.where.column) for f in caught.value.findings] == [(9, 11), (10, 39)]
