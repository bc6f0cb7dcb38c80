"""Laws whose generated C is looked at, and their files."""

from __future__ import annotations

import random
from collections.abc import Mapping
from functools import cache
from pathlib import Path

from hybgen.law import Law, load, read
from hybgen.pipeline import generate
from tests.conftest import ROOT, SPECS, law_of
from tests.strategies import law_text

RANDOM_LAWS = 12

SMALLEST = "law: smallest\nstep: 1 s\n"

COLLIDING = """
    law: raft
    about: Every name here is one that the generated code could have wanted for itself.
    step: 100 ms
    inputs:
      now: {range: [0, 1]}
      status: {type: bool}
      u: {range: [0, 1]}
      held: {range: [-1, 1]}
    parameters:
      p: {value: 0.5, range: [0, 1], tunable: true}
      used: {value: 0.25, range: [0, 1], tunable: true}
    terms:
      raft_clamp: {value: 2 * u}
      raft_step: {value: u + now}
      raft_now: {value: u * u}
      raft_RUN: {value: 3 * u}
      jump: {value: 4 * u}
      taken: {value: 5 * u}
      answer: {value: jump + taken}
      y: {value: answer - now}
      new_x: {value: y * 0.5}
      new_drive: {value: new_x + raft_clamp}
      steps: {value: new_drive * used}
    tables:
      step: {x: [0, 1], y: [0, 0.5]}
      step_x: {x: [0, 0.5, 1], y: [1, 0, 1]}
      read: {x: [0, 1], y: [0, 1]}
      defaults: {x: [0, 1], y: [1, 0]}
      isign: {x: [0, 1], y: [0.25, 1]}
      lift: {x: [0, 1], y: [0, 1, 2], z: [[0, 1, 2], [3, 4, 0]]}
      lift_per: {x: [0, 1], y: [1, 2]}
      lift_z: {x: [0, 1], y: [1, 2]}
      lookup2: {x: [0, 1], y: [0, 1], z: [[0, 1], [1, 0]]}
    states:
      inputs: {logic: [run, RUN, stop]}
      STATUS: {logic: [stuck, STUCK, invalid_input]}
      JUMP: {logic: [start, stop]}
      jump_: {type: bool}
      x: {range: [-9, 9], limit: true}
      z: {range: [-9, 9], limit: true}
      RAFT_JUMP_GO: {range: [-9, 9]}
      idle: {timer: 3 s}
    jumps:
      go:
        set: inputs == run and y > p and idle >= 300 ms
        map: {inputs: RUN, x: z + new_x, z: x - steps, idle: 0 s}
      Go:
        set: inputs == RUN and (status or now > 0.75)
        map: {inputs: stop, JUMP: stop, STATUS: STUCK, jump_: not jump_}
      back:
        set: inputs == stop and u < 0.25
        map: {inputs: run, JUMP: start, STATUS: invalid_input, RAFT_JUMP_GO: sign(x) * raft_RUN}
    flow:
      map: {x: (z * steps - x) / (1 s), z: (x - z) / (2 s)}
      method: euler
    outputs:
      drive: {value: "clamp(raft_clamp, 0, 1) + raft_step * raft_now + raft_now + step(u) + step_x(u)", range: [0, 9]}
      text: {value: "read(now) + defaults(now) + isign(u) + sign(now - u) + new_drive + floor(x * raft_step)"}
      i: {value: inputs}
      a: {type: bool, value: jumped(go) or valid(u)}
      lifted: {value: "lift(u, 2 * now) + lift_per(u) - lift_z(now) * lookup2(now, u)"}
      b: {type: bool, value: (not status) == (u > 0.5)}
"""

HOSTILE = r"""
    law: hostile
    about: "*/ int a; /* // ??/ \\ caf\u00e9 \t *\\ /\\* end \\"
    step: 1 s
    inputs:
      level: {range: [0, 1], about: "*\\ int b; ??/ /\\*"}
    tables:
      curve: {x: [0, 1], y: [0, 1]}
    outputs:
      drive: {value: "curve(level)", about: "*/"}
"""


def random_law(seed: int) -> Law:
    return read(law_text(random.Random(seed), f"random_{seed}").encode(), f"random_{seed}.yaml")


@cache
def laws() -> tuple[Law, ...]:
    """The laws of the clone, difficult ones, and some random ones."""
    difficult = [law_of(t) for t in (SMALLEST, COLLIDING, HOSTILE)]
    return (*(load(path) for path in SPECS), *difficult, *(random_law(seed) for seed in range(RANDOM_LAWS)))


@cache
def generated(number: str) -> Mapping[str, str]:
    """All their files."""
    return {name: text for law in laws() for name, text in generate(law, number=number).items()}


@cache
def bilge_pump() -> Mapping[str, str]:
    return generate(load(ROOT / "specs" / "bilge_pump.yaml"))


def written(files: Mapping[str, str], folder: Path) -> list[str]:
    """Writes the files; the names of the sources."""
    for name, text in files.items():
        (folder / name).write_text(text, encoding="ascii")
    return sorted(n for n in files if n.endswith(".c"))
