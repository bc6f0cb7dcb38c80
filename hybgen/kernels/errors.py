"""Stated error bounds of the elementary functions, in units in the last place of the exact result (of the smallest subnormal below
the normal range).

float32: above the worst of every float (`python -m tests.kernels.every_float`; atan2 and hypot: 2**30 pairs). float64: above
what tests/kernels finds against mpmath on random and worst-case points. `wrap` is rounded once, next to pi to the float below pi.
"""

from __future__ import annotations

ULP: dict[str, dict[str, float]] = {
    "float32": {
        "sqrt": 0.5,
        "sin": 0.52,
        "cos": 0.52,
        "tan": 0.54,
        "asin": 0.53,
        "acos": 0.53,
        "atan2": 0.53,
        "exp": 0.53,
        "log": 0.53,
        "tanh": 0.6,
        "hypot": 0.52,
        "wrap": 0.63,
    },
    "float64": {
        "sqrt": 0.5,
        "sin": 0.51,
        "cos": 0.51,
        "tan": 0.51,
        "asin": 0.51,
        "acos": 0.51,
        "atan2": 0.51,
        "exp": 0.51,
        "log": 0.51,
        "tanh": 0.51,
        "hypot": 0.51,
        "wrap": 0.51,
    },
}

RELATIVE: dict[str, float] = {
    **dict.fromkeys(ULP["float32"], 2.0**-29),
    "tan": 2.0**-28,
    "tanh": 2.0**-27,
}
"""Fixed point: the error is at most half a unit of the result's resolution and this share of the result (tests/kernels)."""
