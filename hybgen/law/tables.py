"""Tables: nodes -> curves and tables of two inputs."""

from __future__ import annotations

from fractions import Fraction

from hybgen.expr.units import Unit
from hybgen.law.context import Context
from hybgen.law.declarations import entries
from hybgen.law.document import Mapping, Node, Scalar
from hybgen.law.model import Grid, Table
from hybgen.law.naming import check_name


def read_table(context: Context, key: Scalar, group: Mapping) -> Table | Grid | None:
    """One table, of one input or (with `z`) of two; None after adding findings."""
    check_name(key, "a table", context.findings)
    x_unit, y_unit = context.unit(group, "x_unit"), context.unit(group, "y_unit")
    x_node, y_node, z_node = (group.get(word) for word in "xyz")
    if x_node is None or y_node is None:
        return None
    x, y = entries(context, x_node, x_unit), entries(context, y_node, y_unit)
    if z_node is not None:
        return _grid(context, key, (x_node, y_node, z_node), (x, y), (x_unit, y_unit, context.unit(group, "z_unit")))
    if x is None or y is None:
        return None
    if len(x[1]) != 1 or x[1] != y[1] or len(x[0]) < 2:
        context.error("HG133", key.span, f"table '{key.text}' needs as many y as x, two at least")
        return None
    return Table(key.text, x[0], y[0], x_unit, y_unit, key.span) if _rises(context, key, "x", x_node, x[0]) else None


_Entries = tuple[tuple[Fraction, ...], tuple[int, ...], Unit]


def _grid(
    context: Context,
    key: Scalar,
    nodes: tuple[Node, Node, Node],
    points: tuple[_Entries | None, _Entries | None],
    units: tuple[Unit, Unit, Unit],
) -> Grid | None:
    """A table of two inputs; every mistake is reported."""
    z = entries(context, nodes[2], units[2])
    x, y = points
    if x is None or y is None or z is None:
        return None
    good = True
    for word, node, found in (("x", nodes[0], x), ("y", nodes[1], y)):
        if len(found[1]) != 1 or len(found[0]) < 2:
            context.error("HG133", node.span, f"table '{key.text}' needs a list of {word}, two at least")
            good = False
        else:
            good = _rises(context, key, word, node, found[0]) and good
    if not good:
        return None
    n, m = len(x[0]), len(y[0])
    if z[1] != (n, m):
        there = f"{z[1][0]} of {z[1][1]}" if len(z[1]) == 2 else "no list of rows"
        message = (
            f"the z of table '{key.text}' need a row for each x with a value for each y: {n} of {m}, this is {there}"
        )
        turned = "a row belongs to an x: exchange rows and columns" if z[1] == (m, n) else None
        context.error("HG133", nodes[2].span, message, turned)
        return None
    rows = tuple(z[0][i * m : (i + 1) * m] for i in range(n))
    return Grid(key.text, x[0], y[0], rows, *units, key.span)


def _rises(context: Context, key: Scalar, word: str, node: Node, points: tuple[Fraction, ...]) -> bool:
    if all(a < b for a, b in zip(points, points[1:], strict=False)):
        return True
    context.error("HG133", node.span, f"the {word} of table '{key.text}' have to rise from point to point")
    return False
