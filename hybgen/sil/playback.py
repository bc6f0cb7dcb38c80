"""A recorded log through reference and C in lock-step: what happened, when, and why."""

from __future__ import annotations

import re
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hybgen.expr.core import Ref, RefKind, refs
from hybgen.law.model import Law
from hybgen.reference import Reference
from hybgen.reference.machine import Machine, physical
from hybgen.sil.chip import Chip
from hybgen.sil.lockstep import Difference, SilReport, _difference, compared
from hybgen.sil.replay import Log
from hybgen.step import build
from hybgen.step.model import StepJump, StepLaw

Array = NDArray[Any]


@dataclass(frozen=True, slots=True)
class Event:
    """A jump that was taken: time in seconds, step, its name, the author's condition, the values it was taken at."""

    t: float
    step: int
    jump: str
    why: str
    values: dict[str, Any]

    def to_json(self) -> dict[str, Any]:
        """JSON-ready data."""
        return {"t": self.t, "step": self.step, "jump": self.jump, "why": self.why, "values": self.values}


@dataclass(frozen=True, slots=True)
class Playback:
    """The report of a replay and its events."""

    report: SilReport
    events: tuple[Event, ...]


def play(
    law: Law | StepLaw,
    log: Log,
    *,
    step: Fraction | None = None,
    number: str | None = None,
    chip: Chip | None = None,
) -> Playback:
    """Replays a log. Events are those of the reference; where C differs the report says so. `chip` replaces the C."""
    made = build(law, step=step, number=number) if isinstance(law, Law) else law
    reference, chip = Reference(made), chip if chip is not None else Chip(made)
    reference.recording = True
    for machine in (reference, chip):
        _set_start(machine, log)
    start = {n: a.copy() for n, a in reference.fields.items()}
    events: list[Event] = []
    difference: Difference | None = None
    done = 0
    for k in range(log.steps):
        _tune(reference, chip, log, k)
        before = dict(reference.state)
        now = {n: a[k : k + 1] for n, a in log.inputs.items()}
        outputs, given = reference._advance(now), chip._advance(now)
        done += 1
        events += _events(reference, before, made, k)
        found = compared(reference, chip, outputs, given)
        if found is not None:
            history = [{n: a[: k + 1, None] for n, a in log.inputs.items()}]
            difference = _difference(reference, found, history, k, "log", start)
            break
    seen = reference.seen
    jumps = {j.name: int(n) for j, n in zip(made.jumps, reference.taken, strict=True)}
    report = SilReport(
        made.law.name, "host", 1, done, difference, int(seen.all(axis=1).sum()) if len(seen) else 0, len(seen), jumps
    )
    return Playback(report, tuple(events))


_PART = re.compile(r"(\w+)(?:\[(\d+)\])?\Z")


def _cell(arrays: dict[str, Array], key: str) -> tuple[Array, Any]:
    found = _PART.match(key)
    assert found is not None
    return arrays[found[1]], (0,) if found[2] is None else (0, int(found[2]))


def _set_start(machine: Machine, log: Log) -> None:
    for key, value in log.start.items():
        array, at = _cell(machine.fields, key)
        array[at] = value


def _tune(reference: Reference, chip: Chip, log: Log, k: int) -> None:
    for key, column in log.parameters.items():
        for machine in (reference, chip):
            array, at = _cell(machine.parameters, key)
            array[at] = column[k]
    if log.parameters:
        reference.parameters_changed()


def _events(reference: Reference, before: dict[str, Any], made: StepLaw, k: int) -> list[Event]:
    """The jumps of one step, in the order in which they were taken."""
    return [
        Event(
            float(k * made.step),
            k,
            made.jumps[n - 1].name,
            made.jumps[n - 1].text,
            _values(reference, before, made.jumps[n - 1]),
        )
        for n in reference.trail
    ]


def _values(reference: Reference, before: dict[str, Any], jump: StepJump) -> dict[str, Any]:
    """The values of the names in a condition as the step began."""
    found: dict[str, Any] = {}
    definitions = {d.name: d.expr for d in reference.step_law.definitions}
    todo = [jump.condition]
    while todo:
        for ref in refs(todo.pop()):
            if ref.kind is RefKind.LOCAL:
                todo.append(definitions[ref.name])
            elif ref.kind is RefKind.STATE:
                found[ref.name] = before[ref.name]
            elif ref.kind in (RefKind.PARAMETER, RefKind.INPUT):
                found[ref.name] = _shown(reference, ref)
            elif ref.kind is RefKind.VALID:
                found[f"valid({ref.name})"] = bool(reference.snapshot[f"valid {ref.name}"][0])
    return found


def _shown(reference: Reference, ref: Ref) -> Any:
    """The value of an input or parameter (first lane), as a physical number."""
    values = reference.parameters if ref.kind is RefKind.PARAMETER else reference.snapshot
    return physical(reference.step_law, ref.kind, ref.name, np.asarray(values[ref.name])[0]).tolist()
