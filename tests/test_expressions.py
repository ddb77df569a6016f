"""The grammar of terms and conditions: what is read, how it is written again, and what is refused."""

import re
from contextlib import suppress

import pytest
from hypothesis import example, given
from hypothesis import strategies as st

from reviewkit.expressions import (
    DEEPEST,
    FUNCTIONS,
    LONGEST,
    Apply,
    Binary,
    Column,
    Factor,
    Literal,
    Member,
    Term,
    Unary,
    columns_of,
    read_column_expression,
    read_row_condition,
    read_terms,
)
from reviewkit.refusals import Refusal

HERB, SOIL = Column("herb"), Column("soil")


@pytest.mark.parametrize(
    ("text", "terms"),
    [
        ("herb", (Term((HERB,)),)),
        ("`leaf area`", (Term((Column("leaf area"),)),)),
        ("log(herb)", (Term((Apply("log", HERB),)),)),
        ("log(herb + 1)", (Term((Apply("log", Binary("+", HERB, Literal(1.0))),)),)),
        ("factor(soil)", (Term((Factor("soil"),)),)),
        ('factor(soil, base="clay")', (Term((Factor("soil", "clay"),)),)),
        ("factor(year, base=-3)", (Term((Factor("year", -3.0),)),)),
        ("herb:soil", (Term((HERB, SOIL)),)),
        ("herb*soil", (Term((HERB,)), Term((SOIL,)), Term((HERB, SOIL)))),
        ("(herb / 1000)", (Term((Binary("/", HERB, Literal(1000.0)),)),)),
        ("herb^2", (Term((Binary("^", HERB, Literal(2.0)),)),)),
        ("factor(soil):log(herb)", (Term((Factor("soil"), Apply("log", HERB))),)),
    ],
)
def test_each_form_of_a_term_is_read(text: str, terms: tuple[Term, ...]) -> None:
    assert read_terms(text, "here") == terms


def test_three_crossed_parts_give_all_products_shorter_ones_first() -> None:
    assert [str(term) for term in read_terms("a*b*c", "here")] == ["a", "b", "c", "a:b", "a:c", "b:c", "a:b:c"]


@pytest.mark.parametrize("function", FUNCTIONS)
def test_each_function_is_read(function: str) -> None:
    assert read_column_expression(f"{function}(herb)", "here") == Apply(function, HERB)


@pytest.mark.parametrize(
    ("text", "node"),
    [
        ("herb >= 2015", Binary(">=", HERB, Literal(2015.0))),
        ("soil != 'clay'", Binary("!=", SOIL, Literal("clay"))),
        ("soil in ('clay', 'sand')", Member(SOIL, ("clay", "sand"))),
        ("soil not in ['clay']", Unary("not", Member(SOIL, ("clay",)))),
        ("not herb < 3", Unary("not", Binary("<", HERB, Literal(3.0)))),
        (
            "herb > 1 or herb < 0 and soil == 'clay'",
            Binary(
                "or",
                Binary(">", HERB, Literal(1.0)),
                Binary("and", Binary("<", HERB, Literal(0.0)), Binary("==", SOIL, Literal("clay"))),
            ),
        ),
    ],
)
def test_each_form_of_a_condition_is_read(text: str, node: object) -> None:
    assert read_row_condition(text, "here") == node


def test_arithmetic_binds_as_usual() -> None:
    assert read_column_expression("1 - 2 - 3 * 4^2", "here") == read_column_expression("(1 - 2) - (3 * (4^2))", "here")
    assert read_column_expression("-herb^2", "here") == Unary("-", Binary("^", HERB, Literal(2.0)))


@pytest.mark.parametrize(
    ("text", "said"),
    [
        ("", "a column name is missing"),
        ("a:", "a column name is missing"),
        ("a b", "`b` is unexpected"),
        ("a + b", "`+` is unexpected"),
        ("(a == b)", "is not a term by itself"),
        ("(not a)", "is not a term by itself"),
        ("(a in (1, 2))", "is not a term by itself"),
        ("7", "is not a term by itself"),
        ("-a", "a column name is missing"),
        ("log(a", "`)` is missing"),
        ("a^b", "a number or a text in quotes is missing"),
        ("a^'2'", "a power must be a number"),
        ("a^2^3", "`^` is unexpected"),
        ("factor(a, ref='b')", "only base= may follow"),
        ("factor(a, base=b)", "a number or a text in quotes is missing"),
        ("factor(log(a))", "is missing"),
        ("a; b", "`;` has no meaning here"),
        ("a[0]", "`[` is unexpected"),
        ("a.__class__()", "is not known here"),
        ("eval('1')", "is not known here"),
        ("__import__('os')", "is not known here"),
        ("log(1e999)", "is too large"),
        ("sin(a)", "`sin()` is not known here"),
    ],
)
def test_what_is_no_term_is_refused(text: str, said: str) -> None:
    with pytest.raises(Refusal, match=re.escape(said)) as refused:
        read_terms(text, "study.toml, model.terms")
    assert refused.value.where == "study.toml, model.terms"
    assert refused.value.status == 2


@pytest.mark.parametrize(
    ("text", "said"),
    [
        ("soil in ()", "a number or a text in quotes is missing"),
        ("soil in ('a', 2)", "numbers and texts are mixed"),
        ("a not b", "`in` is missing"),
        ("a = 1", "`=` is unexpected"),
        ("1 < a < 3", "`<` is unexpected"),
        ("a == 'x", "has no meaning here"),
    ],
)
def test_what_is_no_condition_is_refused(text: str, said: str) -> None:
    with pytest.raises(Refusal, match=re.escape(said)):
        read_row_condition(text, "here")


@pytest.mark.parametrize("text", ["lag(y)", "L(y)", "shift(y)"])
def test_lags_are_refused_with_the_reason(text: str) -> None:
    with pytest.raises(Refusal, match="lags need the data's order"):
        read_terms(text, "here")


def test_length_is_checked_before_anything_is_read() -> None:
    read_row_condition("a == 1" + " " * (LONGEST - 6), "here")
    with pytest.raises(Refusal, match=f"has {LONGEST + 1} characters.*at most {LONGEST}"):
        read_row_condition("?" * (LONGEST + 1), "here")


@pytest.mark.parametrize(
    "nested",
    [lambda n: "(" * n + "a" + ")" * n, lambda n: "log(" * n + "a" + ")" * n, lambda n: "-" * n + "a"],
    ids=["brackets", "functions", "signs"],
)
def test_nesting_is_limited(nested: object) -> None:
    assert callable(nested)
    read_column_expression(nested(DEEPEST), "here")
    with pytest.raises(Refusal, match="nested too deeply"):
        read_column_expression(nested(DEEPEST + 1), "here")


def test_not_is_limited_too() -> None:
    with pytest.raises(Refusal, match="nested too deeply"):
        read_row_condition("not " * (DEEPEST + 1) + "a == 1", "here")


def test_columns_are_listed_once_in_order() -> None:
    assert columns_of(read_row_condition("b > 1 and (log(a) < b or c in (1, 2))", "here")) == ("b", "a", "c")
    assert columns_of(read_terms("factor(g):a:log(a)", "here")[0]) == ("g", "a")


# --- written again and read again, it is the same --------------------------------------------------------------

names = st.sampled_from(["a", "b", "leaf area", "and", "in", "größe", "x.1", "3rd"]).map(Column)
numbers = st.floats(0, 1e12, allow_nan=False).map(lambda value: Literal(float(value)))
texts = st.sampled_from(["clay", "it's", 'a "b"', "", "a:b", "`"]).map(Literal)
numeric = st.recursive(
    names | numbers,
    lambda inner: (
        st.builds(Apply, st.sampled_from(FUNCTIONS), inner)
        | st.builds(Binary, st.sampled_from("+-*/"), inner, inner)
        | st.builds(lambda base, power: Binary("^", base, Literal(power)), inner, st.integers(-3, 3).map(float))
        | st.builds(Unary, st.just("-"), inner)
    ),
    max_leaves=6,
)
simple = (
    st.builds(Binary, st.sampled_from(["<", "<=", ">", ">=", "==", "!="]), numeric, numeric | texts)
    | st.builds(Member, names, st.lists(st.floats(-9, 9), min_size=1, max_size=3).map(tuple))
    | st.builds(Member, names, st.lists(st.sampled_from(["clay", "it's"]), min_size=1, max_size=3).map(tuple))
)
conditions = st.recursive(
    simple,
    lambda inner: (
        st.builds(Binary, st.sampled_from(["and", "or"]), inner, inner) | st.builds(Unary, st.just("not"), inner)
    ),
    max_leaves=4,
)


@given(conditions)
@example(Binary(">", Column("id"), Literal(1234567890123.0)))
@example(Binary("==", Column("x"), Literal(0.1 + 0.2)))
@example(Binary("==", Column("soil"), Literal("it's")))
def test_a_condition_written_and_read_again_is_the_same(node: Binary) -> None:
    text = str(node)
    if len(text) <= LONGEST:
        assert read_row_condition(text, "here") == node


@given(st.lists(numeric.filter(lambda node: not isinstance(node, Literal)), min_size=1, max_size=3))
def test_a_term_written_and_read_again_is_the_same(parts: list[Column]) -> None:
    term = Term(tuple(parts))
    if len(str(term)) <= LONGEST:
        assert read_terms(str(term), "here") == (term,)


@given(st.sampled_from(["g", "leaf area"]), st.none() | st.floats(-1e9, 1e9) | st.sampled_from(["it's", 'a "b"', "x"]))
def test_a_factor_written_and_read_again_is_the_same(column: str, base: float | str | None) -> None:
    term = Term((Factor(column, base),))
    assert read_terms(str(term), "here") == (term,)


SYMBOLS = st.sampled_from(
    [
        *"\"'()[]:*^+-/,=<>.\x00π٣ \n",
        "a",
        "`b c`",
        "1",
        "1e9",
        "'t'",
        "==",
        "!=",
        "and",
        "or",
        "not",
        "in",
        "factor(",
        "log(",
    ]
)


@given(
    st.text(max_size=40) | st.lists(SYMBOLS, max_size=25).map(" ".join) | st.lists(SYMBOLS, max_size=25).map("".join)
)
@example("(" * 5000)
@example("a^-")
def test_no_text_does_more_than_be_read_or_refused(text: str) -> None:
    for read in (read_terms, read_row_condition, read_column_expression):
        with suppress(Refusal):
            read(text, "here")
