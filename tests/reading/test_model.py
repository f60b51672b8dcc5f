"""What a whole rulebook comes to."""

from __future__ import annotations

from fractions import Fraction
from pathlib import Path

from samesum.reading.model import (
    All,
    Arithmetic,
    Band,
    Cases,
    Choice,
    Comparison,
    Expression,
    Follows,
    Formula,
    Function,
    Holds,
    Is,
    Lookup,
    Model,
    Negation,
    Not,
    Number,
    OneOf,
    Position,
    Range,
    Reduction,
    Reference,
    Scaled,
    Some,
    Spread,
    Takes,
    Unknown,
    Value,
    YesNo,
)
from samesum.reading.read import Reader, read, read_file
from samesum.spans import Span

HEAD = 'rulebook "X", draft "1"\nresult q [t]\nindex stratum, at most 3\nindex year, at most 2\n'


def model_of(text: str, reader: Reader) -> Model:
    reading = read(text, "x", reader=reader)
    assert reading.problems == ()
    assert reading.model is not None
    return reading.model


def formula(text: str, reader: Reader, unit: str = "[t]", per: str = "") -> Expression:
    facts = (
        "fact a [t], 0 to 9\nfact b [kg], 0 to 9\nfact c [ha] per stratum, 0 to 9\nfact x, 0 to 9\nfact m [%], 0 to 9\n"
    )
    model = model_of(f"{HEAD}{facts}quantity q [t]\n    = 0\nquantity r {unit}{per}\n    = {text}\n", reader)
    body = model.quantities[1].body
    assert isinstance(body, Formula)
    return body.expression


def test_the_worked_example_of_the_language(samples: list[Path], reader: Reader) -> None:
    (path,) = (path for path in samples if path.stem == "marsh_example")
    reading = read_file(path, reader=reader)
    assert reading.problems == ()
    model = reading.model
    assert model is not None
    assert (model.title, model.draft, model.periods) == ("Salt marsh re-flooding", "0.3", 8)
    assert model.result is not None
    assert (model.result.name, model.result.unit.text, model.result.rounding, model.result.step) == (
        "net_removals", "t CO2e", "down", Fraction(1),
    )  # fmt: skip
    assert [(index.name, index.most) for index in model.indices] == [("stratum", 4)]
    assert [(fact.name, fact.index) for fact in model.facts] == [
        ("area", "stratum"), ("soil", ""), ("salinity", ""), ("plot_mean", "stratum"),
    ]  # fmt: skip
    assert model.facts[0].about.note == "Area of the stratum inside the project boundary."
    assert model.facts[3].about.clause == "7.1.2"
    assert model.facts[1].domain == OneOf(("mineral", "peaty", "organic"))
    assert model.settings[0].domain == Range(Fraction(1, 20), Fraction(1, 5))
    assert (model.judgements[0].wording, model.judgements[0].by) == ("where field plots are practicable", "developer")
    assert [(row.labels, row.value) for row in model.tables[0].rows] == [
        (("mineral",), 62), (("peaty",), 90), (("organic",), 118),
    ]  # fmt: skip
    carbon, methane, net = model.quantities
    assert isinstance(carbon.body, Choice)
    assert (carbon.body.by, carbon.body.timing) == ("developer", "period")
    regional, plots = carbon.body.options
    assert (regional.name, regional.error, regional.reference) == ("regional", Fraction(35, 100), False)
    assert (plots.name, plots.error, plots.reference) == ("plots", Fraction(8, 100), True)
    assert regional.cost is not None and plots.cost is not None and plots.cost.unit.text == "USD"
    assert isinstance(methane.body, Cases)
    assert [branch.name for branch in methane.body.branches] == ["1", "2"]
    follows = methane.body.branches[1].body
    assert isinstance(follows, Follows)
    assert (follows.quantity, follows.index, [option.name for option in follows.options]) == (
        "soil_carbon", "", ["regional", "plots"],
    )  # fmt: skip
    condition = methane.body.branches[1].condition
    assert isinstance(condition, All)
    assert isinstance(condition.parts[0], Comparison) and isinstance(condition.parts[1], Is)
    assert isinstance(net.body, Formula) and net.body.expression.unit.text == "t CO2e"


def test_every_sample_reads_without_syntax_or_name_problems(samples: list[Path], reader: Reader) -> None:
    assert samples
    for path in samples:
        reading = read_file(path, reader=reader)
        assert reading.model is not None
        assert [problem for problem in reading.problems if problem.kind != "unit"] == [], path


def test_compatible_units_convert_and_literal_numbers_are_folded(reader: Reader) -> None:
    added = formula("a + b", reader)
    assert isinstance(added, Arithmetic) and isinstance(added.right, Scaled)
    assert added.right.factor == Fraction(1, 1000) and added.right.unit.text == "t"
    folded = formula("a + 500 [kg]", reader)
    assert isinstance(folded, Arithmetic) and isinstance(folded.right, Number)
    assert (folded.right.value, folded.right.unit.text) == (Fraction(1, 2), "t")


def test_a_formula_is_in_the_quantitys_unit(reader: Reader) -> None:
    scaled = formula("a * 1", reader, "[kg]")
    assert isinstance(scaled, Scaled)
    assert (scaled.factor, scaled.unit.text) == (Fraction(1000), "kg")


def test_a_literal_zero_has_every_unit(reader: Reader) -> None:
    assert isinstance(formula("0", reader), Number)
    bounded = formula("max(0, a - b)", reader)
    assert isinstance(bounded, Function) and bounded.unit.text == "t"
    assert bounded.arguments[0].unit.text == "t"
    assert isinstance(formula("0 + 0 - a", reader), Arithmetic)


def test_percent_and_percent_units(reader: Reader) -> None:
    half = formula("50 % * a", reader)
    assert isinstance(half, Arithmetic) and isinstance(half.left, Number) and half.left.value == Fraction(1, 2)
    share = formula("a * m", reader)
    assert isinstance(share, Scaled) and share.factor == Fraction(1, 100)


def test_powers_and_signs_bind_as_a_reader_expects(reader: Reader) -> None:
    negative = formula("-3 ^ 2 * a", reader)
    assert isinstance(negative, Arithmetic) and isinstance(negative.left, Negation)
    tower = formula("2 ^ 3 ^ 2 * a", reader)
    assert isinstance(tower, Arithmetic) and isinstance(tower.left, Arithmetic)
    assert isinstance(tower.left.right, Arithmetic)
    left = formula("a - 1 [t] - 2 [t]", reader)
    assert isinstance(left, Arithmetic) and isinstance(left.left, Arithmetic)
    root = formula("sqrt(a ^ 2) + (a ^ 3) ^ (1/3)", reader)
    assert root.unit.text == "t"


def test_a_unit_behind_brackets_belongs_to_the_whole(reader: Reader) -> None:
    ratio = formula("a * (44/12) [t/t]", reader)
    assert isinstance(ratio, Arithmetic) and isinstance(ratio.right, Arithmetic)


def test_reductions_and_positions_name_their_index(reader: Reader) -> None:
    total = formula("sum(c * position(stratum) over stratum) * 1 [t/ha]", reader)
    assert isinstance(total, Arithmetic) and isinstance(total.left, Reduction)
    inner = total.left.body
    assert isinstance(inner, Arithmetic)
    assert isinstance(inner.left, Reference) and inner.left.index == "stratum"
    assert isinstance(inner.right, Position) and inner.right.index == "stratum"
    assert isinstance(formula("c", reader, "[ha]", " per stratum"), Reference)


def test_long_sums_stay_shallow(reader: Reader) -> None:
    deep = formula(" + ".join(["a", "b"] * 500), reader)

    def depth(node: Expression) -> int:
        if isinstance(node, Arithmetic):
            return 1 + max(depth(node.left), depth(node.right))
        return 0

    assert depth(deep) < 20


def test_domains_spreads_and_yes_no(reader: Reader) -> None:
    text = (
        f"{HEAD}fact a [t], 1 [kg] to 2, mean 1500 [kg] spread 0.2\nfact y, yes or no\nfact free [t]\n"
        "quantity q [t]\n    cases\n        when y is yes and not y is no\n            = a\n"
        "        otherwise\n            = free\n"
    )
    model = model_of(text, reader)
    assert model.facts[0].domain == Range(Fraction(1, 1000), Fraction(2))
    assert model.facts[0].spread == Spread(Fraction(3, 2), Fraction(1, 5))
    assert model.facts[1].domain == YesNo()
    assert model.facts[2].domain == Range(None, None)
    body = model.quantities[0].body
    assert isinstance(body, Cases) and isinstance(body.branches[0].condition, All)
    yes, no = body.branches[0].condition.parts
    assert isinstance(yes, Holds) and isinstance(no, Not) and isinstance(no.part, Not)


def test_conditions(reader: Reader) -> None:
    text = f"""{HEAD}fact x, 0 to 9
fact s, one of a, b or c
judgement j, "where", by verifier
applies when x < 3 or s is not one of a or b and not j, clause 3
applies when p takes left, clause 4
quantity q [t]
    cases in order
        when 1 <= x < 3
            = 1 [t]
        otherwise
            = 2 [t]
quantity p [t]
    choice by programme, fixed at validation, errors correlated 0.5
        option left, bias -3 %, only when x > 2
            = 1 [t]
        option right
            = 2 [t]
"""
    model = model_of(text, reader)
    first = model.applies[0].condition
    assert isinstance(first, Some) and isinstance(first.parts[1], All)
    assert isinstance(first.parts[1].parts[0], Not)
    assert model.applies[0].about.clause == "3"
    second = model.applies[1].condition
    assert isinstance(second, Takes) and (second.quantity, second.option) == ("p", "left")
    body = model.quantities[0].body
    assert isinstance(body, Cases) and body.in_order
    chained = body.branches[0].condition
    assert isinstance(chained, All)
    assert [part.operator for part in chained.parts if isinstance(part, Comparison)] == ["<=", "<"]
    choice = model.quantities[1].body
    assert isinstance(choice, Choice)
    assert (choice.by, choice.timing, choice.correlated) == ("programme", "validation", Fraction(1, 2))
    assert choice.options[0].bias == Fraction(-3, 100)
    assert isinstance(choice.options[0].only_when, Comparison)


def test_band_tables_and_arguments(reader: Reader) -> None:
    text = f"""{HEAD}fact u [%], 0 to 100
fact s, one of a or b
table d by u
    up to 10 = 0
    above 10 up to 20 = 25 %
    above 20 = 50 %
table two [t] by s, depth
    a, up to 50 [cm] = 1000 [kg]
    a, above 50 [cm] = 2
    b, up to 50 [cm] = 3
fact depth [m], 0 to 2
quantity q [t]
    = d(u) * two(s, depth) + two(a, depth)
"""
    model = model_of(text, reader)
    bands = model.tables[0]
    assert [row.labels[0] for row in bands.rows] == [
        Band(None, Fraction(10)), Band(Fraction(10), Fraction(20)), Band(Fraction(20), None),
    ]  # fmt: skip
    assert [row.value for row in bands.rows] == [0, Fraction(1, 4), Fraction(1, 2)]
    assert bands.keys[0].unit.text == "%"
    two = model.tables[1]
    assert [key.bands for key in two.keys] == [False, True]
    assert two.rows[0].value == 1
    body = model.quantities[0].body
    assert isinstance(body, Formula) and isinstance(body.expression, Arithmetic)
    left, right = body.expression.left, body.expression.right
    assert isinstance(left, Arithmetic) and isinstance(left.right, Lookup) and isinstance(right, Lookup)
    assert isinstance(left.right.arguments[0], Reference) and isinstance(right.arguments[0], Value)
    scaled = right.arguments[1]
    assert isinstance(scaled, Scaled) and (scaled.factor, scaled.unit.text) == (Fraction(100), "cm")


def test_the_result_decides_the_unit_of_its_quantity(reader: Reader) -> None:
    head = 'rulebook "X", draft "1"\nresult q [t], rounded up to 100 [kg]\n'
    text = f"{head}quantity q [kg]\n    = 5 [kg]\nquantity r [kg]\n    = q\n"
    model = model_of(text, reader)
    assert model.result is not None and model.result.unit.text == "t" and model.result.step == Fraction(1, 10)
    assert model.quantities[0].unit.text == "t"
    assert isinstance(model.quantities[0].body, Formula)
    assert model.quantities[0].body.expression == Number(Fraction(5, 1000), model.quantities[0].unit, Span(4, 7, 4, 13))
    other = model.quantities[1].body
    assert isinstance(other, Formula) and isinstance(other.expression, Scaled) and other.expression.factor == 1000


def test_a_cost_is_in_its_currency(reader: Reader) -> None:
    options = "        option a, cost 0\n            = 0\n        option b, cost 5 [USD/t] * 3 [t]\n            = 0\n"
    text = f"{HEAD}quantity q [t]\n    choice by developer\n{options}"
    body = model_of(text, reader).quantities[0].body
    assert isinstance(body, Choice)
    assert body.options[1].cost is not None and body.options[1].cost.unit.text == "USD"


def test_constants_take_a_plain_number_in_their_own_unit(reader: Reader) -> None:
    model = model_of(
        f"{HEAD}constant k [t/ha] = 44/12\nconstant m [kg/ha] = k * 2\nquantity q [t]\n    = k * 1 [ha]\n", reader
    )
    assert isinstance(model.constants[0].expression, Arithmetic)
    second = model.constants[1].expression
    assert isinstance(second, Scaled) and second.factor == 1000


def test_a_percentage_is_a_plain_number_also_where_the_unit_is_percent(reader: Reader) -> None:
    text = f"{HEAD}constant k [%] = 5 %\nconstant m [%] = 5\nquantity q [t]\n    = k * m * 1 [t]\n"
    for constant in model_of(text, reader).constants:
        assert isinstance(constant.expression, Number) and constant.expression.value == 5
    (problem,) = read(f"{HEAD}constant k [t] = 5 %\nquantity q [t]\n    = k\n", "x", reader=reader).problems
    assert "the constant is in [t], but this is a plain number" in problem.says


def test_what_has_no_unit_is_told_so(reader: Reader) -> None:
    (problem,) = read(f"{HEAD}quantity q [t]\n    = r * 1 [t]\nquantity r\n    = 3 [t]\n", "x", reader=reader).problems
    assert problem.says == "the quantity has no unit, but this is [t]"


def test_what_fails_is_unknown_and_the_rest_stays_whole(reader: Reader) -> None:
    text = f"{HEAD}quantity q [t]\n    = r + nothing_like_it\nquantity r [t]\n    = 3 [t] + 4 [ha]\n"
    reading = read(text, "x", reader=reader)
    assert [(problem.kind, problem.span.line) for problem in reading.problems] == [("name", 6), ("unit", 8)]
    assert reading.model is not None
    body = reading.model.quantities[0].body
    assert isinstance(body, Formula) and isinstance(body.expression, Arithmetic)
    assert isinstance(body.expression.left, Reference) and isinstance(body.expression.right, Unknown)


def test_lines_that_go_on_and_comments(reader: Reader) -> None:
    joined = formula("a\n      # a word on b\n      + b  # the other\n      -\n      min(a,\n          b)", reader)
    assert isinstance(joined, Arithmetic) and joined.operator == "-"


def test_names_of_any_alphabet(reader: Reader) -> None:
    model = model_of(
        'rulebook "Ä", draft "β"\nresult größe [t]\nfact 面積 [t], 0 to 1\nquantity größe [t]\n    = 面積\n', reader
    )
    assert model.facts[0].name == "面積"


def test_spans_of_the_parts(reader: Reader) -> None:
    body = "    cases in order\n        when 1 < 2  # no\n            = 3 [t]\n\n\n# the end\n"
    text = f"{HEAD}\n# about q\n\nquantity q [t], clause 3  # here\n{body}"
    quantity = model_of(text, reader).quantities[0]
    assert quantity.about.span == Span(8, 1, 11, 20)
    assert quantity.about.name_span == Span(8, 10, 8, 11)
    assert isinstance(quantity.body, Cases)
    assert quantity.body.span == Span(9, 5, 9, 19)
    assert quantity.body.branches[0].span == Span(10, 9, 10, 19)
    assert quantity.body.branches[0].body.span == Span(11, 13, 11, 20)
