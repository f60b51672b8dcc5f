"""What a block says, word by word, before any name is looked up: frozen dataclasses.

``start`` and ``end`` count code points from the start of the block, so that a block keeps its tree
when it moves down the page; ``Place`` turns them into lines and columns.
"""

from __future__ import annotations

from bisect import bisect_right
from dataclasses import dataclass

from samesum.spans import Span


@dataclass(frozen=True, slots=True)
class Node:
    start: int
    end: int


@dataclass(frozen=True, slots=True)
class Word(Node):
    """A name, a string without its quotes, or a unit without its square brackets."""

    text: str


# --- expressions and conditions ------------------------------------------------------------


@dataclass(frozen=True, slots=True)
class Literal(Node):
    """A number as written, with its sign where a phrase takes a signed number."""

    text: str
    negative: bool
    percent: bool
    unit: Word | None


@dataclass(frozen=True, slots=True)
class Use(Node):
    """A name on its own."""

    name: Word


@dataclass(frozen=True, slots=True)
class Call(Node):
    name: Word
    arguments: tuple[Tree, ...]


@dataclass(frozen=True, slots=True)
class Reduce(Node):
    name: Word
    body: Tree
    index: Word


@dataclass(frozen=True, slots=True)
class Grouped(Node):
    """``(inner)``, with a unit behind it where the writer gives one."""

    inner: Tree
    unit: Word | None


@dataclass(frozen=True, slots=True)
class Minus(Node):
    operand: Tree


@dataclass(frozen=True, slots=True)
class Chain(Node):
    """``first op term op term …``, either all ``+ -`` or all ``* /``."""

    first: Tree
    rest: tuple[tuple[str, Tree], ...]


@dataclass(frozen=True, slots=True)
class Power(Node):
    base: Tree
    exponent: Tree


@dataclass(frozen=True, slots=True)
class Compared(Node):
    """``first op term op term …`` with comparison signs."""

    first: Tree
    rest: tuple[tuple[str, Tree], ...]


@dataclass(frozen=True, slots=True)
class IsValue(Node):
    subject: Tree
    values: tuple[Word, ...]
    negated: bool


@dataclass(frozen=True, slots=True)
class TakesOption(Node):
    subject: Tree
    option: Word


@dataclass(frozen=True, slots=True)
class Both(Node):
    parts: tuple[Tree, ...]


@dataclass(frozen=True, slots=True)
class Either(Node):
    parts: tuple[Tree, ...]


@dataclass(frozen=True, slots=True)
class Negated(Node):
    part: Tree


Tree = (
    Literal
    | Use
    | Call
    | Reduce
    | Grouped
    | Minus
    | Chain
    | Power
    | Compared
    | IsValue
    | TakesOption
    | Both
    | Either
    | Negated
)


# --- phrases, rows, bodies -----------------------------------------------------------------


@dataclass(frozen=True, slots=True)
class Phrase(Node):
    """One phrase; ``kind`` is the name of its rule in the grammar."""

    kind: str
    words: tuple[Word, ...] = ()
    numbers: tuple[Literal, ...] = ()
    expression: Tree | None = None


@dataclass(frozen=True, slots=True)
class Label(Node):
    """What a table's row is for: a value's name, or a band (``name`` is None)."""

    name: Word | None
    low: Literal | None = None
    high: Literal | None = None


@dataclass(frozen=True, slots=True)
class RowTree(Node):
    labels: tuple[Label, ...]
    value: Tree


@dataclass(frozen=True, slots=True)
class FormulaTree(Node):
    expression: Tree


@dataclass(frozen=True, slots=True)
class WhenTree(Node):
    """``start`` to ``end`` is the line ``when CONDITION`` or ``otherwise`` (condition None)."""

    condition: Tree | None
    body: BodyTree


@dataclass(frozen=True, slots=True)
class CasesTree(Node):
    """``start`` to ``end`` is the line ``cases``."""

    in_order: bool
    branches: tuple[WhenTree, ...]


@dataclass(frozen=True, slots=True)
class OptionTree(Node):
    """``start`` to ``end`` is the option's line."""

    name: Word
    phrases: tuple[Phrase, ...]
    body: BodyTree


@dataclass(frozen=True, slots=True)
class ChoiceTree(Node):
    """``start`` to ``end`` is the line ``choice …``; ``follows`` is the quantity followed, if any; ``takes`` the words
    that say what everybody takes, where nobody chooses."""

    follows: Word | None
    phrases: tuple[Phrase, ...]
    options: tuple[OptionTree, ...]
    takes: tuple[Word, ...] = ()


BodyTree = FormulaTree | CasesTree | ChoiceTree


@dataclass(frozen=True, slots=True)
class Declaration(Node):
    """A whole block. ``start`` to ``end`` covers its first line; parts that a kind of declaration
    does not have are empty. For ``rulebook`` the name is its title."""

    kind: str
    name: Word | None
    units: tuple[Word, ...] = ()
    phrases: tuple[Phrase, ...] = ()
    keys: tuple[Word, ...] = ()
    expression: Tree | None = None
    notes: tuple[Word, ...] = ()
    rows: tuple[RowTree, ...] = ()
    body: BodyTree | None = None


@dataclass(frozen=True, slots=True)
class Place:
    """Where a block stands: its text, and the 1-based line of the file on which it starts."""

    text: str
    first_line: int
    line_starts: tuple[int, ...]

    @staticmethod
    def of(text: str, first_line: int) -> Place:
        """The place of the block ``text`` whose first line is ``first_line`` of the file."""
        starts = [0]
        while (end := text.find("\n", starts[-1])) >= 0:
            starts.append(end + 1)
        return Place(text, first_line, tuple(starts))

    def span(self, start: int, end: int) -> Span:
        """Lines and columns of the stretch from ``start`` to ``end``."""
        first = bisect_right(self.line_starts, start) - 1
        last = max(first, bisect_right(self.line_starts, end) - 1)
        return Span(
            self.first_line + first,
            start - self.line_starts[first] + 1,
            self.first_line + last,
            end - self.line_starts[last] + 1,
        )

    def of_node(self, node: Node) -> Span:
        return self.span(node.start, node.end)
