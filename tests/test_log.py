"""Recorded logs: columns, units, times; what happened and why."""

from __future__ import annotations

import numpy as np
import pytest

from hybgen.diag.finding import LawError
from hybgen.law import load
from hybgen.sil.playback import play
from hybgen.sil.replay import read_log, recording
from hybgen.step import build
from tests.conftest import ROOT

MADE = build(load(ROOT / "specs" / "bilge_pump.yaml"))


def test_a_log_is_replayed_with_times_and_reasons() -> None:
    rows = ["t [min],level [mm],armed,high"] + [
        f"{k / 60},{320 if k >= 2 else 200 if k else ''},true,0.31" for k in range(5)
    ]
    played = play(MADE, read_log("\n".join(rows), "pump.csv", MADE))
    assert played.report.equal and played.report.steps == 41
    assert [(e.t, e.jump, e.why) for e in played.events] == [
        (2.0, "start", "armed and pump == off and level >= high and idle >= rest")
    ]
    values = played.events[0].values
    assert values["level"] == pytest.approx(0.32) and values["high"] == pytest.approx(0.31) and values["pump"] == "off"


def test_two_jumps_in_one_step_are_told_in_order() -> None:
    log = read_log("level,armed,start pump,start idle\n0.05,false,1,5\n0.05,false,,\n", "pump.csv", MADE)
    played = play(MADE, log)
    assert [e.jump for e in played.events] == ["stop"]


@pytest.mark.parametrize(
    ("text", "codes"),
    [
        ("", ["HG610"]),
        ("level,armed\n", ["HG610"]),
        ("levl,armed\n1,1\n", ["HG612", "HG611"]),
        ("level\n0.1\n", ["HG612"]),
        ("level [mn],armed\n0.1,1\n", ["HG214"]),
        ("level [s],armed\n0.1,1\n", ["HG202"]),
        ("level,armed\n0.1\n", ["HG613"]),
        ("level,armed\nwet,1\n", ["HG613"]),
        ("level,armed\n0.1,\n", ["HG613"]),
        ("level,level,armed\n1,1,1\n", ["HG611"]),
        ("t,level,armed\n0,0.1,1\n2,0.1,1\n1,0.1,1\n", ["HG614"]),
        ("level[0],armed\n0.1,1\n", ["HG612", "HG611"]),
    ],
)
def test_mistakes_in_a_log(text: str, codes: list[str]) -> None:
    with pytest.raises(LawError) as caught:
        read_log(text, "log.csv", MADE)
    assert sorted(f.code for f in caught.value.findings) == sorted(codes)


def test_what_is_recorded_is_read_back_bit_for_bit() -> None:
    level = np.array([0.1, np.nan, np.inf, 0.30000001, 1e-45], np.float32)
    inputs = {"level": level, "armed": np.array([True, False, True, True, False])}
    text = recording(
        MADE, inputs, 5, {"high": np.float32(0.3), "low": np.float32(0.1)}, {"pump": np.int32(1), "idle": np.int32(7)}
    )
    log = read_log(text, "log.csv", MADE)
    assert log.inputs["level"].view(np.uint32).tolist() == level.view(np.uint32).tolist()
    assert log.inputs["armed"].tolist() == inputs["armed"].tolist()
    assert log.parameters["high"].tolist() == [np.float32(0.3)] * 5 and log.start == {"pump": 1.0, "idle": 7.0}
