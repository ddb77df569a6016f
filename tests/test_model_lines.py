"""A pasted regression line gives a specification, and says what it did not carry over."""

import contextlib
import time

import pytest
from hypothesis import given
from hypothesis import strategies as some

from reviewkit.readers.model_lines import read_model_line
from reviewkit.refusals import Refusal
from reviewkit.specification import specification_from

OLS = {"estimator": "ols"}


def read(line: str):
    """The line, and proof that a specification takes what was understood."""
    found = read_model_line(line)
    if found.understood.get("outcome", {}).get("column"):
        specification_from({"data": "d.csv", **found.understood}, "test")
    return found


def outcome(line: str):
    return read(line).understood["outcome"]


def terms(line: str):
    return read(line).understood["model"].get("terms", [])


def errors(line: str):
    return read(line).understood.get("errors", {})


def left(line: str) -> str:
    return " | ".join(read(line).not_understood)


@pytest.mark.parametrize(
    ("line", "language"),
    [
        ("reg lny i.treat x1, cluster(village)", ".do script"),
        ("lm(y ~ x, d)", "R"),
        ("glm(y ~ x, family = poisson)", "R"),
        ('smf.ols("y ~ x", df).fit()', "Python"),
        ('m = pf.feols("y ~ x", data=df)', "Python"),
    ],
)
def test_the_language_is_recognised(line: str, language: str) -> None:
    assert read(line).language == language


def test_a_line_of_a_do_script_becomes_a_specification() -> None:
    found = read("reg lny i.treat x1, cluster(village)")
    assert found.understood == {
        "outcome": {"column": "lny", "transform": "none", "zeros": "kept"},
        "model": {"estimator": "ols", "terms": ["factor(treat)", "x1"]},
        "errors": {"kind": "cluster", "type": "CR1", "by": ["village"]},
    }
    assert found.not_understood == ()
    assert any("may already be a log" in hint for hint in found.hints)


@pytest.mark.parametrize(
    "command", ["reg", "regr", "regress", "qui reg", "qui: eststo m1: reg", "eststo: reg", "cap noi reg"]
)
def test_abbreviations_and_prefixes_change_nothing(command: str) -> None:
    assert read(f"{command} y x").understood["model"] == {"estimator": "ols", "terms": ["x"]}


@pytest.mark.parametrize(
    ("word", "expected"),
    [
        ("i.region", ["factor(region)"]),
        ("ib3.region", ["factor(region, base=3)"]),
        ("c.age##c.age", ["age", "age^2"]),
        ("c.age#c.age#c.age", ["age^3"]),
        ("i.a#c.x", ["factor(a):x"]),
        ("a##b", ["factor(a)", "factor(b)", "factor(a):factor(b)"]),
        ("i.a##c.x", ["factor(a)", "x", "factor(a):x"]),
        ("i.(a b)", ["factor(a)", "factor(b)"]),
    ],
)
def test_factor_notation_of_do_scripts(word: str, expected: list[str]) -> None:
    assert terms(f"reg y {word}") == expected


@pytest.mark.parametrize(
    ("word", "reason"),
    [
        ("L.x", "order of the data"),
        ("L2.x", "order of the data"),
        ("D.x", "order of the data"),
        ("cL.x", "order of the data"),
        ("x1-x5", "range"),
        ("x*", "wildcard"),
        ("_all", "wildcard"),
        ("`controls'", "macro"),
        ("$controls", "macro"),
        ("(x = z)", "instruments"),
        ("2.region", "single class"),
        ("ib(first).region", "base"),
        ("i.a|x", "old way"),
    ],
)
def test_what_is_not_carried_over_is_left_with_a_reason(word: str, reason: str) -> None:
    found = read(f"reg y {word} z")
    assert found.understood["model"]["terms"] == ["z"]
    assert len(found.not_understood) == 1 and reason in found.not_understood[0]


def test_samples_weights_and_joined_lines_of_do_scripts() -> None:
    found = read('reg y x /// first line\n  z if year>=2015 & region!="north" [pw=w], r // done')
    assert found.understood["model"] == {
        "estimator": "ols",
        "terms": ["x", "z"],
        "where": "(year >= 2015) and (region != 'north')",
        "weights": {"column": "w", "kind": "probability"},
    }
    assert any("missing value counts as larger" in hint for hint in found.hints)


@pytest.mark.parametrize(
    ("condition", "where"),
    [
        ("inlist(g, 1, 2)", "g in (1, 2)"),
        ('inlist(g, "a", "b")', "g in ('a', 'b')"),
        ("inrange(year, 2000, 2005)", "(year >= 2000) and (year <= 2005)"),
        ("treated", "treated != 0"),
        ("!treated", "treated == 0"),
        ("a==1 | b==2 & c==3", "a == 1 or b == 2 and c == 3"),
        ("x > -1.5", "x > -1.5"),
    ],
)
def test_conditions_of_do_scripts(condition: str, where: str) -> None:
    assert read(f"reg y x if {condition}").understood["model"]["where"] in (
        where,
        where.replace("(", "").replace(")", ""),
    )


@pytest.mark.parametrize("condition", ["!missing(z)", "z < .", "_n > 5", "e(sample)", "`sample'"])
def test_conditions_beyond_the_grammar_are_left(condition: str) -> None:
    found = read(f"reg y x if year > 2000 & {condition}" if "`" not in condition else f"reg y x if {condition}")
    assert len(found.not_understood) == 1
    assert found.understood["model"].get("where") in (None, "year > 2000")


@pytest.mark.parametrize(
    ("options", "expected"),
    [
        ("", {"kind": "classical"}),
        (", r", {"kind": "robust", "type": "HC1"}),
        (", vce(robust)", {"kind": "robust", "type": "HC1"}),
        (", vce(hc3)", {"kind": "robust", "type": "HC3"}),
        (", cl(v)", {"kind": "cluster", "type": "CR1", "by": ["v"]}),
        (", vce(cluster v)", {"kind": "cluster", "type": "CR1", "by": ["v"]}),
        (", vce(bootstrap)", {}),
    ],
)
def test_standard_errors_of_do_scripts(options: str, expected: dict) -> None:
    assert errors(f"regress y x{options}") == expected


def test_the_poisson_commands_have_their_own_small_sample_factors() -> None:
    assert errors("poisson y x, vce(robust)")["small_sample"] == "n/(n-1)"
    assert errors("poisson y x, vce(cluster v)")["small_sample"] == "G/(G-1)"
    assert "small_sample" not in errors("reg y x, r")


def test_absorbed_effects_and_panels_of_do_scripts() -> None:
    assert read("reghdfe y x, absorb(firm i.year) vce(cluster v)").understood["model"]["absorb"] == ["firm", "year"]
    assert read("areg y x, a(firm)").understood["model"]["absorb"] == ["firm"]
    assert "unit column" in left("xtreg y x, fe")
    random_effects = read("xtreg y x")
    assert "estimator" not in random_effects.understood["model"]
    assert "random effects" in random_effects.not_understood[0]


def test_a_second_model_and_other_commands_are_left() -> None:
    found = read("gen lny = log(y + 1)\nreg lny x\nreg lny x z")
    assert found.understood["model"]["terms"] == ["x"]
    assert len(found.not_understood) == 2


@pytest.mark.parametrize(
    ("left_side", "expected"),
    [
        ("y", {"transform": "none", "zeros": "kept"}),
        ("log(y)", {"transform": "log", "zeros": "dropped"}),
        ("log(y + 1)", {"transform": "log_plus", "constant": 1.0, "zeros": "kept"}),
        ("log(0.5 + y)", {"transform": "log_plus", "constant": 0.5, "zeros": "kept"}),
        ("log1p(y)", {"transform": "log_plus", "constant": 1.0, "zeros": "kept"}),
        ("I(log(y + 1))", {"transform": "log_plus", "constant": 1.0, "zeros": "kept"}),
        ("asinh(y)", {"transform": "asinh", "zeros": "kept"}),
        ("asinh(1000 * y)", {"transform": "asinh", "scale": 1000.0, "zeros": "kept"}),
        ("log(y + sqrt(y^2 + 1))", {"transform": "asinh", "zeros": "kept"}),
        ("sqrt(y)", {"transform": "sqrt", "zeros": "kept"}),
        ("qlogis(y)", {"transform": "logit", "zeros": "kept"}),
        ("log(y / (1 - y))", {"transform": "logit", "zeros": "kept"}),
        ("asin(sqrt(y))", {"transform": "arcsine", "zeros": "kept"}),
    ],
)
def test_outcomes_of_formulas(left_side: str, expected: dict) -> None:
    assert outcome(f"lm({left_side} ~ x, data = d)") == {"column": "y", **expected}


@pytest.mark.parametrize(
    "left_side",
    ["log(y/x)", "log10(y)", "log(y, 2)", "100*log(y)", "log(y - 1)", "pmax(y, 1)", "y > 0", "log(pmax(y, 1))"],
)
def test_an_outcome_that_is_not_understood_is_not_guessed(left_side: str) -> None:
    found = read_model_line(f"lm({left_side} ~ x, data = d)")
    assert "transform" not in found.understood.get("outcome", {})
    assert len(found.not_understood) == 1


@pytest.mark.parametrize(
    ("right_side", "expected"),
    [
        ("x * z", ["x", "z", "x:z"]),
        ("a * b * c", ["a", "b", "a:b", "c", "a:c", "b:c", "a:b:c"]),
        ("(a * b):c", ["a:c", "b:c", "a:b:c"]),
        ("(a + b)^2", ["a", "b", "a:b"]),
        ("factor(r)", ["factor(r)"]),
        ('relevel(factor(r), ref = "n")', ['factor(r, base="n")']),
        ("I(x^2)", ["x^2"]),
        ("log(x)", ["log(x)"]),
        ("log1p(x)", ["log(x + 1)"]),
        ("I(x / 1000)", ["(x / 1000)"]),
        ("`net income`", ["`net income`"]),
        ("x^2", ["x"]),
    ],
)
def test_terms_of_r(right_side: str, expected: list[str]) -> None:
    assert terms(f"lm(y ~ {right_side}, data = d)") == expected


def test_a_square_in_a_formula_means_what_the_function_makes_of_it() -> None:
    assert terms("feols(y ~ x^2, data = d)") == ["x^2"]
    assert any("not its power" in hint for hint in read("lm(y ~ x^2, data = d)").hints)


@pytest.mark.parametrize(
    ("term", "reason"), [("poly(x, 2)", "cannot|not one"), ("lag(x)", "order"), (".", "all other"), ("-1", "constant")]
)
def test_terms_of_r_that_are_left(term: str, reason: str) -> None:
    found = read(f"lm(y ~ z + {term}, data = d)" if term != "-1" else "lm(y ~ z - 1, data = d)")
    assert found.understood["model"]["terms"] == ["z"]
    assert len(found.not_understood) == 1


def test_data_weights_and_samples_of_r() -> None:
    for line in (
        "lm(log(y+1) ~ x, data = d, weights = w, subset = year > 2000)",
        "lm(log(y+1) ~ x, data = subset(d, year > 2000), weights = w)",
        "m <- lm(log(y+1) ~ x, data = d[d$year > 2000, ], weights = w) # the main one",
        "d %>% filter(year > 2000) %>% lm(log(y+1) ~ x, data = ., weights = w)",
        "summary(lm(log(y+1) ~ x, subset(d, year > 2000), weights = w))",
    ):
        model = read(line).understood["model"]
        assert model == OLS | {
            "terms": ["x"],
            "where": "year > 2000",
            "weights": {"column": "w", "kind": "analytic"},
        }, line
        assert read(line).not_understood == ()


@pytest.mark.parametrize(
    ("line", "expected"),
    [
        ("lm(y ~ x, d)", {"kind": "classical"}),
        ("feols(y ~ x, d, vcov = 'hetero')", {"kind": "robust", "type": "HC1"}),
        ("feols(y ~ x | f, d, cluster = ~v)", {"kind": "cluster", "type": "CR1", "by": ["v"]}),
        ("feols(y ~ x | f, d, vcov = ~v + w)", {"kind": "cluster", "type": "CR1", "by": ["v", "w"]}),
        ("feols(y ~ x | f, d)", {}),
        ("felm(y ~ x | f | 0 | v, d)", {"kind": "cluster", "type": "CR1", "by": ["v"]}),
        ("lm_robust(y ~ x, d)", {"kind": "robust", "type": "HC2"}),
        ("lm_robust(y ~ x, d, se_type = 'HC3')", {"kind": "robust", "type": "HC3"}),
        ("lm_robust(y ~ x, d, clusters = v, se_type = 'CR0')", {"kind": "cluster", "type": "CR0", "by": ["v"]}),
        ("coeftest(lm(y ~ x, d), vcov = vcovHC(m, type = 'HC1'))", {"kind": "robust", "type": "HC1"}),
        ("coeftest(lm(y ~ x, d), vcov = vcovCL(m, cluster = ~v))", {"kind": "cluster", "type": "CR1", "by": ["v"]}),
    ],
)
def test_standard_errors_of_r(line: str, expected: dict) -> None:
    assert errors(line) == expected


@pytest.mark.parametrize(
    ("family", "estimator"),
    [
        ("poisson", "poisson"),
        ('poisson(link = "log")', "poisson"),
        ("quasibinomial()", "fractional_logit"),
        ('Gamma(link = "log")', "gamma"),
        ("binomial", "logit"),
        ("Gamma", None),
        ('poisson("sqrt")', None),
    ],
)
def test_families_of_r(family: str, estimator: str | None) -> None:
    assert read(f"glm(y ~ x, family = {family}, data = d)").understood["model"].get("estimator") == estimator


def test_an_offset_is_an_exposure() -> None:
    assert read("glm(y ~ x + offset(log(days)), family = poisson)").understood["model"]["exposure"] == "days"
    assert read("poisson y x, exposure(days)").understood["model"]["exposure"] == "days"
    assert "exposure" in left("poisson y x, offset(lndays)")


@pytest.mark.parametrize(
    "line",
    [
        'smf.ols("np.log(y+1) ~ C(g) + x", data=df).fit(cov_type="cluster", cov_kwds={"groups": df["v"]})',
        'smf.ols("np.log(y+1) ~ C(g)" + " + x", data=df).fit(cov_type="cluster", cov_kwds=dict(groups=df.v))',
        'fit = pf.feols("log(y+1) ~ C(g) + x", data=df, vcov={"CRV1": "v"})',
    ],
)
def test_lines_of_python(line: str) -> None:
    assert read(line).understood == {
        "outcome": {"column": "y", "transform": "log_plus", "constant": 1.0, "zeros": "kept"},
        "model": {"estimator": "ols", "terms": ["factor(g)", "x"]},
        "errors": {"kind": "cluster", "type": "CR1", "by": ["v"]},
    }


def test_arrays_of_python_are_read_as_far_as_they_name_columns() -> None:
    whole = read('sm.OLS(np.log(df["y"] + 1), sm.add_constant(df[["x", "net income"]])).fit(cov_type="HC3")').understood
    assert whole["outcome"] == {"column": "y", "transform": "log_plus", "constant": 1.0, "zeros": "kept"}
    assert whole["model"]["terms"] == ["x", "`net income`"]
    assert whole["errors"] == {"kind": "robust", "type": "HC3"}
    assert "not named in this line" in left("sm.OLS(y, X).fit()")
    assert "put together elsewhere" in " ".join(read_model_line('smf.ols(f"y ~ {x}", df).fit()').not_understood)


def test_samples_of_python() -> None:
    for data in ('df[df["year"] > 2000]', "df[df.year > 2000]", 'df.query("year > 2000")', 'df.loc[df["year"] > 2000]'):
        assert read(f'smf.poisson("y ~ x", data={data}).fit()').understood["model"]["where"] == "year > 2000"
    kept = read('smf.ols("y ~ x", data=df[(df.a == 1) & df["g"].isin(["n", "s"])]).fit()').understood["model"]["where"]
    assert kept == "(a == 1) and (g in ('n', 's'))"


def test_panels_of_python_ask_for_their_columns() -> None:
    found = read(
        'PanelOLS.from_formula("y ~ x + EntityEffects", data=df).fit(cov_type="clustered", cluster_entity=True)'
    )
    assert found.understood["model"] == {"estimator": "ols", "terms": ["x"]}
    assert "errors" not in found.understood
    assert len(found.not_understood) == 2


@pytest.mark.parametrize(
    "line", ["", "   ", "hello there", "summarize x", "x = 3", "y ~ x", "lm(y ~ x", 'smf.ols("y ~ x"', "import os"]
)
def test_what_is_no_regression_line_is_refused(line: str) -> None:
    with pytest.raises(Refusal):
        read_model_line(line)


def test_nothing_in_a_line_is_run(tmp_path) -> None:
    canary = tmp_path / "ran"
    for line in (
        f'smf.ols("y ~ x", data=open({str(canary)!r}, "w")).fit()',
        f"smf.ols(\"y ~ __import__('pathlib').Path({str(canary)!r}).touch()\", data=df).fit()",
        f'lm(y ~ x, data = system("touch {canary}"))',
        f"reg y x, vce(robust) shell(touch {canary})",
    ):
        with contextlib.suppress(Refusal):
            read_model_line(line)
        assert not canary.exists()


HOSTILE = (
    "reg y " + "(" * 5000,
    "reg y " + "i." * 5000,
    "reg y " + "##".join("abcdefghij"),
    "reg y (" + "a" * 5000 + "!",
    "/*" * 9000 + " reg y x",
    "lm(y ~ " + "(" * 5000,
    "lm(y ~ " + "-" * 5000 + "x)",
    "lm(y ~ " + "*".join("abcdefghijklmnopqrstuvwxyz") + ", data = d)",
    "lm(y ~ " + "+".join(["x"] * 5000) + ")",
    "lm(y ~ " + "[" * 3000 + ")",
    "lm(y ~ a" + "[1]" * 3000 + ")",
    "lm('" * 3000 + "y ~ x",
    'smf.ols("y ~ ' + "(" * 5000 + '", df)',
    "sm.OLS(" + "(" * 5000 + ")",
    "sm.OLS(" + "-" * 9000 + "1)",
    "sm.OLS(" + "1+" * 9000 + "1, X)",
    "sm.OLS(" + "[" * 150 + "]" * 150 + ", X)",
    "reg y " + "x" * 19_000,
    "reg y x " * 2000,
    "reg y x if " + "!" * 9000 + "a",
    "reg y x, " + "a(" * 5000,
    "smf.ols('" + "a*" * 4000 + "b ~ x', df)",
    "reg " + "\x00" * 100,
    "lm(y ~ \ud800)",
    "reg y x" * 20_000,
)


@pytest.mark.parametrize("place", range(len(HOSTILE)))
def test_hostile_lines_end_quickly_in_a_reading_or_a_refusal(place: int) -> None:
    started = time.perf_counter()
    message = ""
    try:
        read_model_line(HOSTILE[place])
    except Refusal as refused:
        message = str(refused)
    assert len(message) < 500
    assert time.perf_counter() - started < 2


PIECES = some.sampled_from(
    [
        "reg ",
        "lm(",
        "smf.ols(",
        '"',
        "'",
        "y",
        " ~ ",
        "x",
        "+",
        "*",
        ":",
        "^",
        "(",
        ")",
        "[",
        "]",
        ",",
        " if ",
        "i.",
        "c.",
        "##",
        "#",
        "`",
        "$",
        "=",
        "==",
        "|",
        "&",
        "!",
        "%in%",
        "log(",
        "data=",
        ".fit(",
        "{",
        "}",
        "\n",
        "///",
        "/*",
        "*/",
        "1",
        "0.5",
        "1e999",
        ".",
        "L.",
        "-",
        "~",
        "\\",
        "cluster(",
        "vce(",
        "c(",
        "offset(",
        "factor(",
        " in ",
        "€",
        "\u202e",
        "None",
        "pf.feols(",
        "vcov=",
        "sm.OLS(",
        "df[",
        "query(",
    ]
)


@given(some.lists(PIECES, max_size=40).map("".join) | some.text(max_size=200))
def test_any_text_ends_in_a_reading_or_a_refusal(text: str) -> None:
    try:
        found = read_model_line(text)
    except Refusal:
        return
    if found.understood.get("outcome", {}).get("column"):
        specification_from({"data": "d.csv", **found.understood}, "test")


@given(
    some.sampled_from(["reg y ", "lm(y ~ ", 'smf.ols("y ~ ']),
    some.lists(PIECES, max_size=25).map("".join),
    some.sampled_from(["", ")", '", df).fit()']),
)
def test_any_model_line_ends_in_a_reading_or_a_refusal(start: str, middle: str, end: str) -> None:
    try:
        read_model_line(start + middle + end)
    except Refusal:
        return
