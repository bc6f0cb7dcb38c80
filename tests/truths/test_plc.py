"""Standard function blocks of IEC 61131-3 as laws: timers, latches, edges, counter, hysteresis, through generated C."""

from __future__ import annotations

import itertools

import numpy as np
import pytest

from hybgen.sil import Chip
from tests.conftest import law_of, run_both

# K1. IEC 61131-3 ed. 3 (2013), Table 46: TON, TOF, TP; the scan table is a restatement of the standard's timing diagrams
# (scan 0.1 s, PT = 0.3 s). Re-triggering of TP is not tested: secondary sources disagree.
IN = [c == "1" for c in "001100111111100000"]

TON = """
    law: on_delay
    step: 100 ms
    inputs: {signal: {type: bool}}
    parameters: {delay: 0.3 s}
    states: {phase: {logic: [idle, timing]}, since: {timer: 10 s}}
    jumps:
      begin: {set: phase == idle and signal, map: {phase: timing, since: 0 s}}
      end: {set: phase == timing and not signal, map: {phase: idle}, keep: [since]}
    outputs: {q: {type: bool, value: phase == timing and since >= delay}}
"""
TOF = """
    law: off_delay
    step: 100 ms
    inputs: {signal: {type: bool}}
    parameters: {delay: 0.3 s}
    states: {phase: {logic: [off, on, falling]}, since: {timer: 10 s}}
    jumps:
      rise: {set: phase != on and signal, map: {phase: on}, keep: [since]}
      fall: {set: phase == on and not signal, map: {phase: falling, since: 0 s}}
      expire: {set: phase == falling and since >= delay, map: {phase: off}, keep: [since]}
    outputs: {q: {type: bool, value: phase != off}}
"""
TP = """
    law: pulse
    step: 100 ms
    inputs: {signal: {type: bool}}
    parameters: {length: 0.3 s}
    states: {phase: {logic: [ready, high, waiting]}, since: {timer: 10 s}}
    jumps:
      begin: {set: phase == ready and signal, map: {phase: high, since: 0 s}}
      expire: {set: phase == high and since >= length, map: {phase: waiting}, keep: [since]}
      arm: {set: phase == waiting and not signal, map: {phase: ready}, keep: [since]}
    outputs: {q: {type: bool, value: phase == high}}
"""


@pytest.mark.parametrize(
    ("text", "expected"), [(TON, "000000000111100000"), (TOF, "001111111111111100"), (TP, "001110111000000000")]
)
def test_timers_follow_the_scan_table(text: str, expected: str) -> None:
    found, _, _ = run_both(law_of(text), {"signal": np.array(IN)})
    assert "".join("01"[int(q)] for q in found["q"]) == expected


# K2. IEC 61131-3, Table 43: SR: Q1 := S1 OR (NOT R AND Q1); RS: Q1 := NOT R1 AND (S OR Q1) (text of SR seen).
LATCH = """
    law: latch
    step: 10 ms
    inputs: {{s: {{type: bool}}, r: {{type: bool}}}}
    states: {{q1: {{type: bool}}}}
    jumps:
      put: {{set: "not q1 and {put}", map: {{q1: true}}}}
      clear: {{set: "q1 and {clear}", map: {{q1: false}}}}
    outputs: {{q: {{type: bool, value: q1}}}}
"""


@pytest.mark.parametrize("dominant", ["set", "reset"])
def test_latches_follow_their_truth_tables(dominant: str) -> None:
    put, clear = ("s", "r and not s") if dominant == "set" else ("s and not r", "r")
    chip = Chip(law_of(LATCH.format(put=put, clear=clear)))
    for s, r, q1 in itertools.product([False, True], repeat=3):
        chip.reset()
        chip.state["q1"] = q1
        wanted = (s or (not r and q1)) if dominant == "set" else (not r and (s or q1))
        assert chip.step({"s": s, "r": r}) == {"q": wanted}


# K3. IEC 61131-3, Table 44 (from memory): one scan true for each edge; R_TRIG pulses with CLK true at the first scan,
# F_TRIG does not with CLK false at the first scan.
EDGES = """
    law: edges
    step: 10 ms
    inputs: {clk: {type: bool}}
    states: {last: {type: bool}}
    sample: {last: clk}
    outputs:
      rise: {type: bool, value: clk and not last}
      fall: {type: bool, value: last and not clk}
"""


def test_edges_last_one_scan() -> None:
    clk = np.array([c == "1" for c in "1100110100"])
    found, _, _ = run_both(law_of(EDGES), {"clk": clk})
    assert "".join("01"[int(q)] for q in found["rise"]) == "1000100100"
    assert "".join("01"[int(q)] for q in found["fall"]) == "0010001010"
    found, _, _ = run_both(law_of(EDGES), {"clk": np.array([False, False])})
    assert not found["fall"].any()


# K4. IEC 61131-3, Table 45 (from memory): CTU: Q = (CV >= PV), reset dominant, saturates at the maximum of its type.
CTU = """
    law: count_up
    step: 10 ms
    inputs: {cu: {type: bool}, reset: {type: bool}}
    parameters: {pv: {value: 3, type: integer}}
    states: {cv: {count: 2147483647}, last: {type: bool}}
    sample: {last: cu}
    jumps:
      clear: {set: reset and cv > 0, map: {cv: 0}}
      up: {set: cu and not last and not reset and not jumped_up, map: {cv: cv + 1, jumped_up: true}}
    outputs: {q: {type: bool, value: cv >= pv}, shown: {type: integer, value: cv}}
"""


def test_counter_counts_edges_and_saturates() -> None:
    text = CTU.replace("last: {type: bool}}\n", "last: {type: bool}, jumped_up: {type: bool}}\n").replace(
        "sample: {last: cu}", "sample: {last: cu, jumped_up: false}"
    )
    law = law_of(text)
    cu = np.array([c == "1" for c in "0101101010101"])
    reset = np.array([c == "1" for c in "0000000000110"])
    found, _, chip = run_both(law, {"cu": cu, "reset": reset})
    assert found["shown"].tolist() == [0, 1, 1, 2, 2, 2, 3, 3, 4, 4, 0, 0, 1]
    assert found["q"].tolist() == [v >= 3 for v in found["shown"].tolist()]
    chip.state["cv"] = 2147483646
    chip.state["last"] = False
    assert [chip.step({"cu": k % 2 == 0, "reset": False})["shown"] for k in range(6)] == [2147483647] * 6


# K5. HYSTERESIS block, final draft IEC 61131-3 2nd ed. (2001-12-10), body text seen: strict inequalities.
HYSTERESIS = """
    law: hysteresis
    step: 10 ms
    number: {number}
    inputs: {{xin1: {{range: [0, 100]}}}}
    parameters: {{xin2: 20, eps: 1}}
    states: {{out: {{type: bool}}}}
    jumps:
      fall: {{set: "out and xin1 < xin2 - eps", map: {{out: false}}}}
      rise: {{set: "not out and xin1 > xin2 + eps", map: {{out: true}}}}
    outputs: {{q: {{type: bool, value: out}}}}
"""


@pytest.mark.parametrize("number", ["float32", "float64"])
def test_hysteresis_block_is_strict(number: str) -> None:
    xin1 = np.array([20.9, 21, 21.1, 20, 19, 18.9, 21, 21.2])
    found, _, _ = run_both(law_of(HYSTERESIS.format(number=number)), {"xin1": xin1})
    assert found["q"].astype(int).tolist() == [0, 0, 1, 1, 1, 0, 0, 1]
    closed = law_of(HYSTERESIS.format(number=number).replace("<", "<=").replace(">", ">="))
    found, _, _ = run_both(closed, {"xin1": xin1})
    assert found["q"].astype(int).tolist() == [0, 1, 1, 1, 0, 0, 1, 1]
