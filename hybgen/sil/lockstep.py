"""Lock-step: reference and C over the same samples, every output, state and status compared bit for bit, every step."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass
from fractions import Fraction
from functools import partial
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hybgen.law.model import Law
from hybgen.reference import Reference
from hybgen.reference.machine import Fields
from hybgen.sil.chip import Chip
from hybgen.sil.replay import recording
from hybgen.sil.vectors import Stimulus
from hybgen.step import build
from hybgen.step.model import StepLaw
from hybgen.step.show import expression

Array = NDArray[Any]
LANES = 2048
STEPS = 1000
CHUNK = 250
INJECTIONS = 40
INJECTED_STEPS = 3
Progress = Callable[[int, int], None]


@dataclass(frozen=True, slots=True)
class Difference:
    """Where reference and C differ first."""

    campaign: str
    step: int
    lane: int
    field: str
    reference: str
    c: str
    """Bits in hexadecimal, and the value."""
    where: str
    """The law's place that gives this field."""
    replay: str
    """A log that shows it again: `hybgen sil LAW --inputs FILE`."""

    def to_json(self) -> dict[str, Any]:
        """JSON-ready data, without the replay log."""
        return {
            "campaign": self.campaign,
            "step": self.step,
            "lane": self.lane,
            "field": self.field,
            "reference": self.reference,
            "c": self.c,
            "where": self.where,
        }


@dataclass(frozen=True, slots=True)
class SilReport:
    """What lock-step found."""

    law: str
    target: str
    lanes: int
    steps: int
    """Steps compared, all lanes together."""
    first_difference: Difference | None
    covered: int
    conditions: int
    jumps: Mapping[str, int]
    open_conditions: tuple[str, ...] = ()
    """Atomic conditions that were never true or never false."""

    @property
    def equal(self) -> bool:
        """No difference was found."""
        return self.first_difference is None

    def to_json(self) -> dict[str, Any]:
        """JSON-ready data."""
        return {
            "law": self.law,
            "target": self.target,
            "equal": self.equal,
            "lanes": self.lanes,
            "steps": self.steps,
            "first_difference": self.first_difference.to_json() if self.first_difference else None,
            "conditions": {"covered": self.covered, "total": self.conditions},
            "jumps": dict(self.jumps),
            "mutants": None,
        }


def bits(array: Array) -> Array:
    """The bits of an array as unsigned integers."""
    return array.view(np.dtype(f"u{array.dtype.itemsize}"))


def differs(one: Array, other: Array) -> Array:
    """Which lanes differ in a bit."""
    found: Array = bits(one) != bits(other)
    return found if found.ndim == 1 else np.any(found, axis=1)


def compared(reference: Reference, chip: Chip, outputs: Fields, given: Fields) -> tuple[int, str, Array, Array] | None:
    """The first lane and field that differ after a step, with both arrays."""
    pairs = [(n, a, given[n]) for n, a in outputs.items()]
    pairs += [(n, a, chip.fields[n]) for n, a in reference.fields.items()]
    pairs.append(("status", reference.state_status, chip.state_status))
    for name, one, other in pairs:
        bad = differs(one, other)
        if bad.any():
            return int(np.flatnonzero(bad)[0]), name, one, other
    return None


def run(
    law: Law | StepLaw,
    *,
    lanes: int = LANES,
    steps: int = STEPS,
    injections: int = INJECTIONS,
    step: Fraction | None = None,
    number: str | None = None,
    chip: Chip | None = None,
    progress: Progress | None = None,
) -> SilReport:
    """The whole comparison: long runs from the start, then injected states.

    `chip` replaces the C (for negative controls); it has to have `lanes` lanes. Raises toolchain.NoCompiler.
    """
    made = build(law, step=step, number=number) if isinstance(law, Law) else law
    stimulus = Stimulus.of(made, 0)
    reference = Reference(made, lanes=lanes)
    chip = chip if chip is not None else Chip(made, lanes=lanes)
    reference.recording = True
    total = 0
    difference = None
    parts = list(_campaign(reference, chip, stimulus, steps, injections))
    for k, part in enumerate(parts):
        difference, done = part()
        total += done
        if difference is not None:
            break
        if progress:
            progress(k + 1, len(parts))
    return _report(made, reference, lanes, total, difference)


Part = Callable[[], tuple[Difference | None, int]]


def _campaign(reference: Reference, chip: Chip, stimulus: Stimulus, steps: int, injections: int) -> Iterator[Part]:
    """Long runs from the start in chunks, then rounds of a few steps from any state, to be done in order."""
    lanes = reference.lanes
    history: list[Fields] = []
    first: Fields = {}

    def chunk(number: int) -> tuple[Difference | None, int]:
        if number == 0:
            _tune(reference, chip, stimulus.parameters(lanes))
            first.update({n: a.copy() for n, a in reference.fields.items()})
        history.append(stimulus.inputs(min(CHUNK, steps - number * CHUNK), lanes))
        return _rounds(reference, chip, history, "run", first)

    def injected() -> tuple[Difference | None, int]:
        _tune(reference, chip, stimulus.parameters(lanes))
        start = stimulus.states(lanes)
        _place(reference, chip, start)
        return _rounds(reference, chip, [stimulus.inputs(INJECTED_STEPS, lanes)], "injected state", start)

    for number in range(-(-steps // CHUNK)):
        yield partial(chunk, number)
    for _ in range(injections):
        yield injected


def _tune(reference: Reference, chip: Chip, parameters: Fields) -> None:
    for name, array in parameters.items():
        reference.parameters[name][...] = array
        chip.parameters[name][...] = array
    reference.parameters_changed()


def _place(reference: Reference, chip: Chip, states: Fields) -> None:
    for name, array in states.items():
        reference.fields[name][...] = array
        chip.fields[name][...] = array


def _rounds(
    reference: Reference, chip: Chip, history: list[Fields], campaign: str, start: Fields
) -> tuple[Difference | None, int]:
    """Lock-step over the last part of the history."""
    inputs = history[-1]
    steps = len(next(iter(inputs.values()))) if inputs else CHUNK
    for k in range(steps):
        now = {n: a[k] for n, a in inputs.items()}
        outputs = reference._advance(now)
        given = chip._advance(now)
        found = compared(reference, chip, outputs, given)
        if found is not None:
            return _difference(reference, found, history, k, campaign, start), (k + 1) * reference.lanes
    return None, steps * reference.lanes


def _difference(
    reference: Reference,
    found: tuple[int, str, Array, Array],
    history: list[Fields],
    k: int,
    campaign: str,
    start: Fields,
) -> Difference:
    lane, name, one, other = found
    before = sum(len(next(iter(h.values()))) if h else CHUNK for h in history[:-1])
    inputs = {
        n: np.concatenate([h[n][:, lane] for h in history[:-1]] + [history[-1][n][: k + 1, lane]]) for n in history[-1]
    }
    parameters = {n: a[lane] for n, a in reference.parameters.items()}
    replay = recording(reference.step_law, inputs, before + k + 1, parameters, {n: a[lane] for n, a in start.items()})
    return Difference(
        campaign, before + k, lane, name, _hex(one[lane]), _hex(other[lane]), _where(reference.step_law, name), replay
    )


def _hex(value: Any) -> str:
    row = np.atleast_1d(value)
    return ", ".join(f"0x{int(b):0{2 * row.dtype.itemsize}x} ({v})" for b, v in zip(bits(row), row, strict=True))


def _where(made: StepLaw, name: str) -> str:
    """The place in the law that a field comes from."""
    spans = [o.span for o in made.outputs if o.name == name]
    spans += [a.span for a in (*made.flow, *made.sample) if a.state == name]
    spans += [a.span for j in made.jumps for a in j.assigns if a.state == name]
    spans += [x.span for x in made.states if x.name == name]
    spans += [u.span for u in made.inputs if f"held_{u.name}" == name]
    return spans[0].place if spans else made.law.file


def _report(made: StepLaw, reference: Reference, lanes: int, total: int, difference: Difference | None) -> SilReport:
    seen = reference.seen
    names = [f"{who}: {expression(a, made)}" for who, a in reference.conditions]
    open_ = tuple(
        f"{n} (never {'true' if not s[1] else 'false'})" for n, s in zip(names, seen, strict=True) if not s.all()
    )
    jumps = {j.name: int(n) for j, n in zip(made.jumps, reference.taken, strict=True)}
    return SilReport(
        made.law.name,
        "host",
        lanes,
        total,
        difference,
        int(seen.all(axis=1).sum()) if len(seen) else 0,
        len(seen),
        jumps,
        open_,
    )
