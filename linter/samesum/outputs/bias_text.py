"""What ``samesum bias`` tells people: a sentence for a committee, tables, and issued/true as bars side by side."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from typing import Any

from samesum.evidence.choosing.latitudes import Latitude
from samesum.evidence.choosing.selection import HEADLINE, Closure, Estimate, Figure, Found, Selection
from samesum.evidence.choosing.tally import BINS, WIDTH
from samesum.outputs.amounts import amount
from samesum.outputs.page import CAUTION, Page, Paper
from samesum.outputs.tables import table_lines
from samesum.written import whole

MOST_CLOSED = 6
_NO_ERROR = 5e-7  # what is below is rounding, not chance
_KINDS = {"choice": "choice", "overlap": "overlap", "setting": "free value", "judgement": "judgement"}


Routes = Mapping[tuple[str, str, str], Any]


def bias_text(selection: Selection, paper: Paper, routes: Routes | None = None) -> str:
    """The whole answer for people. ``routes``: the counts that closing leaves, where they were asked for."""
    page = Page(paper)
    draft = f", draft {selection.model.draft}" if selection.model.draft else ""
    page.paragraph(f"{selection.model.title}{draft}", style="strong")
    page.blank()
    page.paragraph(sentence(selection))
    page.blank()
    page.paragraph(_drawn_from(selection), style="quiet")
    page.heading("When everybody does the same")
    _behaviours(page, selection.figures)
    if selection.terms.join is not None:
        page.blank()
        _enrolment(page, selection)
    page.heading("Issued against true, project by project")
    _bars(page, selection.histograms)
    _over_periods(page, selection)
    page.heading("Where it comes from")
    _ranking(page, selection)
    closable = [
        each
        for each in selection.ranking
        if each.closures and (abs(each.per_thousand) >= 0.05 or _beyond(each) not in ("0.0", "–"))
    ]
    if closable:
        page.heading("What closing a branch point leaves")
        for found in closable[:MOST_CLOSED]:
            _closures(page, found, routes or {})
        if len(closable) > MOST_CLOSED:
            page.blank()
            page.paragraph(f"… and {len(closable) - MOST_CLOSED} more with --json.", style="quiet")
    page.blank()
    page.paragraph(CAUTION, style="quiet")
    return page.text


def sentence(selection: Selection) -> str:
    """What a committee member needs to know, in one sentence or two."""
    chosen = _of(selection.figures, HEADLINE)
    mandated = _of(selection.figures, "mandated")
    if chosen is None or mandated is None:
        return "There is nothing that anybody chooses here."
    acting = [each for each in selection.ranking if each.latitude.by == "developer" and each.latitude.kind != "stated"]
    if not acting:
        return (
            f"Nothing here is left to the developer: of every 1,000 t that are true, the programme issues "
            f"{_tonnes(1000 + 1000 * mandated.over_issuance)} t."
        )
    said = (
        f"For every 1,000 t that are true, the programme issues {_tonnes(1000 + 1000 * chosen.over_issuance)} t when "
        f"developers try the cheapest option first and look again when it comes out short, and "
        f"{_tonnes(1000 + 1000 * mandated.over_issuance)} t when all have to use the reference"
    )
    first = acting[0]
    if first.per_thousand >= max(0.05, 2 * first.per_thousand_error):
        said += f"; most comes from {_name(first.latitude)}, {_tonnes(first.per_thousand)} t by itself"
    return said + "."


def _name(latitude: Latitude) -> str:
    return f"{latitude.id} (clause {latitude.clause})" if latitude.clause else latitude.id


def _tonnes(value: float) -> str:
    return f"{value:,.0f}" if abs(value) >= 9.95 else f"{value:.1f}"


def _percent(value: float, places: int = 2) -> str:
    if not math.isfinite(value):
        return "–"
    shown = f"{100 * value:,.{places}f}"
    if not shown.strip("-0."):
        shown = shown.replace("-", "")
    return f"{shown} %"


def _more(value: float) -> str:
    text = _percent(value)
    return text if text.startswith(("-", "–", "0.00")) else f"+{text}"


def _error(value: float) -> str:
    if not math.isfinite(value):
        return "–"
    return "exact" if value == 0 else f"± {100 * value:,.2f}"


def _of(figures: Sequence[Figure], behaviour: str) -> Figure | None:
    return next((each for each in figures if each.behaviour == behaviour), None)


def _drawn_from(selection: Selection) -> str:
    supply = selection.supply
    text = f"{selection.projects:,} projects, "
    if supply.cases:
        kept = supply.cases - supply.outside - supply.without_result
        text += f"each of {whole(kept)} given ones in turn"
        left = [
            f"{whole(count)} {what}"
            for count, what in (
                (supply.outside, "outside the rulebook"),
                (supply.without_result, "without a result on the reference route"),
            )
            if count
        ]
        text += f" ({' and '.join(left)} left out)" if left else ""
    else:
        text += "drawn from the declared domains (those without a result on the reference route drawn again)"
    text += f"; seed {selection.terms.seed}"
    if selection.terms.price is not None:
        text += f"; {amount(selection.terms.price)} a credit"
    else:
        text += "; no price given, so that costs only say what is tried first"
    return text + ". A project counts by its tonnes; ± is one standard error."


def _behaviours(page: Page, figures: Sequence[Figure]) -> None:
    rows = []
    for each in figures:
        closed = "" if each.closed_form is None else f"{_more(each.simulated)} {_error(each.simulated_error)}"
        name = f"{each.behaviour}: {each.option}" if each.option else each.behaviour
        formula = each.closed_form is not None and each.standard_error < _NO_ERROR
        exact = "by formula" if formula else _error(each.standard_error)
        rows.append((name, _more(each.over_issuance), exact, _percent(each.over_credited, 0), closed))
    titles = ["behaviour", "over-issued", "±", "projects over-credited"]
    if any(row[4] for row in rows):
        titles.append("simulated")
    numbers = titles[1:]
    page.lines += table_lines(titles, [row[: len(titles)] for row in rows], page.paper, numbers=numbers)
    if any(each.closed_form is not None and each.standard_error >= _NO_ERROR for each in figures):
        page.paragraph(
            "Where a simulated figure stands beside it, over-issued is by formula, weighted by what the choice is "
            "worth in the projects simulated; its ± is that of the weights.",
            style="quiet",
        )


def _enrolment(page: Page, selection: Selection) -> None:
    k = selection.terms.join or 0.0
    page.paragraph(f"When only projects join that would be credited more than {amount(k)} × their truth:")
    rows = []
    for each in selection.figures:
        if each.joined is not None:
            name = f"{each.behaviour}: {each.option}" if each.option else each.behaviour
            found = each.joined
            rows.append((name, _more(found.over_issuance), _error(found.standard_error), _percent(found.share, 0)))
    titles = ("the estimate errs", "over-issued", "±", "join")
    page.lines += table_lines(titles, rows, page.paper, numbers=titles[1:])
    scattered = [
        (
            f"{found.latitude.id}: {option}",
            _more(each.over_issuance),
            _error(each.standard_error),
            _percent(each.share, 0),
        )
        for found in selection.found
        for option, each in found.truth_scatters.items()
    ]
    if scattered:
        titles = ("the truth scatters around a fixed average", *titles[1:])
        page.lines += table_lines(titles, scattered, page.paper, numbers=titles[1:])


def _bars(page: Page, histograms: Mapping[str, tuple[int, ...]]) -> None:
    """Two histograms back to back around issued/true, in steps of 0.1."""
    steps = 2
    left, right = (
        [sum(histograms[name][at : at + steps]) for at in range(0, BINS, steps)] for name in ("mandated", HEADLINE)
    )
    used = [number for number in range(len(left)) if left[number] or right[number]]
    if not used:
        page.paragraph("No project has true credits above zero.")
        return
    room = (page.paper.width - 15) // 2
    whole = max(sum(left), 1), max(sum(right), 1)
    longest = max(max(left) / whole[0], max(right) / whole[1])
    titles = "all on the reference", "as developers choose"
    if room >= max(map(len, titles)):
        page.lines.append(f"{titles[0]:>{room}}  issued/true  {titles[1]}")
    else:
        page.paragraph(f"Issued/true in the middle; to the left {titles[0]}, to the right {titles[1]}.")
    for number in range(used[0], used[-1] + 1):
        low, high = number * WIDTH * steps, (number + 1) * WIDTH * steps
        label = f"{low:.1f} to {high:.1f}" if number < len(left) - 1 else f"{low:.1f} and up"
        shares = left[number] / whole[0], right[number] / whole[1]
        bars = [_bar(share / longest * room) for share in shares]
        over = number * steps >= BINS // 2
        shown = page.styled(bars[1], "bad" if over else "quiet") if bars[1] else ""
        page.lines.append(f"{bars[0]:>{room}}  {label:^11}  {shown}".rstrip())


def _bar(length: float) -> str:
    full = int(length)
    if length <= 0:
        return ""
    return "█" * full + ("▌" if length - full >= 0.5 or not full else "")


def _over_periods(page: Page, selection: Selection) -> None:
    found = next((each for each in selection.periods if each.behaviour == HEADLINE), None)
    if found is None:
        return
    page.heading(f"Over the {selection.model.periods} periods")
    titles = ("second look, all periods together", "as written", "all fixed at validation")
    rows = []
    readings = (("each option errs alike in every period", found.stay), ("every estimate is made anew", found.anew))
    for name, by in readings:
        rows.append((name, *(_with_error(by.get(key)) for key in ("as written", "all fixed"))))
    page.lines += table_lines(titles, rows, page.paper, numbers=titles[1:])


def _with_error(found: Estimate | None) -> str:
    if found is None or not math.isfinite(found.value):
        return "–"
    return f"{_more(found.value)} {_error(found.error)}" if found.error else _more(found.value)


def _ranking(page: Page, selection: Selection) -> None:
    rows = []
    for each in selection.ranking:
        latitude = each.latitude
        if latitude.kind == "stated":
            continue
        rows.append(
            (
                f"{each.per_thousand:+,.1f}" if abs(each.per_thousand) >= 0.05 else "0.0",
                f"{each.per_thousand_error:,.1f}" if each.per_thousand_error else "exact",
                _beyond(each),
                latitude.id,
                latitude.clause,
                _KINDS[latitude.kind],
                latitude.by,
            )
        )
    if not rows:
        page.paragraph("Nobody decides anything that moves the result.")
        return
    page.paragraph(
        "Tonnes over-issued for 1,000 true by a second look, each by itself with everything else on its reference. Of "
        "the whole, above, only what the developer decides is part."
    )
    page.paragraph(_held_true(selection))
    titles = ("t", "±", "if all is picked", "branch point", "clause", "what", "who decides")
    page.lines += table_lines(titles, rows, page.paper, numbers=titles[:3])


def _held_true(selection: Selection) -> str:
    """What counts as the truth, of all that is decided here: nobody should have to guess it."""
    kinds = {each.latitude.kind for each in selection.found}
    said = []
    if "choice" in kinds:
        said.append("of a choice its reference, else the option with the lowest stated error, else the first")
    if "overlap" in kinds:
        said.append("of branches that overlap the first")
    if "setting" in kinds:
        said.append("of a free value the middle of its domain")
    if "judgement" in kinds:
        said.append("of a judgement yes")
    return f"Taken as true: {'; '.join(said)}." if said else ""


def _reference(found: Found) -> float:
    """What is over-issued when everybody takes the reference."""
    latitude = found.latitude
    name = latitude.candidates[latitude.reference] if latitude.kind != "overlap" else "in order"
    figures = (each for each in found.figures if each.behaviour == "mandated" and each.option == name)
    return next((each.over_issuance for each in figures), 0.0)


def _beyond(found: Found) -> str:
    """The same for the developer who works out every option and keeps the one that credits most."""
    picked = _of(found.figures, "pick of all")
    if picked is None:
        return "–"
    exact = picked.closed_form is not None and not found.latitude.withheld
    tonnes = 1000 * (picked.over_issuance - _reference(found) if exact else picked.difference)
    if found.latitude.withheld:
        tonnes = 1000 * picked.over_issuance
    return f"{tonnes:+,.1f}" if abs(tonnes) >= 0.05 else "0.0"


def _closures(page: Page, found: Found, routes: Routes) -> None:
    page.blank()
    latitude = found.latitude
    page.paragraph(f"{_name(latitude)}: {found.per_thousand:+,.1f} t for 1,000", style="strong")
    rows = []
    for each in found.closures:
        row = [_closed_how(each, latitude), _with_error(each.left), _with_error(each.whole_left)]
        paths = routes.get((latitude.id, each.kind, each.option))
        if routes:
            row.append(whole(paths["per_project_most"]) if paths is not None else "–")
        rows.append(row)
    titles = ["closed so", "left of this one", "left of the whole", *(["routes"] if routes else [])]
    page.lines += table_lines(titles, rows, page.paper, numbers=titles[1:])


def _closed_how(closure: Closure, latitude: Latitude) -> str:
    match closure.kind:
        case "mandate":
            what = "the reference" if closure.option == latitude.candidates[latitude.reference] else "all"
            return f"{closure.option} for {what}" if what == "all" else f"{closure.option} for all (the reference)"
        case "lowest":
            return "the option that credits least"
        case "fixed":
            return "fixed at validation, errors anew each period"
        case "in order":
            return "the first that holds"
    assert closure.percent is not None
    sign = "deduct" if closure.percent.value >= 0 else "add"
    error = f" ± {100 * closure.percent.error:.2f}" if closure.percent.error else ""
    return f"{closure.behaviour}, {sign} {100 * abs(closure.percent.value):.2f}{error} %"
