"""Names in C: each once, none of C's own."""

from __future__ import annotations

from dataclasses import dataclass, field

from hybgen.ir.model import HELPERS
from hybgen.kernels.table import ARITY
from hybgen.step.model import Status

API = (
    "inputs",
    "parameters",
    "outputs",
    "defaults",
    "init",
    "step",
    "check_parameters",
    "jump_name",
    "selftest",
    "now",
    "read",
    "watch",
    "due",
    "take",
    "give",
    "advance",
)
PARTS = ("pack", "zeros", "high", "ratio", "root", "wave", "angle")
KERNELS = (
    *ARITY,
    "bits",
    "real",
    "punned",
    "fixed_fit",
    "place",
    *(f"{part}{width}" for part in PARTS for width in (32, 64)),
)
TABLES = ("sine", "two_over_pi")
LOCALS = (
    "self",
    "p",
    "u",
    "y",
    "now",
    "status",
    "jump",
    "taken",
    "answer",
    "used",
    "double",
    "float",
    "int",
    "if",
    "for",
    "while",
    "do",
)


def reserved(law: str) -> set[str]:
    """The names that every law's C may have, whatever its author declares."""
    words = {f"{law}_{word}" for word in (*API, *HELPERS, *KERNELS, *TABLES)}
    macros = {f"{law}_STATUS_{bit.name}".upper() for bit in Status} | {f"{law}_NO_NAMES".upper()}
    return {law} | words | macros


@dataclass(slots=True)
class Namer:
    """Gives names, adding `_` until a name is free."""

    taken: set[str] = field(default_factory=set)

    def unique(self, name: str) -> str:
        """A free name, now taken."""
        while name in self.taken:
            name += "_"
        self.taken.add(name)
        return name

    def family(self, name: str, endings: tuple[str, ...]) -> str:
        """A free name that is also free with each of the endings; all of them are now taken."""
        while {name, *(name + e for e in endings)} & self.taken:
            name += "_"
        self.taken |= {name, *(name + e for e in endings)}
        return name
