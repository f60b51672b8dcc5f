"""Units: what a text in square brackets means, and how units multiply, divide and convert.

The units stand in ``grammar/units.txt``. A unit of mass, volume or energy may be followed by the
substance it is of (``t CO2e``, ``kg d.m.``, ``m3 CH4``); the substance is a base unit of its own, so
that two substances never convert into each other. Everything is exact.
"""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass, field
from fractions import Fraction

from samesum.reading.model import PLAIN, Unit
from samesum.reading.words import nearest
from samesum.shipped import shipped_folder

MONEY = "money_"
_OF_A_SUBSTANCE = ("mass", "volume", "normal_volume", "energy")
_WORD = re.compile(r"[^\W\d_][\w.\-]*|%|°C")
_TOKEN = re.compile(r"\s*(?:(per\b)|([^\W\d_][\w.\-]*|%|°C)|(\d+)|([*/^()·×-]|\*\*))")
_HIGHEST_POWER = 12
# `tCO2e` and the like, written in one word.
_JOINED = re.compile(r"([a-zA-Z]{1,2}?)((?:CO2|CH4|N2O|C|N|HFC|SF6|d\.m)[\w.\-]*)\Z")

REMEMBERED_UNITS = 4_000
Terms = tuple[tuple[str, Fraction], ...]


@dataclass(frozen=True, slots=True)
class UnitTable:
    """Each unit's name → its factor and base units, as ``units.txt`` has them.

    ``read`` and ``products`` remember what texts and products came to, since a rulebook uses few units
    again and again; they change no answer.
    """

    units: Mapping[str, tuple[Fraction, Terms]]
    read: dict[str, Unit | UnitMistake] = field(default_factory=dict, compare=False, repr=False)
    products: dict[tuple[str, str, int], Unit] = field(default_factory=dict, compare=False, repr=False)


@dataclass(frozen=True, slots=True)
class UnitMistake:
    """A unit that cannot be read."""

    says: str
    remedy: str


def load_units() -> UnitTable:
    """Reads ``grammar/units.txt``. A line that cannot be read is a ValueError: the file is ours."""
    known: dict[str, tuple[Fraction, Terms]] = {}
    lines = (shipped_folder("grammar") / "units.txt").read_text(encoding="utf-8").splitlines()
    for number, line in enumerate(lines, 1):
        text = line.strip()
        if not text or text.startswith("#"):
            continue
        name, meaning, *others = (part.strip() for part in text.split("="))
        for each in (name, *others):
            if each in known:
                raise ValueError(f"units.txt line {number}: {each} is defined twice")
            known[each] = _meaning(meaning, known)
    return UnitTable(known)


def _meaning(text: str, known: Mapping[str, tuple[Fraction, Terms]]) -> tuple[Fraction, Terms]:
    if text.startswith("["):
        return Fraction(1), ((text[1:-1], Fraction(1)),)
    factor = Fraction(1)
    terms: Terms = ()
    sign = 1
    for word in text.replace("**", " ** ").replace("*", " * ").replace(" *  * ", " ** ").split():
        if word in ("*", "/"):
            sign = 1 if word == "*" else -1
        elif word.isdigit() and "**" not in text:
            factor *= Fraction(int(word)) ** sign
        elif word == "**":
            break
        else:
            unit_factor, unit_terms = known[word]
            factor *= unit_factor**sign
            terms = _merged(terms, unit_terms, sign)
    if "**" in text:
        power = int(text.split("**")[1])
        return factor**power, tuple((name, exponent * power) for name, exponent in terms)
    return factor, terms


def _merged(left: Terms, right: Terms, sign: int | Fraction = 1) -> Terms:
    powers = dict(left)
    for name, power in right:
        powers[name] = powers.get(name, Fraction(0)) + power * sign
    return tuple((name, power) for name, power in powers.items() if power)


# --- reading a unit's text -------------------------------------------------------------------


def read_unit(text: str, table: UnitTable) -> Unit | UnitMistake:
    """The unit that ``text`` (without the square brackets) means."""
    known = table.read.get(text)
    if known is None:
        known = _read(text, table)
        if len(table.read) < REMEMBERED_UNITS:
            table.read[text] = known
    return known


def _read(text: str, table: UnitTable) -> Unit | UnitMistake:
    if not text.strip():
        return UnitMistake("the square brackets hold no unit", "write the unit, as in [ha], or leave the brackets out")
    try:
        terms = _Reader(re.sub(r"\bdeg C\b", "degC", text), table).product()
    except _Unreadable as unreadable:
        return unreadable.mistake
    return unit_of(terms, table, text)


def unit_of(terms: Terms, table: UnitTable, text: str | None = None) -> Unit:
    """The unit with these terms: units as written (``t CO2e`` is one), each with its power."""
    factor = Fraction(1)
    bases: Terms = ()
    for name, power in terms:
        unit, _, substance = name.partition(" ")
        unit_factor, unit_bases = table.units[unit]
        factor *= _power(unit_factor, power)
        bases = _merged(bases, unit_bases, power)
        if substance:
            bases = _merged(bases, ((f"of {substance}", Fraction(1)),), power)
    return Unit(_written(terms) if text is None else text, factor, tuple(sorted(bases)))


class _Unreadable(Exception):
    def __init__(self, says: str, remedy: str = "") -> None:
        super().__init__(says)
        self.mistake = UnitMistake(says, remedy)


class _Reader:
    """Reads ``a b/c d * e^2``: what stands side by side binds tighter than ``/`` and ``*``."""

    def __init__(self, text: str, table: UnitTable) -> None:
        self.text = text
        self.table = table
        self.tokens: list[str] = []
        self.at = 0
        position = 0
        while position < len(text.rstrip()):
            match = _TOKEN.match(text, position)
            if match is None:
                raise _Unreadable(f"{text[position:].strip()[0]!r} cannot stand in the unit [{text}]", self._form())
            self.tokens.append("/" if match[1] else match[2] or match[3] or match[4])
            position = match.end()

    @staticmethod
    def _form() -> str:
        return "write units like [t CO2e/ha], [kWh/(head year)] or [m^2]"

    def peek(self) -> str:
        return self.tokens[self.at] if self.at < len(self.tokens) else ""

    def take(self) -> str:
        token = self.peek()
        self.at += 1
        return token

    def product(self, depth: int = 0) -> Terms:
        terms = self.side_by_side(depth)
        while self.peek() in ("/", "*", "·", "×"):
            sign = -1 if self.take() == "/" else 1
            terms = _merged(terms, self.side_by_side(depth), sign)
        if self.peek() and not (depth and self.peek() == ")"):
            raise _Unreadable(f"the unit [{self.text}] cannot be read from {self.peek()!r} on", self._form())
        return terms

    def side_by_side(self, depth: int) -> Terms:
        terms = self.single(depth)
        while self.peek() == "(" or _WORD.fullmatch(self.peek()):
            terms = _merged(terms, self.single(depth, terms))
        return terms

    def single(self, depth: int, before: Terms = ()) -> Terms:
        token = self.take()
        if token == "(" and depth < 8:
            terms = self.product(depth + 1)
            if self.take() != ")":
                raise _Unreadable(f"a round bracket is not closed in the unit [{self.text}]", "close it with )")
        elif token == "1" and self.peek() == "/":
            return ()
        elif _WORD.fullmatch(token):
            terms = ((self.name(token, before), Fraction(1)),)
        else:
            raise _Unreadable(
                f"the unit [{self.text}] has {token!r} where a unit belongs"
                if token
                else f"the unit [{self.text}] ends too early",
                self._form(),
            )
        if self.peek() in ("^", "**"):
            self.take()
            power = self.power()
            terms = tuple((name, exponent * power) for name, exponent in terms)
        return terms

    def power(self) -> Fraction:
        bracket = self.peek() == "("
        if bracket:
            self.take()
        sign = 1
        if self.peek() == "-":
            self.take()
            sign = -1
        number = self.take()
        value = Fraction(int(number)) if number.isdigit() and len(number) < 4 else Fraction(0)
        if bracket and self.peek() == "/":
            self.take()
            below = self.take()
            value = value / int(below) if below.isdigit() and 0 < int(below) <= _HIGHEST_POWER else Fraction(0)
        if bracket and self.take() != ")":
            value = Fraction(0)
        if not 0 < value <= _HIGHEST_POWER:
            says = f"a power in the unit [{self.text}] cannot be read"
            raise _Unreadable(says, "write a small whole number, as in m^2")
        return value * sign

    def name(self, word: str, before: Terms) -> str:
        """A unit's name, with the substance it is of where one follows."""
        if word not in self.table.units:
            if before:
                raise _Unreadable(
                    f"[{before[-1][0]} {word}]: only a unit of mass, volume or energy is followed by a substance",
                    hint(word, self.table),
                )
            raise _Unreadable(f"there is no unit {word!r}", hint(word, self.table))
        words = [word]
        if _takes_a_substance(self.table.units[word][1]):
            while _WORD.fullmatch(self.peek()) and self.peek() not in self.table.units:
                words.append(self.take())
        return " ".join(words)


def hint(word: str, table: UnitTable) -> str:
    """What to write instead of the unknown unit ``word``."""
    joined = _JOINED.match(word)
    if joined is not None and joined[1] in table.units:
        return f"write [{joined[1]} {joined[2]}], the unit and its substance apart"
    if re.match(r"CO2|CH4|N2O|C\Z|d\.m", word):
        return f"a substance follows a unit, as in [t {word}]"
    close = "tonne" if word.lower() in ("ton", "tons") else nearest(word, table.units)
    return f"did you mean {close}?" if close else "the language reference lists the units"


def _takes_a_substance(bases: Terms) -> bool:
    return any(bases == ((name, Fraction(1)),) for name in _OF_A_SUBSTANCE) or bases == (("length", Fraction(3)),)


# --- calculating with units ------------------------------------------------------------------


def same_dimension(left: Unit, right: Unit) -> bool:
    return left.dimension == right.dimension


def conversion(source: Unit, target: Unit) -> Fraction:
    """What a number in ``source`` is multiplied by to be a number in ``target``. Both must have the
    same dimension."""
    if source.factor == target.factor:
        return Fraction(1)
    return source.factor / target.factor


def money_of(unit: Unit) -> str:
    """The currency that ``unit`` is an amount of, "" when it is none."""
    if len(unit.dimension) == 1:
        base, power = unit.dimension[0]
        if base.startswith(MONEY) and power == 1:
            return base.removeprefix(MONEY)
    return ""


def multiplied(left: Unit, right: Unit, table: UnitTable, sign: int = 1) -> Unit:
    """The unit of left × right (sign 1) or left / right (sign −1)."""
    if right == PLAIN:
        return left
    key = (left.text, right.text, sign)
    known = table.products.get(key)
    if known is None:
        known = unit_of(_merged(_terms(left, table), _terms(right, table), sign), table)
        if len(table.products) < REMEMBERED_UNITS:
            table.products[key] = known
    return known


def raised(unit: Unit, power: Fraction, table: UnitTable) -> Unit:
    """The unit to the power of ``power``; a root that leaves no exact factor goes through base units."""
    if not unit.text:
        return PLAIN
    return unit_of(tuple((name, exponent * power) for name, exponent in _terms(unit, table)), table)


def _terms(unit: Unit, table: UnitTable) -> Terms:
    if not unit.text:
        return ()
    return _Reader(re.sub(r"\bdeg C\b", "degC", unit.text), table).product()


def _written(terms: Terms) -> str:
    def one(name: str, power: Fraction) -> str:
        if power == 1:
            return name
        return f"{name}^{power}" if power.denominator == 1 else f"{name}^({power})"

    above = " ".join(one(name, power) for name, power in terms if power > 0)
    below = [one(name, -power) for name, power in terms if power < 0]
    if not below:
        return above
    return f"{above or '1'}/{below[0] if len(below) == 1 else '(' + ' '.join(below) + ')'}"


def _power(factor: Fraction, power: Fraction) -> Fraction:
    """Exact for whole powers, and for roots that come out; the root of an odd unit such as a tonne is
    as near as floating point gets, which matters only if it is then added to the root of a kilogram."""
    if power.denominator == 1:
        return factor ** int(power)
    return Fraction(float(factor) ** float(power))
