"""Walking over the model's nodes: what an expression, condition or body mentions."""

from __future__ import annotations

from collections.abc import Iterator

from samesum.reading import model as m

Node = m.Expression | m.Condition


def parts(node: Node) -> tuple[Node, ...]:
    """The expressions and conditions directly inside one."""
    match node:
        case m.Lookup(arguments=arguments) | m.Function(arguments=arguments):
            return arguments
        case m.Arithmetic(left=left, right=right) | m.Comparison(left=left, right=right):
            return (left, right)
        case m.Negation(operand=operand) | m.Scaled(operand=operand):
            return (operand,)
        case m.Reduction(body=body):
            return (body,)
        case m.Is(subject=subject):
            return (subject,)
        case m.All(parts=inner) | m.Some(parts=inner):
            return inner
        case m.Not(part=part):
            return (part,)
        case _:
            return ()


def inside(node: Node) -> Iterator[Node]:
    """The node and everything inside it, in reading order."""
    yield node
    for part in parts(node):
        yield from inside(part)


def branches(body: m.Body) -> tuple[m.When | m.Option, ...]:
    """The branches of a body that is a branch point; none for a formula."""
    match body:
        case m.Cases(branches=found):
            return found
        case m.Choice(options=options) | m.Follows(options=options):
            return options
        case _:
            return ()


def condition_of(branch: m.When | m.Option) -> m.Condition | None:
    """What must hold for the branch to be open; None when nothing must."""
    return branch.condition if isinstance(branch, m.When) else branch.only_when


def bodies(body: m.Body) -> Iterator[m.Body]:
    """A body and all bodies nested in it, in reading order."""
    yield body
    for branch in branches(body):
        yield from bodies(branch.body)


def written_in(body: m.Body) -> Iterator[Node]:
    """Every formula and condition written anywhere in a body (costs left out), in reading order."""
    for each in bodies(body):
        if isinstance(each, m.Formula):
            yield each.expression
        for branch in branches(each):
            condition = condition_of(branch)
            if condition is not None:
                yield condition
