"""JSON as every command writes it: one object, whole numbers in full however long."""

from __future__ import annotations

import json
import re
from collections.abc import Mapping
from typing import Any

from samesum.written import long_integers

# control characters beyond ASCII, and signs that change the direction of reading or are not seen
_UNSEEN = re.compile("[\x7f-\x9f\u00ad\u061c\u200b-\u200f\u2028-\u202e\u2060-\u206f\ufeff\ufff9-\ufffb]")


def as_json(answer: Mapping[str, Any]) -> str:
    """The answer as indented JSON in UTF-8 letters, ending in a line end. What a terminal might obey, or nobody can
    see, is written as an escape, so that nothing of it is lost."""
    with long_integers():
        text = json.dumps(answer, indent=2, ensure_ascii=False)
    return visible(text) + "\n"


def visible(text: str) -> str:
    """JSON with every sign that is not seen as an escape."""
    return _UNSEEN.sub(lambda sign: f"\\u{ord(sign[0]):04x}", text)
