"""Logs as CSV: written for a difference, read to replay a recording in reference and C.

Columns are named after inputs; a unit may follow in brackets: `level [mm]`. `t` or `t [s]` is the time of a row (then rows
are held until the next one, on the grid of the step); tunable parameters may have columns too. In the first row, `start NAME`
gives the value of a state before the first step (timers in whole steps). An empty cell of a number is no number (NaN).
"""

from __future__ import annotations

import csv
import io
from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hybgen.diag.finding import Findings
from hybgen.diag.span import Span
from hybgen.diag.suggest import nearest
from hybgen.expr import units
from hybgen.expr.constant import factor
from hybgen.expr.core import REAL, Kind, RefKind, Type
from hybgen.expr.units import ONE, SECOND, Unit
from hybgen.reference.machine import Fields, dtype_of, physical, places_of, to_raw
from hybgen.step.model import StepLaw

Array = NDArray[Any]
MOST_BYTES = 1 << 30


@dataclass(frozen=True, slots=True)
class Log:
    """A recording on the step grid: samples of shape (steps, ...), parameters and start values (or none)."""

    steps: int
    inputs: Fields
    parameters: Fields
    start: Mapping[str, float]


def recording(
    made: StepLaw, inputs: Fields, steps: int, parameters: Mapping[str, Any], start: Mapping[str, Any]
) -> str:
    """A log of one lane as CSV text; numbers are written so that reading gives the same bits. Raw values become physical."""
    inputs = {n: physical(made, RefKind.INPUT, n, a) for n, a in inputs.items()}
    parameters = {n: physical(made, RefKind.PARAMETER, n, v) for n, v in parameters.items()}
    start = {n: physical(made, RefKind.STATE, n, v) for n, v in start.items()}
    columns: list[tuple[str, list[Any]]] = []
    for name, array in inputs.items():
        parts = [array] if array.ndim == 1 else [array[:, i] for i in range(array.shape[1])]
        columns += [(n, list(p)) for n, p in zip(_columns(name, array[0]), parts, strict=True)]
    for prefix, values in (("", parameters), ("start ", start)):
        for name, value in values.items():
            for column, part in zip(_columns(name, value), np.atleast_1d(value), strict=True):
                columns.append((prefix + column, [part] * steps if not prefix else [part] + [""] * (steps - 1)))
    out = io.StringIO()
    writer = csv.writer(out, lineterminator="\n")
    writer.writerow([n for n, _ in columns])
    for k in range(steps):
        writer.writerow([_cell(v[k]) for _, v in columns])
    return out.getvalue()


def _columns(name: str, value: Any) -> list[str]:
    return [name] if np.ndim(value) == 0 else [f"{name}[{i}]" for i in range(len(value))]


def _cell(value: Any) -> str:
    if isinstance(value, str):
        return value
    if isinstance(value, np.bool_ | bool):
        return "1" if value else "0"
    return repr(float(value)) if isinstance(value, np.floating) else str(int(value))


@dataclass(frozen=True, slots=True)
class _Column:
    """What one column is: kind (t, input, parameter, start), name, component, type, factor and shift into the law's unit."""

    kind: str
    name: str
    index: int | None
    type: Type
    factor: Fraction


def read_log(text: str, file: str, made: StepLaw) -> Log:
    """A log for a law. Raises LawError with all mistakes of the header, or of the rows."""
    findings = Findings()
    rows = list(csv.reader(io.StringIO(text)))
    lines = [i + 1 for i, row in enumerate(rows) if row and any(c.strip() for c in row)]
    if len(lines) < 2:
        findings.error(
            "HG610",
            Span(file, 1, 1),
            "this log has no rows",
            hint="the first row names the columns, the others hold samples",
        )
        findings.stop()
    header = rows[lines[0] - 1]
    columns = [_column(cell, i, file, lines[0], made, findings) for i, cell in enumerate(header)]
    _complete(columns, file, made, findings)
    findings.stop()
    values = np.full((len(lines) - 1, len(columns)), np.nan)
    for k, line in enumerate(lines[1:]):
        _row(rows[line - 1], values[k], columns, file, line, findings)
    findings.stop()
    return _gathered(values, columns, made, file, findings)


def _column(cell: str, number: int, file: str, line: int, made: StepLaw, findings: Findings) -> _Column | None:
    text = cell.strip()
    where = Span(file, line, number + 1)
    start = text.startswith("start ")
    name, _, rest = text.removeprefix("start ").partition(" [")
    index = None
    if name.endswith("]") and "[" in name:
        name, _, inner = name.partition("[")
        index = int(inner[:-1]) if inner[:-1].isdigit() else None
    known = _known(made, start)
    if name == "t" and not start:
        return _Column("t", "t", None, known_real(), _factor(rest, SECOND, where, findings))
    if name not in known:
        close = nearest(name, known)
        findings.error(
            "HG611",
            where,
            f"column {number + 1}, '{text[:40]}', is no input or parameter of {made.law.name}",
            hint=f"did you mean '{close}'?" if close else f"known: {', '.join(known)}",
        )
        return None
    kind, type_, unit, size = known[name]
    if (size is None) != (index is None) or (size is not None and index is not None and index >= size):
        findings.error(
            "HG611",
            where,
            f"column {number + 1}: '{name}' has {size or 1} component{'s' if size else ''}",
            hint=f"write {name}[0] for the first" if size else None,
        )
        return None
    return _Column(kind, name, index, type_, _factor(rest, unit, where, findings))


def known_real() -> Type:
    """The type of a time."""
    return Type(Kind.REAL)


def _known(made: StepLaw, start: bool) -> dict[str, tuple[str, Type, Unit, int | None]]:
    if start:
        members = [*((x.name, x.type, x.size) for x in made.states)]
        members += [(f"held_{u.name}", u.type, u.size) for u in made.inputs if u.held]
        rows = {n: ("start", _physical_type(made, RefKind.STATE, n, t), ONE, size) for n, t, size in members}
        return rows | {n: ("start", Type(Kind.INT), ONE, None) for n in ("last_jump", "jumps")}
    inputs = {
        u.name: ("input", _physical_type(made, RefKind.INPUT, u.name, u.type), made.law.input(u.name).unit, u.size)
        for u in made.inputs
    }
    return inputs | {p.name: ("parameter", p.type, made.law.parameter(p.name).unit, p.size) for p in made.parameters}


def _physical_type(made: StepLaw, kind: RefKind, name: str, type_: Type) -> Type:
    """Logs hold physical numbers, whatever the number format."""
    return type_ if places_of(made, kind, name) is None else REAL


def _factor(rest: str, unit: Unit, where: Span, findings: Findings) -> Fraction:
    """The factor from the column's unit to the law's."""
    if not rest:
        return Fraction(1)
    try:
        written = units.parse(rest.rstrip("] "))
    except units.BadUnit as bad:
        findings.error("HG214", where, f"the header's unit: {bad.message}")
        return Fraction(1)
    if not written.alike(unit):
        findings.error(
            "HG202", where, f"the column is in {written}, the law has {unit if not unit.plain else 'no unit'}"
        )
        return Fraction(1)
    return factor(written, unit)


def _complete(columns: list[_Column | None], file: str, made: StepLaw, findings: Findings) -> None:
    have = [(c.kind, c.name, c.index) for c in columns if c is not None]
    for double in {h for h in have if have.count(h) > 1}:
        findings.error("HG611", Span(file, 1, 1), f"there are two columns for '{double[1]}'")
    for u in made.inputs:
        for index in [None] if u.size is None else range(u.size):
            if ("input", u.name, index) not in have:
                findings.error(
                    "HG612",
                    Span(file, 1, 1),
                    f"there is no column for the input '{u.name}{'' if index is None else f'[{index}]'}'",
                )


def _row(
    row: list[str], values: Array, columns: list[_Column | None], file: str, line: int, findings: Findings
) -> None:
    if len(row) != len(columns):
        findings.error("HG613", Span(file, line, 1), f"this row has {len(row)} cells, the header has {len(columns)}")
        return
    for i, (cell, column) in enumerate(zip(row, columns, strict=True)):
        text = cell.strip()
        if column is None or not text:
            if column is not None and column.kind in ("t", "input") and column.type.kind is not Kind.REAL:
                findings.error("HG613", Span(file, line, i + 1), f"the cell of '{column.name}' is empty")
            continue
        value = _cell_value(text)
        if value is None:
            findings.error("HG613", Span(file, line, i + 1), f"'{text[:40]}' is no value for '{column.name}'")
            continue
        values[i] = value


def _cell_value(text: str) -> float | None:
    if text in ("true", "false"):
        return float(text == "true")
    try:
        return float(text)
    except ValueError:
        return None


def _gathered(values: Array, columns: list[_Column | None], made: StepLaw, file: str, findings: Findings) -> Log:
    known = [(i, c) for i, c in enumerate(columns) if c is not None]
    rows = values
    for i, c in known:
        if c.kind == "t":
            times = values[:, i] * float(c.factor)
            if np.isnan(times).any() or (np.diff(times) < 0).any():
                findings.error("HG614", Span(file, 1, i + 1), "the times have to be there and rise from row to row")
                findings.stop()
            grid = (
                np.arange(int(np.floor((times[-1] - times[0]) / float(made.step) + 1e-9)) + 1) * float(made.step)
                + times[0]
            )
            rows = values[np.searchsorted(times, grid + 1e-9 * float(made.step), side="right") - 1]
    inputs: Fields = {}
    for u in made.inputs:
        shape = () if u.size is None else (u.size,)
        inputs[u.name] = np.zeros((len(rows), *shape), dtype_of(u.type, made.format))
    parameters: Fields = {}
    start: dict[str, float] = {}
    for i, c in known:
        column = rows[:, i]
        if c.factor != 1:
            column = column * float(c.factor)
        if c.kind == "input":
            target = inputs[c.name] if c.index is None else inputs[c.name][:, c.index]
            with np.errstate(over="ignore", invalid="ignore"):
                target[...] = _raw(made, RefKind.INPUT, c.name, column)
        elif c.kind == "parameter":
            key = c.name if c.index is None else f"{c.name}[{c.index}]"
            parameters[key] = np.asarray(_raw(made, RefKind.PARAMETER, c.name, column), dtype_of(c.type, made.format))
        elif c.kind == "start" and not np.isnan(values[0, i]):
            start[c.name if c.index is None else f"{c.name}[{c.index}]"] = float(
                _raw(made, RefKind.STATE, c.name, values[0, i])
            )
    return Log(len(rows), inputs, parameters, start)


def _raw(made: StepLaw, kind: RefKind, name: str, values: Array) -> Array:
    """What the struct's member holds for physical numbers."""
    places = places_of(made, kind, name)
    return values if places is None else to_raw(values, places)
