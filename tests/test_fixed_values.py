"""Fixed point as a user meets it: values in and out, bad samples, logs, the command line, conversions and their proof."""

from __future__ import annotations

import json
import math
import re
from pathlib import Path
from typing import Any

import cffi
import numpy as np
import pytest
from numpy.typing import NDArray

from hybgen import Chip, Law, Reference, generate, load
from hybgen.checks import check
from hybgen.cli.main import main
from hybgen.emit import emit
from hybgen.expr.core import RefKind
from hybgen.kernels.integers import NO_NUMBER
from hybgen.lower import lower
from hybgen.reference.machine import to_physical, to_raw
from hybgen.reread import reread
from hybgen.sil import lockstep
from hybgen.sil.playback import play
from hybgen.sil.replay import read_log, recording
from hybgen.sil.toolchain import shared_object, warning_free
from hybgen.step import build
from hybgen.step.model import Status
from tests.conftest import ROOT, SPECS, law_of, run_both

MOST = 2**31 - 1
Samples = dict[str, NDArray[Any]]


def raft(name: str) -> Law:
    return load(ROOT / "specs" / f"{name}.yaml")


@pytest.mark.parametrize("path", SPECS, ids=lambda p: p.stem)
def test_the_c_has_no_floating_point_and_the_stimulus_reaches_every_condition(path: Path) -> None:
    made = build(load(path), number="fixed32")
    files = emit(lower(made))
    assert reread(made, files) == ()
    warning_free(files, made.law.name)
    report = lockstep.run(made, lanes=256, steps=250, injections=20)
    assert report.covered == report.conditions, report.open_conditions
    assert not re.search(r"\b(float|double)\b", re.sub(r"/\*.*?\*/", "", "".join(files.values()), flags=re.DOTALL))


def test_a_choice_keeps_each_of_its_values() -> None:
    """A state that a choice leaves alone keeps its last bit; a constant stays itself, whatever the other one's range."""
    law = law_of("""
        law: keep
        step: 1 s
        number: fixed32
        inputs: {u: {range: [-8, 8]}, go: {type: bool}}
        states: {x: {range: [0, 1], limit: true}, y: {range: [-1, 1], initial: 0.3, limit: true}}
        sample: {x: "choose(go, 0.5, u)"}
        flow: {method: euler, map: {y: "choose(go, 100 * u / (1 s), 0 /s)"}}
        outputs: {a: {value: x}, b: {value: y}}
    """)
    found, _, _ = run_both(law, {"u": np.array([0.25, 0.25, -3.0]), "go": np.array([True, False, False])})
    assert found["a"].tolist() == [0, 0.5, 0.25]
    machine = Chip(law)
    for raw in (1, 3, 5, MOST // 3):
        machine.fields["y"][0] = raw
        machine.step({"u": 1.0, "go": False})
        assert machine.fields["y"][0] == raw


# ------------------------------------------------------------------------------------------------ values in and out

TANK = """
    law: tank
    step: 1 s
    number: fixed32
    inputs:
      level: {unit: m, range: [-1, 1.5], invalid: POLICY}
      flows: {vector: 2, unit: m, range: [0, 100]}
    parameters: {gain: {value: 0.3, range: [0.1, 2], tunable: true}}
    states:
      free: {unit: m, range: [-1, 1]}
      kept: {unit: m, range: [-1, 1], limit: true}
    sample: {free: free + level, kept: kept + gain * level}
    outputs:
      sum: {unit: m, value: free}
      held: {unit: m, value: kept, range: [-0.5, 0.5], limit: true}
      both: {unit: m, value: "[0.001 * flows[0], 3 * flows[1]]"}
      good: {type: bool, value: valid(level)}
"""


def tank(policy: str = "hold") -> Law:
    return law_of(TANK.replace("POLICY", policy))


def test_values_are_physical_or_raw() -> None:
    law = tank()
    places = {name: p for (_, name), p in build(law).places.items()}
    assert places == {"level": 30, "flows": 24, "gain": 29, "free": 29, "kept": 30, "sum": 29, "held": 31, "both": 22}
    chip, raw = Chip(law), Chip(law)
    for _ in range(2):
        told = chip.step({"level": 0.25, "flows": [50, 100]})
        exact = raw.step({"level": 1 << 28, "flows": [50 << 24, 100 << 24]}, raw=True)
        assert exact == {n: to_raw(v, places[n]).tolist() if n in places else v for n, v in told.items()}
    assert told == {"sum": 0.25, "held": pytest.approx(0.075, abs=2**-30), "both": [0.05, 300], "good": True} | {
        "both": [pytest.approx(0.05, abs=2**-22), 300.0]
    }
    many = chip.run({"level": np.full((3, 2), 0.5), "flows": np.zeros((3, 2, 2))})
    assert (
        many["sum"].shape == (3, 2)
        and many["sum"][:, 1].tolist() == [0.5, 1.0, 1.5]
        and many["both"].shape == (3, 2, 2)
    )
    ints = chip.run({"level": np.full(1, 1 << 29), "flows": np.zeros((1, 2), int)}, raw=True)
    assert ints["sum"].dtype == np.int32 and ints["sum"].tolist() == [1 << 28]


def test_state_and_parameters_are_physical() -> None:
    twin = Reference(tank(), {"gain": 1.5})
    assert twin.state == {"free": 0.0, "kept": 0.0}
    twin.state["free"], twin.state["kept"] = -1.25, 7
    assert twin.state["free"] == -1.25 and twin.state["kept"] == 1.0
    assert twin.step({"level": -0.5, "flows": [0, 0]})["held"] == 0.5
    assert twin.state["free"] == -1.75 and twin.state["kept"] == 0.25
    for bad in (2.1, math.nan, math.inf, 0.0999):
        other = Reference(tank(), {"gain": bad})
        other.step({"level": 0.5, "flows": [0, 0]})
        assert other.status == Status.PARAMETER and other.state["kept"] == pytest.approx(0.15, abs=1e-8)


@pytest.mark.parametrize("number", ["float64", "fixed32"])
@pytest.mark.parametrize(
    ("policy", "wanted"),
    [
        ("hold", [0.5, 0.5, 0.5, 0.5, 0.5, -1.0]),
        ("clamp", [0.5, 0.5, 1.5, -1.0, 1.5, -1.0]),
        ("0.125 m", [0.5, 0.125, 0.125, 0.125, 0.125, -1.0]),
    ],
)
def test_bad_samples_are_what_they_are_in_floats(policy: str, wanted: list[float], number: str) -> None:
    """Also `clamp`: what is no number is held, what is beyond 32 bits has an end."""
    law = law_of(TANK.replace("POLICY", policy).replace("fixed32", number).replace("value: free", "value: level"))
    level = np.array([0.5, np.nan, 1.6, -1e300, 1e12, -1.0])
    found, _, chip = run_both(law, {"level": level, "flows": np.zeros((6, 2))})
    assert found["sum"].tolist() == wanted and found["good"].tolist() == [True, *[False] * 4, True]
    for bad in (math.inf, -math.inf):
        chip.step({"level": bad, "flows": [0, 0]})
        assert chip.status == Status.INVALID_INPUT


def test_a_sample_beyond_32_bits_is_never_good() -> None:
    """Where the range nearly fills 32 bits, its end stays below what a larger sample is held at."""
    law = law_of("""
        law: brim
        step: 1 s
        number: fixed32
        inputs: {u: {range: [-2147483647, 2147483647], invalid: 0}, v: {range: [0, 1.9999999999], invalid: 0}}
        outputs: {y: {value: u}, z: {value: v}}
    """)
    chip = Chip(law)
    assert chip.step({"u": 2147483646.0, "v": 1.9999999}) == {
        "y": 2147483646.0,
        "z": pytest.approx(1.9999999, abs=1e-9),
    }
    assert chip.status == 0
    assert chip.step({"u": 4e9, "v": 5.0}) == {"y": 0.0, "z": 0.0} and chip.status == Status.INVALID_INPUT


def test_a_state_that_is_not_limited_is_held_at_its_last_raw_value() -> None:
    found, reference, _ = run_both(tank(), {"level": np.full(20, 1.5), "flows": np.zeros((20, 2))})
    assert found["sum"][2] == 3.0 and np.all(np.diff(found["sum"]) >= 0)
    assert reference.fields["free"].tolist() == [MOST] and found["sum"][-1] == MOST * 2.0**-29


def test_conversions_of_numbers() -> None:
    given = [0.5, 1.5, 2.5, -0.5, -1.5, 3e9, -3e9, 1e308, math.inf, -math.inf, math.nan, 2147483646.5]
    wanted = [0, 2, 2, 0, -2, MOST, -MOST, MOST, *[NO_NUMBER] * 3, 2147483646]
    assert to_raw(given, 0).tolist() == wanted
    assert to_raw([1e308, 5e-324], 62).tolist() == [MOST, 0] and to_raw(3 * 2.0**20, -20) == 3
    assert to_physical([3, -MOST], 31).tolist() == [3 * 2.0**-31, -MOST * 2.0**-31]


# ------------------------------------------------------------------------------------------------ what is shown


def test_the_header_says_how_to_read_each_member() -> None:
    header = generate(raft("winch"), number="fixed32")["winch.h"]
    assert "numbers fixed32" in header and "value * 2^n" in header and "fast-math" not in header
    for line in (
        "int32_t wanted; /* m/s; -1 .. 1; Q1.30, resolution 9.31e-10 m/s;",
        "int32_t gain; /* V*s/m; 5 .. 40; Q6.25, resolution 2.98e-08 V*s/m */",
        "int32_t integral; /* V; -24 .. 24; Q5.26, resolution 1.49e-08 V */",
        "int32_t drive; /* V; -24 .. 24; Q5.26,",
    ):
        assert line in header, line


def test_the_command_line_knows_fixed_point(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    winch, folder = str(ROOT / "specs" / "winch.yaml"), tmp_path / "evidence"
    assert main(["show", winch, "--number", "fixed32"]) == 0
    assert "input speed: Q1.30, resolution 9.31e-10" in capsys.readouterr().out
    assert main(["check", winch, "--number", "fixed32", "--quiet"]) == 0
    assert main(["generate", winch, "--number", "fixed32", "--conversions", "--to", str(tmp_path), "--quiet"]) == 0
    assert "winch_speed_raw(double physical)" in (tmp_path / "winch.h").read_text()
    assert main(["preflight", winch, "--number", "fixed32", "--to", str(folder), "--json", "-", "--quiet"]) == 0
    assert json.loads(capsys.readouterr().out)["sil"]["equal"] is True
    assert "Q1.30" in (folder / "winch.h").read_text()


def test_a_log_holds_physical_numbers() -> None:
    made = build(raft("bilge_pump"), number="fixed32")
    rows = [f"{320 if k >= 2 else 200 if k else ''},true,0.31" for k in range(5)]
    played = play(made, read_log("\n".join(["level [mm],armed,high", *rows]), "pump.csv", made))
    assert played.report.equal and [(e.step, e.jump) for e in played.events] == [(2, "start")]
    values = played.events[0].values
    assert values["level"] == pytest.approx(0.32, abs=1e-9) and values["high"] == pytest.approx(0.31, abs=1e-9)


def test_what_is_recorded_is_read_back_bit_for_bit() -> None:
    made = build(tank())
    level = np.array([0, 1, -5, NO_NUMBER, MOST, -MOST, 123456789], np.int32)
    flows = np.array([[k * 77777777, MOST - k] for k in range(7)], np.int32)
    text = recording(
        made,
        {"level": level, "flows": flows},
        7,
        {"gain": np.int32(NO_NUMBER)},
        {"free": np.int32(-77), "kept": np.int32(MOST), "held_level": np.int32(99)},
    )
    log = read_log(text, "log.csv", made)
    assert log.inputs["level"].tolist() == level.tolist() and log.inputs["flows"].tolist() == flows.tolist()
    assert log.parameters["gain"].tolist() == [NO_NUMBER] * 7
    assert log.start == {"free": -77.0, "kept": float(MOST), "held_level": 99.0}


def test_nearest_thresholds_are_told_in_physical_numbers() -> None:
    path = ROOT / "tests" / "bad" / "HG411_fixed_point.yaml"
    (told,) = [f.message for f in check(load(path)).findings if f.code == "HG411"]
    assert (
        told == "'start' compares with 0.1999999993 in C, where the law needs 0.2000000011: rounding can cause a jump"
    )


# ------------------------------------------------------------------------------------------------ conversions in C


def test_the_conversions_in_c_are_those_of_the_reference(tmp_path: Path) -> None:
    law = tank()
    made = build(law)
    files = emit(lower(made, conversions=True))
    assert reread(made, files) == () and files["tank.c"] == generate(law)["tank.c"]
    warning_free(files, "tank")
    names = [n for (kind, n) in made.places if kind is not RefKind.STATE]
    assert names == ["level", "flows", "gain", "sum", "held", "both"]
    heads = "".join(
        f"int32_t raw_{n}(double x) {{ return tank_{n}_raw(x); }} double physical_{n}(int32_t x) {{ return tank_{n}_physical(x); }}"
        for n in names
    )
    library = cffi.FFI()
    for n in names:
        library.cdef(f"int32_t raw_{n}(double); double physical_{n}(int32_t);")
    calls = library.dlopen(str(shared_object({**files, "all.c": f'#include "tank.h"\n{heads}\n'}, "all.c", tmp_path)))
    dice = np.random.default_rng(5)
    for n in names:
        places = next(p for (_, name), p in made.places.items() if name == n)
        halves = (dice.integers(-(2**32), 2**32, 4000) / 2) * 2.0**-places
        noise = dice.normal(0, 1, 2000) * 2.0 ** dice.integers(-40, 40, 2000)
        edges = [0.0, -0.0, math.inf, -math.inf, math.nan, 1.79e308, -1.79e308, 5e-324, MOST * 2.0**-places]
        for x in [*halves.tolist(), *noise.tolist(), *edges]:
            assert getattr(calls, f"raw_{n}")(x) == int(to_raw(x, places)), (n, x)
        for raw in [0, 1, -1, MOST, -MOST, NO_NUMBER, *dice.integers(-MOST, MOST, 500).tolist()]:
            assert getattr(calls, f"physical_{n}")(raw) == float(to_physical(raw, places))


def test_conversions_are_proved_too() -> None:
    made = build(raft("winch"), number="fixed32")
    files = emit(lower(made, conversions=True))
    for right, wrong in (
        ("rest > 0.5", "rest >= 0.5"),
        ("(int32_t)scaled", "(int32_t)physical"),
        ("physical, 1073741824.0", "physical, 1073741823.0"),
        ("(double)raw / 67108864.0", "(double)raw * 67108864.0"),
    ):
        assert right in files["winch.h"]
        assert reread(made, {n: t.replace(right, wrong, 1) for n, t in files.items()}), wrong


def test_names_of_conversions_are_free_ones() -> None:
    law = law_of("""
        law: raft
        step: 1 s
        number: fixed32
        inputs: {level: {range: [0, 1]}, level_raw: {range: [0, 1]}, nearest: {range: [0, 1]}}
        tables: {level_raw_raw: {x: [0, 1], y: [0, 1]}, level_physical: {x: [0, 1], y: [1, 0]}}
        states: {mode: {logic: [a, b]}}
        outputs: {y: {value: level_raw_raw(level) + level_physical(level_raw) + nearest}, m: {value: mode}}
    """)
    files = generate(law, conversions=True)
    warning_free(files, "raft")
    assert generate(law, number="float32", conversions=True) == generate(law, number="float32")
