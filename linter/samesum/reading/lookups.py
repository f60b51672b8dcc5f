"""Looking something up in a table: as many arguments as keys, each a value or a number of its key."""

from __future__ import annotations

from collections.abc import Callable
from typing import Literal

from samesum.reading import tree
from samesum.reading.model import PLAIN, Expression, Key, Lookup, Reference, Unknown, Value
from samesum.reading.scope import Scope
from samesum.reading.typed import Typed, fit, index_is_known, unknown
from samesum.reading.words import listing, nearest

Resolve = Callable[[tree.Tree, Scope], Typed]


def resolve_lookup(node: tree.Call, scope: Scope, resolve: Resolve) -> Typed:
    """A table called with its keys; ``resolve`` is what resolves the expressions among them."""
    table = scope.find(node.name)
    assert table is not None
    keys = scope.keys.get(table.name)
    if scope.only_constants:
        scope.report(node.name, f"`{table.name}` is a table: a constant may use numbers and other constants only")
        return unknown(scope, node)
    if keys is None:
        return unknown(scope, node)
    if len(keys) != len(node.arguments):
        names = listing([key.name for key in keys], "and")
        takes = f"it takes {len(keys)} in its brackets, not {len(node.arguments)}"
        scope.report(node, f"`{table.name}` is by {names}, so {takes}")
        return unknown(scope, node)
    arguments = tuple(
        _argument(key, argument, scope, resolve) for key, argument in zip(keys, node.arguments, strict=True)
    )
    return Typed(Lookup(table.name, arguments, table.unit or PLAIN, scope.span(node)), table.unit)


def _argument(key: Key, argument: tree.Tree, scope: Scope, resolve: Resolve) -> Expression:
    if key.bands:
        typed = resolve(argument, scope)
        return fit(typed, key.unit, argument, scope, f"the bands of `{key.name}` are in")
    if not isinstance(argument, tree.Use):
        scope.report(argument, f"the table takes a value of `{key.name}` here, not a calculation",
                     f"write `{key.name}` or one of {listing(key.values)}")  # fmt: skip
        return Unknown(scope.span(argument))
    word = argument.name
    if word.text in key.values:
        return Value(word.text, scope.span(word))
    declared = scope.names.get(word.text)
    if declared is None:
        close = nearest(word.text, [key.name, *key.values])
        scope.absent(word, f"`{word.text}` is no value of `{key.name}`",
                     f"did you mean `{close}`?" if close else f"it can be {listing(key.values)}")  # fmt: skip
        return Unknown(scope.span(word))
    scope.find(word)
    if declared.kind == "unreadable":
        return Unknown(scope.span(word))
    if declared.kind not in ("fact", "setting") or not declared.values:
        scope.report(word, f"the table takes a value of `{key.name}` here, and `{word.text}` has none",
                     f"write `{key.name}` or one of {listing(key.values)}")  # fmt: skip
        return Unknown(scope.span(word))
    strange = [value for value in declared.values if value not in key.values]
    if strange:
        scope.report(word, f"`{word.text}` can be {listing(strange)}, which the table's `{key.name}` cannot")
        return Unknown(scope.span(word))
    if not index_is_known(word, declared, scope, number=False):
        return Unknown(scope.span(word))
    kind: Literal["fact", "setting"] = "fact" if declared.kind == "fact" else "setting"
    return Reference(word.text, kind, declared.index, PLAIN, scope.span(word))
