"""HG4xx: step and number format."""

from hybgen.diag.codes.code import Code

NUMBERS = (
    Code(
        "HG401",
        "range",
        "error",
        "a constant beyond the number format",
        "float32 ends at 3.4e38, float64 at 1.8e308.",
        "high: {value: 1e60}",
        "number: float64",
    ),
    Code(
        "HG402",
        "method",
        "error",
        "no exact step for this flow",
        "method: exact needs rates that are affine in the flowing states, with coefficients that are constants.",
        "method: exact    # rate: x * x",
        "method: rk4",
    ),
    Code(
        "HG403",
        "method",
        "error",
        "the flow is too fast for the step",
        "The matrix exponential over one step is beyond every reasonable number.",
        "rate: 1e9 /s * x",
        "step: 1 us",
    ),
    Code(
        "HG404",
        "range",
        "error",
        "a timer that 32 bits of steps can't hold",
        "Timers count whole steps in a 32-bit integer: at 10 ms that ends after 248.551 days.",
        "since: {timer: 300 d}    # step: 10 ms",
        "since: {timer: 200 d}",
    ),
    Code(
        "HG405",
        "range",
        "error",
        "points of a table that fall together",
        "In the number format two points have the same x.",
        "x: [1, 1.00000001]",
        "x: [1, 1.1]",
    ),
    Code(
        "HG406",
        "range",
        "error",
        "a default that its own rule refuses",
        "The default parameters have to pass the law's assumptions in the number format too.",
        "assume: [low < high]    # with low above high",
        "assume: [low < high]",
    ),
    Code(
        "HG410",
        "rounding",
        "note",
        "a time that is no whole number of steps",
        "Times are rounded up to whole steps; the note says to which.",
        "rest: 0.25 s    # step: 100 ms",
        "rest: 0.3 s",
    ),
)
