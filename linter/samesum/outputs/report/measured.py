"""Trial and bias evidence as what the report draws."""

from __future__ import annotations

from samesum.evidence.choosing.selection import HEADLINE, Selection
from samesum.evidence.choosing.tally import WIDTH
from samesum.evidence.trial.outcome import CaseTrial, TrialEvidence
from samesum.outputs.amounts import amount, share, two_shares
from samesum.outputs.bias_text import sentence
from samesum.outputs.report.figures import CaseSpread, ClosingStep, Histogram
from samesum.reviewing.measured import headline
from samesum.written import of_reference, whole

MOST_CASES = 40


def case_spreads(trial: TrialEvidence) -> tuple[CaseSpread, ...]:
    """The cases that are drawn: all of them, or the first so many."""
    result = trial.graph.model.result
    unit = result.unit.text if result is not None else ""
    return tuple(_case(trial.case(place), unit) for place in range(min(len(trial), MOST_CASES)))


def _case(case: CaseTrial, unit: str) -> CaseSpread:
    low, high, reference = case.lowest, case.highest, case.reference
    note = ""
    if case.outside:
        note = "outside the rulebook"
    elif low is None:
        note = "no result on any route"
    elif not case.complete:
        note = "bounds may lie further apart: not all of it could be settled in the time given"
    return CaseSpread(
        name=case.name,
        routes="" if case.routes is None else f"{whole(case.routes)} route{'' if case.routes == 1 else 's'}",
        low=None if low is None else low.value,
        reference=None if reference is None else reference.value,
        high=None if high is None else high.value,
        low_text="" if low is None else amount(low.issued, unit),
        reference_text="" if reference is None else amount(reference.issued, unit),
        high_text="" if high is None else amount(high.issued, unit),
        spread=case.spread,
        note=note,
    )


def closing_steps(trial: TrialEvidence) -> tuple[ClosingStep, ...]:
    """The order of closing."""
    return tuple(ClosingStep(step.general, step.left) for step in trial.closing)


def worst_case(trial: TrialEvidence) -> str:
    """What is known of all projects, not only the cases given."""
    proof = trial.proof
    if proof.low is None and proof.high is None:
        return ""
    low = of_reference(proof.low) if proof.low is not None else "something"
    everywhere = "Over all projects in the declared domains, results"
    if proof.high is None:
        above = f"there is no bound above, for {proof.unbounded}" if proof.unbounded else "no bound above was proved"
        return f"{everywhere} can lie at least {low} apart; {above}."
    if proof.low == proof.high == 0:
        return f"{everywhere} are proved not to lie apart."
    if proof.low is not None:
        low, high = two_shares(proof.low, proof.high)
    else:
        high = share(proof.high)
    return f"{everywhere} can lie {low} apart, and are proved to lie at most {high} apart."


def proved(trial: TrialEvidence) -> str:
    """What was proved for all projects, in a sentence; "" when nothing was."""
    proof = trial.proof
    if proof.verdict not in ("single route", "same number", "within tolerance") or not proof.says:
        return ""
    return f"Proved: {proof.says}."


def histogram_of(selection: Selection) -> Histogram | None:
    """Everybody on the reference beside the headline behaviour; None where nothing was simulated."""
    mandated, chosen = selection.histograms.get("mandated"), selection.histograms.get(HEADLINE)
    first = next((each for each in selection.figures if each.behaviour == "mandated"), None)
    second = headline(selection.figures)
    if not mandated or not chosen or first is None or second is None:
        return None
    used = [number for number, pair in enumerate(zip(mandated, chosen, strict=True)) if any(pair)]
    low, high = max(min(used) - 1, 0), min(max(used) + 2, len(mandated))
    totals = (sum(mandated), sum(chosen))
    return Histogram(
        tuple(round(number * WIDTH, 10) for number in range(low, high + 1)),
        tuple(count / totals[0] for count in mandated[low:high]),
        tuple(count / totals[1] for count in chosen[low:high]),
        first.over_issuance,
        second.over_issuance,
        "Everybody uses the reference",
        "Developers take a second look",
        sentence(selection),
        "the last bar holds all above" if high == len(mandated) else "",
    )
