"""The self-test of a law, built and run on this host."""

from __future__ import annotations

import tempfile
from collections.abc import Mapping, Sequence
from pathlib import Path

from hybgen.sil.toolchain import FLAGS, shared_object


def answer(files: Mapping[str, str], name: str, flags: Sequence[str] = FLAGS) -> int:
    """What NAME_selftest() answers on this host: 0, or the number of the first check that fails.

    `files`: NAME.h, NAME.c, NAME_selftest.c; the two C files are compiled apart, so that no compiler sees the law in its
    test. Raises toolchain.NoCompiler, toolchain.CompilerRefused.
    """
    import cffi  # only where C is loaded

    ffi = cffi.FFI()
    ffi.cdef(f"uint32_t {name}_selftest(void);")
    with tempfile.TemporaryDirectory(prefix="hybgen-") as place:
        library = ffi.dlopen(str(shared_object(files, f"{name}_selftest.c", Path(place), (*flags, f"{name}.c"))))
    return int(getattr(library, f"{name}_selftest")())
