"""Stimulus for a law: deterministic, seeded from the law's digest.

Ramps, steps, sines, noise, walks, points on each threshold and one unit in the last place either side, bad samples,
parameters at and between their limits, and any state of the declared domain.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hybgen.expr.core import COMPARISONS, Const, Kind, Node, Op, Ref, RefKind, walk
from hybgen.reference.machine import Fields, dtype_of
from hybgen.step.model import StepInput, StepLaw, StepParameter, StepState

Array = NDArray[Any]
Key = tuple[RefKind, str]
PROFILES = 8
LARGEST = 2**31 - 1


def generator(made: StepLaw, salt: int) -> np.random.Generator:
    """The random numbers of a law: the same on every machine."""
    return np.random.Generator(np.random.PCG64(int(made.law.digest[:16], 16) ^ salt))


def thresholds(made: StepLaw) -> dict[Key, list[float]]:
    """For each input, parameter and state the constants it is compared with."""
    found: dict[Key, set[float]] = {}
    ends = _ends(made)
    for tree in made.trees():
        for node in walk(tree):
            if isinstance(node, Op) and node.op in COMPARISONS:
                _compared(node.args[0], node.args[1], ends, found)
                _compared(node.args[1], node.args[0], ends, found)
            elif isinstance(node, Op) and node.table:
                table = next(t for t in made.tables if t.name == node.table)
                for arg, points in zip(node.args, (table.x, table.y), strict=False):
                    if isinstance(arg, Ref):
                        found.setdefault((arg.kind, arg.name), set()).update(map(float, points))
    return {k: sorted(v) for k, v in found.items()}


def _ends(made: StepLaw) -> dict[str, list[float]]:
    """Default and range ends of the tunable numbers."""
    return {p.name: [float(v) for v in (*p.default, p.low, p.high) if v is not None] for p in made.parameters}


def _compared(one: Node, other: Node, ends: dict[str, list[float]], found: dict[Key, set[float]]) -> None:
    if not isinstance(one, Ref) or one.type.kind in (Kind.BOOL, Kind.ENUM):
        return
    values = [float(other.value)] if isinstance(other, Const) else []
    if isinstance(other, Ref) and other.kind is RefKind.PARAMETER:
        values = ends.get(other.name, [])
    found.setdefault((one.kind, one.name), set()).update(values)


def around(values: list[float], dtype: np.dtype[Any]) -> Array:
    """Each value in the format, with its neighbours on either side."""
    if dtype.kind == "i":
        whole = np.array(values, np.float64)
        near = np.concatenate([np.floor(whole), np.ceil(whole), np.floor(whole) - 1, np.ceil(whole) + 1])
        whole_marks: Array = np.clip(near, -LARGEST, LARGEST).astype(np.int32)
        return whole_marks
    exact = np.array(values, dtype)
    top = np.array(np.inf, dtype)
    return np.concatenate([exact, np.nextafter(exact, top), np.nextafter(exact, -top)])


@dataclass(frozen=True, slots=True)
class Stimulus:
    """Makes samples, parameters and states for many lanes."""

    made: StepLaw
    random: np.random.Generator
    marks: dict[Key, list[float]]

    @classmethod
    def of(cls, made: StepLaw, salt: int) -> Stimulus:
        """The stimulus of a law; `salt` tells campaigns apart."""
        return cls(made, generator(made, salt), thresholds(made))

    def inputs(self, steps: int, lanes: int) -> Fields:
        """Samples of shape (steps, lanes, ...)."""
        found: Fields = {}
        for u in self.made.inputs:
            shape = () if u.size is None else (u.size,)
            array = np.zeros((steps, lanes, *shape), dtype_of(u.type, self.made.format))
            for i in range(u.size or 1):
                part = array if u.size is None else array[:, :, i]
                part[...] = self._bools(steps, lanes) if u.type.kind is Kind.BOOL else self._numbers(u, steps, lanes)
            found[u.name] = array
        return found

    def _bools(self, steps: int, lanes: int) -> Array:
        """Telegraph signals of many mean lengths."""
        chance = self.random.choice([0.5, 0.1, 0.02, 0.005, 0.001], lanes)
        flips = self.random.random((steps, lanes)) < chance
        flips[0] = self.random.random(lanes) < 0.5
        found: Array = np.logical_xor.accumulate(flips, axis=0)
        return found

    def _numbers(self, u: StepInput, steps: int, lanes: int) -> Array:
        dtype = dtype_of(u.type, self.made.format)
        low, high = float(u.low), float(u.high)
        marks = around([*self.marks.get((RefKind.INPUT, u.name), []), low, high], dtype)
        profile = self.random.integers(0, PROFILES, lanes)
        found = np.zeros((steps, lanes), np.float64)
        for kind in range(PROFILES):
            some = np.flatnonzero(profile == kind)
            found[:, some] = self._profile(kind, marks, low, high, steps, len(some))
        if dtype.kind == "i":
            whole = np.clip(np.rint(found), -LARGEST, LARGEST).astype(dtype)
            return self._spoiled(whole, profile, np.array([u.low, u.high], np.int64), dtype)
        with np.errstate(over="ignore"):
            made = found.astype(dtype)
        exact = self.random.choice(marks, (steps, lanes))
        made = np.where(profile[None, :] == 4, exact, made)
        return self._spoiled(made, profile, np.array([low, high]), dtype)

    def _profile(self, kind: int, marks: Array, low: float, high: float, steps: int, lanes: int) -> Array:
        t = np.arange(steps)[:, None]
        width = high - low
        period = np.exp(self.random.uniform(np.log(8), np.log(2 * steps + 8), lanes))
        phase = self.random.random(lanes)
        match kind:
            case 0:
                saw: Array = low + width * np.abs(2 * np.mod(t / period + phase, 1) - 1)
                return saw
            case 1 | 6:
                length = 40 if kind == 1 else max(50, steps // 3)
                change = self.random.random((steps, lanes)) < 1 / length
                change[0] = True
                values = self._mixed(marks, low, high, (steps, lanes))
                last = np.maximum.accumulate(np.where(change, t, 0), axis=0)
                return np.take_along_axis(values, last, axis=0)
            case 2:
                wave = low + width * (0.5 + 0.5 * np.sin(2 * np.pi * (t / period + phase)))
                return np.clip(wave + width * 0.02 * self.random.standard_normal((steps, lanes)), low, high)
            case 3:
                walk_ = np.cumsum(self.random.standard_normal((steps, lanes)), axis=0) * width * 0.03 + width * phase
                folded: Array = low + width * np.abs(np.mod(walk_ / width, 2) - 1)
                return folded
            case _:
                return self.random.uniform(low, high, (steps, lanes))

    def _mixed(self, marks: Array, low: float, high: float, shape: tuple[int, ...]) -> Array:
        plain = self.random.uniform(low, high, shape)
        return np.where(self.random.random(shape) < 0.3, self.random.choice(marks, shape).astype(np.float64), plain)

    def _spoiled(self, values: Array, profile: Array, ends: Array, dtype: np.dtype[Any]) -> Array:
        """Bad samples in the lanes of the last profile, a few elsewhere."""
        chance = np.where(profile == PROFILES - 1, 0.15, np.where(profile == 2, 0.01, 0.0))
        bad = self.random.random(values.shape) < chance
        if dtype.kind == "i":
            beyond = np.clip(np.array([ends[0] - 1, ends[1] + 1, -LARGEST - 1, LARGEST]), -LARGEST - 1, LARGEST).astype(
                dtype
            )
        else:
            edge = ends.astype(dtype)
            top = np.array(np.inf, dtype)
            beyond = np.array(
                [np.nan, np.inf, -np.inf, np.nextafter(edge[1], top), np.nextafter(edge[0], -top), np.finfo(dtype).max],
                dtype,
            )
        return np.where(bad, self.random.choice(beyond, values.shape), values)

    def parameters(self, lanes: int) -> Fields:
        """Parameters at their defaults (half of the lanes), at and between their limits, some of them bad."""
        found: Fields = {}
        style = self.random.integers(0, 8, lanes)
        for p in self.made.parameters:
            shape = () if p.size is None else (p.size,)
            array = np.zeros((lanes, *shape), dtype_of(p.type, self.made.format))
            for i in range(p.size or 1):
                part = array if p.size is None else array[:, i]
                part[...] = self._parameter(p, i, style)
            found[p.name] = array
        return found

    def _parameter(self, p: StepParameter, i: int, style: Array) -> Array:
        lanes = len(style)
        dtype = dtype_of(p.type, self.made.format)
        default = np.full(lanes, float(p.default[i]) if isinstance(p.default[i], Fraction) else p.default[i], dtype)
        if p.type.kind is Kind.BOOL:
            return np.where(style < 4, default, self.random.random(lanes) < 0.5)
        low, high = (
            float(v)
            for v in (p.low if p.low is not None else p.default[i], p.high if p.high is not None else p.default[i])
        )
        marks = around([low, high, *self.marks.get((RefKind.PARAMETER, p.name), [])], dtype)
        inner = self.random.uniform(low, high, lanes)
        between = (np.rint(inner) if dtype.kind == "i" else inner).astype(dtype)
        chosen = np.where(style == 4, self.random.choice(marks, lanes), between)
        if dtype.kind == "f":
            chosen = np.where((style == 7) & (self.random.random(lanes) < 0.3), dtype.type(np.nan), chosen)
        return np.where(style < 4, default, chosen)

    def states(self, lanes: int) -> Fields:
        """Any state of the declared domain, with what the instance remembers of its inputs and jumps."""
        found: Fields = {}
        for x in self.made.states:
            columns = [self._state(x, lanes) for _ in range(x.size or 1)]
            found[x.name] = columns[0] if x.size is None else np.stack(columns, axis=1)
        for u in self.made.inputs:
            if u.held:
                values = [self._held(u, lanes) for _ in range(u.size or 1)]
                found[f"held_{u.name}"] = values[0] if u.size is None else np.stack(values, axis=1)
        found["last_jump"] = self.random.integers(0, len(self.made.jumps) + 1, lanes).astype(np.uint32)
        counts = np.array([0, 1, 2**31 - 1, 2**31, 2**32 - 2, 2**32 - 1], np.uint32)
        found["jumps"] = self.random.choice(counts, lanes)
        return found

    def _held(self, u: StepInput, lanes: int) -> Array:
        dtype = dtype_of(u.type, self.made.format)
        values = self.random.uniform(float(u.low), float(u.high), lanes)
        return (np.rint(values) if dtype.kind == "i" else values).astype(dtype)

    def _state(self, x: StepState, lanes: int) -> Array:
        marks = self.marks.get((RefKind.STATE, x.name), [])
        match x.kind:
            case "bool":
                return self.random.random(lanes) < 0.5
            case "logic":
                codes = list(range(len(x.values))) if x.type.kind is Kind.ENUM else [int(v) for v in x.values]
                return self.random.choice(np.array(codes, np.int32), lanes)
            case "timer" | "count":
                top = x.maximum or 0
                near = np.clip(
                    np.concatenate(
                        [around([*marks, 0.0, float(top)], np.dtype(np.int32)), [top - 1, top - 2, top - 5]]
                    ),
                    0,
                    top,
                )
                spread = self.random.integers(0, top + 1, lanes)
                return np.where(self.random.random(lanes) < 0.7, self.random.choice(near, lanes), spread).astype(
                    np.int32
                )
            case _:
                return self._real(x, marks, lanes)

    def _real(self, x: StepState, marks: list[float], lanes: int) -> Array:
        dtype = self.made.format.dtype
        state = self.made.law.state(x.name)
        low, high = float(state.low or 0), float(state.high or 0)
        if (places := self.made.places.get((RefKind.STATE, x.name))) is not None:
            low, high = math.ceil(math.ldexp(low, places)), math.floor(math.ldexp(high, places))
        near = around([*marks, low, high, 0.0], dtype)
        with np.errstate(over="ignore"):
            near = near[np.isfinite(near)]
            ends = np.array([low, high]).astype(dtype)
            near = np.clip(near, ends[0], ends[1]) if state.limit else near
            spread = self.random.uniform(low, high, lanes).astype(dtype)
        return np.where(self.random.random(lanes) < 0.5, self.random.choice(near, lanes), spread)
