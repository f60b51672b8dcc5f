"""What is known where a piece of a block is resolved, and where its problems go."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from fractions import Fraction
from typing import Literal

from samesum.problems import Problem
from samesum.reading import tree
from samesum.reading.model import Key, Unit
from samesum.reading.numbers import exact
from samesum.reading.units import UnitMistake, UnitTable, read_unit
from samesum.reading.words import RESERVED, nearest
from samesum.spans import Span

Kind = Literal["fact", "setting", "judgement", "constant", "table", "quantity", "index", "unreadable"]
DEEPEST = 60
# With more names than this no nearest one is looked for: thousands of slips must not take minutes.
MOST_COMPARED = 1_000


@dataclass(frozen=True, slots=True)
class Declared:
    """What a declared name is, as far as whoever uses it needs to know.

    ``unreadable`` is a name whose own declaration failed: its uses stay silent. ``unit`` is None when
    the unit could not be read. ``values`` are the named values of a fact or setting; ``options`` those
    of a quantity whose body is a choice, None when it is something else. ``share`` is the domain of a
    fact or setting that is written in % and lies inside 0 to 1, as plain numbers.
    """

    name: str
    kind: Kind
    span: Span = field(compare=False)  # where it stands means nothing to those who use the name
    unit: Unit | None = None
    index: str = ""
    values: tuple[str, ...] = ()
    yes_no: bool = False
    options: tuple[str, ...] | None = None
    share: tuple[Fraction, Fraction] | None = None


@dataclass(slots=True)
class Notebook:
    """What is written down while resolving: problems, names that do not exist with every place where
    they are used, names mentioned by the declaration at hand, currencies met."""

    problems: list[Problem] = field(default_factory=list)
    absent: dict[str, tuple[str, list[Span]]] = field(default_factory=dict)
    mentions: list[tuple[str, Span]] = field(default_factory=list)
    currencies: list[tuple[str, Span]] = field(default_factory=list)

    def add(self, other: Notebook) -> None:
        """Takes over what another notebook holds."""
        self.problems += other.problems
        self.mentions += other.mentions
        self.currencies += other.currencies
        for says, (remedy, spans) in other.absent.items():
            self.absent.setdefault(says, (remedy, []))[1].extend(spans)


@dataclass(frozen=True, slots=True)
class Scope:
    """``indices`` are the indices whose current element is known here; ``depth`` counts how deep the
    piece at hand is nested; ``only_constants`` is set where nothing may depend on a project."""

    file: str
    place: tree.Place
    notebook: Notebook
    names: Mapping[str, Declared]
    keys: Mapping[str, tuple[Key, ...]]
    units: UnitTable
    indices: tuple[str, ...] = ()
    depth: int = 0
    only_constants: bool = False

    def span(self, node: tree.Node) -> Span:
        return self.place.span(node.start, node.end)

    def report(self, node: tree.Node, says: str, remedy: str = "", kind: str = "shape") -> Span:
        """Writes a problem down; gives the span, ready for an ``Unknown``."""
        span = self.span(node)
        self.notebook.problems.append(Problem(self.file, span, says, remedy, kind))
        return span

    def deeper(self) -> Scope:
        # Written out, since `replace` takes ten times as long and this is asked at every step down.
        return Scope(
            self.file, self.place, self.notebook, self.names, self.keys, self.units,
            self.indices, self.depth + 1, self.only_constants,
        )  # fmt: skip

    def over(self, index: str) -> Scope:
        return replace(self, indices=(*self.indices, index))

    def too_deep(self, node: tree.Node) -> bool:
        """Whether this is nested beyond what anybody reads; reports it."""
        if self.depth > DEEPEST:
            self.report(node, f"this is nested more than {DEEPEST} deep", "give a part of it a quantity of its own")
            return True
        return False

    def find(self, word: tree.Word, wanted: tuple[Kind, ...] = ()) -> Declared | None:
        """What the name is; None, with a problem noted, when it is not declared.

        ``wanted`` are the kinds to look among for the nearest name.
        """
        found = self.names.get(word.text)
        if found is not None:
            self.notebook.mentions.append((word.text, self.span(word)))
            return found
        if word.text in RESERVED:
            self.report(word, f"`{word.text}` is a word of the language and cannot be a name", kind="name")
            return None
        names = self.names if len(self.names) <= MOST_COMPARED else {}
        known = [name for name, other in names.items() if not wanted or other.kind in wanted]
        close = nearest(word.text, known) or nearest(word.text, names)
        remedy = f"did you mean `{close}`?" if close else "declare it, or write the name of something that is declared"
        holders = [other.name for other in self.names.values() if word.text in other.values]
        if holders and not close:
            remedy = f"it is a value of `{holders[0]}`: write `{holders[0]} is {word.text}`"
        self.absent(word, f"`{word.text}` is not declared", remedy)
        return None

    def absent(self, node: tree.Node, says: str, remedy: str) -> None:
        """Writes down a name that does not exist; the same at several places is one problem."""
        self.notebook.absent.setdefault(says, (remedy, []))[1].append(self.span(node))

    def unit(self, word: tree.Word) -> Unit | None:
        """The unit as written; None, with a problem noted, when it cannot be read."""
        found = read_unit(word.text, self.units)
        if isinstance(found, UnitMistake):
            self.report(word, found.says, found.remedy, "unit")
            return None
        return found

    def number(self, literal: tree.Literal) -> Fraction | None:
        """The number as written, percent taken into account, its unit not."""
        value = exact(literal.text)
        if value is None:
            self.report(literal, "this number is too long or too large to calculate with", kind="value")
            return None
        if literal.percent:
            value /= 100
        return -value if literal.negative else value


def absent_problems(notebook: Notebook, file: str) -> list[Problem]:
    """One problem a name, at its first place, with the lines of the others."""
    found = []
    for says, (remedy, spans) in notebook.absent.items():
        first, *others = sorted(set(spans))
        lines = [str(line) for line in sorted({span.line for span in others} - {first.line})]
        if lines:
            more = " and more" if len(lines) > 6 else ""
            says = f"{says} (also on line{'s' if len(lines) > 1 else ''} {', '.join(lines[:6])}{more})"
        found.append(Problem(file, first, says, remedy, "name"))
    return found
