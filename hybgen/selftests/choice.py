"""Which steps a self-test makes: a run from the start, then steps from placed states, as few as tell the law from its mutants
and take each jump, as far as the stimulus can.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hybgen.expr.core import COMPARISONS, Const, Kind, Node, Op, Ref, RefKind, op, walk
from hybgen.reference import Reference
from hybgen.reference.machine import Fields, layout
from hybgen.selftests.mutants import mutants
from hybgen.sil.lockstep import differs
from hybgen.sil.vectors import Stimulus
from hybgen.step.model import Status, StepLaw

Mask = NDArray[np.bool_]
SALT = 0x5E1F
RUN = 24
"""Steps from the start."""
PLACED = 72
"""At most so many steps from placed states."""
LANES = 2048
ROUNDS = 6


@dataclass(frozen=True, slots=True)
class Vectors:
    """Steps and what the reference makes of them; first axis: steps (of `states`: one more, the state after start first)."""

    inputs: Fields
    placed: Fields
    """The states from which the last steps start."""
    states: Fields
    outputs: Fields
    status: NDArray[np.uint32]
    run: int
    """Steps from the start; each of the others starts from a placed state."""
    told: int
    mutants: int
    """So many small changes of the law were tried, and so many of them do these steps tell from it."""
    jumps: tuple[str, ...]
    """The jumps that are taken."""


@dataclass(frozen=True, slots=True)
class _Pool:
    """Candidates: one step of each lane."""

    states: Fields
    inputs: Fields

    def taken(self, lanes: list[int]) -> _Pool:
        return _Pool({n: a[lanes] for n, a in self.states.items()}, {n: a[lanes] for n, a in self.inputs.items()})

    def placed(self, machine: Reference) -> Reference:
        """The machine (or one like it with as many lanes) in the states of the candidates."""
        lanes = len(self.states["jumps"])
        machine = machine if machine.lanes == lanes else machine._spawn(lanes)
        for name, array in self.states.items():
            machine.fields[name][...] = array
        return machine

    def stepped(self, machine: Reference) -> _After:
        """The step of every candidate."""
        machine = self.placed(machine)
        outputs = machine._advance(self.inputs)
        fields = {n: a.copy() for n, a in machine.fields.items()} | {f"output {n}": a for n, a in outputs.items()}
        return _After(fields, machine.state_status)


@dataclass(frozen=True, slots=True)
class _After:
    """Outputs and states after a step, and its status."""

    fields: Fields
    status: NDArray[np.uint32]

    def differs(self, other: _After) -> tuple[Mask, Mask]:
        """In which lanes two laws differ, and in which they take other jumps."""
        found: Mask = self.status != other.status
        for name, array in self.fields.items():
            found = found | differs(array, other.fields[name])
        jumps: Mask = differs(self.fields["jumps"], other.fields["jumps"])
        return found, jumps | differs(self.fields["last_jump"], other.fields["last_jump"])


def _joined(pools: list[_Pool]) -> _Pool:
    states = {n: np.concatenate([p.states[n] for p in pools]) for n in pools[0].states}
    return _Pool(states, {n: np.concatenate([p.inputs[n] for p in pools]) for n in pools[0].inputs})


def vectors(made: StepLaw) -> Vectors:
    """The steps of a law's self-test: the same at every call."""
    stimulus = Stimulus.of(made, SALT)
    machine, changed = Reference(made, lanes=LANES), [Reference(m, lanes=LANES) for m in mutants(made)]
    samples, reached = _from_start(made, stimulus)
    shown: set[str] = set()
    chosen: list[_Pool] = []
    room = PLACED
    for k in range(ROUNDS):
        states = _shuffled(reached, stimulus.random) if k % 3 == 1 else stimulus.states(LANES)
        pool = _Pool(states, _first(stimulus.inputs(1, LANES)))
        pool = _on_edges(machine, pool, stimulus.random) if k % 3 == 2 else pool
        lanes = _cover(machine, pool, changed, shown, room)
        if lanes:
            chosen.append(pool.taken(lanes))
            room -= len(lanes)
    if not chosen:
        chosen = [_Pool(stimulus.states(1), _first(stimulus.inputs(1, 1)))]
    steps = _joined(chosen)
    after = steps.stepped(machine)
    told = sum(bool(after.differs(steps.stepped(other))[0].any()) for other in changed)
    return _played(made, samples, steps, (told, len(changed)))


def _on_edges(machine: Reference, pool: _Pool, random: np.random.Generator) -> _Pool:
    """The candidates, in each of them a sample or state put onto what it is compared with, or next to it."""
    made = machine.step_law
    found = {n for t in made.trees() for n in walk(t) if isinstance(n, Op) and n.op in COMPARISONS}
    sides = [s for n in sorted(found, key=repr) for s in _sides(n) if _placeable(*s)]
    if not sides:
        return pool
    lanes = len(pool.states["jumps"])
    values = pool.placed(machine).values([other for _, other in sides], pool.inputs)
    which, side = random.integers(0, len(sides), lanes), random.integers(-1, 2, lanes)
    for k, ((one, _), value) in enumerate(zip(sides, values, strict=True)):
        assert isinstance(one, Ref)
        array = (pool.inputs if one.kind is RefKind.INPUT else pool.states)[one.name]
        target = array if one.index is None else array[:, one.index]
        if target.dtype.kind == "f":
            ends = np.array([-np.inf, 0, np.inf], target.dtype)[side + 1]
            value = np.where(side == 0, value, np.nextafter(value, ends))
        np.copyto(target, value, where=(which == k) & np.isfinite(value) & _inside(made, one, value))
    return pool


def _sides(comparison: Op) -> list[tuple[Node, Node]]:
    """What stands on each side of a comparison; of a difference against a margin, each part against the other and the margin."""
    a, b = comparison.args
    if isinstance(a, Op) and a.op == "sub" and isinstance(b, Const):
        return [(a.args[0], op("add", a.args[1], b)), (a.args[1], op("sub", a.args[0], b))]
    return [(a, b), (b, a)]


def _placeable(one: Node, other: Node) -> bool:
    """Is this a sample or a state, compared with an expression?"""
    kinds = (RefKind.INPUT, RefKind.STATE)
    return (
        isinstance(one, Ref)
        and one.kind in kinds
        and one.type.kind in (Kind.REAL, Kind.INT)
        and not isinstance(other, Const)
    )


def _inside(made: StepLaw, one: Ref, value: NDArray[Any]) -> Mask:
    """Is it a value that the sample or the state may have? (A bad sample would be another matter.)"""
    if one.kind is RefKind.INPUT:
        u = next(u for u in made.inputs if u.name == one.name)
        return np.asarray((value >= float(u.low)) & (value <= float(u.high)))
    x = next(x for x in made.states if x.name == one.name)
    clamps = [a.clamp for a in (*made.flow, *made.sample) if a.state == x.name and a.clamp is not None]
    ends = [(0, x.maximum)] if x.maximum is not None else clamps
    return np.asarray(
        np.logical_and.reduce(
            [np.ones(value.shape, bool), *((value >= float(a)) & (value <= float(b)) for a, b in ends)]
        )
    )


def _first(inputs: Fields) -> Fields:
    return {n: a[0] for n, a in inputs.items()}


def _shuffled(states: Fields, random: np.random.Generator) -> Fields:
    order = random.permutation(len(states["jumps"]))[:LANES]
    return {n: a[order] for n, a in states.items()}


def _from_start(made: StepLaw, stimulus: Stimulus) -> tuple[Fields, Fields]:
    """Samples of the run that sees most (kinds of status and last jumps), and the states that all runs reached."""
    lanes, steps = 256, RUN
    twin = Reference(made, lanes=lanes)
    inputs = stimulus.inputs(steps, lanes)
    seen = np.zeros((lanes, 32 * (len(made.jumps) + 1)), bool)
    reached: list[Fields] = []
    for k in range(steps):
        twin._advance({n: a[k] for n, a in inputs.items()})
        seen[np.arange(lanes), 32 * twin.fields["last_jump"].astype(np.int64) + twin.state_status] = True
        reached.append({n: a.copy() for n, a in twin.fields.items()})
    best = int(seen.sum(axis=1).argmax())
    names = reached[0]
    return {n: a[:, best] for n, a in inputs.items()}, {n: np.concatenate([r[n] for r in reached]) for n in names}


def _cover(machine: Reference, pool: _Pool, changed: list[Reference], shown: set[str], room: int) -> list[int]:
    """Lanes that show what was not shown yet, greedily; `shown` grows by it."""
    wanted = {
        n: m for n, m in (*_events(machine, pool), *_differences(machine, pool, changed)) if n not in shown and m.any()
    }
    if not wanted:
        return []
    names, missing = list(wanted), np.array(list(wanted.values()))
    open_ = np.ones(len(names), bool)
    lanes: list[int] = []
    while open_.any() and len(lanes) < room:
        lane = int(missing[open_].sum(axis=0).argmax())
        lanes.append(lane)
        shown |= {names[i] for i in np.flatnonzero(open_ & missing[:, lane])}
        open_ &= ~missing[:, lane]
    return lanes


def _differences(machine: Reference, pool: _Pool, changed: list[Reference]) -> Iterator[tuple[str, Mask]]:
    """Where each mutant is told from the law: anywhere, and from each mode, which may have C of its own."""
    modes = [
        (f"{x.name} {v}", pool.states[x.name] == v)
        for x in machine.step_law.states
        if x.type.kind is Kind.ENUM
        for v in range(len(x.values))
    ]
    after = pool.stepped(machine)
    for k, other in enumerate(changed):
        told, jumping = after.differs(pool.stepped(other))
        if told.any():
            yield f"mutant {k}", told
            yield f"mutant {k} by its jumps", jumping
            yield from ((f"mutant {k} from {name}", told & mode) for name, mode in modes)


def _events(machine: Reference, pool: _Pool) -> Iterator[tuple[str, Mask]]:
    """What a step can show: a jump as the first or the last of the step, a bit of the status, a mode."""
    made = machine.step_law
    once, whole = pool.stepped(Reference(replace(made, jumps_per_step=1), lanes=LANES)), pool.stepped(machine)
    for j in made.jumps:
        for words, after in (("first", once), ("last", whole)):
            moved = after.fields["jumps"] != pool.states["jumps"]
            yield f"{words} {j.name}", moved & (after.fields["last_jump"] == j.number)
    for bit in Status:
        yield f"status {bit.name}", (whole.status & np.uint32(bit)) != 0
    for x in made.states:
        if x.type.kind in (Kind.ENUM, Kind.BOOL):
            for value in range(max(2, len(x.values))):
                yield f"{x.name} {value}", (whole.fields[x.name] == value) & (pool.states[x.name] == value)


def _played(made: StepLaw, samples: Fields, pool: _Pool, told: tuple[int, int]) -> Vectors:
    """All steps in one machine, in the order of the self-test."""
    twin = Reference(made)
    count = len(pool.states["jumps"])
    states = [{n: a[0].copy() for n, a in twin.fields.items()}]
    outputs: list[Fields] = []
    status: list[int] = []
    jumps: set[int] = set()
    inputs = {n: np.concatenate([samples[n], pool.inputs[n]]) for n in samples}
    for k in range(RUN + count):
        if k >= RUN:
            for name, array in pool.states.items():
                twin.fields[name][...] = array[k - RUN]
        given = twin._advance({n: a[k : k + 1] for n, a in inputs.items()})
        jumps |= set(twin.trail)
        outputs.append({n: a[0] for n, a in given.items()})
        states.append({n: a[0].copy() for n, a in twin.fields.items()})
        status.append(int(twin.state_status[0]))
    return Vectors(
        inputs,
        pool.states,
        {n: np.array([s[n] for s in states]) for n, _, _ in layout(made, "state")},
        {n: np.array([o[n] for o in outputs]) for n, _, _ in layout(made, "outputs")},
        np.array(status, np.uint32),
        RUN,
        *told,
        tuple(j.name for j in made.jumps if j.number in jumps),
    )
