"""hybgen installs from a clone, from its wheel and from its sdist, with templates and example laws inside."""

from __future__ import annotations

import shutil
import subprocess
import sys
import tarfile
import venv
import zipfile
from pathlib import Path

import pytest

from tests.conftest import ROOT


@pytest.fixture(scope="module")
def packages(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """The wheel and the sdist, built from a copy of what git would ship."""
    folder = tmp_path_factory.mktemp("package")
    copy = folder / "clone"
    copy.mkdir()
    for name in ("hybgen", "templates", "specs", "tests", ".ci"):
        shutil.copytree(ROOT / name, copy / name, ignore=shutil.ignore_patterns("__pycache__"))
    for name in ("pyproject.toml", "README.md", "DEVELOPERS.md", "CHANGELOG.md", "LICENSE"):
        shutil.copy(ROOT / name, copy / name)
    subprocess.run(
        [sys.executable, "-m", "build", "--no-isolation", "--outdir", str(folder / "dist"), str(copy)],
        check=True,
        capture_output=True,
    )
    return folder


def test_the_archives_hold_what_people_read(packages: Path) -> None:
    wheel = zipfile.ZipFile(next((packages / "dist").glob("*.whl")))
    names = wheel.namelist()
    for wanted in (
        "hybgen/templates/law.c.jinja",
        "hybgen/templates/new/pi.yaml.jinja",
        "hybgen/specs/bilge_pump.yaml",
        "hybgen/cli/main.py",
    ):
        assert wanted in names
    assert not any(n.startswith("tests/") for n in names)
    with tarfile.open(next((packages / "dist").glob("*.tar.gz"))) as sdist:
        inside = {n.split("/", 1)[1] for n in sdist.getnames() if "/" in n}
    assert {"templates/law.c.jinja", "specs/winch.yaml", "tests/conftest.py", "pyproject.toml", "LICENSE"} <= inside


@pytest.mark.parametrize("what", ["clone", "wheel", "sdist"])
def test_it_runs_where_it_is_installed(packages: Path, what: str, tmp_path: Path) -> None:
    """Installed into a fresh environment that sees the dependencies of this one."""
    place = tmp_path / "venv"
    venv.create(place, system_site_packages=False, with_pip=False)
    site = next((place / "lib").glob("python*/site-packages"))
    here = [p for p in sys.path if p.endswith("site-packages")]
    (site / "dependencies.pth").write_text("\n".join(here) + "\n")
    source = {
        "clone": packages / "clone",
        "wheel": next((packages / "dist").glob("*.whl")),
        "sdist": next((packages / "dist").glob("*.tar.gz")),
    }[what]
    subprocess.run(
        [
            sys.executable,
            "-m",
            "pip",
            "install",
            "-q",
            "--no-deps",
            "--no-build-isolation",
            "--no-index",
            "--target",
            str(tmp_path / "site"),
            str(source),
        ],
        check=True,
        capture_output=True,
    )
    (site / "a_first.pth").write_text(f"import sys; sys.path.insert(0, {str(tmp_path / 'site')!r})\n")
    python = place / "bin" / "python"
    where = subprocess.run(
        [python, "-c", "import hybgen; print(hybgen.__file__)"],
        capture_output=True,
        text=True,
        check=True,
        cwd=tmp_path,
    ).stdout
    assert str(tmp_path / "site") in where
    law = tmp_path / "site" / "hybgen" / "specs" / "bilge_pump.yaml"
    done = subprocess.run(
        [python, "-m", "hybgen", "preflight", law, "--to", tmp_path / "evidence"],
        capture_output=True,
        text=True,
        cwd=tmp_path,
        check=False,
    )
    assert done.returncode == 0, done.stdout + done.stderr
