"""What ``samesum compare`` answers, as JSON and for people."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

from samesum.evidence.routes.closing import Bracket
from samesum.outputs.counts import FIGURES, title_of
from samesum.outputs.page import CAUTION, Page, Paper
from samesum.outputs.register_cells import bracket_text, decider, share
from samesum.reading.words import listing
from samesum.reviewing.compare import Change, Comparison, direction
from samesum.reviewing.places import Taken
from samesum.reviewing.rows import Register, Row
from samesum.written import whole


def comparison_json(found: Comparison) -> dict[str, Any]:
    """The whole answer of ``samesum compare --json``."""
    return {
        "old": _draft(found.old),
        "new": _draft(found.new),
        "added": [_row(row) for row in found.added],
        "removed": [_row(row) for row in found.removed],
        "changed": [*(_change(change) for change in found.changed), *(_taken(*pair) for pair in found.taken)],
        "closed": [row.id for row in found.closed],
        "opened": [row.id for row in found.opened],
        "paths": {
            name: {"before": _figure(before), "after": _figure(after)}
            for name, (before, after) in found.figures.items()
        },
        "free_values": {
            "before": list(found.old.evidence.counts.free_values),
            "after": list(found.new.evidence.counts.free_values),
        },
        "measured": {each.name: {"before": each.before, "after": each.after} for each in found.measured},
        "branch_points": _deltas(found) if found.measured else [],
        "growth": [
            {"name": each.name, "clause": each.clause, "says": each.says, "allowed": each.allowed}
            for each in found.growth
        ],
        "grew": found.grew,
    }


def _deltas(found: Comparison) -> list[dict[str, Any]]:
    """Swing, what is left and over-issuance of each place before and after, where either is known."""
    before = {row.id: row.measures for row in found.old.rows}
    after = {row.id: row.measures for row in found.new.rows}
    deltas = []
    for id in dict.fromkeys([*before, *after]):
        old, new = before.get(id), after.get(id)
        figures = {
            name: {"before": getattr(old, name, None), "after": getattr(new, name, None)}
            for name in ("swing", "left_if_closed", "over_issuance")
        }
        if any(each["before"] is not None or each["after"] is not None for each in figures.values()):
            deltas.append({"branch_point": id, **figures})
    return deltas


def _draft(register: Register) -> dict[str, str]:
    model = register.evidence.model
    return {"file": model.file, "rulebook": model.title, "draft": model.draft}


def _row(row: Row) -> dict[str, Any]:
    return {
        "branch_point": row.id,
        "clause": row.place.clause,
        "kind": row.kind,
        "who_decides": row.decides or "nobody",
        "wording": row.place.wording,
    }


def _change(change: Change) -> dict[str, Any]:
    return {
        **_row(change.after),
        "closed": change.closed,
        "opened": change.opened,
        "changes": [{"what": name, "before": old, "after": new} for name, old, new in change.aspects],
        "not_worked_out": list(change.unsure),
    }


def _taken(before: Taken, after: Taken) -> dict[str, Any]:
    return {
        "branch_point": after.id,
        "clause": after.clause,
        "kind": after.kind,
        "who_decides": "nobody",
        "wording": after.wording,
        "closed": False,
        "opened": False,
        "changes": [{"what": "what is taken", "before": before.text, "after": after.text}],
        "not_worked_out": [],
    }


def _figure(figure: Bracket) -> Any:
    return figure.high if figure.exact else {"at_least": figure.low, "at_most": figure.high}


# --- for people ----------------------------------------------------------------------------


def comparison_text(found: Sequence[Comparison], paper: Paper) -> str:
    """Each pair of drafts on one page after the other."""
    page = Page(paper)
    for each in found:
        _comparison(page, each)
    page.blank()
    page.paragraph(CAUTION, style="quiet")
    return page.text


def _comparison(page: Page, found: Comparison) -> None:
    old, new = title_of(found.old.evidence.model), title_of(found.new.evidence.model)
    page.heading(new if old == new else f"{old} → {new}")
    page.line(f"{found.old.evidence.model.file} → {found.new.evidence.model.file}", "quiet")
    closed = {row.id for row in found.closed}
    opened = {row.id for row in found.opened}
    _rows(page, "Closed", "−", found.closed, "good")
    _rows(page, "Opened", "+", found.opened, "bad")
    _rows(page, "No longer there", "−", [row for row in found.removed if row.id not in closed], "")
    _rows(page, "New, left to facts", "+", [row for row in found.added if row.id not in opened], "")
    other = [change for change in found.changed if not change.closed and not change.opened]
    if other or found.taken:
        page.blank()
        page.line("Changed", "strong")
        for change in other:
            page.paragraph(f"~ {_place(change.after)}", indent=2, hanging=2)
            for name, before, after in change.aspects:
                page.paragraph(f"{name}: {_said(before)} → {_said(after)}", indent=6, hanging=2, style="quiet")
            if change.unsure:
                options = listing(change.unsure, "and")
                says = f"whether more projects have {options} now was not worked out"
                page.paragraph(says, indent=6, hanging=2, style="warn")
        for was, now in found.taken:
            clause = f"clause {now.clause}" if now.clause else "no clause"
            page.paragraph(f"~ {now.id} ({clause}; {now.kind}, nobody decides)", indent=2, hanging=2)
            page.paragraph(f"{was.text} → {now.text}", indent=6, hanging=2, style="quiet")
    if not (found.taken or found.added or found.removed or found.changed):
        page.blank()
        page.line("No branch point was added, removed or changed.")
    _figures(page, found)
    _verdict(page, found)


def _place(row: Row) -> str:
    clause = f"clause {row.place.clause}" if row.place.clause else "no clause"
    return f"{row.id} ({clause}; {row.kind}, {decider(row)})"


def _rows(page: Page, title: str, sign: str, rows: Sequence[Row], style: str) -> None:
    if not rows:
        return
    page.blank()
    page.line(f"{title} ({whole(len(rows))})", "strong")
    for row in rows:
        page.paragraph(f"{sign} {_place(row)}", indent=2, hanging=2, style=style)


def _said(text: str) -> str:
    short = text if len(text) <= 160 else text[:157] + "…"
    return f"“{short}”" if short else "nothing"


_MEASURED = {"spread": "Widest spread of a case", "over_issuance": "Over-issued, second look"}


def _share(value: float | None) -> str:
    return "not known" if value is None else share(value)


def _figures(page: Page, found: Comparison) -> None:
    page.blank()
    page.line("Figures", "strong")
    labels = {name: label for name, label, _ in FIGURES}
    for name, (before, after) in found.figures.items():
        text = bracket_text(before)
        if direction(before, after) != "same":
            text += f" → {bracket_text(after)}{_how(name, before, after)}"
        page.entry(labels[name], text, indent=2, column=26, style="")
    for each in found.measured:
        text = f"{_share(each.before)} → {_share(each.after)}" + (" (grew)" if each.grew else "")
        page.entry(_MEASURED[each.name], text, indent=2, column=26, style="")
    before_free, after_free = found.old.evidence.counts.free_values, found.new.evidence.counts.free_values
    if before_free or after_free:
        same = before_free == after_free
        text = (
            ", ".join(before_free)
            if same
            else f"{', '.join(before_free) or 'none'} → {', '.join(after_free) or 'none'}"
        )
        page.entry("Free values", text, indent=2, column=26, style="")


def _how(name: str, before: Bracket, after: Bracket) -> str:
    """In brackets how a figure moved. The fewest routes of a project are no measure of what is left to somebody: there
    only having none counts."""
    if name != "per_project_least":
        return f" ({direction(before, after)})"
    if before.high == 0 and after.low > 0:
        return " (every project has a result now)"
    return " (some projects have no result now)" if after.high == 0 and before.low > 0 else ""


def _verdict(page: Page, found: Comparison) -> None:
    page.blank()
    if not found.growth:
        if any(change.unsure for change in found.changed):
            page.paragraph("As far as was worked out, the new draft leaves nothing more to anybody.", style="strong")
        else:
            page.paragraph("The new draft leaves nothing more to anybody.", style="good")
        return
    if found.grew:
        page.paragraph("The new draft leaves more to somebody:", style="bad")
    else:
        page.paragraph("What the new draft leaves more to somebody was allowed:", style="strong")
    labels = {name: label for name, label, _ in FIGURES}
    for each in found.growth:
        name = f"{labels[each.name]} ({each.name})" if each.name in labels else each.name
        clause = f" (clause {each.clause})" if each.clause else ""
        page.paragraph(f"{'·' if each.allowed else '!'} {name}{clause}: {each.says}", indent=2, hanging=2)
    if found.grew:
        page.paragraph("--allow NAME lets one of them pass.", style="quiet")
