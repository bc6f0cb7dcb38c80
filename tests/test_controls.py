"""Negative controls: what has to be caught is caught."""

from __future__ import annotations

import re
from pathlib import Path

import pytest

from hybgen.emit import emit
from hybgen.law import Law
from hybgen.lower import lower
from hybgen.sil import Chip, lockstep
from hybgen.sil.toolchain import FLAGS, CompilerRefused
from hybgen.step import build
from tests.conftest import law_of

FILTER = """
    law: blend
    step: 100 ms
    number: {number}
    inputs: {{a: {{range: [-10, 10]}}, b: {{range: [-10, 10]}}}}
    parameters: {{k: {{value: 0.37, range: [0, 1], tunable: true}}}}
    states: {{x: {{range: [-100, 100]}}}}
    sample: {{x: k * x + b * a}}
    outputs: {{y: {{value: a * b + x}}}}
"""


def difference(law: Law, files: dict[str, str], flags: tuple[str, ...] = FLAGS) -> lockstep.Difference | None:
    """The first difference with the C replaced or the flags changed."""
    made = build(law)
    chip = Chip(made, lanes=64, files=files, flags=flags)
    return lockstep.run(made, lanes=64, steps=200, injections=2, chip=chip).first_difference


@pytest.mark.parametrize("number", ["float32", "float64"])
def test_contraction_is_caught(number: str) -> None:
    """With fused multiply-add and without the pragma that forbids it, the comparison fails; with the pragma it holds."""
    assert "fma" in Path("/proc/cpuinfo").read_text(), (
        "this machine has no fused multiply-add: no control is possible here"
    )
    law = law_of(FILTER.format(number=number))
    flags = (*(f for f in FLAGS if "contract" not in f), "-mfma", "-ffp-contract=fast")
    text = emit(lower(build(law)))["blend.c"]
    bare = re.sub(r"#pragma [^\n]*(CONTRACT|contract)[^\n]*\n", "", text)
    assert bare != text
    found = difference(law, {"blend.c": bare}, flags)
    assert found is not None and found.field in ("x", "y")
    assert difference(law, {}, flags) is None


@pytest.mark.parametrize(
    "flag",
    [
        "-ffast-math",
        "-ffinite-math-only",
        "-fassociative-math -fno-signed-zeros -fno-trapping-math",
        "-freciprocal-math",
    ],
)
def test_fast_math_is_refused_by_the_preprocessor(flag: str) -> None:
    law = law_of(FILTER.format(number="float32"))
    with pytest.raises(CompilerRefused, match="blend: compile without"):
        difference(law, {}, (*FLAGS, *flag.split()))


PLANTED = [
    ("now->a * now->b", "now->a + now->b"),
    ("(now->a * now->b) + self->x", "(now->a * now->b) - self->x"),
    ("u->a <= 10.0f", "u->a < 10.0f"),
    ("self->held_a = u->a;", ""),
    ("p->k <= 1.0f", "p->k < 1.0f"),
    ("used = &blend_defaults;", ""),
    ("status |= BLEND_STATUS_INVALID_INPUT;", "status |= 0u;"),
]


@pytest.mark.parametrize(("old", "new"), PLANTED, ids=lambda t: re.sub(r"\W+", "_", t)[:30])
def test_a_planted_change_is_caught(old: str, new: str) -> None:
    law = law_of(FILTER.format(number="float32"))
    text = emit(lower(build(law)))["blend.c"]
    assert old in text, text
    found = difference(law, {"blend.c": text.replace(old, new, 1)})
    assert found is not None
    assert found.reference.startswith("0x") and found.where.startswith("law.yaml")
    assert found.replay.splitlines()[0].startswith("a,b,k")


def test_a_difference_can_be_replayed() -> None:
    """The log of a difference, replayed in the faulty C, shows the same difference at its last row."""
    from hybgen.sil.playback import play
    from hybgen.sil.replay import read_log

    law = law_of(FILTER.format(number="float32"))
    made = build(law)
    text = emit(lower(made))["blend.c"].replace("u->a <= 10.0f", "u->a < 10.0f", 1)
    found = difference(law, {"blend.c": text})
    assert found is not None
    log = read_log(found.replay, "replay.csv", made)
    again = play(made, log, chip=Chip(made, files={"blend.c": text})).report.first_difference
    assert again is not None
    assert (again.field, again.reference, again.c) == (found.field, found.reference, found.c)
    assert play(made, log).report.equal
