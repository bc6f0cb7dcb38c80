"""The JSON Schema of law files accepts the good laws and refuses what the reader's structure refuses."""

from __future__ import annotations

import random
import re
from pathlib import Path
from typing import Any

import jsonschema
import pytest

from hybgen.diag.finding import Findings, LawError
from hybgen.law import shape, structure
from hybgen.law.document import Mapping, Node, Scalar, Sequence, read_document
from hybgen.law.schema import schema
from tests.conftest import ROOT, SPECS
from tests.strategies import law_text

VALIDATOR = jsonschema.Draft202012Validator(schema())
STRUCTURE = ("HG12", "HG190")


def plain(node: Node) -> Any:
    """The document as an editor sees it after reading YAML 1.2."""
    match node:
        case Scalar():
            if not node.plain:
                return node.text
            if node.text in ("true", "false"):
                return node.text == "true"
            if re.fullmatch(r"-?(0|[1-9]\d*)", node.text):
                return int(node.text)
            return node.text or None
        case Sequence():
            return [plain(i) for i in node.items]
        case Mapping():
            return {k.text: plain(v) for k, v in node.entries}


def agrees(text: str) -> bool:
    """Schema and structural check say the same; what they say."""
    document = read_document(text.encode(), "law.yaml")
    findings = Findings()
    structure.check(document, shape.LAW, "a law", findings)
    valid = VALIDATOR.is_valid(plain(document))
    assert valid == (len(findings) == 0), (
        [f.message for f in findings.sorted()],
        [e.message for e in VALIDATOR.iter_errors(plain(document))],
    )
    return valid


def test_the_schema_is_one() -> None:
    jsonschema.Draft202012Validator.check_schema(schema())


@pytest.mark.parametrize("path", SPECS, ids=lambda p: p.stem)
def test_the_raft_laws_are_valid(path: Path) -> None:
    assert agrees(path.read_text(encoding="utf-8"))


def test_random_laws_are_valid() -> None:
    assert all(agrees(law_text(random.Random(seed))) for seed in range(300))


@pytest.mark.parametrize("path", sorted((ROOT / "tests" / "bad").glob("*.yaml")), ids=lambda p: p.stem)
def test_bad_laws_are_refused_where_the_structure_is_bad(path: Path) -> None:
    text = path.read_text(encoding="utf-8")
    if path.stem.startswith(("HG105", "HG108", "HG109", "HG112")):
        return  # nothing that an editor would hand to a schema
    structural = path.stem.startswith("HG12") or path.stem in ("HG190_fixed_point", "HG190_angle", "HG190_parts")
    assert agrees(text) != structural


PIECES = """|(|)|[|]|{|}|: |, |- |0|01|1e9|m|true|null|not |[]|{}|''|when: a|range: |logic: |é""".split("|")


def test_damaged_laws_are_refused_by_both_or_by_none() -> None:
    chance = random.Random(5)
    texts = [p.read_text(encoding="utf-8") for p in SPECS]
    answers: list[bool] = []
    while len(answers) < 400:
        lines = chance.choice(texts).splitlines(keepends=True)
        for _ in range(chance.randint(1, 3)):
            at = chance.randrange(len(lines))
            first = chance.randint(0, len(lines[at]))
            last = chance.choice([first, chance.randint(first, len(lines[at]))])
            lines[at] = lines[at][:first] + chance.choice(PIECES) + lines[at][last:]
        try:
            answers.append(agrees("".join(lines)))
        except LawError:
            continue  # no YAML any more
    assert {True, False} == set(answers)
