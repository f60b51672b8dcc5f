"""``samesum report``: one page to read, print and hand on."""

from __future__ import annotations

import argparse
import hashlib
from pathlib import Path
from typing import TYPE_CHECKING

from samesum.cli import gathered, shared

if TYPE_CHECKING:
    from samesum.outputs.report.page import Extra


MOST_FINDINGS = 8
"""Findings that are told of one place."""


def add_arguments(parser: argparse.ArgumentParser) -> None:
    parser.add_argument("file", metavar="FILE", type=Path, help="a .rulebook file")
    parser.add_argument("-o", "--output", type=Path, metavar="OUT.html", help="where to (standard output)")
    shared.add_inputs(parser)
    gathered.add_projects(parser)
    parser.add_argument(
        "--rules", metavar="DIR", type=Path, action="append", default=[], help="a folder of further rules"
    )
    shared.add_seconds(parser)


def run(arguments: argparse.Namespace) -> int:
    output = arguments.output
    if output is not None and output.suffix.lower() not in ("", ".html", ".htm"):
        return shared.refuse(f"{output}: the report is a page; write -o {output.with_suffix('.html').name}")
    found = gathered.gather_register(arguments.file, gathered.wanted(arguments))
    if found is None:
        return shared.UNUSABLE
    extra = _extra(found, arguments)
    if extra is None:
        return shared.UNUSABLE
    from samesum.outputs.report.page import report_page

    return shared.deliver(report_page(found.register, found.examined.reading.text, extra), arguments.output)


def _extra(found: gathered.Gathered, arguments: argparse.Namespace) -> Extra | None:
    from samesum.outputs.report import measured
    from samesum.outputs.report.page import Extra

    findings = _findings(found, arguments)
    if findings is None:
        return None
    by_place, rules = findings
    trial, selection = found.tried.trial, found.tried.selection
    origins = [("Rules", rules), ("Time for each analysis", f"{arguments.seconds:g} s")]
    if arguments.inputs is not None:
        origins.append(("Cases", str(arguments.inputs)))
        origins.append(("Cases, SHA-256", hashlib.sha256(arguments.inputs.read_bytes()).hexdigest()))
    if selection is not None:
        origins.append(("Simulation", f"{selection.projects:,} projects, seed {selection.terms.seed}"))
    origins += [("Left out", note) for note in found.notes]
    return Extra(
        cases=measured.case_spreads(trial) if trial is not None else (),
        closing=measured.closing_steps(trial) if trial is not None else (),
        closing_complete=trial is None or trial.closing_complete,
        worst_case=measured.worst_case(trial) if trial is not None else "",
        proved=f"{trial.proof.says[0].upper()}{trial.proof.says[1:]}."
        if trial is not None and trial.proof.says
        else "",
        histogram=measured.histogram_of(selection) if selection is not None else None,
        findings=by_place,
        origins=tuple(origins),
        mistakes=len(found.examined.problems),
    )


def _findings(
    found: gathered.Gathered, arguments: argparse.Namespace
) -> tuple[dict[str, list[tuple[str, str]]], str] | None:
    """What the lint rules say of each place, and which rules they are."""
    from samesum.evidence.subjects.all_subjects import subjects_of
    from samesum.judging.judge import judge
    from samesum.judging.rulebooks_rules import RulesFor
    from samesum.reading.read import default_cache_folder, make_reader

    evidence = found.examined.evidence
    assert evidence is not None
    chosen = RulesFor(make_reader(default_cache_folder()), arguments.rules).rulebook(arguments.file)
    if chosen.problems:
        shared.report(chosen.problems)
        return None
    subjects = subjects_of(evidence, found.examined.problems, arguments.seconds / 2)
    by_place: dict[str, list[tuple[str, str]]] = {}
    for finding in judge(evidence.model.file, subjects, chosen.rules).findings:
        by_place.setdefault(finding.branch_point, []).append((finding.severity, finding.says))
    for told in by_place.values():
        more = len(told) - MOST_FINDINGS
        if more > 1:
            told[MOST_FINDINGS:] = [("", f"and {more} more; `samesum check` lists them all.")]
    return by_place, f"{chosen.rules.version}, {chosen.rules.hash}"
