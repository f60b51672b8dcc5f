"""What lint rules can look at: kinds of subjects and their attributes.

A rule names a kind and states a condition over its attributes; this list is the whole contract between the
two. An attribute is a number, yes or no, or a text (with the words it can be, where they are few).
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from enum import Enum
from fractions import Fraction
from types import MappingProxyType
from typing import Literal

from samesum.evidence.routes.witness import Witness
from samesum.spans import Span


class Undecided(Enum):
    """The value of an attribute that could be neither shown nor refuted."""

    CANNOT_TELL = "cannot tell"


CANNOT_TELL = Undecided.CANNOT_TELL
AttributeValue = bool | int | Fraction | str | Undecided
AttributeKind = Literal["number", "yes or no"] | tuple[str, ...]

TEXT: tuple[str, ...] = ()
YES: AttributeKind = "yes or no"
NUMBER: AttributeKind = "number"
WHO = ("developer", "verifier", "programme", "nobody")
TIMES = ("validation", "each_period", "not_stated", "never")

_EVERYWHERE: Mapping[str, AttributeKind] = {
    "name": TEXT,  # the subject's own name: a branch point's id, a declared name
    "has_clause": YES,
    "clause_number": TEXT,
}

_DECLARED: Mapping[str, AttributeKind] = {
    **_EVERYWHERE,
    "what": ("fact", "setting", "judgement", "constant", "table", "quantity", "index", "result"),
    "used": YES,  # leads to the result, to applicability or to the cost of an option
    "has_source": YES,
    "source_text": TEXT,
    "latest_undated": YES,  # the source says "latest", "current" or the like, and no year
    "has_note": YES,
    "unit_text": TEXT,
    "derived": YES,  # a constant worked out from other constants
}

_STEERED: Mapping[str, AttributeKind] = {
    "steered": YES,  # somebody can move one of its conditions
    "rests_on_judgement": YES,  # a condition asks a judgement by its name
    "steered_through_judgement": YES,
    "steered_through_setting": YES,
    "steered_through_choice": YES,
    "steered_through_overlap": YES,
    "steered_indirectly": YES,  # through a quantity, not by what the condition itself names
    "judgements": TEXT,
    "steerers": TEXT,  # who, and through what
}

_BRANCH_POINT: Mapping[str, AttributeKind] = {
    **_EVERYWHERE,
    **_STEERED,
    "quantity_name": TEXT,
    "what": ("choice", "tied", "cases", "ordered_cases"),
    "decider": WHO,  # who picks among the branches: of a choice, or of an overlap
    "timing": TIMES,
    "period_count": NUMBER,
    "branch_count": NUMBER,
    "branch_names": TEXT,
    "element_count": NUMBER,
    "nested": YES,
    "reaches_result": YES,
    "with_error": NUMBER,
    "with_cost": NUMBER,
    "has_reference": YES,
    "has_cheap_default": YES,  # an option that costs less and errs more than another
    "cheap_option": TEXT,
    "cheap_error": TEXT,
    "dear_option": TEXT,
    "dear_error": TEXT,
}

KINDS: Mapping[str, Mapping[str, AttributeKind]] = MappingProxyType(
    {
        "branch_point": _BRANCH_POINT,
        "branch": {
            **_EVERYWHERE,
            "point": TEXT,
            "what": ("option", "tied_option", "when"),
            "decider": WHO,
            "value_is_zero": YES,
            "other_is_zero": YES,
            "has_error": YES,
            "has_cost": YES,
            "other_has_error": YES,
            "other_has_cost": YES,
            "lacking": TEXT,  # the figures that it does not state and another does: `no cost`
            "is_reference": YES,
            "conditional": YES,
            "reaches_result": YES,
        },
        "overlap": {
            **_EVERYWHERE,
            "exists": YES,
            "first": TEXT,
            "second": TEXT,
            "same_number": YES,
            "element_count": NUMBER,
        },
        "gap": {
            **_EVERYWHERE,
            "exists": YES,
            "missing": ("conditions", "row", "value"),
            "tables": TEXT,
            "element_count": NUMBER,
            "is_choice": YES,
        },
        "dead_branch": {**_EVERYWHERE, "exists": YES, "branch_name": TEXT, "is_option": YES},
        "equal_branches": {**_EVERYWHERE, "first": TEXT, "second": TEXT, "exists": YES, "decider": WHO},
        "untied_choices": {
            **_EVERYWHERE,
            "other": TEXT,
            "other_clause": TEXT,
            "shared": TEXT,
            "shared_count": NUMBER,
            "same_decider": YES,
            "decider": WHO,
        },
        "jump": {
            **_EVERYWHERE,
            "exists": YES,
            "through_table": YES,
            "table_name": TEXT,
            "asked": TEXT,
            "threshold": TEXT,
            "own_size": NUMBER,
            "size": NUMBER,  # of the result; of the quantity where the result has no number there
            "size_percent": TEXT,
            "own_percent": TEXT,
            "before": TEXT,
            "after": TEXT,
            "at_result": YES,
        },
        "over_issuance": {
            **_EVERYWHERE,
            "decider": WHO,
            "surely": NUMBER,  # at least so much by a second look, two standard errors taken off
            "percent_over": TEXT,
        },
        "trial": {
            **_EVERYWHERE,
            "spread": NUMBER,  # the widest of the projects tried, as a share of the reference
            "spread_percent": TEXT,
            "widest_case": TEXT,
            "case_count": NUMBER,
            "cases_without_result": NUMBER,
            "outcome": ("single_route", "same_number", "within_tolerance", "agrees_on_these_cases", "differs", "gap"),
            "first_to_close": TEXT,
            "left_then": TEXT,
        },
        "worked_example": {**_EVERYWHERE, "agrees": YES, "case_name": TEXT, "finding": TEXT},
        "declaration": _DECLARED,
        "fact": {**_DECLARED, "numeric": YES, "bounded": YES, "per_index": YES, "only_low": YES, "only_high": YES},
        "setting": {**_DECLARED, "decider": WHO, "free_value": YES, "numeric": YES, "domain_text": TEXT},
        "judgement": {**_DECLARED, "decider": WHO, "wording": TEXT},
        "constant": _DECLARED,
        "table": {**_DECLARED, "row_count": NUMBER, "key_count": NUMBER},
        "quantity": {**_DECLARED, "branch_points": NUMBER, "is_result": YES, "per_index": YES},
        "result": {**_DECLARED, "has_rounding": YES, "rounding": TEXT},
        "applicability": {**_EVERYWHERE, **_STEERED},
        "unit_mismatch": {**_EVERYWHERE, "problem": TEXT, "help": TEXT},
        "rulebook": {
            **_EVERYWHERE,
            "draft_name": TEXT,
            "has_result": YES,
            "period_count": NUMBER,
            "choices": NUMBER,
            "settings": NUMBER,
            "judgements": NUMBER,
            "per_project_most": NUMBER,
            "per_project_least": NUMBER,
            "exact": YES,
        },
    }
)


@dataclass(frozen=True, slots=True)
class Subject:
    """One thing that rules can look at. ``attributes`` has a value for each attribute of its kind. ``key`` says
    which one it is without any line number; ``branch_point`` is the general id (or the declared name) that
    it belongs to. ``witness`` is a project that shows it, ``notes`` say more about it."""

    kind: str
    branch_point: str
    key: str
    span: Span
    clause: str
    attributes: Mapping[str, AttributeValue]
    witness: Witness | None = None
    notes: tuple[str, ...] = ()
