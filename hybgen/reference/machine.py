"""What the reference and the compiled C have in common: values in and out, by name.

Arrays inside have a first axis of lanes. Enumerations are codes in arrays and names in mappings; timers are whole
steps in arrays and seconds in mappings.
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping, MutableMapping
from fractions import Fraction
from typing import Any, Self

import numpy as np
from numpy.typing import NDArray

from hybgen.expr.core import Kind, RefKind, Type
from hybgen.numbers.format import LARGEST_COUNT, Format
from hybgen.step.model import Status, StepLaw, StepState

Array = NDArray[Any]
Fields = dict[str, Array]


def dtype_of(type_: Type, fmt: Format) -> np.dtype[Any]:
    """The numpy type of a type: as in the C structs."""
    match type_.kind:
        case Kind.REAL:
            return fmt.dtype
        case Kind.BOOL:
            return np.dtype(np.bool_)
        case _:
            return np.dtype(np.int32)


def layout(made: StepLaw, which: str) -> list[tuple[str, np.dtype[Any], tuple[int, ...]]]:
    """Names, types and component shapes of `inputs`, `parameters`, `outputs` or `state`, in the order of the C structs."""

    def row(name: str, type_: Type, size: int | None) -> tuple[str, np.dtype[Any], tuple[int, ...]]:
        return name, dtype_of(type_, made.format), () if size is None else (size,)

    match which:
        case "inputs":
            return [row(u.name, u.type, u.size) for u in made.inputs]
        case "parameters":
            return [row(p.name, p.type, p.size) for p in made.parameters]
        case "outputs":
            return [row(o.name, o.type, o.size) for o in made.law.outputs]
        case _:
            word = np.dtype(np.uint32)
            states = [row(x.name, x.type, x.size) for x in made.states]
            held = [row(f"held_{u.name}", u.type, u.size) for u in made.inputs if u.held]
            return [*states, *held, ("last_jump", word, ()), ("jumps", word, ())]


NO_NUMBER = -(2**31)
"""The raw value of what is no number, in fixed point: outside every range."""


def to_raw(value: Any, places: int) -> Array:
    """Physical values as raw ones: nearest, ties to even; held at the ends; NO_NUMBER for what is not finite."""
    with np.errstate(over="ignore"):
        scaled = np.ldexp(np.asarray(value, np.float64), places)
    held = np.clip(np.rint(np.where(np.isfinite(scaled), scaled, 0.0)), -LARGEST_COUNT, LARGEST_COUNT)
    return np.where(np.isfinite(scaled), held, NO_NUMBER).astype(np.int32)


def to_physical(raw: Any, places: int) -> Array:
    """Raw values as physical ones, exactly."""
    return np.ldexp(np.asarray(raw, np.float64), -places)


class Machine:
    """A law that can be stepped. Subclasses give `_advance` (all lanes, one step) and `_spawn`."""

    def __init__(self, made: StepLaw, parameters: Mapping[str, Any] | None, lanes: int) -> None:
        self.step_law = made
        self.law = made.law
        self.lanes = lanes
        self.fields = self._blank("state")
        self.parameters = self._blank("parameters")
        for p in made.parameters:
            self.parameters[p.name][...] = np.array([_number(v) for v in p.default]).reshape(
                self.parameters[p.name].shape[1:] or ()
            )
        for name, value in (parameters or {}).items():
            if name not in self.parameters:
                raise ValueError(f"'{name}' is no tunable parameter; there {_are(self.parameters)}")
            self.parameters[name][...] = self._given(name, value, self.parameters[name])
        self.state_status = np.zeros(lanes, np.uint32)
        self.reset()

    def _blank(self, which: str) -> Fields:
        return {n: np.zeros((self.lanes, *shape), dtype) for n, dtype, shape in layout(self.step_law, which)}

    def _given(self, name: str, value: Any, like: Array) -> Array:
        """A value for a parameter: one for all lanes, or one for each."""
        places = self.step_law.places.get((RefKind.PARAMETER, name))
        try:
            found = np.asarray(value, dtype=like.dtype) if places is None else to_raw(value, places)
            if found.ndim == like.ndim - 1:
                found = found[None, ...]
            return np.broadcast_to(found, like.shape)
        except (TypeError, ValueError) as error:
            raise ValueError(f"parameter '{name}' can't be {value!r}: {error}") from None

    def reset(self) -> None:
        """The state after start, in every lane."""
        for x in self.step_law.states:
            values = np.array([_number(v) for v in x.initial])
            self.fields[x.name][...] = values if x.size is not None else values[0]
        for u in self.step_law.inputs:
            if u.held:
                self.fields[f"held_{u.name}"][...] = _number(u.initial)
        self.fields["last_jump"][...] = 0
        self.fields["jumps"][...] = 0
        self.state_status[...] = 0

    def _advance(self, inputs: Fields) -> Fields:
        """One step of all lanes; sets `state_status`, gives the outputs."""
        raise NotImplementedError

    def _spawn(self, lanes: int) -> Self:
        """A machine of the same law and parameters with more lanes."""
        raise NotImplementedError

    @property
    def status(self) -> Status:
        """The status bits of the last step (first lane)."""
        return Status(int(self.state_status[0]))

    @property
    def last_jump(self) -> str | None:
        """The name of the last jump (first lane), None before the first."""
        number = int(self.fields["last_jump"][0])
        return self.step_law.jumps[number - 1].name if 0 < number <= len(self.step_law.jumps) else None

    @property
    def jumps(self) -> int:
        """How many jumps were taken (first lane)."""
        return int(self.fields["jumps"][0])

    @property
    def state(self) -> MutableMapping[str, Any]:
        """The state by name (first lane), readable and writable."""
        return StateMapping(self)

    def step(self, inputs: Mapping[str, Any], *, raw: bool = False) -> dict[str, Any]:
        """One step with the samples by name; the outputs by name. Raises ValueError for names or values that don't fit.

        Fixed point: numbers are physical, or raw values with `raw`.
        """
        arrays = {n: a[None, ...] for n, a in self._inputs(inputs, 0, raw).items()}
        if self.lanes != 1:
            arrays = {n: np.repeat(a, self.lanes, axis=0) for n, a in arrays.items()}
        outputs = self._advance(arrays)
        return {o.name: self._physical(o.name, outputs[o.name][0], o.type, raw) for o in self.law.outputs}

    def _physical(self, name: str, value: Any, type_: Type, raw: bool) -> Any:
        places = self.step_law.places.get((RefKind.OUTPUT, name))
        return self._shown(value, type_) if raw or places is None else float(to_physical(value, places))

    def run(self, inputs: Mapping[str, Any], *, raw: bool = False) -> dict[str, Array]:
        """Many steps: arrays of shape (steps,) go on from the state; arrays of shape (steps, lanes) start every lane at the
        state and leave it as it is. A vector input has one more axis, its components. Returns the outputs alike.

        Fixed point: numbers are physical (float64), or raw values (int32) with `raw`.
        """
        found = self._ran(inputs, self._inputs(inputs, 1, raw))
        places = {} if raw else {n: p for (kind, n), p in self.step_law.places.items() if kind is RefKind.OUTPUT}
        return {n: to_physical(a, places[n]) if n in places else a for n, a in found.items()}

    def _ran(self, inputs: Mapping[str, Any], arrays: Fields) -> dict[str, Array]:
        axes = {a.ndim - self._rank(n) for n, a in arrays.items()}
        if axes - {1, 2}:
            raise ValueError("arrays of samples have the shape (steps,) or (steps, lanes), vectors one axis more")
        if axes == {1} or not arrays:
            found = self._series({n: a[:, None, ...] for n, a in arrays.items()}, self._steps(arrays, inputs))
            return {n: a[:, 0, ...] for n, a in found.items()}
        lanes = max(a.shape[1] for n, a in arrays.items() if a.ndim - self._rank(n) == 2)
        wide = {
            n: a if a.ndim - self._rank(n) == 2 else np.repeat(a[:, None, ...], lanes, axis=1)
            for n, a in arrays.items()
        }
        return self._spawn(lanes)._series(wide, self._steps(arrays, inputs))

    def _steps(self, arrays: Fields, inputs: Mapping[str, Any]) -> int:
        lengths = {len(a) for a in arrays.values()}
        if len(lengths) > 1:
            raise ValueError("all arrays of samples have to have the same number of steps")
        return lengths.pop() if lengths else int(inputs.get("steps", 0))

    def _rank(self, name: str) -> int:
        return 0 if next(u.size for u in self.step_law.inputs if u.name == name) is None else 1

    def _series(self, inputs: Fields, steps: int) -> dict[str, Array]:
        """Steps in a row with arrays of shape (steps, lanes, ...)."""
        made = {n: np.zeros((steps, self.lanes, *shape), dtype) for n, dtype, shape in layout(self.step_law, "outputs")}
        for k in range(steps):
            outputs = self._advance({n: a[k] for n, a in inputs.items()})
            for name, array in made.items():
                array[k] = outputs[name]
        return made

    def _inputs(self, inputs: Mapping[str, Any], axes: int, raw: bool) -> Fields:
        """The samples as arrays of their types. `axes` 0: one sample each; 1: arrays."""
        known = {u.name: u for u in self.step_law.inputs}
        extra = [n for n in inputs if n not in known and not (n == "steps" and not known)]
        missing = [n for n in known if n not in inputs]
        if extra or missing:
            words = [f"unknown: {', '.join(map(str, extra))}"] * bool(extra) + [
                f"missing: {', '.join(missing)}"
            ] * bool(missing)
            raise ValueError(f"the inputs of {self.law.name} are {', '.join(known) or 'none'} ({'; '.join(words)})")
        places = {} if raw else self.step_law.places
        return {
            n: self._sample(
                n, u.type, inputs[n], () if u.size is None else (u.size,), axes, places.get((RefKind.INPUT, n))
            )
            for n, u in known.items()
        }

    def _sample(
        self, name: str, type_: Type, value: Any, shape: tuple[int, ...], axes: int, places: int | None
    ) -> Array:
        wanted = dtype_of(type_, self.step_law.format)
        try:
            raw = np.asarray(value) if places is None else to_raw(value, places)
            if wanted.kind == "i" and (
                raw.dtype.kind not in "iub" or np.any((raw > LARGEST_COUNT) | (raw < NO_NUMBER))
            ):
                raise ValueError("whole numbers of 32 bits are needed")
            if raw.dtype.kind not in "iufb":
                raise ValueError(f"{raw.dtype} is no number")
            if wanted.kind == "b" and raw.dtype.kind not in "b" and np.any((raw != 0) & (raw != 1)):
                raise ValueError("true or false is needed")
            with np.errstate(over="ignore"):
                found = raw.astype(wanted)
        except (TypeError, ValueError) as error:
            raise ValueError(f"input '{name}' can't be {str(value)[:60]}: {error}") from None
        if found.shape[found.ndim - len(shape) :] != shape or (axes == 0 and found.ndim != len(shape)):
            raise ValueError(f"input '{name}' has the shape {found.shape}, a sample has {shape}")
        return found

    def _shown(self, value: Any, type_: Type) -> Any:
        """A value for people: a float, int, bool, name, or a list of them."""
        if np.ndim(value):
            return [self._shown(v, type_) for v in value]
        match type_.kind:
            case Kind.REAL:
                return float(value)
            case Kind.BOOL:
                return bool(value)
            case Kind.ENUM:
                code = int(value)
                return type_.values[code] if 0 <= code < len(type_.values) else code
            case Kind.INT:
                return int(value)


class StateMapping(MutableMapping[str, Any]):
    """The state of the first lane: floats, ints, bools, names of logic values; timers in seconds.

    What is written into a timer, a count or a limited state is held inside its range.
    """

    def __init__(self, machine: Machine) -> None:
        self._machine = machine
        self._states = {x.name: x for x in machine.step_law.states}

    def __getitem__(self, name: str) -> Any:
        x = self._states[name]
        value = self._machine.fields[name][0]
        places = self._machine.step_law.places.get((RefKind.STATE, name))
        if places is not None:
            return to_physical(value, places).tolist()
        if x.kind == "timer":
            return float(int(value) * self._machine.step_law.step)
        return self._machine._shown(value, x.type)

    def __setitem__(self, name: str, value: Any) -> None:
        if name not in self._states:
            raise KeyError(f"{name}: the states are {', '.join(self._states)}")
        self._machine.fields[name][0] = self._stored(self._states[name], value)

    def _stored(self, x: StepState, value: Any) -> Any:
        if x.kind == "timer":
            steps = Fraction(repr(float(value))) / self._machine.step_law.step
            return min(max(0, math.ceil(steps)), x.maximum or 0)
        if x.type.kind is Kind.ENUM:
            if value not in x.type.values:
                raise ValueError(f"{x.name} is one of {', '.join(x.type.values)}, not {value!r}")
            return x.type.values.index(value)
        if x.kind == "logic" and value not in x.values:
            raise ValueError(f"{x.name} is one of {', '.join(map(str, x.values))}, not {value!r}")
        if x.maximum is not None:
            return min(max(0, int(value)), x.maximum)
        declared = self._machine.law.state(x.name)
        if declared.limit and declared.low is not None and declared.high is not None:
            value = np.clip(value, float(declared.low), float(declared.high))
        places = self._machine.step_law.places.get((RefKind.STATE, x.name))
        return value if places is None else to_raw(value, places)

    def __delitem__(self, name: str) -> None:
        raise TypeError("a state can't be taken out")

    def __iter__(self) -> Iterator[str]:
        return iter(self._states)

    def __len__(self) -> int:
        return len(self._states)

    def __repr__(self) -> str:
        return repr(dict(self))


def _number(value: Fraction | int | bool) -> float | int | bool:
    return float(value) if isinstance(value, Fraction) else value


def _are(names: Mapping[str, Any]) -> str:
    return f"are {', '.join(names)}" if names else "is none"
