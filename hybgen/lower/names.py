"""Names in C: each once, none of C's own."""

from __future__ import annotations

from dataclasses import dataclass, field

API = ("inputs", "parameters", "outputs", "defaults", "init", "step", "check_parameters", "jump_name", "now", "read", "watch", "due", "take",
       "give", "advance")
LOCALS = ("self", "p", "u", "y", "now", "status", "jump", "taken", "answer", "used", "double", "float", "int", "if", "for", "while", "do")


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
