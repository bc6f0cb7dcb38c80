"""`hybgen --help` against `python -c pass`: the ratio of the best of many runs.

python tests/bench/start.py
"""

from __future__ import annotations

import subprocess
import sys
import time
from pathlib import Path


def best(command: list[str]) -> float:
    """The shortest of 30 runs, in seconds."""
    times = []
    for _ in range(30):
        start = time.perf_counter()
        subprocess.run(command, check=True, stdout=subprocess.DEVNULL)
        times.append(time.perf_counter() - start)
    return min(times)


def main() -> None:
    """Prints both times and their ratio."""
    bare = best([sys.executable, "-c", "pass"])
    help_ = best([str(Path(sys.executable).with_name("hybgen")), "--help"])
    print(f"python -c pass {bare * 1e3:.1f} ms, hybgen --help {help_ * 1e3:.1f} ms, ratio {help_ / bare:.2f}")


if __name__ == "__main__":
    main()
