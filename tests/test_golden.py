"""The C of the raft laws, as reviewed: a change of the generator shows up as a change of these files."""

from __future__ import annotations

from pathlib import Path

import pytest

from hybgen.law import load
from hybgen.pipeline import generate
from tests.conftest import ROOT, SPECS

GOLDEN = ROOT / "tests" / "golden"


@pytest.mark.parametrize("path", SPECS, ids=lambda p: p.stem)
def test_the_c_is_as_reviewed(path: Path, request: pytest.FixtureRequest) -> None:
    for name, text in generate(load(path)).items():
        if request.config.getoption("--update-golden"):
            (GOLDEN / name).write_text(text)
        assert (GOLDEN / name).read_text() == text, (
            f"{name} changed; if that is meant: pytest tests/test_golden.py --update-golden"
        )
