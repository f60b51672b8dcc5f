"""Numbers as projects give them: in a text, perhaps with a unit behind it, and every mistake in them."""

from __future__ import annotations

import re
from dataclasses import dataclass, field
from fractions import Fraction

from samesum.problems import Problem
from samesum.reading import model as m
from samesum.reading.domains import unit_behind
from samesum.reading.numbers import exact, without_comma
from samesum.reading.units import UnitMistake, UnitTable, load_units, read_unit, same_dimension
from samesum.spans import Span

_NUMBER = re.compile(
    r"([+-]?(?:\d[\d_]*(?:\.\d[\d_]*)?|\.\d[\d_]*)(?:[eE][+-]?\d+)?)(?:\s*/\s*(\d+))?\s*(.*)", re.DOTALL
)
_WITH_COMMA = re.compile(r"([+-]?\d[\d_]*),(\d[\d_.]*(?:,\d{3})*)(?![\d,]).*", re.DOTALL)


@dataclass(slots=True)
class Numbers:
    """Reads numbers, each in the unit it should have, converting from the unit written behind it."""

    file: str
    units: UnitTable = field(default_factory=load_units)
    problems: list[Problem] = field(default_factory=list)

    def report(self, span: Span, says: str, remedy: str = "", kind: str = "value") -> None:
        self.problems.append(Problem(self.file, span, says, remedy, kind))

    def read(self, text: str, unit: m.Unit, name: str, span: Span) -> Fraction | None:
        """The number in ``unit``, converted from the unit written behind it, if one is."""
        comma = _WITH_COMMA.fullmatch(text)
        if comma is not None:
            self.report(span, f"{name}: a number has no comma", without_comma(comma[1], comma[2]))
            return None
        found = _NUMBER.fullmatch(text)
        value = exact(found[1].removeprefix("+").removeprefix("-")) if found else None
        if found is None or value is None:
            remedy = f"write a number, as in `{name}: 12{unit_behind(unit)}`"
            self.report(span, f"{name}: `{text}` is no number", remedy)
            return None
        if found[1].startswith("-"):
            value = -value
        if found[2]:
            if not int(found[2]):
                self.report(span, f"{name}: `{text}` divides by zero", "write a number")
                return None
            value /= int(found[2])
        written = found[3].strip().removeprefix("[").removesuffix("]").strip()
        if not written:
            return value
        given = read_unit(written, self.units)
        if isinstance(given, UnitMistake):
            self.report(span, f"{name}: {given.says}", given.remedy, "unit")
            return None
        if not same_dimension(given, unit):
            wanted = f"[{unit.text}]" if unit.text else "a plain number"
            self.report(
                span, f"{name} is in {wanted}, not in [{written}]", "convert the value, or leave the unit out", "unit"
            )
            return None
        return value * given.factor / unit.factor
