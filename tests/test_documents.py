"""What README.md and DEVELOPERS.md show works as shown."""

from __future__ import annotations

import argparse
import re
from pathlib import Path

import pytest

from hybgen.checks import check
from hybgen.cli.main import main
from hybgen.cli.options import parser
from hybgen.diag.codes import CODES
from hybgen.diag.finding import LawError
from hybgen.diag.render import render
from hybgen.law import read
from hybgen.pipeline import generate
from hybgen.reference import Reference
from tests.conftest import ROOT

README = (ROOT / "README.md").read_text(encoding="utf-8")
BLOCKS = re.findall(r"```(\w*)\n(.*?)```", README, re.S)
LAW = next(text for kind, text in BLOCKS if kind == "yaml")


def test_the_law_is_good_and_the_c_is_declared_as_shown() -> None:
    law = read(LAW.encode(), "bilge_pump.yaml")
    assert check(law).ok
    header = " ".join(generate(law)["bilge_pump.h"].split())
    shown = next(text for kind, text in BLOCKS if kind == "c")
    declared = [" ".join(line.partition(";")[0].split()) + ";" for line in shown.splitlines()]
    assert len(declared) == 4
    for line in declared:
        assert line in header, line


def test_the_finding_is_shown_as_it_is() -> None:
    shown = next(text for kind, text in BLOCKS if "error HG203" in text)
    place = re.match(r"tank\.yaml:(\d+):\d+: ", shown)
    assert place is not None
    set_line = next(line for line in LAW.splitlines() if "level >= high" in line)
    wanted = next(line.partition("| ")[2] for line in shown.splitlines() if "level >= high" in line)
    text = LAW.replace(set_line, wanted).replace(
        "armed: {type: bool}", "armed: {type: bool}\n  depth: {unit: m, range: [0, 5]}"
    )
    text = "\n" * (int(place[1]) - 1 - text.splitlines().index(wanted)) + text
    with pytest.raises(LawError) as caught:
        read(text.encode(), "tank.yaml")
    assert [render(f).rstrip() for f in caught.value.findings] == [shown.rstrip()]


def test_the_python_runs(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(ROOT)
    names: dict[str, object] = {}
    exec(next(text for kind, text in BLOCKS if kind == "python"), names)
    assert names["y"] == {"drive": True}


def test_the_table_of_two_inputs_is_what_it_says() -> None:
    shown = next(text for kind, text in BLOCKS if kind == "yaml" and text.startswith("tables:"))
    inputs = "inputs: {speed: {unit: m/s, range: [0, 2]}, battery: {unit: V, range: [9, 15]}}\n"
    outputs = 'outputs: {push: {unit: N, value: "thrust(speed, battery)"}}\n'
    twin = Reference(read(f"law: raft\nstep: 1 s\n{inputs}{shown}{outputs}".encode(), "raft.yaml"))
    for speed, battery, push in ((0, 12, 20), (0.5, 15, 23), (0.25, 11, (10 + 20 + 8 + 17) / 4)):
        assert twin.step({"speed": speed, "battery": battery}) == {"push": push}


def test_every_command_is_listed() -> None:
    listed = set(
        re.findall(r"^hybgen (\w+)", next(text for _, text in BLOCKS if text.startswith("hybgen check")), re.M)
    )
    known = [a for a in parser()._actions if isinstance(a, argparse._SubParsersAction)]
    assert listed == set(known[0].choices)


def test_what_is_said_to_be_missing_has_its_finding() -> None:
    missing = README.partition("said so by a finding (HG190)")[2].partition("## ")[0]
    functions = re.findall(r"`(qmul [^`]*)`", missing)[0].split()
    assert functions == ["qmul", "qconj", "qrotate"]
    for name in functions:
        text = LAW.replace("level <= low", f"{name}(level / high) <= 1")
        with pytest.raises(LawError) as caught:
            read(text.encode(), "law.yaml")
        assert {f.code for f in caught.value.findings} == {"HG190"}, name


def test_files_and_codes_named_exist(capsys: pytest.CaptureFixture[str]) -> None:
    for page in (README, (ROOT / "DEVELOPERS.md").read_text(encoding="utf-8")):
        for name in re.findall(r"\]\(([\w./]+)\)", page) + re.findall(r"\b(tests/[\w/]+\.py)\b", page):
            assert (ROOT / name).exists(), name
        for code in re.findall(r"\bHG\d{3}\b", page):
            assert code in CODES and main(["explain", code]) == 0
    assert "HG203" in capsys.readouterr().out


def test_the_one_line_commands_are_the_ones_of_ci() -> None:
    ci = (ROOT / ".ci" / "run").read_text(encoding="utf-8")
    setup, tests = re.findall(r"^python3 -m venv .*$", README, re.M)
    install = re.search(r"pip install -q (-e '[^']+')", tests)
    assert (
        install is not None and install[1] in ci and ".venv/bin/pytest -n 2" in tests and ".venv/bin/pytest -n 2" in ci
    )
    spec = re.search(r"hybgen preflight (\S+)$", setup)
    assert spec is not None and Path(ROOT / spec[1]).exists()
