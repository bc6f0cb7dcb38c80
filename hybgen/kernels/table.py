"""The operations that are kernels, by name: elementary functions of floats, arithmetic and functions of fixed point."""

from __future__ import annotations

from hybgen.kernels import fixed, floats, integers
from hybgen.kernels.word import ELEMENTARY, Kernel

FIXED: dict[str, int] = {
    **{name: len(words.split()) for name, (words, _, _) in integers.ARITHMETIC.items()},
    **{f"fixed_{name}": 2 * count + 1 for name, count in ELEMENTARY.items()},
}
"""Operations of fixed point: name -> number of arguments, all of them int32_t."""
ARITY = ELEMENTARY | FIXED


def kernel(operation: str, number_format: str) -> Kernel:
    """The kernel of an operation (a key of ARITY) in float32, float64 or fixed32."""
    if operation in integers.ARITHMETIC:
        return integers.arithmetic(operation)
    if operation in FIXED:
        return fixed.kernel(operation.removeprefix("fixed_"))
    return floats.kernel(operation, number_format)
