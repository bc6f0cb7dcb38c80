"""The Python face: Reference and compiled C behave alike, by name and by array."""

from __future__ import annotations

import math

import numpy as np
import pytest

import hybgen
from tests.conftest import ROOT, law_of

RICH = """
    law: rich
    step: 100 ms
    inputs:
      level: {unit: m, range: [0, 1], invalid: hold}
      go: {type: bool}
      ticks: {type: integer, range: [0, 9]}
      pull: {vector: 2, range: [-2, 2]}
    parameters:
      high: {value: 0.5 m, range: [0.3 m, 0.8 m], tunable: true}
      bias: {value: [0.1, 0.2], range: [-1, 1], tunable: true}
    states:
      mode: {logic: [idle, run, rest], initial: run}
      side: {logic: [-1, 1]}
      flag: {type: bool}
      since: {timer: 5 s, initial: 1.25 s}
      n: {count: 10}
      x: {range: [-5, 5], initial: 0.25}
      w: {vector: 2, range: [-9, 9], initial: [1, 2]}
    jumps:
      begin: {set: mode != run and go, map: {mode: run, since: 0 s, n: n + 1}}
      end: {set: mode == run and level >= high, map: {mode: rest, side: -side, flag: not flag}}
    flow: {map: {x: "0.5 /s * (pull[0] - x)"}}
    sample: {w: "0.5 * w + pull + bias"}
    outputs:
      mode_out: {value: mode}
      busy: {type: bool, value: mode == run}
      total: {value: "x + w[0] + w[1]"}
      both: {value: w}
      count_out: {value: n}
      side_out: {value: side}
"""
SAMPLE = {"level": 0.4, "go": True, "ticks": 3, "pull": [0.5, -0.5]}


@pytest.fixture(params=["reference", "chip"])
def machine(request: pytest.FixtureRequest) -> object:
    law = law_of(RICH)
    return hybgen.Reference(law) if request.param == "reference" else hybgen.compile(law)


def test_the_readme_example() -> None:
    law = hybgen.load(ROOT / "specs" / "bilge_pump.yaml")
    report = hybgen.check(law)
    assert report.ok and report.findings
    files = hybgen.generate(law)
    assert sorted(files) == ["bilge_pump.c", "bilge_pump.h"]
    twin, chip = hybgen.Reference(law), hybgen.compile(law)
    y = twin.step({"level": 0.31, "armed": True})
    assert y == {"drive": True} and twin.last_jump == "start" and int(twin.status) == 0
    assert chip.step({"level": 0.31, "armed": True}) == y
    assert dict(chip.state) == dict(twin.state) == {"pump": "on", "idle": 60.0}


def test_values_by_name(machine: hybgen.Reference) -> None:
    assert dict(machine.state) == {
        "mode": "run",
        "side": -1,
        "flag": False,
        "since": 1.3,
        "n": 0,
        "x": 0.25,
        "w": [1.0, 2.0],
    }
    y = machine.step(SAMPLE)
    assert y == {"mode_out": "run", "busy": True, "total": 3.25, "both": [1.0, 2.0], "count_out": 0, "side_out": -1}
    assert machine.last_jump is None and machine.jumps == 0
    y = machine.step({**SAMPLE, "level": 0.9, "go": False})
    assert (
        y["mode_out"] == "rest" and y["side_out"] == 1 and machine.last_jump == "end" and machine.state["flag"] is True
    )
    machine.step(SAMPLE)
    assert machine.last_jump == "begin" and machine.jumps == 2 and machine.state["n"] == 1
    assert math.isclose(machine.state["since"], 0.1)
    machine.reset()
    assert machine.jumps == 0 and machine.state["x"] == 0.25


def test_the_state_can_be_written(machine: hybgen.Reference) -> None:
    machine.state["mode"] = "idle"
    machine.state["since"] = 0.25
    machine.state["x"] = -1.5
    machine.state["w"] = [3, 4]
    assert machine.state["since"] == 0.3 and machine.state["mode"] == "idle" and machine.state["w"] == [3.0, 4.0]
    for name, value, error in (("mode", "walk", ValueError), ("side", 0, ValueError), ("lost", 1, KeyError)):
        with pytest.raises(error):
            machine.state[name] = value


@pytest.mark.parametrize(
    ("change", "words"),
    [
        ({"level": None}, "level"),
        ({"lvl": 1}, "unknown: lvl"),
        ({"go": 2}, "true or false"),
        ({"ticks": 1.5}, "whole"),
        ({"pull": [1, 2, 3]}, "shape"),
        ({"level": "high"}, "number"),
    ],
)
def test_wrong_samples_are_refused(machine: hybgen.Reference, change: dict[str, object], words: str) -> None:
    with pytest.raises(ValueError, match=words):
        machine.step({**SAMPLE, **change})
    with pytest.raises(ValueError, match="missing: ticks"):
        machine.step({k: v for k, v in SAMPLE.items() if k != "ticks"})


def test_arrays(machine: hybgen.Reference) -> None:
    steps, lanes = 30, 4
    rng = np.random.default_rng(3)
    level = rng.uniform(-0.2, 1.2, (steps, lanes))
    pull = rng.uniform(-2, 2, (steps, lanes, 2))
    samples = {"level": level, "go": level > 0.3, "ticks": np.ones((steps, lanes), int), "pull": pull}
    before = dict(machine.state)
    wide = machine.run(samples)
    assert dict(machine.state) == before
    assert wide["total"].shape == (steps, lanes) and wide["both"].shape == (steps, lanes, 2)
    for lane in (0, 3):
        machine.reset()
        narrow = machine.run({n: a[:, lane] for n, a in samples.items()})
        assert all(narrow[n].tobytes() == np.ascontiguousarray(wide[n][:, lane]).tobytes() for n in narrow)
    assert wide["mode_out"].dtype == np.int32
    with pytest.raises(ValueError, match="same number of steps"):
        machine.run({**samples, "level": level[:5]})


def test_parameters() -> None:
    law = law_of(RICH)
    for make in (hybgen.Reference, hybgen.compile):
        machine = make(law, parameters={"high": 0.35})
        assert machine.step(SAMPLE)["mode_out"] == "run"  # end, then begin: go is true
        assert machine.jumps == 2
        broken = make(law, parameters={"high": 2.0})
        assert broken.step(SAMPLE)["mode_out"] == "run" and broken.jumps == 0 and int(broken.status) == 16
        with pytest.raises(ValueError, match="no tunable parameter"):
            make(law, parameters={"higher": 1})


def test_a_law_without_inputs_can_run() -> None:
    law = law_of("""
        law: blink
        step: 100 ms
        states: {lamp: {logic: [dark, bright]}, since: {timer: 1 s}}
        jumps: {change: {set: since >= 0.3 s, map: {lamp: "choose(lamp == dark, bright, dark)", since: 0 s}}}
        outputs: {on: {type: bool, value: lamp == bright}}
    """)
    for make in (hybgen.Reference, hybgen.compile):
        assert "".join("01"[int(v)] for v in make(law).run({"steps": 12})["on"]) == "000111000111"
        assert make(law).step({}) == {"on": False}
