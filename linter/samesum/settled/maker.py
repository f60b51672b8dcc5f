"""What stands in the place of a choice, a setting or a judgement that nobody decides."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace
from fractions import Fraction
from itertools import combinations

from samesum.reading import model as m
from samesum.settled.answers import Answer, all_of, never, not_so, written
from samesum.spans import Span


def by_preference(options: tuple[m.Option, ...]) -> tuple[int, ...]:
    """The options from the most to the least fit to stand for the truth: the reference, then those with the lowest
    stated errors, then the others as written."""

    def rank(number: int) -> tuple[bool, bool, Fraction, int]:
        option = options[number]
        return (not option.reference, option.error is None, option.error or Fraction(0), number)

    return tuple(sorted(range(len(options)), key=rank))


@dataclass(slots=True)
class Maker:
    """Bodies, conditions and formulas as they are once nothing is left to be taken.

    ``choices``: as ``_leaders`` gives them. ``values``: what settings and judgements take. ``asked``: quantities
    whose own choice is followed or asked. ``made``: quantities that stand for options, to be added."""

    choices: Mapping[str, m.Quantity]
    values: Mapping[str, Fraction | str | bool | None]
    asked: frozenset[str]
    made: list[m.Quantity] = field(default_factory=list)

    # -- bodies ---------------------------------------------------------------------------

    def body(self, quantity: m.Quantity, body: m.Body, id: str) -> m.Body:
        match body:
            case m.Formula(expression=expression):
                return replace(body, expression=self.expression(expression))
            case m.Cases():
                return self._cases(quantity, body, id)
            case m.Choice(takes=takes) if takes:
                return self._taken(quantity, body, id)
            case m.Follows() if body.quantity in self.choices:
                return self._follows(quantity, body, id)
            case m.Choice(options=options) | m.Follows(options=options):
                return replace(body, options=tuple(self._option(quantity, each, id) for each in options))
            case _:
                return body

    def _cases(self, quantity: m.Quantity, body: m.Cases, id: str) -> m.Body:
        answers = [True if each.condition is None else self._answer(each.condition) for each in body.branches]
        asked = [
            each for each, answer in zip(body.branches, answers, strict=True) if each.condition and answer is not False
        ]
        branches: list[m.When] = []
        for when, answer in zip(body.branches, answers, strict=True):
            if answer is False:
                continue
            inner = self.body(quantity, when.body, f"{id}/{when.name}")
            # Of conditions without an order, one that always holds still overlaps with the others.
            surely = answer is True and (when.condition is None or body.in_order or len(asked) == 1)
            condition = None if surely else written(answer, when.span)
            branches.append(replace(when, condition=condition, body=inner))
            if surely:
                break
        if not branches:
            first = body.branches[0]
            inner = self.body(quantity, first.body, f"{id}/{first.name}")
            branches = [replace(first, condition=never(first.span), body=inner)]
        if branches[0].condition is None:
            return branches[0].body
        return replace(body, branches=tuple(branches))

    def _option(self, quantity: m.Quantity, option: m.Option, id: str) -> m.Option:
        guard = self._guard(option)
        return replace(
            option,
            body=self.body(quantity, option.body, f"{id}/{option.name}"),
            only_when=None if guard is True else written(guard, option.span),
            cost=self.expression(option.cost) if option.cost is not None else None,
        )

    def _taken(self, quantity: m.Quantity, body: m.Choice, id: str) -> m.Body:
        if body.takes not in (m.LOWEST, m.HIGHEST):
            inner: dict[str, m.Body] = {}
            for option in body.options:
                whole = self.body(quantity, option.body, f"{id}/{option.name}")
                inner[option.name] = whole if isinstance(whole, m.Formula) else self._apart(quantity, option, whole, id)
            return self._in_order(body, inner, body.span)
        return self._extreme(quantity, body, self._terms(quantity, body, id), id)

    def _follows(self, quantity: m.Quantity, body: m.Follows, id: str) -> m.Body:
        leading = self.choices[body.quantity]
        leader = leading.body
        assert isinstance(leader, m.Choice)
        inner = {each.name: self.body(quantity, each.body, f"{id}/{each.name}") for each in body.options}
        if leader.takes not in (m.LOWEST, m.HIGHEST):
            return self._in_order(leader, inner, body.span)
        branches: list[m.When] = []
        for number, option in enumerate(leader.options, start=1):
            was = self._is_extreme(option.name, leader, leading, body.span)
            last = number == len(leader.options)  # one of them was the lowest
            condition = None if last and branches else written(was, body.span)
            branches.append(m.When(option.name, condition, inner[option.name], option.span))
        return settled_cases(branches, body.span)

    def _in_order(self, choice: m.Choice, inner: Mapping[str, m.Body], span: Span) -> m.Body:
        """The mandated option's body where it is open, else that of the first other one that is."""
        branches: list[m.When] = []
        for option in _order(choice):
            guard = self._guard(option)
            if guard is False:
                continue
            condition = None if guard is True else written(guard, option.span)
            branches.append(m.When(option.name, condition, inner[option.name], option.span))
            if guard is True:
                break
        if not branches:
            first = _order(choice)[0]
            branches = [m.When("1", never(span), inner[first.name], first.span)]
        return branches[0].body if branches[0].condition is None else settled_cases(branches, span)

    # -- the lowest or highest ------------------------------------------------------------------

    def _terms(self, quantity: m.Quantity, body: m.Choice, id: str) -> dict[str, m.Expression]:
        """What each option gives, as a part of a formula; as a quantity of its own where it is more than a formula,
        or where somebody asks which of them it was."""
        asked = body is quantity.body and quantity.name in self.asked
        terms: dict[str, m.Expression] = {}
        for option in body.options:
            inner = self.body(quantity, option.body, f"{id}/{option.name}")
            if isinstance(inner, m.Formula) and not asked:
                terms[option.name] = inner.expression
                continue
            whole = self._apart(quantity, option, inner, id).expression
            terms[option.name] = whole
            guard = self._guard(option)
            if asked and not isinstance(guard, bool):
                self.made.append(_where_open(quantity, option, guard, whole))
        return terms

    def _apart(self, quantity: m.Quantity, option: m.Option, body: m.Body, id: str) -> m.Formula:
        """An option as a quantity of its own, so that what is decided inside keeps its id; its name in its place."""
        name = f"{id}/{option.name}"
        about = replace(quantity.about, span=option.span)
        self.made.append(m.Quantity(name, quantity.unit, quantity.index, body, about))
        whole = m.Reference(name, "quantity", quantity.index, quantity.unit, option.span)
        return m.Formula(whole, option.span)

    def _extreme(self, quantity: m.Quantity, body: m.Choice, terms: Mapping[str, m.Expression], id: str) -> m.Body:
        """The lowest of the options that are open. Of sets of options the larger come first: the first that is open
        altogether holds every option that is."""
        guards = {each.name: self._guard(each) for each in body.options}
        always = {name for name, guard in guards.items() if guard is True}
        sometimes = [name for name, guard in guards.items() if not isinstance(guard, bool)]
        if len(sometimes) > MOST_SETS_OF:
            return self._one_after_another(quantity, body, terms, id)
        branches: list[m.When] = []
        for size in range(len(sometimes), -1, -1):
            for among in combinations(sometimes, size):
                inside = [terms[each.name] for each in body.options if each.name in always or each.name in among]
                if not inside:
                    continue
                asked = all_of([guards[name] for name in among], body.span)
                condition = None if isinstance(asked, bool) else asked
                name = " and ".join(among) if condition is not None else "otherwise"
                branches.append(m.When(name, condition, self._one_of(quantity, body, inside), body.span))
        if not branches:
            number = m.Formula(m.Number(Fraction(0), quantity.unit, body.span), body.span)
            branches = [m.When("1", never(body.span), number, body.span)]
        return branches[0].body if branches[0].condition is None else settled_cases(branches, body.span)

    def _one_after_another(
        self, quantity: m.Quantity, body: m.Choice, terms: Mapping[str, m.Expression], id: str
    ) -> m.Body:
        """The lowest where the sets of open options are too many to be told apart: each option against the lowest of
        those before it, in quantities that nobody wrote."""
        span = body.span
        guards = {each.name: self._guard(each) for each in body.options}
        always = [terms[name] for name, guard in guards.items() if guard is True]
        sometimes = [(name, guard) for name, guard in guards.items() if not isinstance(guard, bool)]
        before: m.Expression | None = self._one_of(quantity, body, always).expression if always else None
        any_before: list[m.Condition] = []
        whole: m.Body = body
        for number, (name, guard) in enumerate(sometimes, start=1):
            own = terms[name]
            branches: list[m.When] = []
            if before is not None:
                some = None if always else m.Some(tuple(any_before), span) if len(any_before) > 1 else any_before[0]
                both = guard if some is None else m.All((guard, some), span)
                branches = [m.When("1", both, self._one_of(quantity, body, [before, own]), span)]
                if some is not None:
                    branches.append(m.When("2", guard, m.Formula(own, span), span))
                last = "otherwise" if some is None else "3"
                branches.append(m.When(last, some, m.Formula(before, span), span))
            else:
                branches = [m.When("1", guard, m.Formula(own, span), span)]
            whole = settled_cases(branches, span)
            any_before.append(guard)
            if number < len(sometimes):
                helper = f"{id}/{name}{WHERE_OPEN} or one before it"
                about = replace(quantity.about, span=span)
                self.made.append(m.Quantity(helper, quantity.unit, quantity.index, whole, about))
                before = m.Reference(helper, "quantity", quantity.index, quantity.unit, span)
        return whole

    def _one_of(self, quantity: m.Quantity, body: m.Choice, among: list[m.Expression]) -> m.Formula:
        function = "min" if body.takes == m.LOWEST else "max"
        lowest = m.Function(function, tuple(among), quantity.unit, body.span)
        return m.Formula(among[0] if len(among) == 1 else lowest, body.span)

    def _guard(self, option: m.Option) -> Answer:
        return self._answer(option.only_when) if option.only_when is not None else True

    def _is_extreme(self, name: str, choice: m.Choice, quantity: m.Quantity, span: Span) -> Answer:
        """Whether the option of that name was the lowest; of several alike the one most fit to stand for the truth."""

        def reference(name: str) -> m.Reference:
            return m.Reference(name, "quantity", quantity.index, quantity.unit, span)

        def equals(option: m.Option) -> Answer:
            guard = self._guard(option)
            if guard is False:
                return False
            name = f"{quantity.name}/{option.name}" if guard is True else _where_open_name(quantity, option)
            return m.Comparison("=", reference(quantity.name), reference(name), span)

        parts: list[Answer] = []
        for number in by_preference(choice.options):
            option = choice.options[number]
            if option.name == name:
                return all_of([*parts, equals(option)], span)
            parts.append(not_so(equals(option), span))
        return False

    # -- conditions and expressions -----------------------------------------------------------------

    def condition(self, condition: m.Condition) -> m.Condition:
        return written(self._answer(condition), condition.span)

    def _answer(self, condition: m.Condition) -> Answer:
        """The condition as it is now, or whether it always or never holds."""
        match condition:
            case m.All(parts=parts, span=span):
                return all_of([self._answer(part) for part in parts], span)
            case m.Some(parts=parts, span=span):
                found = [self._answer(part) for part in parts]
                if any(each is True for each in found):
                    return True
                left = tuple(each for each in found if not isinstance(each, bool))
                return m.Some(left, span) if len(left) > 1 else left[0] if left else False
            case m.Not(part=part, span=span):
                return not_so(self._answer(part), span)
            case m.Holds(name=name) if name in self.values:
                return self.values[name] is True
            case m.Is(subject=subject, values=values) if subject.name in self.values:
                return self.values[subject.name] in values
            case m.Takes(quantity=quantity, option=option, span=span) if quantity in self.choices:
                return self._took(option, self.choices[quantity], span)
            case m.Comparison(left=left, right=right):
                return replace(condition, left=self.expression(left), right=self.expression(right))
            case _:
                return condition

    def _took(self, option: str, quantity: m.Quantity, span: Span) -> Answer:
        choice = quantity.body
        assert isinstance(choice, m.Choice)
        if choice.takes in (m.LOWEST, m.HIGHEST):
            return self._is_extreme(option, choice, quantity, span)
        parts: list[Answer] = []
        for each in _order(choice):
            guard = self._guard(each)
            if each.name == option:
                return all_of([*parts, guard], span)
            parts.append(not_so(guard, span))
        return False

    def expression(self, expression: m.Expression) -> m.Expression:
        match expression:
            case m.Reference(kind="setting", name=name, span=span) if name in self.values:
                value = self.values[name]
                return m.Value(value, span) if isinstance(value, str) else replace(expression, kind="constant")
            case m.Lookup(arguments=arguments) | m.Function(arguments=arguments):
                return replace(expression, arguments=tuple(self.expression(each) for each in arguments))
            case m.Arithmetic(left=left, right=right):
                return replace(expression, left=self.expression(left), right=self.expression(right))
            case m.Negation(operand=operand) | m.Scaled(operand=operand):
                return replace(expression, operand=self.expression(operand))
            case m.Reduction(body=body):
                return replace(expression, body=self.expression(body))
            case _:
                return expression


def settled_cases(branches: Sequence[m.When], span: Span) -> m.Cases:
    return m.Cases(True, tuple(branches), span, settled=True)


MOST_SETS_OF = 5
"""Up to so many options that are open only sometimes, what can be open together is told apart, which reads better."""
WHERE_OPEN = " where open"
"""Behind the name of a quantity that nobody wrote: what an option gives where it is open."""


def _where_open_name(quantity: m.Quantity, option: m.Option) -> str:
    return f"{quantity.name}/{option.name}{WHERE_OPEN}"


def _where_open(quantity: m.Quantity, option: m.Option, guard: m.Condition, whole: m.Expression) -> m.Quantity:
    """What an option gives where it is open, elsewhere a number that is not the lowest. A quantity of its own, since a
    condition asks everything in it, and an option that is not open need not have a number."""
    span = option.span
    result = m.Reference(quantity.name, "quantity", quantity.index, quantity.unit, span)
    one = m.Number(Fraction(1), quantity.unit, span)
    another = m.Arithmetic("+", result, one, quantity.unit, span)
    branches = (
        m.When("1", guard, m.Formula(whole, span), span),
        m.When("otherwise", None, m.Formula(another, span), span),
    )
    about = replace(quantity.about, span=span)
    name = _where_open_name(quantity, option)
    return m.Quantity(name, quantity.unit, quantity.index, settled_cases(branches, span), about)


def _order(choice: m.Choice) -> tuple[m.Option, ...]:
    """The mandated option first, then the others as they are fit to stand for the truth."""
    first = tuple(each for each in choice.options if each.name == choice.takes)
    others = (choice.options[number] for number in by_preference(choice.options))
    return (*first, *(each for each in others if each.name != choice.takes))
