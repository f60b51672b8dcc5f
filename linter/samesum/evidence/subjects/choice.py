"""Subjects that follow from what choosing does to a programme."""

from __future__ import annotations

from collections.abc import Iterator
from fractions import Fraction

from samesum.evidence.evidence import Evidence
from samesum.evidence.subjects.branches import basics, general_points
from samesum.evidence.subjects.kinds import CANNOT_TELL, AttributeValue, Subject
from samesum.reading import model as m
from samesum.written import percent


def over_issued(evidence: Evidence) -> Iterator[Subject]:
    """What a second look over-issues at each choice whose options state errors. Nothing is imported or worked out where
    no option does."""
    points = general_points(evidence.graph)
    if not any(isinstance(point.body, m.Choice) and _states_errors(point.body) for point in points.values()):
        return
    from samesum.evidence.choosing.over_issuing import over_issuing

    for found in over_issuing(evidence.model):
        point = points[found.id]
        surely: AttributeValue = CANNOT_TELL
        shown = ""
        if found.value is not None and found.error is not None:
            surely = Fraction(found.value - 2 * found.error).limit_denominator(10**6)
            shown = percent(Fraction(round(found.value * 1000), 1000))
        attributes: dict[str, AttributeValue] = {
            **basics(found.id, point.clause),
            "decider": found.by,
            "surely": surely,
            "percent_over": shown,
        }
        yield Subject("over_issuance", found.id, "", point.span, point.clause, attributes)


def _states_errors(choice: m.Choice) -> bool:
    return sum(option.error is not None or option.bias is not None for option in choice.options) > 1
