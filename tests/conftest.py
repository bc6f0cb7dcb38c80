"""Helpers of the tests."""

from __future__ import annotations

import textwrap
from collections.abc import Callable, Mapping
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from hypothesis import HealthCheck, settings

from hybgen.law import Law, read
from hybgen.reference import Reference
from hybgen.sil import Chip

settings.register_profile("tests", deadline=None, derandomize=True, suppress_health_check=list(HealthCheck))
settings.load_profile("tests")

ROOT = Path(__file__).resolve().parent.parent
SPECS = sorted((ROOT / "specs").glob("*.yaml"))


def law_of(text: str, name: str = "law.yaml") -> Law:
    """The law in an indented text."""
    return read(textwrap.dedent(text).lstrip().encode(), name)


def run_both(law: Law, inputs: Mapping[str, Any], **options: Any) -> tuple[dict[str, Any], Reference, Chip]:
    """Runs reference and generated C over the same samples; they have to agree in every bit of outputs and state."""
    reference, chip = Reference(law, **options), Chip(law, **options)
    expected, found = reference.run(inputs), chip.run(inputs)
    for name, array in expected.items():
        assert array.tobytes() == np.ascontiguousarray(found[name]).tobytes(), name
    for name, array in reference.fields.items():
        assert array.tobytes() == np.ascontiguousarray(chip.fields[name]).tobytes(), name
    return found, reference, chip


@pytest.fixture
def both() -> Callable[..., tuple[dict[str, Any], Reference, Chip]]:
    """`run_both` as a fixture."""
    return run_both


def pytest_addoption(parser: pytest.Parser) -> None:
    """--update-golden writes the golden C anew instead of comparing with it."""
    parser.addoption("--update-golden", action="store_true", help="write tests/golden anew")
