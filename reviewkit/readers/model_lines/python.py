"""Regression lines of Python scripts, through Python's own syntax trees; nothing is run."""

import ast
import warnings
from collections.abc import Iterator

from reviewkit.readers.model_lines.formulas import read_formula
from reviewkit.readers.model_lines.outcomes import read_outcome
from reviewkit.readers.model_lines.pieces import ModelLine, Pieces, plain_column
from reviewkit.readers.model_lines.row_conditions import add_condition
from reviewkit.readers.model_lines.syntax import Unreadable, parse

LANGUAGE = "Python"

_FORMULA_MODELS = {
    "ols": "ols", "wls": "ols", "poisson": "poisson", "negativebinomial": "negbin", "logit": "logit", "probit": "probit",
    "feols": "ols", "fepois": "poisson", "glm": "", "feglm": "",
}  # fmt: skip
_ARRAY_MODELS = {
    "OLS": "ols", "WLS": "ols", "Poisson": "poisson", "NegativeBinomial": "negbin", "Logit": "logit", "Probit": "probit",
    "PanelOLS": "ols", "GLM": "", "BetaModel": "beta",
}  # fmt: skip
_ELSEWHERE = ("gls", "GLS", "gee", "GEE", "mixedlm", "MixedLM", "quantreg", "QuantReg", "rlm", "RLM", "IV2SLS", "RandomEffects", "Tobit")
_FAMILIES = {
    "Poisson": ("poisson", "Log"), "Gaussian": ("ols", "Identity"), "Gamma": ("gamma", "Log"), "NegativeBinomial": ("negbin", "Log"),
    "Binomial": ("fractional_logit", "Logit"),
}  # fmt: skip
_HARMLESS = ("data", "missing", "disp", "maxiter", "method", "use_t", "cov_kwds", "debiased", "hasconst", "tol", "model", "low_memory")
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
    name = _last_name(call.func)
    if name == "from_formula" and isinstance(call.func, ast.Attribute):
        name = _last_name(call.func.value)
    return name if name in (*_FORMULA_MODELS, *_ARRAY_MODELS, *_ELSEWHERE) and not _is_family(call) else ""


def _is_family(call: ast.Call) -> bool:
    return "families" in ast.unparse(call.func) if isinstance(call.func, ast.Attribute) else False


def _last_name(node: ast.expr) -> str:
    match node:
        case ast.Attribute(_, name):
            return name
        case ast.Name(name):
            return name
    return ""


def _read_model(call: ast.Call, pieces: Pieces) -> None:
    name = _model_name(call)
    if name in _ELSEWHERE:
        pieces.leave(name, "this estimator is not covered")
        return
    pieces.model["estimator"] = _FORMULA_MODELS.get(name, _ARRAY_MODELS.get(name, ""))
    first = call.args[0] if call.args else _keyword(call, "formula", "fml", "endog", "dependent")
    second = call.args[1] if len(call.args) > 1 else _keyword(call, "exog", "data")
    if name in _FORMULA_MODELS or _last_name(call.func) == "from_formula":
        _formula(first, name, pieces)
        _data(_keyword(call, "data") or second, pieces)
    else:
        _arrays(first, second, pieces)
    if not pieces.model["estimator"]:
        _family(_keyword(call, "family"), pieces)
    for keyword in call.keywords:
        _model_argument(name, keyword, pieces)
    if name in ("feols", "fepois") and not pieces.errors and pieces.model.get("absorb") and _keyword(call, "vcov") is None:
        pieces.leave(name, "its default errors depend on its version; say which")


def _keyword(call: ast.Call, *names: str) -> ast.expr | None:
    return next((each.value for each in call.keywords if each.arg in names), None)


def _text(node: ast.expr | None) -> str | None:
    """A text that stands in the line, parts joined by + included."""
    match node:
        case ast.Constant(str(value)):
            return value
        case ast.BinOp(left, ast.Add(), right):
            first, second = _text(left), _text(right)
            return None if first is None or second is None else first + second
    return None


def _shown(node: ast.AST | None) -> str:
    return ast.unparse(node) if node is not None else "(nothing)"


def _formula(node: ast.expr | None, name: str, pieces: Pieces) -> None:
    text = _text(node)
    if text is None:
        pieces.leave(_shown(node), "the formula is put together elsewhere; it is not in this line")
        return
    try:
        read_formula(text, pieces, square_in_formula=name.startswith("fe"))
    except Unreadable as why:
        pieces.leave(text, f"this formula could not be read ({why})")


def _arrays(outcome: ast.expr | None, covariates: ast.expr | None, pieces: Pieces) -> None:
    text = _as_formula(outcome)
    if text is None:
        pieces.leave(_shown(outcome), "the outcome is not named in this line")
    else:
        reading = read_outcome(parse(text))
        pieces.outcome = dict(reading.table)
        for piece, why in reading.left:
            pieces.leave(piece, why)
    columns = _columns_in(covariates)
    if columns is None:
        pieces.leave(_shown(covariates), "the covariates are not named in this line; name their columns")
    else:
        pieces.add_terms(map(plain_column, columns))
    if covariates is not None and "add_constant" not in _shown(covariates) and columns is not None:
        pieces.hint("no constant is added in this line; a specification always has one")


def _as_formula(node: ast.expr | None) -> str | None:
    """`np.log(df["y"] + 1)` as `np.log(y + 1)`."""
    match node:
        case ast.Subscript(_, ast.Constant(str(name))) if "`" not in name and name:
            return f"`{name}`"
        case ast.Attribute(ast.Name(frame), name) if frame not in ("np", "numpy", "math"):
            return f"`{name}`"
        case ast.Name(name):
            return name
        case ast.Constant(int() | float() as value) if not isinstance(value, bool):
            return f"{value:.12g}"
        case ast.BinOp(left, operator, right):
            sign = {ast.Add: "+", ast.Sub: "-", ast.Mult: "*", ast.Div: "/", ast.Pow: "^"}.get(type(operator))
            first, second = _as_formula(left), _as_formula(right)
            return f"({first} {sign} {second})" if sign and first and second else None
        case ast.Call(function, [argument], []):
            inner = _as_formula(argument)
            return f"{ast.unparse(function)}({inner})" if inner and _dotted(function) else None
    return None


def _dotted(node: ast.expr) -> bool:
    return isinstance(node, ast.Name) or (isinstance(node, ast.Attribute) and isinstance(node.value, ast.Name))


def _columns_in(node: ast.expr | None) -> list[str] | None:
    """Columns of `sm.add_constant(df[["x", "z"]])`."""
    match node:
        case ast.Call(function, [inner, *_], _) if _last_name(function) == "add_constant":
            return _columns_in(inner)
        case ast.Subscript(_, ast.List(items) | ast.Tuple(items)):
            names = [_text(item) for item in items]
            return None if any(name is None or "`" in name for name in names) else [name for name in names if name]
        case ast.Subscript(_, ast.Constant(str(name))) if "`" not in name:
            return [name]
        case ast.Attribute(ast.Name(_), name):
            return [name]
    return None


def _column(node: ast.expr | None) -> str | None:
    """The column in `df["v"]`, `df.v` or `"v"`."""
    columns = _columns_in(node)
    return columns[0] if columns and len(columns) == 1 else _text(node)


def _family(node: ast.expr | None, pieces: Pieces) -> None:
    call = node if isinstance(node, ast.Call) else None
    name = _last_name(call.func) if call else (_text(node) or "").capitalize() if node is not None else "Gaussian"
    estimator, usual = _FAMILIES.get(name, ("", ""))
    link = (call.args[0] if call.args else _keyword(call, "link")) if call else None
    link_name = _last_name(link.func) if isinstance(link, ast.Call) else _last_name(link) if link is not None else usual
    if not estimator or link_name.lower() != usual.lower() or (name == "Gamma" and link is None):
        pieces.leave(f"family={_shown(node)}", "of families with their links, the usual ones are covered, for gamma the log")
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
            _condition(value, pieces)
        case "vcov":
            _variance(value, pieces)
        case "entity_effects" | "time_effects":
            if not isinstance(value, ast.Constant) or value.value:
                pieces.leave(f"{keyword.arg}={_shown(value)}", "name the column whose effects are absorbed")
        case "formula" | "fml" | "endog" | "exog" | "dependent" | "family" | "data":
            return
        case arg if arg not in _HARMLESS:
            pieces.leave(f"{arg}={_shown(value)}", "this argument is not carried over")


def _weights(argument: str, value: ast.expr, pieces: Pieces) -> None:
    column = _column(value)
    if column:
        pieces.weigh(column, "frequency" if argument == "freq_weights" else "analytic")
    else:
        pieces.leave(f"{argument}={_shown(value)}", "a weight must be a column")


def _exposure(argument: str, value: ast.expr, pieces: Pieces) -> None:
    inner = value.args[0] if isinstance(value, ast.Call) and _last_name(value.func) == "log" and value.args else None
    column = _column(value if argument == "exposure" else inner)
    if column:
        pieces.model["exposure"] = column
    else:
        pieces.leave(f"{argument}={_shown(value)}", "only the log of a column, the exposure, can be an offset")


def _data(node: ast.expr | None, pieces: Pieces) -> None:
    """Conditions in `df[df["year"] > 2000]`, `df.query("year > 2000")`, `df.loc[…]`."""
    for _ in range(10):
        match node:
            case ast.Name(_) | None:
                return
            case ast.Subscript(inner, ast.Compare() | ast.BinOp() | ast.UnaryOp() | ast.Call() as condition):
                _condition(condition, pieces)
                node = inner
            case ast.Call(ast.Attribute(inner, "query"), [ast.Constant(str(text))], _):
                add_condition(_query_words(text), pieces)
                node = inner
            case ast.Call(ast.Attribute(inner, "dropna" | "copy" | "reset_index"), [], []):
                node = inner
            case ast.Attribute(inner, "loc"):
                node = inner
            case _:
                pieces.leave(f"data={_shown(node)}", "what is done to the data here is not carried over")
                return


def _query_words(text: str) -> str:
    pieces = []
    for quoted in _quoted_parts(text):
        for word, sign in ((" and ", " & "), (" or ", " | "), ("not ", "!"), (" in [", " %in% c("), ("]", ")")):
            quoted = quoted if quoted[:1] in "\"'" else quoted.replace(word, sign)
        pieces.append(quoted)
    return "".join(pieces)


def _quoted_parts(text: str) -> Iterator[str]:
    part, quote = "", ""
    for letter in text:
        if quote:
            part += letter
            if letter == quote:
                yield part
                part, quote = "", ""
        elif letter in "\"'":
            yield part
            part, quote = letter, letter
        else:
            part += letter
    yield part


def _condition(node: ast.expr, pieces: Pieces) -> None:
    text = _condition_text(node)
    if text is None:
        pieces.leave(_shown(node), "this sample condition is not one a specification can hold")
    else:
        add_condition(text, pieces)


def _condition_text(node: ast.expr) -> str | None:
    match node:
        case ast.BinOp(left, ast.BitAnd() | ast.BitOr() as operator, right):
            first, second = _condition_text(left), _condition_text(right)
            sign = "&" if isinstance(operator, ast.BitAnd) else "|"
            return f"({first}) {sign} ({second})" if first and second else None
        case ast.UnaryOp(ast.Invert() | ast.Not(), inner):
            inside = _condition_text(inner)
            return f"!({inside})" if inside else None
        case ast.Compare(left, [operator], [right]):
            signs: dict[type[ast.cmpop], str] = {ast.Lt: "<", ast.LtE: "<=", ast.Gt: ">", ast.GtE: ">=", ast.Eq: "==", ast.NotEq: "!="}
            first, second, sign = _as_formula(left), _operand(right), signs.get(type(operator))
            return f"{first} {sign} {second}" if first and second and sign else None
        case ast.Call(ast.Attribute(inner, "isin"), [ast.List(items)], []):
            column, values = _as_formula(inner), [_operand(item) for item in items]
            return None if column is None or None in values else f"{column} %in% c({', '.join(map(str, values))})"
    return _as_formula(node)


def _operand(node: ast.expr) -> str | None:
    match node:
        case ast.Constant(str(text)):
            return f'"{text}"' if '"' not in text and "\\" not in text else None
        case ast.UnaryOp(ast.USub(), ast.Constant(int() | float() as value)):
            return f"-{value:.12g}"
    return _as_formula(node)


def _read_fit(call: ast.Call, pieces: Pieces) -> None:
    kind = _text(_keyword(call, "cov_type", "cov", "cov_estimator") or (call.args[0] if call.args else None))
    groups = _keyword(call, "groups") or _groups(_keyword(call, "cov_kwds"))
    if _last_name(call.func) == "vcov":
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
        pieces.leave(f"standard errors {kind or _shown(_keyword(call, 'cov_type'))}", "classical, HC0 to HC3 and clustered ones are covered")
    for keyword in call.keywords:
        if keyword.arg not in (*_HARMLESS, "cov_type", "cov", "groups", "cluster_entity", "cluster_time", "clusters", "vcov"):
            pieces.leave(f"{keyword.arg}={_shown(keyword.value)}", "this argument is not carried over")


def _groups(node: ast.expr | None) -> ast.expr | None:
    if isinstance(node, ast.Dict):
        return next((value for key, value in zip(node.keys, node.values, strict=True) if _text(key) == "groups"), None)
    if isinstance(node, ast.Call):
        return _keyword(node, "groups")
    return None


def _clusters(call: ast.Call, groups: ast.expr | None, pieces: Pieces) -> None:
    groups = groups or _keyword(call, "clusters")
    columns = _columns_in(groups)
    if columns:
        pieces.clustered(columns)
    else:
        pieces.leave(f"standard errors clustered by {_shown(groups)}", "the column of the clusters is not named in this line")


def _variance(node: ast.expr | None, pieces: Pieces) -> None:
    kind = _text(node)
    if kind in ("hetero", *_ROBUST):
        pieces.robust("HC1" if kind == "hetero" else str(kind))
    elif kind == "iid":
        pieces.errors = {"kind": "classical"}
    elif isinstance(node, ast.Dict) and len(node.keys) == 1 and _text(node.keys[0]) == "CRV1" and _text(node.values[0]):
        pieces.clustered(each.strip() for each in (_text(node.values[0]) or "").split("+"))
    else:
        pieces.leave(f"standard errors {_shown(node)}", "classical, HC1 to HC3 and clustered (CRV1) ones are covered")
