"""What ``samesum bias --json`` answers."""

from __future__ import annotations

import math
from collections.abc import Mapping
from typing import Any

from samesum.evidence.choosing.selection import (
    HEADLINE,
    Closure,
    Enrolment,
    Estimate,
    Figure,
    Found,
    Periods,
    Selection,
)
from samesum.evidence.choosing.tally import WIDTH
from samesum.outputs.bias_text import sentence


def bias_json(selection: Selection, routes: Mapping[tuple[str, str, str], Any] | None = None) -> dict[str, Any]:
    """The whole answer. ``routes``: the counts of the rulebook with a closure written out, by id, kind, option."""
    model, supply, terms = selection.model, selection.supply, selection.terms
    return {
        "rulebook": model.title,
        "draft": model.draft,
        "file": model.file,
        "projects": {
            "simulated": selection.projects,
            "from": "cases" if supply.cases else "domains",
            "cases": supply.cases,
            "outside": supply.outside,
            "without_result": supply.without_result,
        },
        "seed": terms.seed,
        "price": terms.price,
        "join": terms.join,
        "periods": model.periods,
        "headline": HEADLINE,
        "says": sentence(selection),
        "whole": {
            "behaviours": [_figure(each) for each in selection.figures],
            "over_the_periods": [_periods(each) for each in selection.periods],
            "histogram": _histogram(selection.histograms),
        },
        "choices": [_found(each, routes or {}) for each in selection.found],
        "ranking": [
            {"id": each.latitude.id, "tonnes_per_thousand": _number(each.per_thousand)} for each in selection.ranking
        ],
    }


def _number(value: float | None) -> float | None:
    return None if value is None or not math.isfinite(value) else value


def _figure(figure: Figure) -> dict[str, Any]:
    made: dict[str, Any] = {"behaviour": figure.behaviour}
    if figure.option:
        made["option"] = figure.option
    made |= {
        "over_issuance": _number(figure.over_issuance),
        "standard_error": _number(figure.standard_error),
        "over_credited": _number(figure.over_credited),
        "closed_form": _number(figure.closed_form),
        "simulated": {"over_issuance": _number(figure.simulated), "standard_error": _number(figure.simulated_error)},
        "beyond_mandated": {"value": _number(figure.difference), "standard_error": _number(figure.difference_error)},
    }
    if figure.joined is not None:
        made["enrolment"] = {"reading": "the estimate errs", **_enrolment(figure.joined)}
    return made


def _enrolment(found: Enrolment) -> dict[str, Any]:
    return {
        "over_issuance": _number(found.over_issuance),
        "standard_error": _number(found.standard_error),
        "share_that_joins": _number(found.share),
        "closed_form": _number(found.closed_form),
        "closed_form_share": _number(found.closed_share),
    }


def _estimate(found: Estimate | None) -> dict[str, Any] | None:
    return None if found is None else {"value": _number(found.value), "standard_error": _number(found.error)}


def _periods(found: Periods) -> dict[str, Any]:
    return {
        "behaviour": found.behaviour,
        "errors_stay": {name.replace(" ", "_"): _estimate(each) for name, each in found.stay.items()},
        "errors_anew": {name.replace(" ", "_"): _estimate(each) for name, each in found.anew.items()},
    }


def _histogram(found: Mapping[str, tuple[int, ...]]) -> dict[str, Any]:
    return {"from": 0, "width": WIDTH, **{name.replace(" ", "_"): list(counts) for name, counts in found.items()}}


def _found(found: Found, routes: Mapping[tuple[str, str, str], Any]) -> dict[str, Any]:
    latitude = found.latitude
    made: dict[str, Any] = {
        "id": latitude.id,
        "kind": latitude.kind,
        "by": None if latitude.kind == "stated" else latitude.by,
        "clause": latitude.clause,
        "options": list(latitude.candidates),
        "reference": latitude.candidates[latitude.reference],
        "behaviours": [_figure(each) for each in found.figures],
        "tonnes_per_thousand": _number(found.per_thousand),
        "tonnes_per_thousand_standard_error": _number(found.per_thousand_error),
        "over_the_periods": [_periods(each) for each in found.periods],
        "histogram": _histogram(found.histograms),
        "closures": [_closure(each, latitude.id, routes) for each in found.closures],
    }
    if found.truth_scatters:
        made["enrolment_truth_scatters"] = [
            {"reading": "the truth scatters around a fixed average", "option": option, **_enrolment(each)}
            for option, each in found.truth_scatters.items()
        ]
    return made


def _closure(closure: Closure, id: str, routes: Mapping[tuple[str, str, str], Any]) -> dict[str, Any]:
    made: dict[str, Any] = {"kind": closure.kind}
    if closure.option:
        made["option"] = closure.option
    if closure.behaviour:
        made["behaviour"] = closure.behaviour
    made["left"] = _estimate(closure.left)
    if closure.stay is not None:
        made["left_if_errors_stay"] = _estimate(closure.stay)
    if closure.whole_left is not None:
        made["whole_left"] = _estimate(closure.whole_left)
    if closure.percent is not None:
        made["deduction"] = _estimate(closure.percent)
    found = routes.get((id, closure.kind, closure.option))
    if found is not None:
        made["paths"] = found
    return made
