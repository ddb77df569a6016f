"""Regression lines of R scripts."""

import re
from dataclasses import replace

from reviewkit.readers.model_lines.formulas import added, read_formula
from reviewkit.readers.model_lines.outcomes import column_named
from reviewkit.readers.model_lines.pieces import ModelLine, Pieces
from reviewkit.readers.model_lines.row_conditions import add_condition_tree
from reviewkit.readers.model_lines.syntax import Call, Name, Operation, Pick, Prefix, Text, Tree, bare, parse, written

LANGUAGE = "R"

_ESTIMATORS = {
    "lm": "ols", "feols": "ols", "lm_robust": "ols", "felm": "ols", "plm": "ols", "fepois": "poisson",
    "glm.nb": "negbin", "fenegbin": "negbin", "betareg": "beta", "glm": "", "feglm": "",
}  # fmt: skip
_ELSEWHERE = (
    "ivreg", "iv_robust", "lmer", "glmer", "rq", "tobit", "censReg", "coxph", "gam", "polr", "multinom", "zeroinfl",
    "hurdle", "nls", "femlm",
)  # fmt: skip
_FAMILIES = {
    "poisson": "poisson", "quasipoisson": "poisson", "gaussian": "ols", "Gamma": "gamma", "binomial": "logit",
    "quasibinomial": "fractional_logit",
}  # fmt: skip
_LINKS = {
    "poisson": "log",
    "quasipoisson": "log",
    "gaussian": "identity",
    "Gamma": "inverse",
    "binomial": "logit",
    "quasibinomial": "logit",
}
_USUAL = _LINKS | {"Gamma": "log"}
_SQUARES = ("feols", "fepois", "feglm", "fenegbin")
"""Functions in whose formulas `x^2` is the square of x."""
_HARMLESS = (
    "na.action", "model", "x", "y", "qr", "singular.ok", "notes", "warn", "nthreads", "verbose", "lean", "mem.clean",
    "combine.quick", "control", "start", "method", "maxit", "epsilon", "ci", "alpha", "return_vcov", "try_cholesky",
    "exactDOF", "keepX", "keepCX",
)  # fmt: skip


def read_r(text: str) -> ModelLine | None:
    """The regression in a line of R; None where there is none.

    Raises:
        Unreadable: the line has no shape that R has.
    """
    pieces = Pieces(LANGUAGE)
    tree = parse(_without_comments(text))
    call = _model_call(tree, pieces)
    if call is None:
        return None
    _read(call, pieces)
    return pieces.finished()


def _without_comments(text: str) -> str:
    quoted = r"(\"(?:[^\"\\\n]|\\.)*\"|'(?:[^'\\\n]|\\.)*')|#[^\n]*"
    plain = re.sub(quoted, lambda found: found[1] or "", text).strip().rstrip(";")
    return re.sub(r"^(\s*(?:`[^`]+`|[\w.$\[\]\"']+)\s*)=(?!=)", r"\1<-", plain, count=1)


def _model_call(tree: Tree, pieces: Pieces) -> Call | None:
    """The call that fits a model inside assignments, pipes and wrappers such as summary()."""
    tree = bare(tree)
    match tree:
        case Operation("<-", _, right):
            return _model_call(right, pieces)
        case Operation("->", left, _):
            return _model_call(left, pieces)
        case Operation("%>%" | "|>", left, right):
            return _piped(left, bare(right), pieces)
        case Call() if _short(tree.function) in _ESTIMATORS or _short(tree.function) in _ELSEWHERE:
            return replace(tree, function=_short(tree.function))
        case Call(
            "summary" | "coeftest" | "print" | "tidy" | "lmtest::coeftest" | "etable" | "modelsummary" | "broom::tidy",
            arguments,
        ):
            found = _model_call(arguments[0][1], pieces) if arguments else None
            return _with_outer_errors(found, tree, pieces) if found else None
        case _:
            return None


def _short(function: str) -> str:
    return re.sub(r"^(?:stats|fixest|estimatr|lfe|plm|MASS|betareg|AER|lme4)::", "", function)


def _piped(left: Tree, right: Tree, pieces: Pieces) -> Call | None:
    inner = _model_call(right, pieces)
    if inner is not None:
        if inner.named("data") is None or written(inner.named("data")) == ".":
            arguments = tuple((name, value) for name, value in inner.arguments if name != "data")
            inner = replace(inner, arguments=(*arguments, ("data", left)))
        return inner
    found = _model_call(left, pieces)
    return _with_outer_errors(found, right, pieces) if found and isinstance(right, Call) else found


def _with_outer_errors(call: Call, outer: Call, pieces: Pieces) -> Call:
    """The call, with errors that a wrapper asks for; its other arguments are display only."""
    kept = ("vcov", "vcov.", "cluster", "se", "vcov_type", "robust")
    asked = tuple((name.rstrip("."), value) for name, value in outer.arguments if name in kept)
    return replace(call, arguments=(*call.arguments, *asked))


def _read(call: Call, pieces: Pieces) -> None:
    if call.function in _ELSEWHERE:
        pieces.leave(call.function, "this estimator is not covered")
        return
    pieces.model["estimator"] = _ESTIMATORS[call.function]
    formula = call.named("formula", "fml") or next(iter(call.unnamed()), None)
    if not (isinstance(formula, Operation) and formula.operator == "~"):
        pieces.leave(written(formula), "the formula is not in this line")
    else:
        _formula(call, formula, pieces)
    if not pieces.model["estimator"]:
        _family(call, pieces)
    for name, value in call.arguments:
        if value is not formula:
            _argument(call, name, value, pieces)
    _data(call, pieces)
    if call.function == "lm_robust" and call.named("clusters") is not None and call.named("se_type") is None:
        pieces.leave("clusters", "this function's default errors (CR2) are not covered; CR1 stands in their place")
    if not pieces.errors:
        _default_errors(call, pieces)


def _formula(call: Call, formula: Operation, pieces: Pieces) -> None:
    parts = _bars(formula.right)
    if call.function == "felm":  # y ~ x | effects | instruments | clusters
        clusters = parts[3] if len(parts) > 3 else None
        kept = parts[:3]
        if clusters is not None and written(clusters) != "0":
            _cluster(clusters, pieces)
        text = " | ".join(written(part) for part in kept)
    else:
        text = " | ".join(written(part) for part in parts)
    read_formula(f"{written(formula.left)} ~ {text}", pieces, call.function in _SQUARES)


def _bars(tree: Tree) -> list[Tree]:
    return [*_bars(tree.left), tree.right] if isinstance(tree, Operation) and tree.operator == "|" else [tree]


def _family(call: Call, pieces: Pieces) -> None:
    given = call.named("family") or next((each for each in call.unnamed() if _family_name(each) in _FAMILIES), None)
    name = _family_name(given) if given is not None else "gaussian"
    link = _LINKS.get(name, "")
    if isinstance(given, Call) and given.arguments:
        link = written(given.arguments[0][1]).strip('"')
    if name not in _FAMILIES or link != _USUAL[name]:
        pieces.leave(f"family = {written(given)}", "of families with their links, the usual ones are covered")
        del pieces.model["estimator"]
        return
    pieces.model["estimator"] = _FAMILIES[name]
    if name == "quasipoisson":
        pieces.hint("quasipoisson scales its errors by an estimated dispersion; robust errors serve here")


def _family_name(tree: Tree) -> str:
    match tree:
        case Call(function, _):
            return function.removeprefix("stats::")
        case Name(text) | Text(text):
            return text.removeprefix("stats::")
    return ""


def _argument(call: Call, name: str, value: Tree, pieces: Pieces) -> None:
    match name:
        case "" | "formula" | "fml" | "data" | "family":
            return
        case "weights":
            _weights(call, value, pieces)
        case "subset":
            add_condition_tree(value.operand if isinstance(value, Prefix) and value.operator == "~" else value, pieces)
        case "cluster" | "clusters":
            _cluster(value, pieces)
        case "vcov" | "se" | "se_type" | "vcov_type":
            _variance(call, value, pieces)
        case "fixed_effects" | "fixef":
            _absorb(value, pieces)
        case "offset":
            read_formula(f"y ~ {written(Call('offset', (('', _inside_tilde(value)),)))}", offset := Pieces(LANGUAGE))
            pieces.model |= {key: each for key, each in offset.model.items() if key == "exposure"}
            pieces.left += offset.left
        case "model" | "effect" | "index" if call.function == "plm":
            _panel(name, value, pieces)
        case _ if name not in _HARMLESS:
            pieces.leave(f"{name} = {written(value)}", "this argument is not carried over")


def _inside_tilde(tree: Tree) -> Tree:
    return tree.operand if isinstance(tree, Prefix) and tree.operator == "~" else tree


def _weights(call: Call, value: Tree, pieces: Pieces) -> None:
    column = column_named(_inside_tilde(value))
    if column is None:
        pieces.leave(f"weights = {written(value)}", "a weight must be a column")
        return
    pieces.weigh(column, "analytic")
    if pieces.model.get("estimator") not in ("ols", None):
        pieces.hint("Weights in R enter as analytic ones here; in a Poisson model say whether they are frequencies")


def _names_in(value: Tree) -> list[str] | None:
    value = bare(_inside_tilde(value))
    if isinstance(value, Call) and value.function == "c":
        listed = [_name_or_text(each) for _, each in value.arguments]
    else:
        listed = [_name_or_text(each) for _, each in added(value)]
    return None if any(each is None for each in listed) else [each for each in listed if each]


def _name_or_text(tree: Tree) -> str | None:
    tree = bare(tree)
    if isinstance(tree, Call) and tree.function in ("factor", "as.factor") and len(tree.arguments) == 1:
        tree = bare(tree.arguments[0][1])
    if isinstance(tree, Pick) and len(tree.places) == 1 and isinstance(tree.places[0], Text):
        return tree.places[0].text
    return tree.text if isinstance(tree, Text) else column_named(tree)


def _cluster(value: Tree, pieces: Pieces) -> None:
    names = _names_in(value)
    if names:
        pieces.clustered(names)
    else:
        pieces.leave(f"cluster = {written(value)}", "clusters must be columns; make one of the combination first")


def _absorb(value: Tree, pieces: Pieces) -> None:
    names = _names_in(value)
    if names:
        pieces.absorb(names)
    else:
        pieces.leave(written(value), "absorbed effects must be columns")


def _variance(call: Call, value: Tree, pieces: Pieces) -> None:
    inner = bare(value)
    kind = inner.text if isinstance(inner, Text | Name) else ""
    simple = {"hetero": "HC1", "white": "HC1", **{name: name for name in ("HC0", "HC1", "HC2", "HC3")}}
    if isinstance(inner, Prefix) and inner.operator == "~":
        _cluster(inner, pieces)
    elif kind in simple:
        pieces.robust(simple[kind])
    elif kind in ("iid", "standard", "classical", "const"):
        pieces.errors = {"kind": "classical"}
    elif kind in ("CR0", "CR1") and pieces.errors.get("kind") == "cluster":
        pieces.errors["type"] = kind
    elif kind == "CR0" or (kind == "cluster" and call.named("cluster") is not None):
        return
    elif kind == "cluster" and pieces.model.get("absorb"):
        pieces.clustered(pieces.model["absorb"][:1])
    elif isinstance(inner, Call) and re.search(r"vcovHC$", inner.function):
        _sandwich(inner, "HC3", pieces)
    elif isinstance(inner, Call) and re.search(r"vcovCL$", inner.function) and inner.named("cluster") is not None:
        _cluster(inner.named("cluster") or inner, pieces)
    elif isinstance(inner, Name) and re.search(r"vcovHC$", kind):
        pieces.robust("HC3")
    else:
        pieces.leave(
            f"standard errors {written(value)}", "of these, classical, HC0 to HC3 and clustered ones are covered"
        )
        pieces.errors = {} if pieces.errors.get("kind") != "cluster" else pieces.errors


def _sandwich(call: Call, default: str, pieces: Pieces) -> None:
    given = call.named("type")
    type_ = given.text if isinstance(given, Text) else default
    if type_ in ("HC0", "HC1", "HC2", "HC3"):
        pieces.robust(type_)
    else:
        pieces.leave(written(call), "of robust errors HC0 to HC3 are covered")


def _panel(name: str, value: Tree, pieces: Pieces) -> None:
    text = written(value).strip('"')
    if name == "index":
        names = _names_in(value) or []
        pieces.absorb(names[:1])
        if len(names) != 1:
            pieces.hint("the first column of the index was taken as the absorbed unit")
    elif (name, text) not in (("model", "within"), ("effect", "individual")):
        pieces.leave(f"{name} = {written(value)}", "of panel models, effects of one unit (within) are covered")


def _data(call: Call, pieces: Pieces) -> None:
    """A condition that stands where the data are named: subset(d, …), filter(d, …), d[…, ]."""
    unnamed = call.unnamed()
    placed = list(unnamed if call.named("formula", "fml") is not None else unnamed[1:])
    placed = [each for each in placed if _family_name(each) not in _FAMILIES]
    data = bare(call.named("data") or (placed.pop(0) if placed else Name("data")))
    for each in placed:
        pieces.leave(written(each), "an argument without a name; write its name before it")
    for _ in range(10):
        match data:
            case Operation("%>%" | "|>", left, Call("filter" | "dplyr::filter" | "subset", arguments)):
                for _, value in arguments:
                    add_condition_tree(value, pieces)
                data = bare(left)
            case Call("subset" | "filter" | "dplyr::filter", (("", inner), *others)):
                for _, value in others:
                    add_condition_tree(value, pieces)
                data = bare(inner)
            case Pick(inner, (place, None)) if place is not None:
                add_condition_tree(place, pieces)
                data = bare(inner)
            case Name(_) | Operation("$", _, _):
                return
            case _:
                pieces.leave(f"data = {written(data)}", "what is done to the data here is not carried over")
                return


def _default_errors(call: Call, pieces: Pieces) -> None:
    clusters = call.named("clusters") is not None
    if any("standard errors" in each or "cluster" in each for each in pieces.left):
        return
    if call.function == "lm_robust" and not clusters:
        pieces.robust("HC2")
    elif call.function in _SQUARES and pieces.model.get("absorb"):
        pieces.leave(
            call.function,
            "its default errors depend on its version (classical, or clustered by the first effect); say which",
        )
    else:
        pieces.errors = {"kind": "classical"}


def looks_like_r(text: str) -> bool:
    """Whether a line has a model call of R."""
    names = "|".join(map(re.escape, (*_ESTIMATORS, *_ELSEWHERE)))
    return bool(re.search(rf"(?<![\w.])(?:{names})\s*\(", text)) and "~" in text
