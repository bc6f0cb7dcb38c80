"""The entry: exit codes, faults, broken pipes."""

from __future__ import annotations

import os
import sys
from collections.abc import Sequence

OK, FINDINGS, USAGE, FAULT, INTERRUPTED = 0, 1, 2, 3, 130


def main(arguments: Sequence[str] | None = None) -> int:
    """Runs a command; gives the exit code."""
    from hybgen.cli.options import parser

    top = parser()
    try:
        chosen = top.parse_args(arguments)
    except SystemExit as stop:
        return int(stop.code or 0)
    try:
        from hybgen.cli.commands import COMMANDS

        code = COMMANDS[chosen.command](chosen)
        sys.stdout.flush()
        return code
    except BrokenPipeError:
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return OK
    except KeyboardInterrupt:
        return INTERRUPTED
    except OSError as error:
        print(f"hybgen: {error.filename or ''}: {error.strerror or error}", file=sys.stderr)
        return USAGE
    except Exception as fault:
        if getattr(chosen, "debug", False):
            raise
        print(
            f"hybgen: HG901 a fault in hybgen: {type(fault).__name__}: {fault}\n"
            "        run again with --debug and report it, with the law if you can",
            file=sys.stderr,
        )
        return FAULT
