"""What one step means, on small laws worked by hand (the numbers in the comments are the hand calculation)."""

from __future__ import annotations

import numpy as np
import pytest

from hybgen.diag.finding import LawError
from hybgen.sil import Chip
from hybgen.step.model import Status
from tests.conftest import law_of, run_both


def chip_of(text: str) -> Chip:
    """The C of a law; its reference is compared on the way in every test that uses run_both."""
    return Chip(law_of(text))


def test_new_values_are_computed_from_the_old_ones() -> None:
    found, _, _ = run_both(
        law_of("""
        law: swap
        step: 100 ms
        inputs: {go: {type: bool}}
        states: {a: {range: [0, 9], initial: 1}, b: {range: [0, 9], initial: 2}, c: {range: [0, 9], initial: 3}}
        jumps: {turn: {set: go, map: {a: b, b: c, c: a}}}
        jumps_per_step: 1
        outputs: {y: {value: 100 * a + 10 * b + c}}
    """),
        {"go": np.array([False, True, True])},
    )
    assert found["y"].tolist() == [123, 231, 312]


def test_sample_and_flow_see_the_same_old_values() -> None:
    found, _, _ = run_both(
        law_of("""
        law: pair
        step: 1 s
        inputs: {go: {type: bool}}
        states: {x: {range: [-99, 99], initial: 1}, last: {range: [-99, 99], initial: 7}}
        flow: {map: {x: last / (1 s)}}
        sample: {last: x}
        outputs: {y: {value: x}, z: {value: last}}
    """),
        {"go": np.zeros(3, bool)},
    )
    assert found["y"].tolist() == [1, 8, 9] and found["z"].tolist() == [7, 1, 8]


COUNT = """
    law: burst
    step: 100 ms
    inputs: {{go: {{type: bool}}}}
    states: {{n: {{count: 100}}}}
    jumps: {{more: {{set: go and n < 5, map: {{n: n + 1}}}}}}
    jumps_per_step: {most}
    outputs: {{y: {{type: integer, value: n}}}}
"""


def test_a_jump_beyond_the_limit_happens_at_the_next_step() -> None:
    chip = chip_of(COUNT.format(most=2))
    seen = [(chip.step({"go": True})["y"], chip.status) for _ in range(4)]
    assert seen == [(2, Status.JUMP_LIMIT), (4, Status.JUMP_LIMIT), (5, Status(0)), (5, Status(0))]
    assert chip_of(COUNT.format(most=8)).step({"go": True}) == {"y": 5}


FLOW = """
    law: band
    step: 1 s
    prefer: {prefer}
    inputs: {{u: {{range: [0, 10]}}}}
    states: {{side: {{logic: [low, high]}}, x: {{range: [0, 99]}}, since: {{timer: 50 s}}}}
    flow: {{set: u <= 6, map: {{x: 1 /s}}}}
    jumps:
      up: {{set: side == low and u >= 4, map: {{side: high}}}}
      down: {{set: side == high and u < 2, map: {{side: low}}}}
    outputs: {{y: {{value: side}}, z: {{value: x}}}}
"""


@pytest.mark.parametrize(("prefer", "sides"), [("jump", [0, 1, 1, 0]), ("flow", [0, 0, 1, 1])])
def test_where_flow_and_jump_are_both_allowed_prefer_decides(prefer: str, sides: list[int]) -> None:
    """u = 5 lies in both sets; u = 7 and 8 only in the jump set of `up`; u = 1 in the flow set and in `down`."""
    found, _, chip = run_both(law_of(FLOW.format(prefer=prefer)), {"u": np.array([1.0, 5.0, 7.0, 1.0])})
    assert found["y"].tolist() == sides
    assert found["z"].tolist() == [0, 1, 2, 2]  # no flow in the third step: u > 6
    assert int(chip.fields["since"][0]) == 3


def test_stuck_is_told_and_time_stands_still() -> None:
    chip = chip_of(FLOW.format(prefer="jump"))
    chip.step({"u": 5.0})
    assert chip.status == Status(0) and chip.state["since"] == 1.0
    chip.step({"u": 9.0})  # high already: no jump, no flow
    assert chip.status == Status.STUCK and chip.state["since"] == 1.0 and chip.state["x"] == 1.0


def test_bad_samples_become_what_the_law_says() -> None:
    law = law_of("""
        law: probe
        step: 100 ms
        inputs:
          a: {range: [0, 1], invalid: hold, initial: 0.25}
          b: {range: [0, 1], invalid: clamp}
          c: {range: [0, 1], invalid: 0.75}
          n: {type: integer, range: [0, 9], invalid: clamp}
          v: {vector: 2, range: [0, 1], invalid: hold}
        outputs:
          oa: {value: a}
          ob: {value: b}
          oc: {value: c}
          on_: {type: integer, value: n}
          ov: {value: v}
          good: {type: bool, value: valid(a) and valid(b) and valid(c) and valid(n) and valid(v)}
    """)
    inf, nan = np.inf, np.nan
    found, _, chip = run_both(
        law,
        {
            "a": np.array([nan, 0.5, 2.0, -inf]),
            "b": np.array([1.5, -0.5, nan, 0.125]),
            "c": np.array([nan, 0.5, 1.5, inf]),
            "n": np.array([12, -3, 4, 5]),
            "v": np.array([[0.25, 0.5], [0.125, nan], [2, 0], [1, 1]]),
        },
    )
    assert found["oa"].tolist() == [0.25, 0.5, 0.5, 0.5]  # the initial one, then the last good one
    assert found["ob"].tolist() == [1, 0, 0.5, 0.125]  # NaN: nothing good was seen yet, so the middle
    assert found["oc"].tolist() == [0.75, 0.5, 0.75, 0.75]
    assert found["on_"].tolist() == [9, 0, 4, 5]
    assert found["ov"].tolist() == [[0.25, 0.5], [0.25, 0.5], [0.25, 0.5], [1, 1]]  # as a whole
    assert not found["good"].any() and chip.status == Status.INVALID_INPUT


def test_a_value_that_is_not_finite_is_not_taken() -> None:
    law = law_of("""
        law: ratio
        step: 1 s
        inputs: {u: {range: [0, 9]}}
        states: {x: {range: [-9, 9], initial: 3}}
        sample: {x: 1 / u}
        outputs: {y: {value: 1 / u, range: [2, 5]}, z: {value: x}}
    """)
    found, _, chip = run_both(law, {"u": np.array([4.0, 0.0])})
    assert found["y"].tolist() == [0.25, 2.0]  # the fallback: 0 held in the range
    assert found["z"].tolist() == [3, 0.25] and chip.state["x"] == 0.25 and chip.status == Status.NON_FINITE


def test_limits_hold_states_and_outputs() -> None:
    found, _, _ = run_both(
        law_of("""
        law: held
        step: 1 s
        inputs: {u: {range: [-9, 9]}}
        states: {x: {range: [-2, 2], limit: true}}
        flow: {map: {x: u / (1 s)}}
        outputs: {y: {value: x}, z: {value: 3 * x, range: [-4, 5], limit: true}}
    """),
        {"u": np.array([1.5, 1.5, -9.0, 0.0])},
    )
    assert found["y"].tolist() == [0, 1.5, 2, -2] and found["z"].tolist() == [0, 4.5, 5, -4]


def test_tables_are_linear_between_points_and_held_beyond() -> None:
    found, _, _ = run_both(
        law_of("""
        law: map
        step: 1 s
        inputs: {u: {unit: V, range: [-9, 9]}}
        tables: {curve: {x: [0, 1, 3], y: [10, 20, 0], x_unit: V, y_unit: degC}}
        outputs: {y: {value: curve(u)}}
    """),
        {"u": np.array([-5, 0, 0.25, 1, 2, 3, 8.0])},
    )
    assert found["y"].tolist() == [10, 10, 12.5, 20, 10, 0, 0]


def test_jumped_is_known_in_the_same_step() -> None:
    found, _, _ = run_both(
        law_of("""
        law: bell
        step: 1 s
        inputs: {u: {range: [0, 9]}}
        states: {side: {logic: [low, high]}, rings: {count: 9}}
        jumps:
          up: {set: side == low and u >= 5, map: {side: high}, keep: [rings]}
          down: {set: side == high and u <= 4, map: {side: low}, keep: [rings]}
        sample: {rings: "choose(jumped(up), rings + 1, rings)"}
        outputs: {up_: {type: bool, value: jumped(up)}, n: {type: integer, value: rings}}
    """),
        {"u": np.array([5, 6, 3, 7, 7.0])},
    )
    assert found["up_"].tolist() == [True, False, False, True, False] and found["n"].tolist() == [0, 1, 1, 1, 2]


def test_matrices_vectors_and_products() -> None:
    found, _, _ = run_both(
        law_of("""
        law: frame
        step: 1 s
        inputs: {v: {vector: 3, unit: m, range: [-9, 9]}}
        parameters: {m: {value: [[1, 2, 3], [0, 1, 0]]}, e: {value: [0, 0, 1]}}
        outputs:
          product: {value: m @ v}
          turned: {value: "cross(e, v)"}
          length2: {value: "dot(v, v)", unit: m2}
          entry: {value: "m[0, 2] * v[1]"}
    """),
        {"v": np.array([[1.0, 2.0, 3.0]])},
    )
    assert found["product"].tolist() == [[14, 2]] and found["turned"].tolist() == [[-2, 1, 0]]
    assert found["length2"].tolist() == [14] and found["entry"].tolist() == [6]


def test_the_defaults_are_used_while_parameters_break_a_rule() -> None:
    law = law_of("""
        law: marks
        step: 1 s
        inputs: {u: {range: [0, 9]}}
        parameters:
          low: {value: 2, range: [0, 9], tunable: true}
          high: {value: 5, range: [0, 9], tunable: true}
        assume: [low < high]
        outputs: {y: {value: low}}
    """)
    chip = Chip(law)
    for low, high, seen, status in ((3, 4, 3, 0), (6, 5, 2, 16), (np.nan, 5, 2, 16), (5, 5, 2, 16), (4, 9, 4, 0)):
        chip.parameters["low"][0], chip.parameters["high"][0] = low, high
        assert chip.step({"u": 1.0}) == {"y": seen} and int(chip.status) == status


def test_an_unbounded_chain_is_not_called_bounded() -> None:
    from hybgen.checks import check

    law = law_of("""
        law: flutter
        step: 1 s
        inputs: {u: {range: [0, 9]}}
        states: {side: {logic: [low, high]}}
        jumps:
          up: {set: side == low and u >= 5, map: {side: high}}
          down: {set: side == high and u >= 4, map: {side: low}}
        outputs: {y: {value: side}}
    """)
    assert [f.verdict for f in check(law).findings if f.code == "HG320"] == ["open"]
    calm = law_of("""
        law: steady
        step: 1 s
        inputs: {u: {range: [0, 9]}, go: {type: bool}}
        states: {side: {logic: [low, high]}}
        jumps:
          up: {set: side == low and go and u >= 5, map: {side: high}}
          down: {set: side == high and not go, map: {side: low}}
        outputs: {y: {value: side}}
    """)
    found = next(f for f in check(calm).findings if f.code == "HG320")
    assert (found.verdict, found.value) == ("proved", {"chain": 1})


def test_exact_is_refused_where_it_can_not_be() -> None:
    from hybgen.pipeline import generate

    with pytest.raises(LawError, match="HG402"):
        generate(
            law_of("""
            law: curve
            step: 1 s
            states: {x: {range: [0, 9]}}
            flow: {method: exact, map: {x: x * x / (1 s)}}
            outputs: {y: {value: x}}
        """)
        )
