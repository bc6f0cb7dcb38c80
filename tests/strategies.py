"""Random whole laws: every feature of the language of this version, as the text of a law file."""

from __future__ import annotations

import random
from dataclasses import dataclass, field

from hypothesis import strategies as st

CONSTANTS = ["0", "1", "0.1", "0.3", "2", "0.25", "1.7", "3", "1e-3", "12.5"]


@dataclass
class Names:
    """What a law has declared so far, by kind."""

    reals: list[str] = field(default_factory=list)
    ints: list[str] = field(default_factory=list)
    bools: list[str] = field(default_factory=list)
    logic: dict[str, list[str]] = field(default_factory=dict)
    signs: list[str] = field(default_factory=list)
    timers: list[str] = field(default_factory=list)
    times: list[str] = field(default_factory=list)
    valid: list[str] = field(default_factory=list)
    tables: list[str] = field(default_factory=list)
    jumps: list[str] = field(default_factory=list)


class Author:
    """Writes one law with the random numbers given."""

    def __init__(self, dice: random.Random, name: str) -> None:
        self.dice = dice
        self.name = name
        self.names = Names()
        self.lines: list[str] = []

    def some(self, chance: float) -> bool:
        return self.dice.random() < chance

    def pick(self, items: list[str]) -> str:
        return self.dice.choice(items)

    def real(self, depth: int) -> str:
        n = self.names
        if depth <= 0 or self.some(0.2):
            leaves = [*n.reals, *(t + " / (1 s)" for t in n.timers if self.some(0.2)), *n.ints[:2], *n.signs]
            return self.pick(leaves) if leaves and self.some(0.75) else self.pick(CONSTANTS)
        a, b = self.real(depth - 1), self.real(depth - 1)
        kind = self.dice.randrange(15)
        match kind:
            case 0 | 1:
                return f"({a} + {b})"
            case 2 | 3:
                return f"({a} - {b})"
            case 4 | 5:
                return f"({a} * {b})"
            case 6:
                return f"({a} / (1.5 + abs({b})))" if self.some(0.7) else f"({a} / {self.pick(['3', '0.7', *n.reals])})"
            case 7:
                return f"{self.pick(['min', 'max'])}({a}, {b})"
            case 8:
                return f"clamp({a}, -1, {self.pick(['1.5', '2'])})"
            case 9:
                return f"{self.pick(['abs', 'floor', 'sign'])}({a})"
            case 10:
                return f"(-({a}))"
            case 11:
                return f"choose({self.boolean(depth - 1)}, 1.0 * {a}, 1.0 * {b})"
            case 13:
                return self.elementary(a, b)
            case 12:
                return self.lookup(a, b) if n.tables else f"({a})**2"
            case _:
                return f"(0.5 * {a})"

    def elementary(self, a: str, b: str) -> str:
        """An elementary function, mostly inside its domain."""
        inside = self.some(0.8)
        return self.pick(
            [
                f"sqrt({f'abs({a})' if inside else a})",
                f"log({f'(0.1 + abs({a}))' if inside else a})",
                f"exp({f'clamp({a}, -9, 3)' if inside else a})",
                f"{self.pick(['asin', 'acos'])}({f'clamp({a}, -1, 1)' if inside else a})",
                f"{self.pick(['sin', 'cos', 'tan', 'tanh', 'wrap'])}({a})",
                f"{self.pick(['atan2', 'hypot'])}({a}, {b})",
                f"norm([{a}, {b}, 1.5])",
            ]
        )

    def whole(self, depth: int) -> str:
        n = self.names
        if depth <= 0 or not (n.ints or n.signs):
            return self.pick([*n.ints, *n.signs, "1", "3"])
        a, b = self.whole(depth - 1), self.whole(depth - 1)
        return self.pick(
            [
                f"({a} + {b})",
                f"({a} - {b})",
                f"({a} * 2)",
                f"min({a}, {b})",
                f"max({a}, {b})",
                f"abs({a})",
                f"sign({a})",
                f"clamp({a}, -5, 9)",
                f"(-{a})",
                f"choose({self.boolean(0)}, {a}, {b})",
            ]
        )

    def boolean(self, depth: int) -> str:
        n = self.names
        if depth <= 0 or self.some(0.4):
            return self.atom()
        a, b = self.boolean(depth - 1), self.boolean(depth - 1)
        return self.pick(
            [
                f"({a} and {b})",
                f"({a} or {b})",
                f"(not {a})",
                f"({a} and {b} or {a})",
                f"choose({a}, {b}, {self.atom()})",
                f"(({a}) == ({b}))" if not n.valid else f"({a} and {b})",
            ]
        )

    def atom(self) -> str:
        n = self.names
        options = [
            f"{self.real(1)} {self.pick(['<', '<=', '>', '>='])} {self.real(0)}",
            f"{self.pick(CONSTANTS)} {self.pick(['<', '>='])} {self.real(1)}",
        ]
        options += n.bools + [f"not {b}" for b in n.bools[:1]] + [f"valid({v})" for v in n.valid]
        for state, values in n.logic.items():
            options += [
                f"{state} == {self.pick(values)}",
                f"{state} != {self.pick(values)}",
                f"{state} == {self.pick(values)}",
            ]
        options += [
            f"{t} {self.pick(['>=', '<', '>', '<='])} {self.pick(['0.3 s', '500 ms', '1 s', *n.times])}"
            for t in n.timers
        ]
        options += [f"{i} {self.pick(['>=', '<', '==', '!='])} {self.pick(['1', '2', '0'])}" for i in n.ints + n.signs]
        if n.reals and self.some(0.2):
            options.append(f"0.2 <= {self.pick(n.reals)} < 0.8")
        return f"({self.pick(options)})"

    def put(self, line: str) -> None:
        self.lines.append(line)

    def write(self) -> str:
        self.put(f"law: {self.name}")
        self.put(f"step: {self.pick(['100 ms', '0.01 s', '0.3 s', '1 s'])}")
        self.put(f"number: {self.pick(['float32', 'float64'])}")
        if self.some(0.15):
            self.put("thresholds: nearest")
        if self.some(0.15):
            self.put(f"jumps_per_step: {self.dice.randint(1, 4)}")
        later = Names()
        self.inputs(later)
        self.parameters(later)
        self.states(later)
        self.tables()
        self.names = later
        self.terms()
        flow_set = self.some(0.2)
        if flow_set and self.some(0.5):
            self.put("prefer: flow")
        self.jumps()
        self.flow(flow_set)
        self.sample()
        self.outputs()
        return "\n".join(self.lines) + "\n"

    def inputs(self, n: Names) -> None:
        rows = []
        for i in range(self.dice.randint(0, 3)):
            policy = self.pick(
                ["", ", invalid: hold", ", invalid: clamp", ", invalid: 0.5", ", invalid: hold, initial: 0.4"]
            )
            rows.append(
                f"  u{i}: {{range: [{self.pick(['0', '-1', '0.1'])}, {self.pick(['1', '2.3', '10'])}]{policy}}}"
            )
            n.reals.append(f"u{i}")
            n.valid.append(f"u{i}")
        if self.some(0.6):
            rows.append("  on_board: {type: bool}")
            n.bools.append("on_board")
        if self.some(0.3):
            rows.append(
                f"  ticks: {{type: integer, range: [-3, 20]{self.pick(['', ', invalid: clamp', ', invalid: 2'])}}}"
            )
            n.ints.append("ticks")
            n.valid.append("ticks")
        if self.some(0.25):
            rows.append(f"  pull: {{vector: 2, range: [-2, 2]{self.pick(['', ', invalid: clamp', ', invalid: 1'])}}}")
            n.reals += ["pull[0]", "pull[1]", "dot(pull, pull)"]
            n.valid.append("pull")
        self.section("inputs", rows)

    def section(self, key: str, rows: list[str]) -> None:
        if rows:
            self.put(f"{key}:")
            self.lines += rows

    def parameters(self, n: Names) -> None:
        rows = []
        for i in range(self.dice.randint(0, 3)):
            value = self.pick(["0.3", "0.5", "1.1", "-0.7"])
            tunable = self.some(0.6)
            rows.append(f"  p{i}: {{value: {value}, range: [-2, 2], tunable: true}}" if tunable else f"  p{i}: {value}")
            n.reals.append(f"p{i}")
        if self.some(0.3):
            rows.append("  armed: {value: true, type: bool, tunable: true}")
            n.bools.append("armed")
        if self.some(0.3):
            rows.append(f"  most: {{value: 3, type: integer, range: [0, 7], tunable: {self.pick(['true', 'false'])}}}")
            n.ints.append("most")
        if self.some(0.4):
            rows.append(self.pick(["  rest: {value: 0.7 s, range: [0 s, 3 s], tunable: true}", "  rest: 1.2 s"]))
            n.times.append("rest")
        if self.some(0.2):
            rows.append("  gains: {value: [[1, 0.5], [-0.5, 0.25]]}")
            rows.append(f"  bias: {{value: [0.1, -0.2], range: [-1, 1], tunable: {self.pick(['true', 'false'])}}}")
            n.reals += ["bias[0]", "(gains @ bias)[1]", "dot(gains[0], bias)"]
        self.section("parameters", rows)

    def states(self, n: Names) -> None:
        rows = []
        if self.some(0.8):
            values = ["idle", "run", "fault", "drain"][: self.dice.randint(2, 4)]
            rows.append(f"  mode: {{logic: [{', '.join(values)}], initial: {self.pick(values)}}}")
            n.logic["mode"] = values
        if self.some(0.3):
            rows.append("  pump: {logic: [off, on]}")
            n.logic["pump"] = ["off", "on"]
        if self.some(0.3):
            rows.append("  side: {logic: [-1, 1], initial: 1}")
            n.signs.append("side")
        if self.some(0.3):
            rows.append("  latch: {type: bool}")
            n.bools.append("latch")
        if self.some(0.6):
            rows.append(
                f"  since: {{timer: {self.pick(['2 s', '1.5 s', '60 s'])}, initial: {self.pick(['0 s', '1.25 s'])}}}"
            )
            n.timers.append("since")
        if self.some(0.3):
            rows.append("  tries: {count: 4}")
            n.ints.append("tries")
        for i in range(self.dice.randint(0, 3)):
            limit = ", limit: true" if self.some(0.5) else ""
            rows.append(f"  x{i}: {{range: [-3, 3], initial: {self.pick(['0', '0.1', '-1'])}{limit}}}")
            n.reals.append(f"x{i}")
        if self.some(0.2):
            rows.append("  w: {vector: 2, range: [-5, 5], initial: [0.1, 0.2]}")
            n.reals += ["w[0]", "w[1]"]
        self.section("states", rows)

    def lookup(self, a: str, b: str) -> str:
        name = self.pick(self.names.tables)
        return f"{name}({a}, {b})" if name == "map" else f"{name}({a})"

    def tables(self) -> None:
        rows = ["  curve: {x: [0, 0.5, 1, 2], y: [0, 1, 0.3, 0.9]}"] if self.some(0.3) else []
        if self.some(0.3):
            x, y = [-1, 0.1, 0.5, 2][: self.dice.randint(2, 4)], [-0.7, 0, 1.3, 4][-self.dice.randint(2, 4) :]
            z = [[self.dice.choice([0, 0.3, -1, 0.9, 2.5]) for _ in y] for _ in x]
            rows.append(f"  map: {{x: {x}, y: {y}, z: {z}}}")
        self.section("tables", rows)

    def terms(self) -> None:
        rows = []
        self.names.tables = [name for name in ("curve", "map") if self.declared(name)]
        for i in range(self.dice.randint(0, 3)):
            if self.some(0.7):
                rows.append(f'  t{i}: {{value: "{self.real(2)} + 0.0"}}')
                self.names.reals.append(f"t{i}")
            else:
                rows.append(f'  c{i}: {{value: "{self.boolean(1)}"}}')
                self.names.bools.append(f"c{i}")
        self.section("terms", rows)

    def declared(self, prefix: str) -> bool:
        return any(line.startswith(f"  {prefix}:") for line in self.lines)

    def new_values(self) -> list[str]:
        rows = []
        if "mode" in self.names.logic and self.some(0.7):
            values = self.names.logic["mode"]
            value = self.pick(values)
            rows.append(
                f'mode: "{value}"'
                if self.some(0.8)
                else f'mode: "choose({self.boolean(0)}, {value}, {self.pick(values)})"'
            )
        if "pump" in self.names.logic and self.some(0.4):
            rows.append(f"pump: {self.pick(['off', 'on'])}")
        if "side" in self.names.signs and self.some(0.4):
            rows.append(f'side: "{self.pick(["-side", "1", "choose(" + self.boolean(0) + ", 1, -1)"])}"')
        if self.declared("latch") and self.some(0.4):
            rows.append(f'latch: "{self.boolean(1)}"')
        if self.names.timers and self.some(0.5):
            rows.append(f"since: {self.pick(['0 s', '0.25 s', *self.names.times])}")
        if self.declared("tries") and self.some(0.5):
            rows.append(f'tries: "{self.pick(["0", "tries + 1", self.whole(1)])}"')
        for i in range(3):
            if self.declared(f"x{i}") and self.some(0.4):
                rows.append(
                    f'x{i}: "{self.pick([self.real(2), "x0", "x1"]) if self.declared("x0") and self.declared("x1") else self.real(2)}"'
                )
        if self.declared("w") and self.some(0.4):
            rows.append('w: ["w[1]", "w[0]"]' if self.some(0.6) else 'w: "0.5 * w"')
        return rows

    def jumps(self) -> None:
        self.names.jumps = [f"j{i}" for i in range(self.dice.randint(0, 5))]
        if not self.names.jumps:
            return
        self.put("jumps:")
        for name in self.names.jumps:
            condition = self.boolean(2)
            if self.names.logic and self.some(0.6):
                state = self.pick(list(self.names.logic))
                condition = f"{state} == {self.pick(self.names.logic[state])} and {condition}"
            self.lines += [f"  {name}:", f'    set: "{condition}"']
            rows = self.new_values()
            if rows:
                self.put("    map:")
                self.lines += [f"      {row}" for row in rows]

    def rate(self, name: str) -> list[str]:
        style = self.dice.randrange(6)
        match style:
            case 0:
                return [f'    {name}: "({self.pick(self.names.reals)} - {name}) / (2 s)"']
            case 1:
                return [f'    {name}: "0.3 /s * {self.real(1)}"']
            case 2:
                return [f'    {name}: "({self.real(2)}) / (1 s)"']
            case 3 if self.names.logic:
                state = next(iter(self.names.logic))
                rows = [f"    {name}:"]
                for value in self.names.logic[state][:2]:
                    rows += [f"      - when: {state} == {value}", f'        is: "({self.real(1)}) / (1 s)"']
                return [*rows, "      - otherwise: 0"]
            case 4 if self.declared("x0") and self.declared("x1"):
                return [
                    f'    {name}: "(0.5 * x0 - x1 + {self.pick(["u0", "1"]) if self.declared("u0") else "1"}) / (3 s)"'
                ]
            case _:
                return [f'    {name}: "choose({self.boolean(1)}, 1.0 * {self.real(1)}, 0) / (1 s)"']

    def flow(self, flow_set: bool) -> None:
        rows: list[str] = []
        if flow_set:
            rows.append(f'  set: "{self.boolean(1)}"')
        rates = [r for i in range(3) if self.declared(f"x{i}") and self.some(0.6) for r in self.rate(f"x{i}")]
        if self.declared("w") and self.some(0.5):
            rates.append(
                f"    w: {self.pick(['[' + chr(34) + 'w[1] / (1 s)' + chr(34) + ', ' + chr(34) + '(-w[0] - 0.2 * w[1]) / (1 s)' + chr(34) + ']'])}"
            )
        if rates:
            rows += ["  map:", *rates]
        if rates and self.some(0.7):
            rows.append(f"  method: {self.pick(['euler', 'heun', 'rk4', 'auto', 'auto'])}")
        self.flowing = [f"x{i}" for i in range(3) if any(r.startswith(f"    x{i}:") for r in rates)]
        self.section("flow", rows)

    def sample(self) -> None:
        rows = []
        for i in range(3):
            if self.declared(f"x{i}") and f"x{i}" not in self.flowing and self.some(0.4):
                rows.append(f'  x{i}: "{self.late(self.real(2))}"')
        if self.declared("tries") and self.some(0.3):
            rows.append(f'  tries: "{self.whole(1)}"')
        if self.declared("latch") and self.some(0.3):
            rows.append(f'  latch: "{self.boolean(1)}"')
        self.section("sample", rows)

    def late(self, real: str) -> str:
        if self.names.jumps and self.some(0.3):
            return f"choose(jumped({self.pick(self.names.jumps)}), 1.0, 1.0 * {real})"
        return real

    def outputs(self) -> None:
        rows = [
            f'  y0: {{value: "{self.late(self.real(2))}"{self.pick(["", ", range: [-1, 1], limit: true", ", range: [0.5, 4]"])}}}'
        ]
        rows.append(f'  y1: {{type: bool, value: "{self.boolean(2)}"}}')
        if self.names.logic and self.some(0.5):
            rows.append(f"  y2: {{value: {self.pick(list(self.names.logic))}}}")
        if self.some(0.3):
            rows.append(f'  y3: {{type: integer, value: "{self.whole(2)}"}}')
        if self.names.jumps and self.some(0.4):
            rows.append(f"  y4: {{type: bool, value: jumped({self.pick(self.names.jumps)})}}")
        if self.declared("w"):
            rows.append('  y5: {value: "2 * w"}')
        self.section("outputs", rows)


def law_text(dice: random.Random, name: str = "random_law") -> str:
    """A law file."""
    return Author(dice, name).write()


def laws() -> st.SearchStrategy[str]:
    """Whole laws as text; shrinks with the choices behind them."""
    return st.randoms(use_true_random=False).map(law_text)


def seeded_laws() -> st.SearchStrategy[str]:
    """Whole laws as text from one seed: faster, for campaigns."""
    return st.integers(0, 2**48).map(lambda seed: law_text(random.Random(seed)))
