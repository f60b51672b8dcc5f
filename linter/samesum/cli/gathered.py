"""A rulebook examined, with its review record and, where cases are given, what trial and bias say of it."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

from samesum.cli import shared

if TYPE_CHECKING:
    from samesum.examine import Examined
    from samesum.reviewing.rows import Register


def gather_register(file: Path, inputs: Path | None, seconds: float) -> tuple[Examined, Register] | None:
    """The register of a rulebook; None when something could not be read, which is then said."""
    from samesum.examine import examine
    from samesum.reviewing.record import read_record
    from samesum.reviewing.rows import register_of

    examined = examine(file, seconds)
    record, problems = read_record(file)
    if examined.evidence is None or problems:
        shared.report([*(examined.problems if examined.evidence is None else ()), *problems])
        return None
    return examined, register_of(examined.evidence, examined.reading.text, record, seconds)
