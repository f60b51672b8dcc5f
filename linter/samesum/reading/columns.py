"""Projects from CSV and Parquet: one project a row, checked against a rulebook column by column.

A column has the name of a fact, setting or judgement; of a fact per index, ``area@1``, ``area@2`` and so on (in
Parquet also one column of lists). An empty cell is an element that the project does not have, or something that
is left open. Needs pyarrow (the optional extra ``tables``).
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field
from fractions import Fraction
from pathlib import Path
from typing import Any

import numpy as np
import numpy.typing as npt

from samesum.problems import Problem, in_order
from samesum.reading import model as m
from samesum.reading.cases import YES, used_names
from samesum.reading.domains import domain_words, in_percent, lies_inside
from samesum.reading.prescribed import prescribed_for, prescribed_words
from samesum.reading.table_files import open_table
from samesum.reading.words import listing, nearest
from samesum.reading.written_numbers import Numbers
from samesum.spans import Span

Array = npt.NDArray[Any]
SUFFIXES = (".csv", ".parquet")
MOST_TOLD = 5


@dataclass(frozen=True, slots=True)
class Columns:
    """``numbers``, ``codes`` and ``flags`` by id; ``given``: where a cell is not empty. ``sizes``: how many elements of
    each index each project has."""

    file: str
    names: tuple[str, ...]
    numbers: Mapping[str, Array]
    codes: Mapping[str, Array]
    flags: Mapping[str, Array]
    given: Mapping[str, Array]
    sizes: Mapping[str, Array]


def read_columns(path: Path, model: m.Model) -> tuple[Columns | None, tuple[Problem, ...]]:
    """The projects of a table and everything that is wrong with them; None when there is anything."""
    table, problems = open_table(path)
    if table is None:
        return None, problems
    reader = _Reader(str(path), model, table.num_rows, Numbers(str(path)))
    made = reader.whole(table)
    return (None if reader.problems else made), in_order(reader.problems)


@dataclass(slots=True)
class _Reader:
    file: str
    model: m.Model
    rows: int
    parser: Numbers
    problems: list[Problem] = field(default_factory=list)

    def report(self, row: int, column: int, says: str, remedy: str, kind: str = "value") -> None:
        self.problems.append(Problem(self.file, Span(row, column, row, column + 1), says, remedy, kind))

    def whole(self, table: Any) -> Columns:
        model = self.model
        every: list[m.Fact | m.Setting | m.Judgement] = [*model.facts, *model.settings, *model.judgements]
        declared = {each.name: each for each in every}
        numbers: dict[str, Array] = {}
        codes: dict[str, Array] = {}
        flags: dict[str, Array] = {}
        given: dict[str, Array] = {}
        names = tuple(f"row {row}" for row in range(1, self.rows + 1))
        named = False
        if not self.rows:
            self.report(1, 1, "the table has no projects", "give one project a row", "shape")
        for place, (name, values) in enumerate(self._spread(table, declared), start=1):
            if name == "name":
                if named:
                    self.report(1, place, "the column `name` stands here a second time", "keep one of the two", "shape")
                    continue
                named = True
                names = tuple("" if each is None else str(each) for each in values.to_pylist())
                self._one_of_each(names, place)
                continue
            base = name.partition("@")[0]
            if base not in declared:
                close = nearest(base, (*declared, "name"))
                remedy = f"did you mean `{close}`?" if close else "columns are facts, settings and judgements"
                self.report(1, place, f"the rulebook has no fact, setting or judgement `{base}`", remedy, "name")
                continue
            if name in given:
                self.report(1, place, f"the column `{name}` stands here a second time", "keep one of the two", "shape")
                continue
            before = len(self.problems)
            self._column(declared[base], name, values, place, numbers, codes, flags, given)
            differs = taken_back(declared[base], name, numbers, codes, flags, given)
            if differs is not None and len(self.problems) == before:
                says, remedy = prescribed_words(declared[base])
                self._told(np.flatnonzero(differs), place, lambda row, says=says: says, remedy)
        sizes = self._sizes(given)
        self._missing(given, sizes)
        return Columns(self.file, names, numbers, codes, flags, given, sizes)

    def _one_of_each(self, names: tuple[str, ...], place: int) -> None:
        """Reports the first project whose name another has already; projects without a name are let be."""
        first: dict[str, int] = {}
        for row, name in enumerate(names, start=2):
            if name and first.setdefault(name, row) != row:
                says = f"two projects are called {name} (first on line {first[name]})"
                self.report(row, place, says, "give one of them another name")
                return

    def _spread(self, table: Any, declared: Mapping[str, Any]) -> Iterator[tuple[str, Any]]:
        """Columns by name; a column of lists as one column an element."""
        import pyarrow as pa
        import pyarrow.compute as compute

        most = {index.name: index.most for index in self.model.indices}
        for number, name in enumerate(table.column_names):
            values = table.column(number).combine_chunks()
            each = declared.get(name)
            if pa.types.is_list(values.type) or pa.types.is_large_list(values.type):
                size = most.get(each.index, 0) if isinstance(each, m.Fact) else 0
                lengths = compute.list_value_length(values)
                longest = compute.max(lengths).as_py() or 0
                if longest > size:
                    self.report(
                        1, 1, f"{name} has {longest} values in a row, and a project has at most {size}", "", "shape"
                    )
                for element in range(1, min(size, longest) + 1):
                    enough = compute.fill_null(compute.greater_equal(lengths, element), False)
                    kept = compute.if_else(enough, values, None)
                    yield (
                        f"{name}@{element}",
                        compute.list_element(
                            compute.list_slice(kept, element - 1, element, return_fixed_size_list=True), 0
                        ),
                    )
            else:
                yield name, values

    def _column(
        self, declared: m.Fact | m.Setting | m.Judgement, id: str, values: Any, place: int,
        numbers: dict[str, Array], codes: dict[str, Array], flags: dict[str, Array], given: dict[str, Array],
    ) -> None:  # fmt: skip
        index = declared.index if isinstance(declared, m.Fact) else ""
        element = id.partition("@")[2]
        most = next((each.most for each in self.model.indices if each.name == index), 0)
        if index and not (element.isdigit() and 1 <= int(element) <= most):
            self.report(
                1,
                place,
                f"`{id}` is no element of {index}",
                f"write `{declared.name}@1` to `{declared.name}@{most}`",
                "shape",
            )
            return
        if not index and element:
            self.report(1, place, f"{declared.name} is not per index", f"call the column `{declared.name}`", "shape")
            return
        domain: m.Domain = m.YesNo() if isinstance(declared, m.Judgement) else declared.domain
        if not _is_plain(values.type):
            says = f"the column `{id}` holds {_in_words(values.type)}, and not numbers or texts"
            self.report(1, place, says, "write numbers, names, or yes and no", "shape")
            return
        has = ~np.asarray(values.is_null().to_numpy(zero_copy_only=False), dtype=bool)
        if isinstance(domain, m.Range):
            assert not isinstance(declared, m.Judgement)
            found, has = self._numbers(declared, domain, values, has, place)
            numbers[id] = found
            self._inside(declared, domain, found, has, place)
        elif isinstance(domain, m.OneOf):
            codes[id] = self._named(declared.name, domain.values, values, has, place)
        else:
            flags[id] = self._yes_no(declared.name, values, has, place)
        given[id] = has

    def _numbers(
        self, declared: m.Fact | m.Setting, domain: m.Range, values: Any, has: Array, place: int
    ) -> tuple[Array, Array]:
        import pyarrow as pa

        # What could not be read is told once; a number from the domain in its place is not told a second time.
        known_end = domain.low if domain.low is not None else domain.high
        unread = float(known_end or 0)
        if not pa.types.is_string(values.type) and not pa.types.is_large_string(values.type):
            if pa.types.is_null(values.type):
                return np.zeros(self.rows), has
            if pa.types.is_boolean(values.type):
                says = f"{declared.name} is a number, and the column holds yes and no"
                self.report(1, place, says, "write numbers")
                return np.full(self.rows, unread), has
            found = np.asarray(values.cast(pa.float64(), safe=False).to_numpy(zero_copy_only=False), dtype=np.float64)
            finite = np.isfinite(found)
            self._told(
                np.flatnonzero(has & ~finite),
                place,
                lambda row: f"{declared.name}: {found[row]:g} is no number",
                "write a number, or leave the cell empty",
            )
            # a cell with nan counts as filled: it is told here, and not a second time as missing
            return np.where(has, np.where(finite, found, unread), 0.0), has
        texts, which = _encoded(values)
        known = np.zeros(max(1, len(texts)))
        for number, text in enumerate(texts):
            row = int(np.argmax(which == number)) + 2
            value = self.parser.read(text.strip(), declared.unit, declared.name, Span(row, place, row, place + 1))
            known[number] = unread if value is None else float(value)
        self.problems += self.parser.problems
        self.parser.problems.clear()
        return np.where(has, known[np.where(has, which, 0)], 0.0), has

    def _inside(self, declared: m.Fact | m.Setting, domain: m.Range, found: Array, has: Array, place: int) -> None:
        wrong = np.zeros(self.rows, dtype=bool)
        if domain.low is not None:
            wrong |= found < float(domain.low)
        if domain.high is not None:
            wrong |= found > float(domain.high)
        rows = np.flatnonzero(wrong & has)
        remedy = f"the rulebook says {domain_words(domain, declared.unit)}"
        exact = [Fraction(f"{value:.15g}") / 100 for value in found[rows[:MOST_TOLD]].tolist()]
        if in_percent(domain, declared.unit) and all(lies_inside(value, domain) for value in exact):
            remedy += "; write % behind the number"
        self._told(rows, place, lambda row: f"{declared.name} is {found[row]:g}, outside its domain", remedy)

    def _told(self, rows: Array, place: int, says: Any, remedy: str) -> None:
        for row in rows[:MOST_TOLD].tolist():
            self.report(row + 2, place, says(row), remedy)
        if len(rows) > MOST_TOLD:
            row = int(rows[MOST_TOLD]) + 2
            self.report(row, place, f"and {len(rows) - MOST_TOLD} more rows from here on with the same mistake", remedy)

    def _named(self, name: str, known: tuple[str, ...], values: Any, has: Array, place: int) -> Array:
        texts, which = _encoded(values)
        codes = np.zeros(max(1, len(texts)), dtype=np.int64)
        for number, text in enumerate(texts):
            if text.strip() in known:
                codes[number] = known.index(text.strip())
                continue
            close = nearest(text, known)
            remedy = f"did you mean `{close}`?" if close else f"write one of {listing(known)}"
            self._told(
                np.flatnonzero((which == number) & has),
                place,
                lambda row, t=text: f"{name} is {listing(known)}, not `{t}`",
                remedy,
            )
        return np.where(has, codes[np.where(has, which, 0)], 0)

    def _yes_no(self, name: str, values: Any, has: Array, place: int) -> Array:
        import pyarrow as pa

        if pa.types.is_boolean(values.type):
            return np.asarray(values.fill_null(True).to_numpy(zero_copy_only=False), dtype=bool)
        texts, which = _encoded(values)
        flags = np.zeros(max(1, len(texts)), dtype=bool)
        for number, text in enumerate(texts):
            if text.strip().lower() in YES:
                flags[number] = YES[text.strip().lower()]
                continue
            self._told(
                np.flatnonzero((which == number) & has),
                place,
                lambda row, t=text: f"{name} is yes or no, not `{t}`",
                "write yes or no",
            )
        return np.where(has, flags[np.where(has, which, 0)], True)

    def _sizes(self, given: Mapping[str, Array]) -> dict[str, Array]:
        """Elements of each index by project: as many cells as are filled, from the first on."""
        found: dict[str, Array] = {}
        for index in self.model.indices:
            agreed: tuple[str, Array] | None = None
            for fact in self.model.facts:
                cells = [
                    given.get(f"{fact.name}@{element}", np.zeros(self.rows, dtype=bool))
                    for element in range(1, index.most + 1)
                ]
                if fact.index != index.name or not any(each.any() for each in cells):
                    continue
                filled = np.stack(cells)
                size = filled.sum(axis=0)
                first = np.cumprod(filled, axis=0).sum(axis=0)
                self._told(
                    np.flatnonzero(first != size),
                    1,
                    lambda row, n=fact.name: f"{n} has an empty cell before a filled one",
                    "fill elements from the first on",
                )
                if agreed is None:
                    agreed = (fact.name, size)
                else:
                    other = agreed[0]
                    self._told(
                        np.flatnonzero(size != agreed[1]),
                        1,
                        lambda row, n=fact.name, o=other: f"{n} and {o} have different numbers of values",
                        f"both are per {index.name}",
                    )
            found[index.name] = np.full(self.rows, index.most) if agreed is None else agreed[1]
        return found

    def _missing(self, given: Mapping[str, Array], sizes: Mapping[str, Array]) -> None:
        used = used_names(self.model)
        for fact in self.model.facts:
            if fact.name not in used:
                continue
            id = f"{fact.name}@1" if fact.index else fact.name
            if id not in given:
                self.report(1, 1, f"the fact {fact.name} is missing", f"add a column `{id}`", "name")
            else:
                self._told(
                    np.flatnonzero(~given[id]), 1, lambda row, n=fact.name: f"the fact {n} is missing", "fill the cell"
                )


def taken_back(
    declared: m.Fact | m.Setting | m.Judgement,
    name: str,
    numbers: dict[str, Array],
    codes: dict[str, Array],
    flags: dict[str, Array],
    given: dict[str, Array],
) -> Array | None:
    """Takes a column back that the rulebook prescribes itself. Where it gives something else; None for others."""
    takes = prescribed_for(declared)
    if takes is None or name not in given:
        return None
    has = given.pop(name)
    if isinstance(takes, bool):
        return np.asarray(has & (flags.pop(name) != takes))
    if isinstance(takes, str):
        assert isinstance(declared, m.Setting) and isinstance(declared.domain, m.OneOf)
        return np.asarray(has & (codes.pop(name) != declared.domain.values.index(takes)))
    return np.asarray(has & (numbers.pop(name) != float(takes)))


def _is_plain(kind: Any) -> bool:
    import pyarrow as pa

    tests = (
        pa.types.is_integer, pa.types.is_floating, pa.types.is_decimal, pa.types.is_boolean,
        pa.types.is_string, pa.types.is_large_string, pa.types.is_null,
    )  # fmt: skip
    return any(test(kind) for test in tests)


def _in_words(kind: Any) -> str:
    import pyarrow as pa

    if pa.types.is_temporal(kind):
        return "dates" if pa.types.is_date(kind) else "times"
    if pa.types.is_nested(kind):
        return "several things in one cell"
    if pa.types.is_binary(kind) or pa.types.is_large_binary(kind) or pa.types.is_fixed_size_binary(kind):
        return "raw bytes"
    return str(kind)


def _encoded(values: Any) -> tuple[list[str], Array]:
    """The different texts of a column, and which of them each row has (-1 for none)."""
    import pyarrow as pa

    encoded = values.cast(pa.string()).dictionary_encode()
    which = np.asarray(encoded.indices.fill_null(-1).to_numpy(zero_copy_only=False))
    return [str(each) for each in encoded.dictionary.to_pylist()], which
