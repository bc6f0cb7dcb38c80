"""The terminal: what is printed, and where."""

from __future__ import annotations

import argparse
import json
import os
import sys
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

from hybgen.cli.files import write
from hybgen.diag.finding import Finding


@dataclass(frozen=True, slots=True)
class Console:
    """Prints for people to stdout (stderr while JSON goes to stdout), progress to a terminal's stderr only."""

    quiet: bool
    json: str | None
    colour: bool

    def say(self, text: str) -> None:
        """A line for people."""
        if not self.quiet:
            print(text, file=sys.stderr if self.json == "-" else sys.stdout)

    def data(self, value: Any) -> None:
        """The result as JSON, where it was asked for."""
        if self.json is None:
            return
        text = json.dumps(value, indent=2, ensure_ascii=False, allow_nan=False) + "\n"
        if self.json == "-":
            sys.stdout.write(text)
        else:
            write(Path(self.json), text)

    def progress(self, what: str, done: int, total: int) -> None:
        """A line that is written over; nothing in a pipe."""
        if self.quiet or not sys.stderr.isatty():
            return
        bar = "#" * (20 * done // max(1, total))
        end = "\r\x1b[K" if done >= total else ""
        sys.stderr.write(f"\r{what} [{bar:<20}] {done}/{total}{end}")
        sys.stderr.flush()


def wants_colour(choice: str) -> bool:
    """always, never, or auto: on a terminal without NO_COLOR."""
    if choice != "auto":
        return choice == "always"
    return sys.stdout.isatty() and not os.environ.get("NO_COLOR")


def placed(findings: tuple[Finding, ...], options: argparse.Namespace) -> tuple[Finding, ...]:
    """Findings whose places name the law's file as it was given, so that an editor can open it."""
    name = Path(options.law).name
    return tuple(replace(f, where=replace(f.where, file=options.law)) if f.where.file == name else f for f in findings)
