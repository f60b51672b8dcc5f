"""Opening a CSV or Parquet file, and what is wrong with one that cannot be opened. Needs pyarrow."""

from __future__ import annotations

from pathlib import Path
from typing import Any

from samesum.problems import Problem
from samesum.spans import START, Span


def open_table(path: Path) -> tuple[Any, tuple[Problem, ...]]:
    """The table as pyarrow has it; None and why not where it cannot be read."""
    if path.is_dir():
        return None, (_problem(path, "this is a folder", "give the file with the projects, CSV or Parquet"),)
    if not path.exists():
        return None, (_problem(path, "there is no such file", "check the name and the folder"),)
    twice = _twice(path)
    if twice:
        return None, twice
    try:
        table = _table(path)
        _ = table.column_names  # names that are not UTF-8 are noticed here
    except ModuleNotFoundError:
        return None, (
            _problem(path, "reading CSV and Parquet needs pyarrow", "install it with samesum's extra `tables`"),
        )
    except OSError as error:
        why = f": {error.strerror}" if error.strerror else ""
        says = f"the file cannot be read{why}"
        return None, (_problem(path, says, "check that it is CSV in UTF-8, or Parquet"),)
    except ValueError:  # pyarrow's own errors about what is inside are ValueErrors; their text may hold raw bytes
        return None, (_misunderstood(path),)
    except NotImplementedError:  # raised by pyarrow for a type of column that it can store and not read
        return None, (_problem(path, "a column holds something that cannot be read", "write numbers and texts"),)
    if len(table.column_names) == 1 and ";" in table.column_names[0]:
        return None, (_semicolons(path),)
    return table, ()


def _problem(path: Path, says: str, remedy: str) -> Problem:
    return Problem(str(path), START, says, remedy, "file")


def _semicolons(path: Path) -> Problem:
    return _problem(path, "columns are separated by commas here, not by `;`", "save the table as CSV with commas")


def _misunderstood(path: Path) -> Problem:
    """What is wrong with a file that pyarrow could not read, as far as its beginning shows."""
    if path.suffix.lower() == ".parquet":
        return _problem(path, "the file is not Parquet, or is damaged", "write it anew as Parquet, or as CSV")
    with path.open("rb") as file:
        start = file.read(65_536)
    if not start.strip():
        return _problem(path, "the file is empty", "the first line names the columns, every other is a project")
    if b"\0" in start:
        return _problem(path, "this is not a text file", "save the table as CSV in UTF-8")
    heading, *rows = start.splitlines()
    if heading.count(b";") > heading.count(b","):
        return _semicolons(path)
    if any(row.strip() and row.count(b",") != heading.count(b",") for row in rows):
        says = "the rows do not all have as many cells as there are columns, or a quotation mark is not closed"
        return _problem(path, says, "give every row as many commas as the first line; write decimals with a point")
    return _problem(path, "the file is not text in UTF-8", "save the table as CSV in UTF-8")


def _twice(path: Path) -> tuple[Problem, ...]:
    """A column name that a Parquet file has twice: pyarrow would not read the table at all."""
    if path.suffix.lower() != ".parquet":
        return ()
    try:
        import pyarrow.parquet as parquet

        names = [str(name) for name in parquet.read_schema(path).names]
    except (ModuleNotFoundError, OSError, ValueError):
        return ()  # told when the table is read
    for place, name in enumerate(names, start=1):
        if name in names[: place - 1]:
            says = f"the column `{name}` stands here a second time"
            return (Problem(str(path), Span(1, place, 1, place + 1), says, "keep one of the two", "shape"),)
    return ()


def _table(path: Path) -> Any:
    if path.suffix.lower() == ".parquet":
        import pyarrow.parquet as parquet

        return parquet.read_table(path)
    import pyarrow.csv as csv

    return csv.read_csv(path, convert_options=csv.ConvertOptions(null_values=[""], strings_can_be_null=True))
