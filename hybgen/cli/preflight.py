"""preflight: all stages in one go, with evidence. Exit 0 only if every one of them passed."""

from __future__ import annotations

import argparse
import hashlib
import json
from collections.abc import Callable, Mapping
from dataclasses import replace
from pathlib import Path
from typing import TYPE_CHECKING

from hybgen.checks import Report, check
from hybgen.checks.report import error
from hybgen.cli.console import Console, placed
from hybgen.cli.files import write_all
from hybgen.cli.main import FINDINGS, OK
from hybgen.diag.finding import Finding, Verdict
from hybgen.diag.render import render, summary
from hybgen.diag.span import Span
from hybgen.pipeline import generate
from hybgen.reread import reread
from hybgen.selftests import selftest
from hybgen.sil import board, lockstep, toolchain
from hybgen.sil.lockstep import SilReport
from hybgen.step import build
from hybgen.version import VERSION

if TYPE_CHECKING:
    from hybgen.law import Law

Stage = Callable[[str, bool, str], bool]
CAUTION = (
    "Simulation is not a safety case. Local codes, functional-safety standards and a qualified review decide whether "
    "this code may control a machine."
)


def preflight(options: argparse.Namespace, law: Law, console: Console) -> int:
    """Runs the stages, prints a line for each, writes the evidence folder."""
    stages: list[tuple[str, bool, str]] = []

    def stage(name: str, passed: bool, text: str) -> bool:
        stages.append((name, passed, text))
        console.say(f"{'passed' if passed else 'FAILED':<7} {name}: {text}")
        return passed

    report = check(law, step=options.step, number=options.number)
    for finding in placed(report.failing("warning"), options):
        console.say(render(finding, console.colour))
    files: dict[str, str] = {}
    sil: SilReport | None = None
    if stage("check", not report.failing(options.fail_on), summary(report.findings)):
        files, sil, failed = _made(options, law, stage, console)
        report = replace(report, findings=(*report.findings, *failed))
    passed = all(p for _, p, _ in stages) and sil is not None
    folder = Path(options.to or f"{law.name}_evidence")
    evidence = _evidence(law, report, files, sil, stages, passed)
    write_all(folder, evidence)
    console.say(f"{law.name}: {'passed' if passed else 'NOT passed'}; evidence in {folder}\n{CAUTION}")
    console.data(
        {
            "law": law.name,
            "ok": passed,
            "stages": [{"stage": n, "passed": p, "text": t} for n, p, t in stages],
            "findings": [f.to_json() for f in placed(report.findings, options)],
            "sil": sil.to_json() if sil else None,
            "evidence": str(folder),
        }
    )
    return OK if passed else FINDINGS


def _made(
    options: argparse.Namespace, law: Law, stage: Stage, console: Console
) -> tuple[dict[str, str], SilReport | None, tuple[Finding, ...]]:
    """The stages from the C on: the files, what lock-step found, what the self-test found."""
    sil: SilReport | None = None
    failed: tuple[Finding, ...] = ()
    files = generate(law, step=options.step, number=options.number)
    same = files == generate(law, step=options.step, number=options.number)
    stage("generate", same, f"{', '.join(files)}, {'the same bytes twice' if same else 'not the same bytes twice'}")
    wrong = reread(build(law, step=options.step, number=options.number), files)
    told = "; ".join(f"{w.function}: {w.what}{'' if w.decided else ' (too many cases to tell)'}" for w in wrong)
    stage("reread", not wrong, told or "the C, read back, is the step law in every operation, for all inputs")
    tested = selftest(law, step=options.step, number=options.number)
    if _builds(law, files, tested, stage):
        failed = _tested(law, files, tested, stage)
        for finding in placed(failed, options):
            console.say(render(finding, console.colour))
        sil = _sil(options, law, stage, console)
    return {**files, **tested}, sil, failed


def _builds(law: Law, files: Mapping[str, str], tested: Mapping[str, str], stage: Stage) -> bool:
    try:
        for name in (law.name, f"{law.name}_selftest"):
            toolchain.warning_free({**files, **tested}, name)
    except (toolchain.NoCompiler, toolchain.CompilerRefused) as error:
        return stage("compile", False, str(error))
    return stage("compile", True, "C99 without a warning, warnings as errors")


def _tested(law: Law, files: Mapping[str, str], tested: Mapping[str, str], stage: Stage) -> tuple[Finding, ...]:
    """The self-test on this host: what is wrong, if it fails."""
    number = board.answer({**files, **tested}, law.name)
    if stage("selftest", number == 0, "0 on this host" if number == 0 else f"{number} on this host, not 0 (HG604)"):
        return ()
    message = f"{law.name}_selftest() answers {number} on this host"
    hint = f"the head of {law.name}_selftest.c says what {number} means"
    return (error("HG604", "equality", Span(law.file, 1, 1), law.name, message, hint),)


def _sil(options: argparse.Namespace, law: Law, stage: Stage, console: Console) -> SilReport:
    report = lockstep.run(
        law,
        step=options.step,
        number=options.number,
        progress=lambda done, total: console.progress("lock-step", done, total),
    )
    difference = report.first_difference
    text = f"equal in every bit over {report.steps} steps, {report.covered} of {report.conditions} conditions seen true and false"
    if difference is not None:
        text = (
            f"'{difference.field}' differs at step {difference.step} ({difference.where}): reference {difference.reference}, "
            f"C {difference.c}"
        )
    stage("sil", report.equal, text)
    return report


def _evidence(
    law: Law,
    report: Report,
    files: Mapping[str, str],
    sil: SilReport | None,
    stages: list[tuple[str, bool, str]],
    passed: bool,
) -> dict[str, str]:
    """The files of the evidence folder; no clock, host or path in them."""
    made = dict(files)
    made["findings.json"] = _json(report.to_json())
    if sil is not None:
        made["sil.json"] = _json(sil.to_json())
        if sil.first_difference is not None:
            made["replay.csv"] = sil.first_difference.replay
    made["summary.md"] = "\n".join(_summary(law, report, made, sil, stages, passed)) + "\n"
    return made


def _json(value: object) -> str:
    return json.dumps(value, indent=2, ensure_ascii=False) + "\n"


def _summary(
    law: Law,
    report: Report,
    files: Mapping[str, str],
    sil: SilReport | None,
    stages: list[tuple[str, bool, str]],
    passed: bool,
) -> list[str]:
    lines = [
        f"# Preflight of {law.name}: {'passed' if passed else 'NOT passed'}",
        "",
        law.about,
        "",
        f"hybgen {VERSION}; law file {law.file}, SHA-256 {law.digest}",
        "",
        f"> {CAUTION}",
        "",
        "## Stages",
        "",
    ]
    lines += [f"- {'passed' if p else 'FAILED'}: {n}: {t}" for n, p, t in stages]
    lines += ["", "## Findings", ""]
    lines += [
        f"- {f.severity} {f.code} ({f.property}, {f.verdict}) {f.where.place}: {f.message}"
        for f in report.findings
        if f.verdict is not Verdict.OPEN
    ] or ["- none"]
    lines += ["", "## Not decided by this version", ""]
    lines += [f"- {f.property}: {f.message}" for f in report.findings if f.verdict is Verdict.OPEN]
    if sil is not None:
        lines += ["", "## Conditions that the stimulus did not show both ways", ""]
        lines += [f"- {text}" for text in sil.open_conditions] or ["- none"]
        lines += ["", "## Jumps taken", ""] + [f"- {name}: {count}" for name, count in sil.jumps.items()]
    lines += ["", "## Files", ""] + [
        f"- {name}: SHA-256 {hashlib.sha256(text.encode()).hexdigest()}" for name, text in files.items()
    ]
    return lines
