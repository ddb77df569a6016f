"""Regression lines of Python scripts, through Python's own syntax trees; nothing is run."""

import ast
import warnings

from reviewkit.readers.model_lines.formulas import read_formula
from reviewkit.readers.model_lines.outcomes import read_outcome
from reviewkit.readers.model_lines.pieces import ModelLine, Pieces, plain_column
from reviewkit.readers.model_lines.python_expressions import (
    column_in,
    columns_in,
    formula_text,
    last_name,
    read_condition,
    read_data,
    source,
    text_in,
)
from reviewkit.readers.model_lines.syntax import Unreadable, parse

LANGUAGE = "Python"

_FORMULA_MODELS = {
    "ols": "ols", "wls": "ols", "poisson": "poisson", "negativebinomial": "negbin", "logit": "logit",
    "probit": "probit", "feols": "ols", "fepois": "poisson", "glm": "", "feglm": "",
}  # fmt: skip
_ARRAY_MODELS = {
    "OLS": "ols", "WLS": "ols", "Poisson": "poisson", "NegativeBinomial": "negbin", "Logit": "logit",
    "Probit": "probit", "PanelOLS": "ols", "GLM": "", "BetaModel": "beta",
}  # fmt: skip
_ELSEWHERE = (
    "gls",
    "GLS",
    "gee",
    "GEE",
    "mixedlm",
    "MixedLM",
    "quantreg",
    "QuantReg",
    "rlm",
    "RLM",
    "IV2SLS",
    "RandomEffects",
    "Tobit",
)
_FAMILIES = {
    "Poisson": ("poisson", "Log"), "Gaussian": ("ols", "Identity"), "Gamma": ("gamma", "Log"),
    "NegativeBinomial": ("negbin", "Log"), "Binomial": ("fractional_logit", "Logit"),
}  # fmt: skip
_HARMLESS = (
    "data",
    "missing",
    "disp",
    "maxiter",
    "method",
    "use_t",
    "cov_kwds",
    "debiased",
    "hasconst",
    "tol",
    "model",
    "low_memory",
)
_ROBUST = ("HC0", "HC1", "HC2", "HC3")


def looks_like_python(text: str) -> bool:
    """Whether a line has a model call of Python."""
    names = (*_FORMULA_MODELS, *_ARRAY_MODELS, *_ELSEWHERE)
    called = any(f".{name}(" in text or f".{name}.from_formula(" in text for name in names) or "PanelOLS" in text
    return called and "::" not in text


def read_python(text: str) -> ModelLine | None:
    """The regression in a line of Python; None where there is none.

    Raises:
        Unreadable: the line is not Python.
    """
    try:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")  # such as odd escapes in the pasted text
            tree = ast.parse(text.strip())
    except (SyntaxError, ValueError, MemoryError, RecursionError):
        raise Unreadable("the line is not whole or not Python") from None
    pieces = Pieces(LANGUAGE)
    calls = [node for node in ast.walk(tree) if isinstance(node, ast.Call)]
    model = next((call for call in calls if _model_name(call)), None)
    if model is None:
        return None
    _read_model(model, pieces)
    fit = next((call for call in calls if isinstance(call.func, ast.Attribute) and call.func.attr == "fit"), None)
    for call in (fit, *_later_errors(calls)):
        if call is not None:
            _read_fit(call, pieces)
    if not pieces.errors and not any("standard errors" in each for each in pieces.left):
        pieces.errors = {"kind": "classical"}
    if any("its default errors" in each for each in pieces.left):
        pieces.errors = {}
    return pieces.finished()


def _later_errors(calls: list[ast.Call]) -> list[ast.Call]:
    names = ("get_robustcov_results", "vcov")
    return [call for call in calls if isinstance(call.func, ast.Attribute) and call.func.attr in names]


def _model_name(call: ast.Call) -> str:
    name = last_name(call.func)
    if name == "from_formula" and isinstance(call.func, ast.Attribute):
        name = last_name(call.func.value)
    return name if name in (*_FORMULA_MODELS, *_ARRAY_MODELS, *_ELSEWHERE) and not _is_family(call) else ""


def _is_family(call: ast.Call) -> bool:
    return "families" in ast.unparse(call.func) if isinstance(call.func, ast.Attribute) else False


def _read_model(call: ast.Call, pieces: Pieces) -> None:
    name = _model_name(call)
    if name in _ELSEWHERE:
        pieces.leave(name, "this estimator is not covered")
        return
    pieces.model["estimator"] = _FORMULA_MODELS.get(name, _ARRAY_MODELS.get(name, ""))
    first = call.args[0] if call.args else _keyword(call, "formula", "fml", "endog", "dependent")
    second = call.args[1] if len(call.args) > 1 else _keyword(call, "exog", "data")
    if name in _FORMULA_MODELS or last_name(call.func) == "from_formula":
        _formula(first, name, pieces)
        read_data(_keyword(call, "data") or second, pieces)
    else:
        _arrays(first, second, pieces)
    if not pieces.model["estimator"]:
        _family(_keyword(call, "family"), pieces)
    for keyword in call.keywords:
        _model_argument(name, keyword, pieces)
    if (
        name in ("feols", "fepois")
        and not pieces.errors
        and pieces.model.get("absorb")
        and _keyword(call, "vcov") is None
    ):
        pieces.leave(name, "its default errors depend on its version; say which")


def _keyword(call: ast.Call, *names: str) -> ast.expr | None:
    return next((each.value for each in call.keywords if each.arg in names), None)


def _formula(node: ast.expr | None, name: str, pieces: Pieces) -> None:
    text = text_in(node)
    if text is None:
        pieces.leave(source(node), "the formula is put together elsewhere; it is not in this line")
        return
    try:
        read_formula(text, pieces, square_in_formula=name.startswith("fe"))
    except Unreadable as why:
        pieces.leave(text, f"this formula could not be read ({why})")


def _arrays(outcome: ast.expr | None, covariates: ast.expr | None, pieces: Pieces) -> None:
    text = formula_text(outcome)
    if text is None:
        pieces.leave(source(outcome), "the outcome is not named in this line")
    else:
        reading = read_outcome(parse(text))
        pieces.outcome = dict(reading.table)
        for piece, why in reading.left:
            pieces.leave(piece, why)
    columns = columns_in(covariates)
    if columns is None:
        pieces.leave(source(covariates), "the covariates are not named in this line; name their columns")
    else:
        pieces.add_terms(map(plain_column, columns))
    if covariates is not None and "add_constant" not in source(covariates) and columns is not None:
        pieces.hint("no constant is added in this line; a specification always has one")


def _family(node: ast.expr | None, pieces: Pieces) -> None:
    call = node if isinstance(node, ast.Call) else None
    name = last_name(call.func) if call else (text_in(node) or "").capitalize() if node is not None else "Gaussian"
    estimator, usual = _FAMILIES.get(name, ("", ""))
    link = (call.args[0] if call.args else _keyword(call, "link")) if call else None
    link_name = last_name(link.func) if isinstance(link, ast.Call) else last_name(link) if link is not None else usual
    if not estimator or link_name.lower() != usual.lower() or (name == "Gamma" and link is None):
        pieces.leave(
            f"family={source(node)}", "of families with their links, the usual ones are covered, for gamma the log"
        )
        del pieces.model["estimator"]
    else:
        pieces.model["estimator"] = estimator


def _model_argument(name: str, keyword: ast.keyword, pieces: Pieces) -> None:
    value = keyword.value
    match keyword.arg:
        case "weights" | "freq_weights" | "var_weights":
            _weights(keyword.arg, value, pieces)
        case "exposure" | "offset":
            _exposure(keyword.arg, value, pieces)
        case "subset":
            read_condition(value, pieces)
        case "vcov":
            _variance(value, pieces)
        case "entity_effects" | "time_effects":
            if not isinstance(value, ast.Constant) or value.value:
                pieces.leave(f"{keyword.arg}={source(value)}", "name the column whose effects are absorbed")
        case "formula" | "fml" | "endog" | "exog" | "dependent" | "family" | "data":
            return
        case arg if arg not in _HARMLESS:
            pieces.leave(f"{arg}={source(value)}", "this argument is not carried over")


def _weights(argument: str, value: ast.expr, pieces: Pieces) -> None:
    column = column_in(value)
    if column:
        pieces.weigh(column, "frequency" if argument == "freq_weights" else "analytic")
    else:
        pieces.leave(f"{argument}={source(value)}", "a weight must be a column")


def _exposure(argument: str, value: ast.expr, pieces: Pieces) -> None:
    inner = value.args[0] if isinstance(value, ast.Call) and last_name(value.func) == "log" and value.args else None
    column = column_in(value if argument == "exposure" else inner)
    if column:
        pieces.model["exposure"] = column
    else:
        pieces.leave(f"{argument}={source(value)}", "only the log of a column, the exposure, can be an offset")


def _read_fit(call: ast.Call, pieces: Pieces) -> None:
    kind = text_in(_keyword(call, "cov_type", "cov", "cov_estimator") or (call.args[0] if call.args else None))
    groups = _keyword(call, "groups") or _groups(_keyword(call, "cov_kwds"))
    if last_name(call.func) == "vcov":
        _variance(call.args[0] if call.args else _keyword(call, "vcov"), pieces)
    elif kind in _ROBUST:
        pieces.robust(kind)
    elif kind == "robust":
        pieces.robust("HC1")
        pieces.hint("the small-sample factor of these robust errors was taken to be that of HC1")
    elif kind in ("cluster", "clustered"):
        _clusters(call, groups, pieces)
    elif kind in ("nonrobust", "unadjusted", "homoskedastic"):
        pieces.errors = {"kind": "classical"}
    elif kind is not None or _keyword(call, "cov_type") is not None:
        pieces.leave(
            f"standard errors {kind or source(_keyword(call, 'cov_type'))}",
            "classical, HC0 to HC3 and clustered ones are covered",
        )
    for keyword in call.keywords:
        if keyword.arg not in (
            *_HARMLESS,
            "cov_type",
            "cov",
            "groups",
            "cluster_entity",
            "cluster_time",
            "clusters",
            "vcov",
        ):
            pieces.leave(f"{keyword.arg}={source(keyword.value)}", "this argument is not carried over")


def _groups(node: ast.expr | None) -> ast.expr | None:
    if isinstance(node, ast.Dict):
        return next(
            (value for key, value in zip(node.keys, node.values, strict=True) if text_in(key) == "groups"), None
        )
    if isinstance(node, ast.Call):
        return _keyword(node, "groups")
    return None


def _clusters(call: ast.Call, groups: ast.expr | None, pieces: Pieces) -> None:
    groups = groups or _keyword(call, "clusters")
    columns = columns_in(groups)
    if columns:
        pieces.clustered(columns)
    else:
        pieces.leave(
            f"standard errors clustered by {source(groups)}", "the column of the clusters is not named in this line"
        )


def _variance(node: ast.expr | None, pieces: Pieces) -> None:
    kind = text_in(node)
    if kind in ("hetero", *_ROBUST):
        pieces.robust("HC1" if kind == "hetero" else str(kind))
    elif kind == "iid":
        pieces.errors = {"kind": "classical"}
    elif (
        isinstance(node, ast.Dict)
        and len(node.keys) == 1
        and text_in(node.keys[0]) == "CRV1"
        and text_in(node.values[0])
    ):
        pieces.clustered(each.strip() for each in (text_in(node.values[0]) or "").split("+"))
    else:
        pieces.leave(f"standard errors {source(node)}", "classical, HC1 to HC3 and clustered (CRV1) ones are covered")
