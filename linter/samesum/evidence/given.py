"""The projects that ``--inputs`` names, whichever form their file has."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING

from samesum.problems import Problem
from samesum.reading.model import Model

if TYPE_CHECKING:
    from samesum.evidence.choosing.batches import Batch
    from samesum.reading.cases import Case
    from samesum.reading.columns import Columns


TABLES = (".csv", ".parquet")
"""The endings of files that hold a project a row."""


@dataclass(frozen=True, slots=True)
class Given:
    """Projects by name: ``cases`` of a file of cases, or the ``columns`` of a table, which has no worked examples."""

    names: Sequence[str]
    cases: Sequence[Case] = ()
    columns: Columns | None = None

    def batches(self, model: Model) -> list[Batch]:
        """The projects as arrays. Raises ``Unplannable`` when a part that the result needs could not be read."""
        from samesum.evidence.choosing.batches import batches_of, batches_of_columns

        return batches_of(model, self.cases) if self.columns is None else batches_of_columns(model, self.columns)


def is_table(path: Path) -> bool:
    """Whether a file holds a project a row, by its ending."""
    return path.suffix.lower() in TABLES


def read_given(path: Path, model: Model) -> tuple[Given | None, tuple[Problem, ...]]:
    """The projects of a file, and everything that is wrong with them; None when there is anything."""
    if is_table(path):
        from samesum.reading.columns import read_columns

        columns, problems = read_columns(path, model)
        return (Given(columns.names, columns=columns) if columns is not None else None), problems
    from samesum.reading.cases import read_cases

    cases, problems = read_cases(path, model)
    return (None if problems else Given([case.name for case in cases.cases], cases.cases)), problems
