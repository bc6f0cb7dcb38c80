"""The command line as a user runs it."""

from __future__ import annotations

import json
import os
import signal
import subprocess
import sys
import time
from pathlib import Path

import pytest

from hybgen.cli.main import main
from tests.conftest import ROOT, SPECS

PUMP = ROOT / "specs" / "bilge_pump.yaml"
BAD = ROOT / "tests" / "bad"


def run(*arguments: object, env: dict[str, str] | None = None) -> subprocess.CompletedProcess[str]:
    command = [sys.executable, "-m", "hybgen", *map(str, arguments)]
    return subprocess.run(command, capture_output=True, text=True, check=False, env=env)


def test_exit_codes(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    assert main(["check", str(PUMP), "--quiet"]) == 0
    assert main(["check", str(BAD / "HG201_unknown_name.yaml"), "--quiet"]) == 1
    assert main(["check", str(BAD / "HG305_unused.yaml"), "--quiet"]) == 0
    assert main(["check", str(BAD / "HG305_unused.yaml"), "--quiet", "--fail-on", "warning"]) == 1
    assert main(["check", str(PUMP), "--quiet", "--fail-on", "open"]) == 1
    assert main(["check", str(tmp_path / "lost.yaml"), "--quiet"]) == 2
    assert main(["check", str(tmp_path), "--quiet"]) == 2
    assert main(["check"]) == 2
    assert main(["chekc", str(PUMP)]) == 2
    assert main(["check", str(PUMP), "--step", "fast"]) == 2
    assert main(["generate", str(BAD / "HG301_never.yaml"), "--to", "c", "--quiet"]) == 1
    assert not (tmp_path / "c").exists()


def test_check_as_json() -> None:
    done = run("check", BAD / "HG203_scale_of_unit.yaml", "--json", "-")
    assert done.returncode == 1
    told = json.loads(done.stdout)
    assert told["ok"] is False
    assert {
        "code",
        "property",
        "verdict",
        "severity",
        "where",
        "subject",
        "message",
        "witness",
        "value",
        "hint",
    } == set(told["findings"][0])
    assert told["findings"][0]["code"] == "HG203" and told["findings"][0]["where"]["line"] == 24
    done = run("check", PUMP, "--json", "-", "--quiet")
    told = json.loads(done.stdout)
    assert done.returncode == 0 and done.stderr == "" and told["law"] == "bilge_pump" and told["ok"] is True
    assert {f["verdict"] for f in told["findings"]} == {"proved", "open"}


def test_findings_show_the_line_and_a_caret() -> None:
    done = run("check", BAD / "HG203_scale_of_unit.yaml")
    lines = done.stdout.splitlines()
    assert lines[0].startswith(f"{BAD / 'HG203_scale_of_unit.yaml'}:24:") and "the factor 1/1000 is missing" in lines[0]
    assert lines[1].index("1000 mm") == lines[2].index("^")
    assert "\x1b" not in done.stdout
    assert "\x1b[" in run("check", BAD / "HG203_scale_of_unit.yaml", "--colour", "always").stdout


def test_generate_writes_both_files_the_same_twice(tmp_path: Path) -> None:
    for folder in ("one", "two"):
        assert (
            run(
                "generate",
                PUMP,
                "--to",
                tmp_path / folder,
                env={**os.environ, "PYTHONHASHSEED": "7" if folder == "one" else "8"},
            ).returncode
            == 0
        )
    names = sorted(p.name for p in (tmp_path / "one").iterdir())
    assert names == ["bilge_pump.c", "bilge_pump.h"]
    assert all((tmp_path / "one" / n).read_bytes() == (tmp_path / "two" / n).read_bytes() for n in names)
    assert str(tmp_path) not in (tmp_path / "one" / "bilge_pump.c").read_text()


def test_sil_as_json() -> None:
    done = run("sil", PUMP, "--lanes", "32", "--steps", "300", "--json", "-", "--quiet")
    told = json.loads(done.stdout)
    assert done.returncode == 0 and done.stderr == ""
    assert (
        told["equal"] is True and told["target"] == "host" and told["lanes"] == 32 and told["first_difference"] is None
    )
    assert (
        told["conditions"]["total"] == 9 and set(told["jumps"]) == {"lost", "start", "stop"} and told["mutants"] is None
    )


def test_sil_replays_a_log(tmp_path: Path) -> None:
    log = tmp_path / "log.csv"
    log.write_text("level [mm],armed\n" + "310,1\n" * 3 + "50,1\n")
    done = run("sil", PUMP, "--inputs", log)
    assert done.returncode == 0
    assert "0.000 s  start: armed and pump == off and level >= high and idle >= rest" in done.stdout
    assert "0.300 s  stop: pump == on and (level <= low or not armed)" in done.stdout
    log.write_text("levl,armed\n1,1\n")
    assert run("sil", PUMP, "--inputs", log).returncode == 1
    assert run("sil", PUMP, "--inputs", tmp_path / "lost.csv").returncode == 2


def test_a_missing_compiler_is_a_message() -> None:
    done = run("sil", PUMP, env={**os.environ, "CC": "no-such-compiler"})
    assert done.returncode == 2 and "HG602" in done.stderr and "Traceback" not in done.stderr


@pytest.mark.parametrize("stage", ["law", "step", "program", "c"])
def test_show(stage: str) -> None:
    for path in SPECS:
        done = run("show", path, "--stage", stage)
        assert done.returncode == 0 and path.stem in done.stdout


@pytest.mark.parametrize("shape", ["two-point", "modes", "pi", "empty"])
def test_new_laws_pass(tmp_path: Path, shape: str, capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["new", "keel_lamp", "--shape", shape, "--to", str(tmp_path)]) == 0
    assert main(["new", "keel_lamp", "--shape", shape, "--to", str(tmp_path)]) == 2
    assert main(["check", str(tmp_path / "keel_lamp.yaml"), "--fail-on", "warning"]) == 0
    assert "is there already" in capsys.readouterr().err
    assert main(["new", "keel-lamp", "--to", str(tmp_path)]) == 2


def test_explain(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["explain", "hg203"]) == 0
    assert "factor" in capsys.readouterr().out
    assert main(["explain"]) == 0
    assert capsys.readouterr().out.count("\n") > 60
    assert main(["explain", "HG999"]) == 2


def test_preflight_leaves_evidence(tmp_path: Path) -> None:
    one, two = tmp_path / "one", tmp_path / "two"
    done = run("preflight", PUMP, "--to", one)
    assert done.returncode == 0, done.stdout + done.stderr
    assert [line.split()[0] for line in done.stdout.splitlines()[:6]] == ["passed"] * 6
    assert run("preflight", PUMP, "--to", two, "--quiet").stdout == ""
    names = sorted(p.name for p in one.iterdir())
    assert names == [
        "bilge_pump.c", "bilge_pump.h", "bilge_pump_selftest.c", "findings.json", "sil.json", "summary.md",
    ]  # fmt: skip
    assert all((one / n).read_bytes() == (two / n).read_bytes() for n in names)
    assert "not a safety case" in (one / "summary.md").read_text()
    bad = run("preflight", BAD / "HG301_never.yaml", "--to", tmp_path / "bad")
    assert bad.returncode == 1 and "FAILED  check" in bad.stdout
    assert not (tmp_path / "bad" / "tank.c").exists()


def test_nothing_extra_in_a_pipe_and_a_closed_pipe_is_quiet() -> None:
    done = run("sil", PUMP, "--lanes", "16", "--steps", "100")
    assert done.stderr == "" and "\r" not in done.stdout
    shell = f"{sys.executable} -m hybgen explain | head -1"
    piped = subprocess.run(shell, shell=True, capture_output=True, text=True, check=False)
    assert piped.stdout.startswith("HG101") and piped.stderr == ""


def test_an_interrupt_leaves_nothing_by_halves(tmp_path: Path) -> None:
    process = subprocess.Popen(
        [sys.executable, "-m", "hybgen", "preflight", str(SPECS[-1]), "--to", str(tmp_path / "e")],
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
    )
    time.sleep(1.5)
    process.send_signal(signal.SIGINT)
    out, err = process.communicate(timeout=60)
    assert process.returncode in (0, 130) and "Traceback" not in out + err
    if process.returncode == 130:
        assert not (tmp_path / "e").exists()


def test_a_fault_in_hybgen_is_told_as_one(monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]) -> None:
    def broken(*_: object) -> None:
        raise AssertionError("a planted fault")

    monkeypatch.setattr("hybgen.cli.commands.checked", broken)
    assert main(["check", str(PUMP)]) == 3
    told = capsys.readouterr().err
    assert "HG901" in told and "a planted fault" in told and "Traceback" not in told
    with pytest.raises(AssertionError):
        main(["check", str(PUMP), "--debug"])


def test_completion_and_schema() -> None:
    for shell in ("bash", "zsh", "tcsh"):
        done = run("completion", shell)
        assert done.returncode == 0 and "preflight" in done.stdout
    assert json.loads(run("schema").stdout)["title"] == "hybgen law file"
    assert json.loads(run("schema", "--json", "-").stdout)["title"] == "hybgen law file"


def test_without_a_compiler_ziglang_serves(tmp_path: Path) -> None:
    """An empty PATH: the C is built by the `cc` extra."""
    environment = {k: v for k, v in os.environ.items() if k != "CC"}
    done = run("sil", PUMP, "--lanes", "16", "--steps", "100", env={**environment, "PATH": str(tmp_path)})
    assert done.returncode == 0 and "equal in every bit" in done.stdout, done.stderr
