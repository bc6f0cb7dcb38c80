"""The host's C compiler. Only this room starts processes."""

from __future__ import annotations

import importlib.util
import os
import shlex
import shutil
import subprocess
import sys
import tempfile
from collections.abc import Mapping, Sequence
from pathlib import Path

FLAGS = ("-std=c99", "-O2", "-ffp-contract=off", "-fPIC", "-shared")
WARNINGS = (
    "-Wall",
    "-Wextra",
    "-Wconversion",
    "-Wshadow",
    "-Wdouble-promotion",
    "-Wfloat-equal",
    "-pedantic",
    "-Werror",
)


class NoCompiler(Exception):
    """There is no C compiler; the message says how to get one."""


class CompilerRefused(Exception):
    """The compiler did not accept the code; the message is its own."""


def compiler() -> tuple[str, ...]:
    """The command of the host's C compiler: $CC, cc, gcc, clang, or ziglang from the extra `cc`."""
    if chosen := os.environ.get("CC"):
        return tuple(shlex.split(chosen))
    for name in ("cc", "gcc", "clang"):
        if found := shutil.which(name):
            return (found,)
    if importlib.util.find_spec("ziglang") is not None:
        return (sys.executable, "-m", "ziglang", "cc")
    raise NoCompiler("no C compiler found: install gcc or clang, or run: pip install 'hybgen[cc]'")


def run(command: Sequence[str], folder: Path) -> None:
    """Runs a compiler in a folder. Raises CompilerRefused with what it said."""
    environment = {
        **os.environ,
        "ZIG_GLOBAL_CACHE_DIR": os.environ.get(
            "ZIG_GLOBAL_CACHE_DIR", str(Path(tempfile.gettempdir()) / "hybgen-zig-cache")
        ),
    }
    try:
        done = subprocess.run(
            command,
            cwd=folder,
            env=environment,
            capture_output=True,
            text=True,
            errors="replace",
            check=False,
            stdin=subprocess.DEVNULL,
            timeout=600,
        )
    except OSError as error:
        raise NoCompiler(f"the C compiler '{command[0]}' can't be started: {error.strerror}") from None
    if done.returncode != 0:
        raise CompilerRefused((done.stderr or done.stdout).strip())


def shared_object(files: Mapping[str, str], main: str, folder: Path, flags: Sequence[str] = FLAGS) -> Path:
    """Writes the files into a folder, compiles `main` and gives the path of the shared object."""
    for name, text in files.items():
        (folder / name).write_text(text, encoding="ascii")
    made = folder / "law.so"
    run([*compiler(), *flags, main, "-o", str(made)], folder)
    return made


def warning_free(files: Mapping[str, str], name: str) -> None:
    """Compiles the law's C with every warning as an error. Raises CompilerRefused."""
    with tempfile.TemporaryDirectory(prefix="hybgen-") as place:
        folder = Path(place)
        for file, text in files.items():
            (folder / file).write_text(text, encoding="ascii")
        run([*compiler(), "-std=c99", "-O2", "-ffp-contract=off", *WARNINGS, "-c", f"{name}.c", "-o", "law.o"], folder)
