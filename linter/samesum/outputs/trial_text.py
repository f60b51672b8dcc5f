"""What ``samesum trial`` answers, for people."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence

from samesum.evidence.routes.witness import Value
from samesum.evidence.trial.blame import Blame
from samesum.evidence.trial.examples import Example, described
from samesum.evidence.trial.outcome import CaseTrial, TrialEvidence
from samesum.evidence.trial.working import Line, in_unit
from samesum.outputs.amounts import amount, share, short_share, two_shares
from samesum.outputs.counts import title_of
from samesum.outputs.page import CAUTION, Page, Paper, clean, width_of
from samesum.outputs.projects import Words, words_for
from samesum.outputs.projects import given as given_value
from samesum.written import of_reference, whole

MOST_CASES = 12
MOST_MOVERS = 14
STYLES = {
    "single route": "good",
    "same number": "good",
    "within tolerance": "good",
    "agrees on these cases": "warn",
    "differs": "bad",
    "gap": "bad",
}


def trial_text(evidence: TrialEvidence, paper: Paper, workings: Mapping[str, Sequence[Line]]) -> str:
    """The whole answer. ``workings``: the calculation of each worked example that does not come out."""
    page = Page(paper)
    model = evidence.graph.model
    page.heading(title_of(model))
    unit = model.result.unit.text if model.result is not None else ""
    if len(evidence) <= MOST_CASES:
        spreads = [each for each in evidence.spreads() if math.isfinite(each)]
        for place in range(len(evidence)):
            _case(page, evidence.case(place), unit, max(spreads, default=0.0))
    else:
        _summary(page, evidence, unit)
    _examples(page, evidence.examples, workings)
    _movers(page, evidence)
    _proved(page, evidence)
    page.blank()
    page.paragraph(CAUTION, style="quiet")
    return page.text


def _case(page: Page, case: CaseTrial, unit: str, widest: float) -> None:
    page.blank()
    page.line(case.name, "strong")
    if case.outside:
        page.paragraph("Outside the rulebook: it does not apply to this project.", indent=4)
        return
    if case.routes == 0 or case.lowest is None or case.highest is None:
        page.paragraph("No route gives a result: this project falls into a gap.", indent=4, style="bad")
        return
    routes = "too many to count" if case.routes is None else whole(case.routes)
    results = "" if case.distinct_results is None else f", {whole(case.distinct_results)} different results"
    page.entry("routes", f"{routes}{results}", 4, 14)
    page.entry("lowest", amount(case.lowest.issued, unit), 4, 14)
    if case.reference is None:
        page.entry("reference", "none: the reference route has no result", 4, 14)
    else:
        page.entry("reference", amount(case.reference.issued, unit), 4, 14)
    page.entry("highest", amount(case.highest.issued, unit), 4, 14)
    if case.spread is not None:
        page.entry("spread", of_reference(case.spread), 4, 14)
    if case.spread:
        _bar(page, case, widest)
    if not case.complete:
        text = "Lowest and highest are what was found; that nothing lies beyond was not proved."
        if case.proved is not None and None not in case.proved:
            low, high = case.proved
            assert low is not None and high is not None
            text += f" Every result lies between {amount(low, unit)} and {amount(high, unit)}: that much is proved."
        page.paragraph(text, indent=4, style="warn")


def _bar(page: Page, case: CaseTrial, widest: float) -> None:
    """From lowest to highest, as long as the spread is against the widest; ``●`` is the reference."""
    assert case.lowest is not None and case.highest is not None and case.spread is not None
    room = max(12, min(56, page.paper.width - 20))
    length = max(3, round(room * min(1.0, case.spread / widest))) if widest else 3
    marks = ["─"] * length
    marks[0], marks[-1] = "├", "┤"
    if case.reference is not None and case.highest.value > case.lowest.value:
        share_at = (case.reference.value - case.lowest.value) / (case.highest.value - case.lowest.value)
        marks[min(length - 1, max(0, round(share_at * (length - 1))))] = "●"
    page.line(" " * 18 + "".join(marks))


def _summary(page: Page, evidence: TrialEvidence, unit: str) -> None:
    spreads = evidence.spreads()
    known = sorted(each for each in spreads if math.isfinite(each))
    outside = sum(int(each.outside.sum()) for each in evidence.figures)
    stuck = len(evidence.proof.stuck_cases)
    page.blank()
    page.line(f"{whole(len(evidence))} projects", "strong")
    if outside:
        page.entry("outside", f"{whole(outside)}: the rulebook does not apply to them", 4, 14)
    if stuck:
        page.entry("no result", f"{whole(stuck)}: they fall into a gap", 4, 14)
    if known:
        page.entry(
            "same number", f"{whole(sum(1 for each in known if each < 1e-12))}: one result on every route", 4, 14
        )
        middle = known[len(known) // 2]
        usual, most = two_shares(middle, known[-1])
        page.entry("spread", f"{usual} in the middle, {most} at most", 4, 14)
    order = sorted(
        (place for place in range(len(evidence)) if math.isfinite(spreads[place])), key=lambda p: (-spreads[p], p)
    )
    if order and spreads[order[0]] > 0:
        page.blank()
        page.line("The widest", "strong")
        for place in order[:10]:
            case = evidence.case(place)
            if case.lowest is not None and case.highest is not None:
                text = f"{amount(case.lowest.issued)} to {amount(case.highest.issued, unit)}: {share(case.spread)}"
                page.entry(case.name, text, 4, 24, "")


def _examples(page: Page, examples: Sequence[Example], workings: Mapping[str, Sequence[Line]]) -> None:
    if not examples:
        return
    page.blank()
    page.line("Worked examples", "strong")
    for example in examples:
        good = example.agrees
        page.paragraph(f"{example.case}: {described(example)}.", indent=4, style="good" if good else "bad", hanging=2)
        if not good and example.case in workings:
            _working(page, workings[example.case], 6)


def working_text(case: str, lines: Sequence[Line], issued: str, paper: Paper) -> str:
    """One calculation step by step."""
    page = Page(paper)
    page.heading(case)
    _working(page, lines, 0)
    if issued:
        page.blank()
        page.line(issued, "strong")
    return page.text


def _working(page: Page, lines: Sequence[Line], indent: int) -> None:
    for line in lines:
        page.blank()
        clause = f"   clause {line.clause}" if line.clause else ""
        page.line(" " * indent + clean(f"{line.id}{clause}"), "strong")
        for branch in line.branches:
            page.paragraph(branch, indent + 4, "quiet", 4)
        if line.formula:
            page.paragraph(f"= {line.formula}", indent + 4, hanging=4)
        if line.numbers and line.numbers != line.formula:
            page.paragraph(f"= {line.numbers}", indent + 4, hanging=4)
        if line.value is not None:
            result = in_unit(line.value, line.unit)
            if result not in (line.numbers, line.formula):
                page.paragraph(f"= {result}", indent + 4)
        elif line.trouble:
            page.paragraph(line.trouble, indent + 4, "bad")


def _movers(page: Page, evidence: TrialEvidence) -> None:
    ranked = sorted(evidence.blame, key=lambda blame: (-(blame.swing or 0.0), blame.mover.id))
    moving = [blame for blame in ranked if blame.swing or blame.left is not None]
    if not moving:
        return
    page.blank()
    page.line("Who moves the number", "strong")
    text = (
        "Alone: how far it can take the result from the reference by itself. Left: the spread when it alone is closed."
    )
    page.paragraph(text, indent=4, style="quiet")
    shown = moving[:MOST_MOVERS]
    names = [blame.mover.id for blame in shown]
    wide = min(max((width_of(name) for name in names), default=10), max(10, page.paper.width - 48))
    header = f"{'':{wide}}  {'what':<10} {'who':<10} {'alone':>9}  {'left':>9}"
    page.line("    " + header.rstrip(), "quiet")
    for blame in shown:
        page.line("    " + _row(blame, wide))
    if len(moving) > len(shown):
        page.line(f"    … and {whole(len(moving) - len(shown))} more", "quiet")
    if evidence.closing:
        page.blank()
        page.line("Close them in this order", "strong")
        for number, each in enumerate(evidence.closing, start=1):
            page.paragraph(f"{number}. {each.general}: leaves {share(each.left)}", indent=4, hanging=3)
        if not evidence.closing_complete:
            page.paragraph("The rest was not worked out in the time given; --seconds gives more.", 4, "warn")


def _row(blame: Blame, wide: int) -> str:
    name = clean(blame.mover.id)
    if width_of(name) > wide:
        name = name[: wide - 1] + "…"
    pad = " " * (wide - width_of(name))
    figures = f"{short_share(blame.swing):>9}  {short_share(blame.left):>9}"
    return f"{name}{pad}  {blame.mover.kind:<10} {blame.mover.by:<10} {figures}"


def _proved(page: Page, evidence: TrialEvidence) -> None:
    proof = evidence.proof
    words = words_for(evidence.graph.model)
    page.blank()
    page.line(f"Verdict: {proof.verdict}", STYLES[proof.verdict])
    page.paragraph(f"{proof.says[0].upper()}{proof.says[1:]}.", indent=4, hanging=0)
    failed = [example.case for example in evidence.examples if not example.agrees]
    if failed:
        listed = ", ".join(failed[:8]) + (" and others" if len(failed) > 8 else "")
        text = "The worked example does not come out" if len(failed) == 1 else "Worked examples do not come out"
        page.paragraph(f"{text}: {listed}.", indent=4, style="bad")
    if proof.verdict != "single route" and (proof.low is not None or proof.high is not None or proof.unbounded):
        low, high = two_shares(proof.low or 0.0, proof.high or 0.0)
        high = "no bound was proved" if proof.high is None else f"at most {high}, proved by {proof.by}"
        if proof.unbounded:
            high = f"there is no bound, for {proof.unbounded}"
        page.paragraph(f"Worst case over all projects: at least {low}; {high}.", indent=4)
    if proof.witness is not None and not proof.witness.case:
        page.paragraph(f"The project that was found: {_described(proof.witness.values, words)}.", 4, "quiet")
    if proof.gaps and proof.verdict != "gap":
        places = ", ".join(dict.fromkeys(gap.branch_point for gap in proof.gaps))
        page.paragraph(f"Some projects have no result: gap at {places}.", indent=4, style="bad")
    if proof.stuck_cases:
        listed = ", ".join(proof.stuck_cases[:8]) + (" and others" if len(proof.stuck_cases) > 8 else "")
        page.paragraph(f"Without a result: {listed}.", indent=4, style="bad")
    for point, branches in proof.harmless:
        text = (
            f"At {point}, branches {' and '.join(branches)} can hold together; proved harmless: they give one number."
        )
        page.paragraph(text, indent=4)


def _described(values: Mapping[str, Value | tuple[Value, ...]], words: Words) -> str:
    return ", ".join(given_value(name, value, words) for name, value in values.items())
