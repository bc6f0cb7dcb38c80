"""Commands and options."""

from __future__ import annotations

import argparse

from hybgen.version import VERSION

TYPE_CHECKING = False
if TYPE_CHECKING:
    from fractions import Fraction

SHAPES = ("two-point", "modes", "pi", "empty")
STAGES = ("law", "step", "program", "c")
_EPILOG = (
    "Exit: 0 nothing wrong, 1 findings, 2 wrong usage or unreadable file, 3 a fault in hybgen. "
    "Simulation is not a safety case."
)


def parser() -> argparse.ArgumentParser:
    """The command line."""
    top = argparse.ArgumentParser(
        prog="hybgen", description="Hybrid feedback laws: check, generate C, verify bit for bit.", epilog=_EPILOG
    )
    top.add_argument("--version", action="version", version=f"hybgen {VERSION}")
    commands = top.add_subparsers(dest="command", required=True, metavar="COMMAND")
    _law(commands, "check", "check a law: language, units, names, reachability, memory kept over jumps")
    _generate(commands)
    sil = _law(commands, "sil", "compare reference and compiled C, bit for bit, at every step")
    sil.add_argument("--target", default="host", choices=("host",), help="where the C runs (this version: host)")
    sil.add_argument("--lanes", type=_count, default=2048, metavar="N", help="runs side by side (default 2048)")
    sil.add_argument("--steps", type=_count, default=1000, metavar="N", help="steps of each run (default 1000)")
    sil.add_argument("--inputs", metavar="FILE", help="replay a recorded log (CSV) instead")
    sil.add_argument(
        "--replay", metavar="FILE", help="where a difference is written as a log (default NAME_replay.csv)"
    )
    show = _law(commands, "show", "print what a stage made of a law")
    show.add_argument("--stage", default="step", choices=STAGES, help="default: step")
    preflight = _law(commands, "preflight", "check, generate, compile, self-test, compare; evidence into a folder")
    preflight.add_argument("--to", default=None, metavar="DIR", help="evidence folder (default NAME_evidence)")
    new = _common(commands.add_parser("new", help="write a commented law to start from"))
    new.add_argument("name", metavar="NAME", help="a C identifier; the file is NAME.yaml")
    new.add_argument("--shape", default="two-point", choices=SHAPES, help="default: two-point")
    new.add_argument("--to", default=".", metavar="DIR", help="folder to write into")
    explain = _common(commands.add_parser("explain", help="say what a code means"))
    explain.add_argument("code", nargs="?", metavar="CODE", help="such as HG203; left out: all of them")
    schema = _common(commands.add_parser("schema", help="print the JSON Schema of law files, for editors"))
    schema.set_defaults(quiet=False)
    completion = commands.add_parser("completion", help="print a completion script for a shell")
    completion.add_argument("shell", choices=("bash", "zsh", "tcsh"))
    return top


def _common(command: argparse.ArgumentParser) -> argparse.ArgumentParser:
    command.add_argument("--json", metavar="FILE", help="the result as JSON ('-': to stdout)")
    command.add_argument("--quiet", action="store_true", help="print nothing for people")
    command.add_argument("--colour", choices=("auto", "always", "never"), default="auto", help="default: auto")
    command.add_argument("--debug", action="store_true", help="show the traceback of a fault in hybgen")
    return command


def _generate(commands: argparse._SubParsersAction[argparse.ArgumentParser]) -> None:
    generate = _law(commands, "generate", "write NAME.h and NAME.c, with --selftest a test of the target")
    generate.add_argument("--to", default=".", metavar="DIR", help="folder to write into (made if missing)")
    generate.add_argument(
        "--conversions", action="store_true", help="fixed32: functions between physical and raw values in NAME.h"
    )
    generate.add_argument(
        "--selftest",
        action="store_true",
        help="NAME_selftest.c too: run on the target, it answers 0 if every bit is right",
    )


def _law(
    commands: argparse._SubParsersAction[argparse.ArgumentParser], name: str, about: str
) -> argparse.ArgumentParser:
    command = _common(commands.add_parser(name, help=about))
    command.add_argument("law", metavar="LAW", help="the law file")
    command.add_argument(
        "--fail-on",
        choices=("error", "warning", "open"),
        default="error",
        help="least finding that fails (default error)",
    )
    command.add_argument("--step", type=_time, metavar="TIME", help="another step, such as '50 ms'")
    command.add_argument("--number", choices=("float32", "float64", "fixed32"), help="another number format")
    return command


def _count(text: str) -> int:
    if not text.isdigit() or not 0 < int(text) <= 10**7:
        raise argparse.ArgumentTypeError(f"a whole number from 1 to 10000000 is needed, not '{text}'")
    return int(text)


def _time(text: str) -> Fraction:
    """A time as it is written in a law."""
    from hybgen.diag.finding import Findings
    from hybgen.diag.span import Span
    from hybgen.expr.constant import value_in
    from hybgen.expr.parser import parse
    from hybgen.expr.units import SECOND

    findings = Findings()
    expr = parse(text, lambda offset, length: Span("--step", 1, offset + 1, length, text), findings)
    found = value_in(expr, SECOND, findings) if expr is not None else None
    if found is None or found[0] <= 0:
        raise argparse.ArgumentTypeError(f"a time is needed, such as '50 ms', not '{text}'")
    return found[0]
