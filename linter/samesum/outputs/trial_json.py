"""What ``samesum trial`` answers, as JSON. Written piece by piece: there may be a hundred thousand projects."""

from __future__ import annotations

import json
import math
from collections.abc import Iterator, Mapping
from fractions import Fraction
from typing import Any

from samesum.evidence.routes.witness import Value
from samesum.evidence.trial.examples import described
from samesum.evidence.trial.outcome import CaseTrial, End, TrialEvidence
from samesum.outputs.json_text import visible
from samesum.written import long_integers, number


def trial_json(evidence: TrialEvidence) -> Iterator[str]:
    """The whole answer as one JSON object, in pieces."""
    model = evidence.graph.model
    yield "{\n"
    for name, text in (("rulebook", model.title), ("draft", model.draft), ("file", model.file)):
        yield f'  "{name}": {_dumped(text)},\n'
    yield '  "cases": ['
    for place in range(len(evidence)):
        yield (",\n    " if place else "\n    ") + _dumped(case_json(evidence.case(place)))
    yield "\n  ]" if len(evidence) else "]"
    for name, value in rest_json(evidence).items():
        text = visible(json.dumps(value, ensure_ascii=False, indent=2)).replace("\n", "\n  ")
        yield f",\n  {_dumped(name)}: {text}"
    yield "\n}\n"


def _dumped(value: Any) -> str:
    with long_integers():
        return visible(json.dumps(value, ensure_ascii=False))


def case_json(case: CaseTrial) -> dict[str, Any]:
    """One project."""
    answer: dict[str, Any] = {
        "name": case.name,
        "outside": case.outside,
        "routes": case.routes,
        "distinct_results": case.distinct_results,
        "lowest": _end(case.lowest, True),
        "highest": _end(case.highest, True),
        "reference": _end(case.reference, False),
        "spread": case.spread,
        "complete": case.complete,
    }
    if case.outside:
        answer["says"] = "outside the rulebook: applicability fails"
    elif case.routes == 0:
        answer["says"] = "no route gives a result"
    if case.proved is not None:
        answer["proved"] = list(case.proved)
        answer["says"] = (
            "lowest and highest are what was found, not proved to be all; every result lies within `proved`"
        )
    return answer


def _end(end: End | None, inputs: bool) -> dict[str, Any] | None:
    if end is None:
        return None
    answer: dict[str, Any] = {"value": end.value, "issued": _short(end.issued), "route": dict(end.route)}
    if inputs:
        answer["settings"] = {name: _plain(value) for name, value in end.settings}
        answer["judgements"] = dict(end.judgements)
    return answer


def _short(value: float) -> int | float:
    return int(value) if value == int(value) and abs(value) < 1e15 else value


def _plain(value: Value | float) -> Any:
    return number(value) if isinstance(value, Fraction) else value


def _values(values: Mapping[str, Value | tuple[Value, ...]]) -> dict[str, Any]:
    return {
        name: [_plain(each) for each in value] if isinstance(value, tuple) else _plain(value)
        for name, value in values.items()
    }


def rest_json(evidence: TrialEvidence) -> dict[str, Any]:
    """Everything but the projects."""
    proof = evidence.proof
    witness: dict[str, Any] | None = None
    if proof.witness is not None:
        witness = {
            **({"case": proof.witness.case} if proof.witness.case else {}),
            "facts": _values(proof.witness.values),
            "lowest_route": dict(proof.witness.lowest),
            "highest_route": dict(proof.witness.highest),
        }
    return {
        "branch_points": [
            {
                "id": blame.mover.id,
                "kind": blame.mover.kind,
                "by": blame.mover.by,
                "swing": _figure(blame.swing),
                "left_if_closed": _figure(blame.left),
            }
            for blame in evidence.blame
        ],
        "closing_order": [{"id": each.general, "left": each.left} for each in evidence.closing],
        "closing_order_complete": evidence.closing_complete,
        "worst_case": {
            "low": proof.low,
            "high": proof.high,
            "proved_by": proof.by or None,
            "no_bound_because": proof.unbounded or None,
            "witness": witness,
        },
        "verdict": proof.verdict,
        "says": proof.says,
        "gaps": list(dict.fromkeys(gap.branch_point for gap in proof.gaps)),
        "cases_without_result": list(proof.stuck_cases),
        "harmless_overlaps": [
            {"branch_point": point, "branches": list(branches)} for point, branches in proof.harmless
        ],
        "examples": [
            {
                "case": each.case,
                "expected": None if each.expected is None else number(each.expected),
                "value": each.value,
                "issued": None if each.issued is None else _short(each.issued),
                "agrees": each.agrees,
                "says": described(each),
            }
            for each in evidence.examples
        ],
    }


def _figure(value: float | None) -> float | None:
    return None if value is None or not math.isfinite(value) else value
