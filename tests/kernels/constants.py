"""Prints hybgen/kernels/constants.py: `python tests/kernels/constants.py`."""

from __future__ import annotations

import mpmath as mp

from tests.kernels.minimax import OFFSET

PLACES = 1280


def main() -> None:
    """Prints the module: value * 2**places, cut."""
    mp.mp.prec = PLACES + 64
    rows = {
        "TWO_OVER_PI": 2 / mp.pi,
        "HALF_PI": mp.pi / 2,
        "LOG2_E": 1 / mp.log(2),
        "LN2": mp.log(2),
        "SQRT2": mp.sqrt(2),
        "LOG_OFFSET": OFFSET,
    }
    print(
        '"""Constants as (integer, places): integer * 2**-places, cut. Printed by `python tests/kernels/constants.py`."""\n'
    )
    for name, value in rows.items():
        places = PLACES if name == "TWO_OVER_PI" else 192
        digits = f"0x{int(mp.floor(value * mp.mpf(2) ** places)):X}"
        print(f"{name} = ({digits}, {places})" if len(digits) < 100 else f"{name} = (\n    {digits},\n    {places},\n)")


if __name__ == "__main__":
    main()
