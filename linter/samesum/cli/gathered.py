"""A rulebook examined, with its review record and, where cases are given, what trial and bias say of it."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

from samesum.cli import shared

if TYPE_CHECKING:
    from samesum.examine import Examined
    from samesum.reading.read import Reading
    from samesum.reviewing.rows import Register


def gather_register(file: Path, inputs: Path | None, seconds: float) -> tuple[Examined, Register] | None:
    """The register of a rulebook; None when something could not be read, which is then said."""
    from samesum.reading.read import read_file

    return registered(read_file(file), file, inputs, seconds)


def registered(
    reading: Reading, file: Path, inputs: Path | None, seconds: float, record: bool = True
) -> tuple[Examined, Register] | None:
    """The same for a text read already. ``file`` is where the review record lies, if that is wanted."""
    from samesum.examine import examine_reading
    from samesum.reviewing.record import Record, read_record
    from samesum.reviewing.rows import register_of

    examined = examine_reading(reading, seconds)
    decided, problems = read_record(file) if record else (Record(""), ())
    if examined.evidence is None or problems:
        shared.report([*(examined.problems if examined.evidence is None else ()), *problems])
        return None
    return examined, register_of(examined.evidence, reading.text, decided, seconds)
