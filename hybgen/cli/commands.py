"""The commands: each runs its stages in order, prints, writes, and gives an exit code."""

from __future__ import annotations

import argparse
import sys
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import TYPE_CHECKING, Any

from hybgen.cli.console import Console, placed, wants_colour
from hybgen.cli.files import write, write_all
from hybgen.cli.main import FINDINGS, OK, USAGE
from hybgen.diag.finding import Finding, LawError, Severity
from hybgen.diag.render import render, summary

if TYPE_CHECKING:
    from hybgen.checks import Report
    from hybgen.law import Law


def console_of(options: argparse.Namespace) -> Console:
    """The terminal as the options want it."""
    return Console(options.quiet, options.json, wants_colour(options.colour))


def load(options: argparse.Namespace, console: Console) -> Law | int:
    """The law, or an exit code after saying what is wrong with the file."""
    from hybgen.law import UnreadableFile
    from hybgen.law import load as load_law

    try:
        return load_law(options.law)
    except LawError as error:
        findings = placed(error.findings, options)
        show_findings(findings, console)
        console.data({"law": None, "ok": False, "findings": [f.to_json() for f in findings]})
        return USAGE if isinstance(error, UnreadableFile) else FINDINGS


def show_findings(findings: tuple[Finding, ...], console: Console) -> None:
    """Findings for people, and how many there are."""
    for finding in findings:
        console.say(render(finding, console.colour))
    console.say(summary(findings))


def law_command(run: Callable[[argparse.Namespace, Law, Console], int]) -> Callable[[argparse.Namespace], int]:
    """A command that works on a law."""

    def command(options: argparse.Namespace) -> int:
        console = console_of(options)
        law = load(options, console)
        if isinstance(law, int):
            return law
        try:
            return run(options, law, console)
        except LawError as error:
            findings = placed(error.findings, options)
            show_findings(findings, console)
            console.data({"law": law.name, "ok": False, "findings": [f.to_json() for f in findings]})
            return FINDINGS

    return command


def checked(options: argparse.Namespace, law: Law) -> Report:
    """The findings about a law, at the step and number format of the options."""
    from hybgen.checks import check

    report = check(law, step=options.step, number=options.number)
    return replace(report, findings=placed(report.findings, options))


def check_command(options: argparse.Namespace, law: Law, console: Console) -> int:
    """hybgen check"""
    report = checked(options, law)
    told = tuple(f for f in report.findings if f.severity is not Severity.NOTE)
    for finding in told:
        console.say(render(finding, console.colour))
    for finding in report.findings:
        if finding.severity is Severity.NOTE and finding.code != "HG390":
            console.say(f"{finding.where.place}: note {finding.code}: {finding.message} [{finding.verdict}]")
    pending = [f for f in report.findings if f.code == "HG390"]
    if pending:
        words = ", ".join(f.subject if f.property == "claims" else f.property for f in pending)
        console.say(f"not decided by this version: {words}")
    console.say(f"{law.name}: {summary(report.findings)}")
    console.data(report.to_json())
    return FINDINGS if report.failing(options.fail_on) else OK


def generate_command(options: argparse.Namespace, law: Law, console: Console) -> int:
    """hybgen generate: a law with errors gives no C."""
    from hybgen.pipeline import generate

    report = checked(options, law)
    if report.failing(options.fail_on):
        show_findings(report.failing(options.fail_on), console)
        console.data(report.to_json())
        return FINDINGS
    files = generate(law, step=options.step, number=options.number, conversions=options.conversions)
    if options.selftest:
        from hybgen.selftests import selftest

        files |= selftest(law, step=options.step, number=options.number)
    folder = Path(options.to)
    write_all(folder, files)
    for name in files:
        console.say(f"{folder / name}")
    console.data({"law": law.name, "ok": True, "files": [str(folder / n) for n in files]})
    return OK


def sil_command(options: argparse.Namespace, law: Law, console: Console) -> int:
    """hybgen sil"""
    from hybgen.sil import lockstep
    from hybgen.sil.toolchain import CompilerRefused, NoCompiler

    try:
        if options.inputs:
            return _replay(options, law, console)
        report = lockstep.run(
            law,
            lanes=options.lanes,
            steps=options.steps,
            step=options.step,
            number=options.number,
            progress=lambda done, total: console.progress("lock-step", done, total),
        )
    except (NoCompiler, CompilerRefused) as error:
        _refused(law, str(error), console)
        return FINDINGS if isinstance(error, CompilerRefused) else USAGE
    tell(report, console)
    console.data(report.to_json())
    return _difference(report, options, law, console)


def _refused(law: Law, message: str, console: Console) -> None:
    print(f"hybgen: HG602 the C of {law.name} can't be built: {message}", file=sys.stderr)
    console.data({"law": law.name, "target": "host", "equal": False, "error": message})


def _difference(report: Any, options: argparse.Namespace, law: Law, console: Console) -> int:
    difference = report.first_difference
    if difference is None:
        return OK
    path = Path(options.replay or f"{law.name}_replay.csv")
    write(path, difference.replay)
    console.say(
        f"{difference.where}: error HG601: '{difference.field}' differs at step {difference.step}, lane {difference.lane} "
        f"({difference.campaign})\n    reference {difference.reference}\n    C         {difference.c}\n"
        f"    hint: hybgen sil {options.law} --inputs {path} shows it again"
    )
    return FINDINGS


def tell(report: Any, console: Console) -> None:
    """The outcome of lock-step for people."""
    console.say(
        f"{report.law} on {report.target}: {'equal in every bit' if report.equal else 'DIFFERENT'}, {report.steps} steps "
        f"in {report.lanes} lane{'s' if report.lanes != 1 else ''}"
    )
    console.say(f"conditions seen true and false: {report.covered} of {report.conditions}")
    for text in report.open_conditions:
        console.say(f"    note HG603: {text}")
    console.say("jumps taken: " + (", ".join(f"{n} {c}" for n, c in report.jumps.items()) or "the law has none"))


def _replay(options: argparse.Namespace, law: Law, console: Console) -> int:
    from hybgen.sil.playback import play
    from hybgen.sil.replay import read_log
    from hybgen.step import build

    made = build(law, step=options.step, number=options.number)
    text = Path(options.inputs).read_text(encoding="utf-8-sig", errors="replace")
    played = play(made, read_log(text, Path(options.inputs).name, made))
    for event in played.events:
        values = ", ".join(f"{n} = {v}" for n, v in event.values.items())
        console.say(f"{event.t:12.3f} s  {event.jump}: {event.why}\n{'':17}{values}")
    tell(played.report, console)
    console.data({**played.report.to_json(), "events": [e.to_json() for e in played.events]})
    return _difference(played.report, options, law, console)


def show_command(options: argparse.Namespace, law: Law, console: Console) -> int:
    """hybgen show"""
    from hybgen.cli.stages import stage_text

    text = stage_text(law, options.stage, options.step, options.number)
    console.say(text.rstrip("\n"))
    console.data({"law": law.name, "stage": options.stage, "text": text})
    return OK


def preflight_command(options: argparse.Namespace, law: Law, console: Console) -> int:
    """hybgen preflight"""
    from hybgen.cli.preflight import preflight

    return preflight(options, law, console)


def new_command(options: argparse.Namespace) -> int:
    """hybgen new: never writes over a file."""
    from hybgen.cli.starter import starter

    console = console_of(options)
    path = Path(options.to) / f"{options.name}.yaml"
    if path.exists():
        print(f"hybgen: {path} is there already; it is left as it is", file=sys.stderr)
        return USAGE
    try:
        text = starter(options.name, options.shape)
    except LawError as error:
        print(f"hybgen: {error.findings[0].message}", file=sys.stderr)
        return USAGE
    write(path, text)
    console.say(f"{path}\nnext: hybgen preflight {path}")
    console.data({"file": str(path), "shape": options.shape})
    return OK


def explain_command(options: argparse.Namespace) -> int:
    """hybgen explain"""
    from hybgen.diag.codes import CODES
    from hybgen.diag.suggest import nearest

    console = console_of(options)
    if options.code is None:
        for code in sorted(CODES.values(), key=lambda c: c.code):
            console.say(f"{code.code}  {code.title}")
        console.data(
            [
                {"code": c.code, "property": c.property, "severity": c.severity, "title": c.title}
                for c in sorted(CODES.values(), key=lambda c: c.code)
            ]
        )
        return OK
    found = CODES.get(options.code.upper())
    if found is None:
        close = nearest(options.code.upper(), CODES)
        print(
            f"hybgen: there is no code '{options.code}'" + (f"; did you mean {close}?" if close else ""),
            file=sys.stderr,
        )
        return USAGE
    console.say(f"{found.code}: {found.title} ({found.property}, {found.severity})\n\n{found.meaning}")
    for word, example in (("bad ", found.bad), ("good", found.good)):
        if example not in ("", "—", "…"):
            console.say(f"\n{word}: " + example.replace("\\n", "\n      "))
    console.data(
        {
            "code": found.code,
            "property": found.property,
            "severity": found.severity,
            "title": found.title,
            "meaning": found.meaning,
            "bad": found.bad,
            "good": found.good,
        }
    )
    return OK


def schema_command(options: argparse.Namespace) -> int:
    """hybgen schema"""
    import json

    from hybgen.law.schema import schema

    console = console_of(options)
    if options.json is None:
        console.say(json.dumps(schema(), indent=2))
    console.data(schema())
    return OK


def completion_command(options: argparse.Namespace) -> int:
    """hybgen completion"""
    import shtab

    from hybgen.cli.options import parser

    print(shtab.complete(parser(), shell=options.shell))
    return OK


COMMANDS: dict[str, Callable[[argparse.Namespace], int]] = {
    "check": law_command(check_command),
    "generate": law_command(generate_command),
    "sil": law_command(sil_command),
    "show": law_command(show_command),
    "preflight": law_command(preflight_command),
    "new": new_command,
    "explain": explain_command,
    "schema": schema_command,
    "completion": completion_command,
}
