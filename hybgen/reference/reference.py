"""The reference: a step law evaluated in numpy, many lanes at once, straight from its trees."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import Any, Self

import numpy as np
from numpy.typing import NDArray

from hybgen.expr.core import Kind, Node, Ref, RefKind
from hybgen.law.model import Law
from hybgen.reference.machine import Fields, Machine
from hybgen.reference.plan import Plan, Planner, atoms
from hybgen.step import build
from hybgen.step.model import Status, StepAssign, StepInput, StepLaw, StepOutput

Array = NDArray[Any]
Lanes = Array | slice
"""Numbers of lanes, or all of them."""


@dataclass(frozen=True, slots=True)
class _Plans:
    """Everything one step computes."""

    rules: Plan
    alarms: Plan
    due: Plan
    maps: tuple[Plan, ...]
    outputs: Plan
    flow: Plan
    sample: Plan
    atoms: tuple[tuple[str, Node], ...]
    """(who, atomic condition), in the order of the watched slots of `due`."""
    watch: tuple[int, ...]


def _plans(made: StepLaw) -> _Plans:
    planner = Planner(made)
    definitions = {d.name: d.expr for d in made.definitions}
    conditions = [j.condition for j in made.jumps]
    watched = [(j.name, a) for j in made.jumps for a in atoms(j.condition, definitions)]
    if made.flow_condition is not None:
        conditions.append(made.flow_condition)
        watched += [("flow", a) for a in atoms(made.flow_condition, definitions)]
    watched = list(dict.fromkeys(watched))
    due, watch = planner.plan(conditions, [a for _, a in watched])

    def plan(nodes: Sequence[Node]) -> Plan:
        return planner.plan(nodes)[0]

    return _Plans(
        plan([r.condition for r in made.rules]),
        plan(made.alarms),
        due,
        tuple(plan([a.expr for a in j.assigns]) for j in made.jumps),
        plan([o.expr for o in made.outputs]),
        plan([a.expr for a in made.flow]),
        plan([a.expr for a in made.sample]),
        tuple(watched),
        watch,
    )


class Reference(Machine):
    """The law in Python: `step`, `run`, `state`, `status`, `last_jump`, `jumps`, `reset` (README).

    `step` (seconds) and `number` override those of the law. `snapshot` holds the samples of the last step, `trail` the
    numbers of its jumps in order (first lane). `seen` counts, for each atomic condition of a jump or
    of the flow, whether it was ever true and ever false (while `recording`); `taken` counts the jumps.
    """

    def __init__(
        self,
        law: Law | StepLaw,
        parameters: Mapping[str, Any] | None = None,
        *,
        step: Fraction | None = None,
        number: str | None = None,
        lanes: int = 1,
        plans: _Plans | None = None,
    ) -> None:
        made = build(law, step=step, number=number) if isinstance(law, Law) else law
        self._plans = plans or _plans(made)
        self.recording = False
        self.seen = np.zeros((len(self._plans.atoms), 2), bool)
        self.taken = np.zeros(len(made.jumps), np.int64)
        self.snapshot: Fields = {}
        self.trail: list[int] = []
        self._used: Fields = {}
        self._broken: Array | None = None
        super().__init__(made, parameters, lanes)

    @property
    def conditions(self) -> tuple[tuple[str, Node], ...]:
        """(who, atomic condition) in the order of `seen`."""
        return self._plans.atoms

    def _spawn(self, lanes: int) -> Self:
        other = type(self)(self.step_law, lanes=lanes, plans=self._plans)
        for name, array in other.fields.items():
            array[...] = self.fields[name][:1]
        for name, array in other.parameters.items():
            array[...] = self.parameters[name][:1]
        return other

    def parameters_changed(self) -> None:
        """To be called after writing into `parameters`: they are checked at the next step."""
        self._broken = None

    def _check_parameters(self) -> Array:
        """Which lanes' parameters break a rule; those use the defaults."""
        if self._broken is None:
            broken = np.zeros(self.lanes, bool)
            self._used = self.parameters
            for holds in self._plans.rules.run(self._load(None))[0]:
                broken |= ~np.broadcast_to(holds, broken.shape)
            self._used = {}
            for p in self.step_law.parameters:
                given = self.parameters[p.name]
                default = np.array([float(v) if isinstance(v, Fraction) else v for v in p.default], given.dtype)
                shaped = broken.reshape((-1,) + (1,) * (given.ndim - 1))
                self._used[p.name] = np.where(shaped, default if p.size is not None else default[0], given)
            self._broken = broken
        return self._broken

    def _load(self, lanes: Array | None) -> Callable[[Ref], Array]:
        """A reader of references, for all lanes or some."""
        sources = {RefKind.STATE: self.fields, RefKind.PARAMETER: self._used}

        def load(ref: Ref) -> Array:
            if ref.kind in sources:
                array = sources[ref.kind][ref.name]
            else:
                name = {RefKind.VALID: f"valid {ref.name}", RefKind.JUMPED: f"jumped {ref.name}"}.get(
                    ref.kind, ref.name
                )
                array = self.snapshot[name]
            array = array if ref.index is None else array[:, ref.index]
            return array if lanes is None else array[lanes]

        return load

    def _advance(self, inputs: Fields) -> Fields:
        with np.errstate(all="ignore"):
            status = np.where(self._check_parameters(), np.uint32(Status.PARAMETER), np.uint32(0))
            self._snapshot(inputs, status)
            due = self._jump(status)
            outputs = self._give(status)
            self._flow(due, status)
        self.state_status = status
        return outputs

    def values(self, nodes: Sequence[Node], inputs: Fields) -> list[Array]:
        """Expressions at the present state and these samples, one value for each lane; no step is made."""
        kept = {n: a.copy() for n, a in self.fields.items()}
        with np.errstate(all="ignore"):
            self._check_parameters()
            self._snapshot(inputs, np.zeros(self.lanes, np.uint32))
            found = Planner(self.step_law).plan(nodes)[0].run(self._load(None))[0]
        for name, array in kept.items():
            self.fields[name][...] = array
        return [np.broadcast_to(value, (self.lanes,)) for value in found]

    def _snapshot(self, inputs: Fields, status: Array) -> None:
        self.snapshot = {}
        for u in self.step_law.inputs:
            raw = inputs[u.name]
            if u.type.kind is Kind.BOOL:
                self.snapshot[u.name] = raw
            else:
                self._sampled(u, raw, status)
        for jump in self.step_law.jumps:
            if jump.flagged:
                self.snapshot[f"jumped {jump.name}"] = np.zeros(self.lanes, bool)
        for value in self._plans.alarms.run(self._load(None))[0]:
            status[~np.isfinite(np.broadcast_to(value, status.shape))] |= np.uint32(Status.NON_FINITE)

    def _sampled(self, u: StepInput, raw: Array, status: Array) -> None:
        dtype = raw.dtype.type
        low, high, substitute = (
            dtype(float(v) if isinstance(v, Fraction) else v) for v in (u.low, u.high, u.substitute)
        )
        good = (raw >= low) & (raw <= high)
        whole = good if u.size is None else good.all(axis=1)
        each = good if u.size is None or u.invalid == "clamp" else whole[:, None]
        held = self.fields.get(f"held_{u.name}")
        if held is not None:
            np.copyto(held, raw, where=each)
        match u.invalid:
            case "hold":
                assert held is not None
                seen = held  # the last good sample is this one, where it is good
            case "value":
                seen = np.where(each, raw, substitute)
            case _:
                inside = np.where(raw < low, low, np.where(raw > high, high, raw))
                seen = inside if held is None else np.where(np.isfinite(raw), inside, held)
        self.snapshot[u.name] = seen
        self.snapshot[f"valid {u.name}"] = whole
        np.bitwise_or(status, np.uint32(Status.INVALID_INPUT), out=status, where=~whole)

    def _due(self, lanes: Array | None) -> Array:
        """The number of the jump that is due in each lane, 0 if none."""
        count = self.lanes if lanes is None else len(lanes)
        found, watched = self._plans.due.run(self._load(lanes), self._plans.watch if self.recording else ())
        for i, values in enumerate(watched):
            self.seen[i] |= (not np.all(values), bool(np.any(values)))
        due = np.zeros(count, np.uint16)
        for number in range(len(self.step_law.jumps), 0, -1):
            np.copyto(due, np.uint16(number), where=found[number - 1])
        if self.step_law.law.prefer == "flow" and self.step_law.flow_condition is not None:
            np.copyto(due, np.uint16(0), where=found[-1])
        return due

    def _jump(self, status: Array) -> Array:
        """Jumps while one is due; the jump still due in each lane."""
        if not self.step_law.jumps:
            return np.zeros(self.lanes, np.uint16)
        due = self._due(None)
        lanes = np.flatnonzero(due)
        self.trail = []
        for _ in range(self.step_law.jumps_per_step):
            if not len(lanes):
                break
            asked = due[lanes]
            for number in np.flatnonzero(np.bincount(asked)):
                self._take(int(number), lanes[asked == number], status)
            again = self._due(lanes)
            due[lanes] = again
            lanes = lanes[again != 0]
        status[lanes] |= np.uint32(Status.JUMP_LIMIT)
        return due

    def _take(self, number: int, lanes: Array, status: Array) -> None:
        jump = self.step_law.jumps[number - 1]
        values, _ = self._plans.maps[number - 1].run(self._load(lanes))
        for assign, value in zip(jump.assigns, values, strict=True):
            self._store(assign, value, lanes, status)
        self.fields["last_jump"][lanes] = number
        self.fields["jumps"][lanes] += np.uint32(1)
        if jump.flagged:
            self.snapshot[f"jumped {jump.name}"][lanes] = True
        self.taken[number - 1] += len(lanes)
        if lanes[0] == 0:
            self.trail.append(number)

    def _store(self, a: StepAssign, value: Array, lanes: Lanes, status: Array) -> None:
        """A new value into some lanes, if it is finite, held inside its range."""
        if a.guarded:
            numbers = np.arange(self.lanes) if isinstance(lanes, slice) else lanes
            value = np.broadcast_to(value, numbers.shape)
            good = np.isfinite(value)
            if not good.all():
                status[numbers[~good]] |= np.uint32(Status.NON_FINITE)
                lanes, value = numbers[good], value[good]
        if a.clamp is not None:
            value = self._clamped(value, a.clamp)
        target = self.fields[a.state]
        if a.index is None:
            target[lanes] = value
        else:
            target[lanes, a.index] = value

    def _clamped(self, value: Array, clamp: tuple[Any, Any]) -> Array:
        low, high = (value.dtype.type(float(c) if isinstance(c, Fraction) else c) for c in clamp)
        held = np.array(value)
        np.copyto(held, low, where=value < low)
        np.copyto(held, high, where=value > high)
        return held

    def _give(self, status: Array) -> Fields:
        outputs = self._blank("outputs")
        values, _ = self._plans.outputs.run(self._load(None))
        for o, value in zip(self.step_law.outputs, values, strict=True):
            target = outputs[o.name] if o.index is None else outputs[o.name][:, o.index]
            target[...] = self._output(o, np.broadcast_to(value, status.shape), status)
        return outputs

    def _output(self, o: StepOutput, value: Array, status: Array) -> Array:
        good = None
        if o.guarded:
            good = np.isfinite(value)
            status[~good] |= np.uint32(Status.NON_FINITE)
        if o.clamp is not None:
            value = self._clamped(value, o.clamp)
        return value if good is None else np.where(good, value, value.dtype.type(float(o.fallback)))

    def _flow(self, due: Array, status: Array) -> None:
        """Flow and sample: all values from the old state, then stored."""
        flowing = self._flows()
        sampled, _ = self._plans.sample.run(self._load(None))
        if isinstance(flowing, slice):
            flowed, _ = self._plans.flow.run(self._load(None))
        else:
            still = np.ones(self.lanes, bool)
            still[flowing] = False
            status[still & (due == 0)] |= np.uint32(Status.STUCK)
            flowed, _ = self._plans.flow.run(self._load(flowing))
        for a, value in zip(self.step_law.flow, flowed, strict=True):
            self._store(a, value, flowing, status)
        for a, value in zip(self.step_law.sample, sampled, strict=True):
            self._store(a, value, slice(None), status)
        for x in self.step_law.states:
            if x.kind == "timer":
                timer = self.fields[x.name]
                timer[flowing] += timer[flowing] < np.int32(x.maximum or 0)

    def _flows(self) -> Lanes:
        """The lanes that flow in this step."""
        if self.step_law.flow_condition is None:
            return slice(None)
        holds = self._plans.due.run(self._load(None))[0][-1]
        found = np.flatnonzero(np.broadcast_to(holds, (self.lanes,)))
        return slice(None) if len(found) == self.lanes else found
