"""Writing files whole or not at all."""

from __future__ import annotations

import os
import tempfile
from collections.abc import Mapping
from pathlib import Path


def write(path: Path, text: str) -> None:
    """Writes a file through a temporary one in the same folder, so that it is never there by halves."""
    handle, name = tempfile.mkstemp(dir=path.parent, prefix=f".{path.name}.")
    try:
        with os.fdopen(handle, "w", encoding="utf-8", newline="\n") as file:
            file.write(text)
        umask = os.umask(0)
        os.umask(umask)
        os.chmod(name, 0o666 & ~umask)
        os.replace(name, path)
    except BaseException:
        Path(name).unlink(missing_ok=True)
        raise


def write_all(folder: Path, files: Mapping[str, str]) -> None:
    """Writes files into a folder, which is made if it is not there."""
    folder.mkdir(parents=True, exist_ok=True)
    for name, text in files.items():
        write(folder / name, text)
