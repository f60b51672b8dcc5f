"""The routes open to one project, for people and as JSON."""

from __future__ import annotations

from typing import Any

from samesum.evidence.routes.listing import Routes
from samesum.outputs.page import Page, Paper
from samesum.written import whole


def routes_json(routes: Routes, project: str) -> dict[str, Any]:
    """``listed`` for ``samesum count --list --json``."""
    return {
        "project": project,
        "open": routes.open,
        "exact": routes.exact,
        "routes": [dict(each) for each in routes.first],
    }


def routes_text(routes: Routes, project: str, paper: Paper) -> str:
    """One paragraph a route: each branch point that is reached with the branch taken."""
    page = Page(paper)
    page.blank()
    if routes.open is None:
        page.paragraph(f"The routes open to {project} could not be counted in the time given.", style="strong")
        return "\n" + page.text
    if routes.open == 0:
        page.paragraph(
            f"No route is open to {project}: it has no result, or the rulebook does not apply.", style="strong"
        )
        return "\n" + page.text
    about = "" if routes.exact else "At most "
    plural = "route is" if routes.open == 1 else "routes are"
    page.paragraph(f"{about}{whole(routes.open)} {plural} open to {project}:", style="strong")
    for place, route in enumerate(routes.first, start=1):
        steps = ", ".join(f"{point}: {branch}" for point, branch in route) or "no branch point is reached"
        page.entry(f"{place}", steps, indent=2, column=max(4, len(str(len(routes.first))) + 2))
    left = routes.open - len(routes.first)
    if left > 0:
        page.paragraph(f"and {whole(left)} more.", indent=2, style="quiet")
    if not routes.exact:
        page.paragraph("A condition could not be told; a route listed may not be open.", indent=2, style="warn")
    return "\n" + page.text
