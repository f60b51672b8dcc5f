"""Whether a subject meets a rule's condition: yes, no, or cannot tell (Kleene's three values)."""

from __future__ import annotations

from collections.abc import Mapping
from fractions import Fraction

from samesum.evidence.subjects.kinds import CANNOT_TELL, AttributeValue, Undecided
from samesum.reading.where import (
    AllOf,
    AnyOf,
    Attribute,
    Compare,
    IsOneOf,
    IsYes,
    NotSo,
    Side,
    WhereCondition,
)

Answer = bool | Undecided


def holds(where: WhereCondition, attributes: Mapping[str, AttributeValue]) -> Answer:
    """The condition's answer. Names and kinds were checked when the rule was loaded."""
    match where:
        case AllOf(parts=parts):
            answers = [holds(part, attributes) for part in parts]
            return False if False in answers else CANNOT_TELL if CANNOT_TELL in answers else True
        case AnyOf(parts=parts):
            answers = [holds(part, attributes) for part in parts]
            return True if True in answers else CANNOT_TELL if CANNOT_TELL in answers else False
        case NotSo(part=part):
            answer = holds(part, attributes)
            return CANNOT_TELL if answer is CANNOT_TELL else not answer
        case IsYes(attribute=attribute):
            value = attributes[attribute.name]
            return CANNOT_TELL if value is CANNOT_TELL else value is True
        case IsOneOf(attribute=attribute, values=values):
            value = attributes[attribute.name]
            return CANNOT_TELL if value is CANNOT_TELL else value in values
        case Compare(operator=operator, left=left, right=right):
            a, b = _number(left, attributes), _number(right, attributes)
            if a is None or b is None:
                return CANNOT_TELL
            sign = (a > b) - (a < b)
            return sign in {"<": (-1,), "<=": (-1, 0), "=": (0,), "<>": (-1, 1), ">=": (0, 1), ">": (1,)}[operator]


def _number(side: Side, attributes: Mapping[str, AttributeValue]) -> Fraction | None:
    if not isinstance(side, Attribute):
        return side.value
    value = attributes[side.name]
    return Fraction(value) if isinstance(value, (int, Fraction)) else None
