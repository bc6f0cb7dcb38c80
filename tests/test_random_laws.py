"""Random whole laws: the C compiles without a warning, equals the reference in every bit, and proves when read back.

The default run takes 600 laws, and 120 in fixed point; `pytest -m campaign tests/test_random_laws.py` takes 50,000 (HYBGEN_LAWS sets another number).
"""

from __future__ import annotations

import os
import random

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from hybgen.diag.finding import LawError
from hybgen.emit import emit
from hybgen.law import read
from hybgen.lower import lower
from hybgen.reread import reread
from hybgen.sil import lockstep
from hybgen.sil.chip import Chip, load_many
from hybgen.sil.toolchain import FLAGS, WARNINGS, CompilerRefused
from hybgen.step import StepLaw, build
from tests.strategies import law_text, laws

BATCH = 20
LANES = 48


RULES = {"HG204", "HG211", "HG401"}
FIXED_RULES = {"HG421", "HG422"}
"""What a random law may break in fixed point: a divisor that can be 0, an argument outside a domain, a range without room."""


def built(seeds: range, number: str | None = None) -> list[StepLaw]:
    """The laws that are good ones; a random law may break a rule, which is no matter here."""
    found = []
    for seed in seeds:
        name = f"law_{seed}"
        try:
            found.append(build(read(law_text(random.Random(seed), name).encode(), f"{name}.yaml"), number=number))
        except LawError as error:
            allowed = RULES | (FIXED_RULES if number == "fixed32" else set())
            assert {f.code for f in error.findings if f.severity == "error"} <= allowed, (seed, error)
    return found


def check_batch(seeds: range, number: str | None = None) -> int:
    """Compiles a batch as one object and compares each law; how many laws there were."""
    made = built(seeds, number)
    flags = (*FLAGS[:1], "-O1", *FLAGS[2:])
    try:
        libraries = load_many(made, (*flags, *WARNINGS))
    except CompilerRefused as refused:
        # a law that asks mode == run and mode == fault at once: gcc says so, and has no option for it
        assert "mutually exclusive equal-tests" in str(refused) and str(refused).count("error:") == 1, refused
        libraries = load_many(made, flags)
    for law, library in zip(made, libraries, strict=True):
        chip = Chip(law, lanes=LANES, library=library)
        report = lockstep.run(law, lanes=LANES, steps=40, injections=3, chip=chip)
        assert report.equal, (law.law.name, report.first_difference)
        assert not reread(law, emit(lower(law))), law.law.name
    return len(made)


@pytest.mark.parametrize("part", range(10))
def test_random_laws_equal_their_reference_in_every_bit(part: int) -> None:
    count = sum(check_batch(range(first, first + BATCH)) for first in range(part * 60, (part + 1) * 60, BATCH))
    assert count >= 57


@pytest.mark.parametrize("part", range(4))
def test_random_laws_in_fixed_point_equal_their_reference(part: int) -> None:
    firsts = range(20000 + part * 30, 20000 + (part + 1) * 30, 15)
    assert sum(check_batch(range(first, first + 15), "fixed32") for first in firsts) >= 22


@pytest.mark.campaign
def test_fifty_thousand_random_laws() -> None:
    total = int(os.environ.get("HYBGEN_LAWS", "50000"))
    first = int(os.environ.get("HYBGEN_FIRST", "100000"))
    numbers = (None, None, "fixed32")  # float32 or float64, as the law says, and every third batch in fixed point
    firsts = range(first, first + total, BATCH)
    count = sum(check_batch(range(k, k + BATCH), numbers[i % 3]) for i, k in enumerate(firsts))
    print(f"{count} laws, 0 differences")
    assert count >= 0.9 * total


@settings(max_examples=60)
@given(laws(), st.sampled_from(["float32", "float64"]))
def test_a_law_found_by_hypothesis_equals_its_reference(text: str, number: str) -> None:
    try:
        made = build(read(text.encode(), "random_law.yaml"), number=number)
    except LawError:
        return
    assert lockstep.run(made, lanes=16, steps=20, injections=2).equal
