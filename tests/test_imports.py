"""The rooms of DEVELOPERS.md: who may import whom, who may read YAML, start processes, print."""

from __future__ import annotations

import ast
import re
from pathlib import Path

import pytest

from tests.conftest import ROOT

MAY = {
    "version": set(), "diag": set(), "kernels": set(), "expr": {"diag"}, "law": {"diag", "expr"}, "numbers": {"expr", "kernels"},
    "step": {"diag", "expr", "law", "kernels", "numbers"}, "reference": {"expr", "law", "numbers", "kernels", "step"}, "ir": {"kernels"},
    "lower": {"diag", "expr", "law", "step", "ir", "kernels", "version"}, "emit": {"ir", "kernels"},
    "checks": {"diag", "expr", "law", "numbers", "step"}, "pipeline": {"diag", "law", "step", "lower", "emit", "reread"},
    "reread": {"expr", "numbers", "kernels", "step"},
    "selftests": {"expr", "law", "kernels", "numbers", "step", "reference", "ir", "lower", "emit", "sil"},
    "sil": {"diag", "expr", "law", "step", "reference", "lower", "emit"},
}  # fmt: skip
EVERYTHING = {"cli", "__init__", "__main__"}
OUTWARD = {"print", "input", "eval", "exec", "stdout", "stderr", "stdin", "system", "popen"}
ONLY = {
    "yaml": {"law"},
    "subprocess": {"sil"},
    "cffi": {"sil"},
    "pycparser": {"reread"},
    "jinja2": {"emit"},
    "flint": {"numbers"},
    "sympy": set(),
    "argparse": {"cli"},
}
FILES = sorted((ROOT / "hybgen").rglob("*.py"))


def room(path: Path) -> str:
    return path.relative_to(ROOT / "hybgen").parts[0].removesuffix(".py")


def imports(path: Path) -> set[str]:
    found: set[str] = set()
    for node in ast.walk(ast.parse(path.read_text())):
        if isinstance(node, ast.Import):
            found |= {a.name for a in node.names}
        elif isinstance(node, ast.ImportFrom):
            assert node.level == 0 and all(a.name != "*" for a in node.names), path
            found.add(str(node.module))
            if node.module == "hybgen":
                found |= {f"hybgen.{a.name}" for a in node.names}
    return found


@pytest.mark.parametrize("path", FILES, ids=lambda p: str(p.relative_to(ROOT)))
def test_imports_follow_the_table(path: Path) -> None:
    own = room(path)
    for name in imports(path):
        top, _, rest = name.partition(".")
        if top == "hybgen" and rest and own not in EVERYTHING:
            assert rest.split(".")[0] in MAY[own] | {own}, f"{path} may not import {name}"
        if top in ONLY:
            assert own in ONLY[top], f"{path} may not import {name}"


def test_only_the_command_line_prints() -> None:
    for path in FILES:
        if room(path) not in EVERYTHING:
            assert not uses(ast.parse(path.read_text())) & OUTWARD, path


def uses(tree: ast.AST) -> set[str]:
    """Names read in a module, and the attributes of `sys` and `os`."""
    found = {n.id for n in ast.walk(tree) if isinstance(n, ast.Name)}
    for node in ast.walk(tree):
        if isinstance(node, ast.Attribute) and isinstance(node.value, ast.Name) and node.value.id in {"sys", "os"}:
            found.add(node.attr)
    return found


def test_printing_is_seen() -> None:
    for text in ("print(1)", "sys.stdout.write('x')", "import os; os.system('x')", "w = sys.stderr"):
        assert uses(ast.parse(text)) & OUTWARD, text


def test_the_table_is_the_one_of_the_developers_page() -> None:
    """`cli` may import all; `version` imports nothing and has no row."""
    rows = re.findall(r"^\| `(\w+)` \|.*\| ([^|]+) \|$", (ROOT / "DEVELOPERS.md").read_text(encoding="utf-8"), re.M)
    table = {name: set(words.replace(" ", "").split(",")) - {"-"} for name, words in rows}
    assert table.pop("cli") == {"all"}
    assert table == {name: allowed for name, allowed in MAY.items() if name != "version"}


def test_files_and_functions_stay_small() -> None:
    for path in FILES:
        text = path.read_text()
        assert len(text.splitlines()) <= 400, path
        for node in ast.walk(ast.parse(text)):
            if isinstance(node, ast.FunctionDef | ast.AsyncFunctionDef):
                length = (node.end_lineno or 0) - node.lineno + 1
                assert length <= 40, f"{path}: {node.name} has {length} lines"


def test_templates_compute_nothing() -> None:
    for path in (ROOT / "templates").rglob("*.jinja"):
        for piece in path.read_text().split("{{")[1:]:
            assert piece.split("}}")[0].strip().replace(".", "").replace("_", "").isalnum(), (path, piece[:40])
