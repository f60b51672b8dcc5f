"""JSON as every command writes it: one object, whole numbers in full however long."""

from __future__ import annotations

import json
from collections.abc import Mapping
from typing import Any

from samesum.written import long_integers


def as_json(answer: Mapping[str, Any]) -> str:
    """The answer as indented JSON in UTF-8 letters, ending in a line end."""
    with long_integers():
        return json.dumps(answer, indent=2, ensure_ascii=False) + "\n"
