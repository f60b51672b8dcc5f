"""The register as JSON, with the keys that other tools read."""

from __future__ import annotations

from typing import Any

from samesum.evidence.routes.closing import Bracket
from samesum.outputs.counts import paths_json, shown_by
from samesum.outputs.register_cells import decider
from samesum.reviewing.record import Standing
from samesum.reviewing.rows import Register, Row
from samesum.written import number


def register_json(register: Register) -> dict[str, Any]:
    """The whole answer of ``samesum register --as json``."""
    model = register.evidence.model
    return {
        "rulebook": model.title,
        "draft": model.draft,
        "file": model.file,
        "paths": paths_json(register.evidence.counts),
        "free_values": list(register.evidence.counts.free_values),
        "simulated": _simulated(register),
        "rows": [row_json(row) for row in register.rows],
        "stale_decisions": [
            {"branch_point": each.decision.place, "why": each.stale, **_decision(each)} for each in register.stale
        ],
    }


def _simulated(register: Register) -> dict[str, Any] | None:
    """What over-issuance was simulated on; null when it was not."""
    found = register.simulated
    if found is None:
        return None
    origin = {"from": "cases", "cases": found.given} if found.given else {"from": "domains"}
    return {"projects": found.projects, **origin, "seed": found.seed}


def row_json(row: Row) -> dict[str, Any]:
    """One row. Figures that nobody asked for are null."""
    return {
        "id": row.id,
        "clause": row.place.clause,
        "wording": row.place.wording,
        "quantity": row.quantity,
        "kind": row.kind,
        "who_decides": row.decides or "nobody",
        "decided_through": decider(row),
        "steered_by": [
            {"by": mover.by, "through": mover.through, "source": mover.source, "chain": list(mover.chain)}
            for mover in row.movers
        ],
        "moves": list(row.moves),
        "fixed": row.fixed,
        "elements": row.elements,
        "line": row.span.line,
        "column": row.span.column,
        "options": [
            {
                "name": option.name,
                "when": option.when,
                "error": None if option.error is None else number(option.error),
                "bias": None if option.bias is None else number(option.bias),
                "cost": option.cost,
                "reference": option.reference,
                "calculation": option.body,
            }
            for option in row.options
        ],
        **_routes("routes_with", row.routes),
        **_routes("routes_without", row.without),
        "overlaps": [{"branches": list(each.branches), **shown_by(each.witness)} for each in row.overlaps],
        "gaps": [{"missing": each.kind, **shown_by(each.witness)} for each in row.gaps],
        "swing": row.measures.swing,
        "left_if_closed": row.measures.left_if_closed,
        "over_issuance": row.measures.over_issuance,
        "suggested_closure": row.measures.closure or row.closure,
        "decision": _decision(row.standing) if row.standing else {"decision": "open"} if row.leaves_something else None,
        "fingerprint": row.place.fingerprint,
    }


def _routes(name: str, figure: Bracket) -> dict[str, Any]:
    return {name: figure.high} if figure.exact else {name: figure.high, f"{name}_at_least": figure.low}


def _decision(standing: Standing) -> dict[str, Any]:
    decided = standing.decision
    return {
        "decision": decided.verdict,
        "reason": decided.reason,
        "by": decided.by,
        "when": decided.when,
        "stale": standing.stale or False,
    }
