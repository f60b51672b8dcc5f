"""Tables: their keys, and rows that are values' names or bands in order."""

from __future__ import annotations

from fractions import Fraction

from samesum.reading import tree
from samesum.reading.model import PLAIN, Band, Key, Row, Unit
from samesum.reading.phrases import in_unit
from samesum.reading.scope import Scope
from samesum.reading.typed import say_unit
from samesum.reading.units import conversion, same_dimension
from samesum.reading.words import listing, nearest


def resolve_keys(table: tree.Declaration, scope: Scope) -> tuple[Key, ...] | None:
    """What the table is called with; None, with a problem noted, when that cannot be told."""
    name = table.name
    assert name is not None
    if not table.keys:
        scope.report(name, f"the table `{name.text}` does not say what it is by", "write `by` and a fact or setting")
        return None
    keys = []
    for at, word in enumerate(table.keys):
        labels = [row.labels[at] for row in table.rows if len(row.labels) == len(table.keys)]
        bands = [label for label in labels if label.name is None]
        key = _band_key(word, bands, scope) if bands else _named_key(word, scope)
        if key is None:
            return None
        keys.append(key)
    texts = [word.text for word in table.keys]
    for at, word in enumerate(table.keys):
        if word.text in texts[:at]:
            scope.report(word, f"the table is by `{word.text}` twice", "leave out one of the two")
    return tuple(keys)


def _named_key(word: tree.Word, scope: Scope) -> Key | None:
    declared = scope.find(word, ("fact", "setting"))
    if declared is None or declared.kind == "unreadable":
        return None
    if declared.yes_no:
        scope.report(word, f"`{word.text}` is yes or no, which is no value that a row can name",
                     "declare it with `one of` two names, or use `cases`")  # fmt: skip
        return None
    if declared.kind not in ("fact", "setting") or not declared.values:
        scope.report(word, f"`{word.text}` has no named values for the rows",
                     "write rows of bands, as in `up to 10 = …`, or a fact with `one of` values")  # fmt: skip
        return None
    return Key(word.text, False, declared.values, PLAIN, scope.span(word))


def _band_key(word: tree.Word, labels: list[tree.Label], scope: Scope) -> Key | None:
    """A key of bands: in the unit written in them, else in that of what the key is called after."""
    for label in labels:
        for literal in (label.low, label.high):
            if literal is not None and literal.unit is not None:
                unit = scope.unit(literal.unit)
                return None if unit is None else Key(word.text, True, (), unit, scope.span(word))
    declared = scope.names.get(word.text)
    unit = PLAIN
    if declared is not None:
        scope.notebook.mentions.append((word.text, scope.span(word)))
        if declared.kind == "unreadable":
            return None
        unit = declared.unit or PLAIN
    return Key(word.text, True, (), unit, scope.span(word))


def resolve_rows(table: tree.Declaration, keys: tuple[Key, ...], unit: Unit | None, scope: Scope) -> tuple[Row, ...]:
    """The rows that are whole; reports those that are not, that repeat one another or overlap."""
    rows: list[Row] = []
    # Only rows with the same names can clash, so that a table of thousands of rows is read at once.
    groups: dict[tuple[str, ...], list[Row]] = {}
    for row in table.rows:
        if len(row.labels) != len(keys):
            names = listing([key.name for key in keys], "and")
            scope.report(row, f"the table is by {names}, so a row starts with {len(keys)} "
                         f"label{'s' if len(keys) > 1 else ''}, not {len(row.labels)}")  # fmt: skip
            continue
        labels = [_label(label, key, scope) for label, key in zip(row.labels, keys, strict=True)]
        value = _value(row, unit, scope)
        whole = tuple(label for label in labels if label is not None)
        if value is None or len(whole) < len(labels):
            continue
        group = groups.setdefault(tuple(label for label in whole if isinstance(label, str)), [])
        if not _clashes(row, whole, group, scope):
            group.append(Row(whole, value, scope.span(row)))
            rows.append(group[-1])
    return tuple(rows)


def _label(label: tree.Label, key: Key, scope: Scope) -> str | Band | None:
    if key.bands:
        if label.name is not None:
            scope.report(label, f"`{label.name.text}` is a name among bands",
                         "write `up to …`, `above … up to …` or `above …`")  # fmt: skip
            return None
        low = in_unit(label.low, key.unit, scope) if label.low is not None else None
        high = in_unit(label.high, key.unit, scope) if label.high is not None else None
        if (label.low is not None and low is None) or (label.high is not None and high is None):
            return None
        if low is not None and high is not None and low >= high:
            scope.report(label, "this band ends where it starts, or before", "write the smaller number first", "value")
            return None
        return Band(low, high)
    if label.name is None:
        return None
    if label.name.text not in key.values:
        close = nearest(label.name.text, key.values)
        scope.absent(label, f"`{label.name.text}` is no value of `{key.name}`",
                     f"did you mean `{close}`?" if close else f"it can be {listing(key.values)}")  # fmt: skip
        return None
    return label.name.text


def _clashes(row: tree.RowTree, labels: tuple[str | Band, ...], group: list[Row], scope: Scope) -> bool:
    """Whether the row is for what one of ``group`` (the rows before with the same names) is for; reports it."""
    bands = _bands(labels)
    if group and len(bands) == 1 and _after(bands[0], _bands(group[-1].labels)[0]):
        return False
    for other in group:
        if all(_overlap(mine, theirs) for mine, theirs in zip(bands, _bands(other.labels), strict=True)):
            says = "repeats" if labels == other.labels else "overlaps with"
            remedy = "one argument finds one row"
            scope.report(row, f"this row {says} the one on line {other.span.line}", remedy, "value")
            return True
    if group and len(bands) == 1:
        scope.report(row, "this band is out of order", "write the bands from the lowest to the highest", "value")
    return False


def _bands(labels: tuple[str | Band, ...]) -> tuple[Band, ...]:
    return tuple(label for label in labels if isinstance(label, Band))


def _overlap(one: Band, other: Band) -> bool:
    return (other.high is None or one.low is None or one.low < other.high) and (
        one.high is None or other.low is None or other.low < one.high
    )


def _after(band: Band, before: Band) -> bool:
    return band.low is not None and before.high is not None and band.low >= before.high


# --- the values of rows ----------------------------------------------------------------------


def _value(row: tree.RowTree, unit: Unit | None, scope: Scope) -> Fraction | None:
    """The row's number in the table's unit; a number without a unit is in that unit already."""
    found = _calculated(row.value, scope)
    if found is None or unit is None:
        return None
    value, own = found
    if own is None or (value == 0 and not own.dimension):
        return value
    if not same_dimension(own, unit):
        says = f"the table is in [{unit.text}]" if unit.text else "the table has no unit"
        remedy = f"write the number in [{unit.text}]" if unit.text else "leave the unit out, or give the table one"
        scope.report(row.value, f"{says}, but this is {say_unit(own)}", remedy, "unit")
        return None
    return value * conversion(own, unit)


def _calculated(node: tree.Tree, scope: Scope) -> tuple[Fraction, Unit | None] | None:
    """A number, a negative one, or one divided by another (44/12); nothing that has to be looked up."""
    match node:
        case tree.Literal():
            value = scope.number(node)
            own = scope.unit(node.unit) if node.unit is not None else PLAIN if node.percent else None
            if value is None or (node.unit is not None and own is None):
                return None
            return value, own
        case tree.Minus(operand=tree.Literal() | tree.Chain() as operand):
            inner = _calculated(operand, scope)
            return None if inner is None else (-inner[0], inner[1])
        case tree.Chain(first=tree.Literal(unit=None) as above, rest=(("/", tree.Literal(unit=None) as below),)):
            top, bottom = scope.number(above), scope.number(below)
            if top is None or bottom is None:
                return None
            if bottom == 0:
                scope.report(below, "this divides by zero", kind="value")
                return None
            return top / bottom, None
        case _:
            scope.report(node, "a row gives a number", "calculate in a quantity; a table holds published numbers")
            return None
