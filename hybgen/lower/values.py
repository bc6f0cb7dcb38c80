"""Trees of a step law -> values of a program."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction

from hybgen.expr.core import Const, Kind, Node, Op, Ref, RefKind, Type
from hybgen.ir.model import Apply, Constant, Field, Local, Value

_BASES = {
    RefKind.INPUT: "now",
    RefKind.VALID: "now",
    RefKind.JUMPED: "now",
    RefKind.PARAMETER: "p",
    RefKind.STATE: "self",
}


@dataclass(frozen=True, slots=True)
class Values:
    """Translates; `enums`: owner -> (type name, enumerators), `names`: members whose name differs, `locals`: definitions,
    `tables`: look-up functions."""

    enums: Mapping[str, tuple[str, tuple[str, ...]]]
    names: Mapping[tuple[RefKind, str], str]
    locals: Mapping[str, str]
    tables: Mapping[str, str]

    def type(self, type_: Type) -> str:
        """The type's name in the program."""
        return self.enums[type_.owner][0] if type_.kind is Kind.ENUM else str(type_.kind)

    def constant(self, value: Fraction | int | bool, type_: Type) -> Constant:
        """A constant."""
        if type_.kind is Kind.ENUM:
            name, values = self.enums[type_.owner]
            return Constant(values[int(value)], name)
        return Constant(value, str(type_.kind))

    def of(self, node: Node) -> Value:
        """The value of a tree."""
        match node:
            case Const():
                return self.constant(node.value, node.type)
            case Ref(kind=RefKind.LOCAL):
                return Local(self.locals[node.name], self.type(node.type))
            case Ref():
                name = self.names.get((node.kind, node.name), node.name)
                return Field(_BASES[node.kind], name, node.index, self.type(node.type))
            case Op():
                return Apply(
                    node.op, tuple(self.of(a) for a in node.args), self.type(node.type), self.tables.get(node.table, "")
                )
