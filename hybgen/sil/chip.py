"""The generated C, built for this host and loaded; the same interface as the reference."""

from __future__ import annotations

import tempfile
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from pathlib import Path
from typing import Any, Self

import numpy as np
from numpy.typing import NDArray

from hybgen.emit import emit
from hybgen.law.model import Law
from hybgen.lower import lower
from hybgen.reference.machine import Fields, Machine, layout
from hybgen.sil.toolchain import FLAGS, shared_object
from hybgen.step import build
from hybgen.step.model import StepLaw

Array = NDArray[Any]
_STRUCTS = ("state", "parameters", "inputs", "outputs")

_HARNESS = """#include "{name}.c"

const uint32_t hybgen_{name}_places[] = {{ {places} }};

void hybgen_{name}_lanes({name} *self, const {name}_parameters *p, const {name}_inputs *u, {name}_outputs *y, uint32_t *status,
                  size_t lanes, size_t steps)
{{
    size_t i;
    size_t k;

    for (k = 0u; k < steps; k++) {{
        for (i = 0u; i < lanes; i++) {{
            status[(k * lanes) + i] = {name}_step(&self[i], &p[i], &u[(k * lanes) + i], &y[(k * lanes) + i]);
        }}
    }}
}}
"""


def struct(made: StepLaw, which: str) -> np.dtype[Any]:
    """The numpy type of one of the C structs."""
    rows = layout(made, which) or [("none", np.dtype(np.uint8), ())]
    return np.dtype([(n, d, shape) for n, d, shape in rows], align=True)


def _places(made: StepLaw) -> tuple[str, list[int]]:
    """C text that gives the sizes and offsets of the structs, and what numpy thinks they are."""
    name = made.law.name
    texts: list[str] = []
    values: list[int] = []
    for which in _STRUCTS:
        type_ = name if which == "state" else f"{name}_{which}"
        dtype = struct(made, which)
        texts.append(f"(uint32_t)sizeof({type_})")
        values.append(dtype.itemsize)
        for field in dtype.names or ():
            texts.append(f"(uint32_t)offsetof({type_}, {field})")
            assert dtype.fields is not None
            values.append(int(dtype.fields[field][1]))
    return ", ".join(texts), values


@dataclass(frozen=True, slots=True)
class Library:
    """A loaded shared object with the functions of one law."""

    lanes: Any
    buffer: Any
    """(C type, array) -> a pointer to the array's memory."""


def load_many(
    laws: Sequence[StepLaw], flags: Sequence[str] = FLAGS, files: Mapping[str, str] | None = None
) -> list[Library]:
    """Compiles the C of laws with different names into one shared object. `files` replaces generated ones."""
    import cffi  # only where C is loaded

    texts: dict[str, str] = {}
    main = []
    expected = []
    for made in laws:
        texts.update(emit(lower(made)))
        places, values = _places(made)
        expected.append(values)
        texts[f"{made.law.name}_harness.c"] = _HARNESS.format(name=made.law.name, places=places)
        main.append(f'#include "{made.law.name}_harness.c"')
    texts.update(files or {})
    texts["all.c"] = "\n".join(main) + "\n"
    ffi = cffi.FFI()
    for made, values in zip(laws, expected, strict=True):
        name = made.law.name
        ffi.cdef(
            f"void hybgen_{name}_lanes(void *, const void *, const void *, void *, uint32_t *, size_t, size_t);"
            f"extern const uint32_t hybgen_{name}_places[{len(values)}];"
        )
    with tempfile.TemporaryDirectory(prefix="hybgen-") as place:
        library = ffi.dlopen(str(shared_object(texts, "all.c", Path(place), flags)))
    found = []
    for made, values in zip(laws, expected, strict=True):
        name = made.law.name
        assert list(getattr(library, f"hybgen_{name}_places")) == values, f"the structs of {name} lie differently in C"
        found.append(Library(getattr(library, f"hybgen_{name}_lanes"), ffi.from_buffer))
    return found


class Chip(Machine):
    """The law as its generated C. Raises toolchain.NoCompiler, toolchain.CompilerRefused."""

    def __init__(
        self,
        law: Law | StepLaw,
        parameters: Mapping[str, Any] | None = None,
        *,
        step: Fraction | None = None,
        number: str | None = None,
        lanes: int = 1,
        library: Library | None = None,
        flags: Sequence[str] = FLAGS,
        files: Mapping[str, str] | None = None,
    ) -> None:
        made = build(law, step=step, number=number) if isinstance(law, Law) else law
        self._library = library or load_many([made], flags, files)[0]
        self._structs: dict[str, Array] = {}
        super().__init__(made, parameters, lanes)
        self._blank("inputs")
        self._inputs_now = {n: self._structs["inputs"][n] for n, _, _ in layout(made, "inputs")}

    def _blank(self, which: str) -> Fields:
        array = np.zeros(self.lanes, struct(self.step_law, which))
        self._structs[which] = array
        return {n: array[n] for n, _, _ in layout(self.step_law, which)}

    def _spawn(self, lanes: int) -> Self:
        other = type(self)(self.step_law, lanes=lanes, library=self._library)
        for which in ("state", "parameters"):
            other._structs[which][...] = self._structs[which][:1]
        return other

    def _call(self, u: Array, y: Array, status: Array, steps: int) -> None:
        pointers = [
            self._library.buffer("unsigned char[]", a)
            for a in (self._structs["state"], self._structs["parameters"], u, y)
        ]
        self._library.lanes(*pointers, self._library.buffer("uint32_t[]", status), self.lanes, steps)

    def _advance(self, inputs: Fields) -> Fields:
        for name, array in inputs.items():
            self._inputs_now[name][...] = array
        outputs = self._blank("outputs")
        self._call(self._structs["inputs"], self._structs["outputs"], self.state_status, 1)
        return outputs

    def _series(self, inputs: Fields, steps: int) -> dict[str, Array]:
        u = np.zeros((steps, self.lanes), struct(self.step_law, "inputs"))
        for name, array in inputs.items():
            u[name] = array
        y, status = self.many(u)
        if steps:
            self.state_status[...] = status[-1]
        return {n: np.ascontiguousarray(y[n]) for n, _, _ in layout(self.step_law, "outputs")}

    def many(self, u: Array) -> tuple[Array, Array]:
        """Steps over an array of input structs of shape (steps, lanes); output structs and status words alike."""
        y = np.zeros(u.shape, struct(self.step_law, "outputs"))
        status = np.zeros(u.shape, np.uint32)
        self._call(u, y, status, len(u))
        return y, status


def compile(
    law: Law | StepLaw,
    parameters: Mapping[str, Any] | None = None,
    *,
    step: Fraction | None = None,
    number: str | None = None,
) -> Chip:
    """The law's C, built for this host and loaded. Raises toolchain.NoCompiler with the install command."""
    return Chip(law, parameters, step=step, number=number)
