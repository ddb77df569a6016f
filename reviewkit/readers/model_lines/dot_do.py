"""Regression lines of .do scripts."""

import re
from dataclasses import dataclass

from reviewkit.readers.model_lines.dot_do_terms import read_varlist
from reviewkit.readers.model_lines.pieces import ModelLine, Pieces, shown
from reviewkit.readers.model_lines.row_conditions import add_condition

LANGUAGE = ".do script"

_COMMANDS = {
    "regress": ("reg", "ols"), "areg": ("areg", "ols"), "reghdfe": ("reghdfe", "ols"), "xtreg": ("xtreg", "ols"),
    "poisson": ("poisson", "poisson"), "ppmlhdfe": ("ppmlhdfe", "poisson"), "ppml": ("ppml", "poisson"),
    "xtpoisson": ("xtpoisson", "poisson"), "nbreg": ("nbreg", "negbin"), "logit": ("logi", "logit"),
    "logistic": ("logistic", "logit"), "probit": ("prob", "probit"), "fracreg": ("fracreg", "fractional_logit"),
    "betareg": ("betareg", "beta"), "glm": ("glm", ""),
}  # fmt: skip
"""Commands with their shortest form and the estimator of a specification."""
_ELSEWHERE = (
    "ivregress", "ivreg", "ivreg2", "ivreghdfe", "xtivreg", "tobit", "intreg", "truncreg", "heckman", "qreg", "mixed",
    "xtmixed", "xtlogit", "xtnbreg", "nl", "sureg", "stcox", "zip", "zinb", "rreg", "cnsreg", "newey", "prais", "xtgls",
    "xtabond", "gmm", "ologit", "oprobit", "mlogit", "boxcox", "didregress", "xtdidregress", "teffects",
)  # fmt: skip
_LIKELIHOOD = ("poisson", "ppml", "xtpoisson", "nbreg", "logit", "logistic", "probit", "fracreg", "betareg", "glm")
"""Commands whose robust covariance has the factor n/(n-1), or G/(G-1), only."""
_PREFIX = re.compile(
    r"^\s*(?:qui(?:e(?:t(?:ly?)?)?)?|n(?:oi(?:s(?:i(?:ly?)?)?)?)?|cap(?:t(?:u(?:re?)?)?)?|xi|eststo(?:\s+[\w*]+)?)\b\s*(?:,[^:]*)?:?\s*(?=\S)",
    re.IGNORECASE,
)
_BY = re.compile(
    r"^\s*(?:by|bys|byso|bysor|bysort|svy|bootstrap|bs|jackknife|mi\s+est\w*|statsby|rolling|permute|simulate)\b[^:]*:\s*"
)
_WEIGHTS = {"a": "analytic", "p": "probability", "f": "frequency"}
_HARMLESS = re.compile(
    r"^(?:irr|or|eform|level|l|beta|nohe\w*|noheader|nolog|log|notab\w*|vsquish|dots|verbose|keepsing\w*|nolstretch|"
    r"cformat|pformat|sformat|iter\w*|tol\w*|dif\w*|nowarn\w*|vers\w*|compact|allbase\w*|baselevels?|noomit\w*|noempty\w*|coefl\w*|depname|noconst_)$"
)
_CLUSTER = re.compile(r"^(?:cl|clu|clus|clust|cluste|cluster)$")
_ROBUST = re.compile(r"^(?:r|ro|rob|robu|robus|robust)$")


@dataclass(frozen=True, slots=True)
class Command:
    """The pieces of one command as its language separates them."""

    name: str
    body: str
    condition: str
    rows: str
    weights: str
    options: tuple[tuple[str, str], ...]


def command_named(word: str) -> str | None:
    """The full name of a regression command that may be shortened; None for any other word."""
    if word in _COMMANDS or word in _ELSEWHERE:
        return word
    shortest = {full: short for full, (short, _) in _COMMANDS.items()}
    return next((full for full, short in shortest.items() if full.startswith(word) and word.startswith(short)), None)


def read_dot_do(text: str) -> ModelLine | None:
    """The regression of a .do script's line; None where there is none."""
    pieces = Pieces(LANGUAGE)
    found: Command | None = None
    for line in _lines(text):
        command = _command(_without_prefixes(line, pieces))
        if command is None or command_named(command.name) is None:
            pieces.leave(line, "this line fits no model that is known")
        elif found is None:
            found = command
        else:
            pieces.leave(line, "one model a time; this is a second one")
    if found is None:
        return None
    _read(found, pieces)
    return pieces.finished()


def starts_like_dot_do(text: str) -> bool:
    """Whether a line begins with a regression command of a .do script."""
    for line in _lines(text):
        found = re.match(r"\s*(\w+)\b(?!\s*[(.])", _without_prefixes(line, Pieces(LANGUAGE)))
        if found and command_named(found[1]):
            return True
    return False


def _lines(text: str) -> list[str]:
    """Logical lines: comments out, joined lines joined."""
    joined = re.sub(r"[ \t]///[^\n]*(?:\n|$)", " ", _without_block_comments(text))
    plain = re.sub(r"(?:^|(?<=\s))//[^\n]*", "", joined)
    lines = (line.strip().rstrip(";").strip() for line in re.split(r"[\n]|;\s*(?=\w+\s)", plain))
    return [line for line in (re.sub(r"^\.\s+", "", each) for each in lines) if line and not line.startswith("*")]


def _without_block_comments(text: str) -> str:
    parts, start = [], 0
    while (opening := text.find("/*", start)) >= 0 and (closing := text.find("*/", opening + 2)) >= 0:
        parts.append(text[start:opening])
        start = closing + 2
    return " ".join([*parts, text[start:]])


def _without_prefixes(line: str, pieces: Pieces) -> str:
    for _ in range(6):
        by = _BY.match(line)
        if by:
            pieces.leave(by[0], "repeating or resampling a model is not covered; the model itself was read")
            line = line[by.end() :]
            continue
        found = _PREFIX.match(line)
        word = re.match(r"\s*(\w+)", line)
        if found is None or (word and command_named(word[1])):
            return line
        line = line[found.end() :]
    return line


def _command(line: str) -> Command | None:
    found = re.match(r"\s*(\w+)\b\s*", line)
    if found is None:
        return None
    body, options = _split_once(line[found.end() :], ",")
    weights = re.search(r"\[\s*([a-z]*)\s*=([^\]]*)\]", body)
    body = body.replace(weights[0], " ", 1) if weights else body
    body, rows = _split_word(body, "in")
    body, condition = _split_word(body, "if")
    if not condition and " if " in f" {rows} ":
        rows, condition = _split_word(rows, "if")
    shown_weights = f"{weights[1]}={weights[2].strip()}" if weights else ""
    return Command(found[1], body.strip(), condition.strip(), rows.strip(), shown_weights, tuple(_options(options)))


def _outside(text: str) -> list[int]:
    """Depth of brackets at each character; quoted texts count as inside."""
    depth, quote, depths = 0, False, []
    for letter in text:
        quote = quote != (letter == '"')
        depth += 0 if quote else (letter in "([") - (letter in ")]")
        depths.append(depth + (1 if quote or letter == '"' else 0))
    return depths


def _split_once(text: str, sign: str) -> tuple[str, str]:
    depths = _outside(text)
    place = next((place for place, letter in enumerate(text) if letter == sign and depths[place] <= 0), None)
    return (text, "") if place is None else (text[:place], text[place + 1 :])


def _split_word(text: str, word: str) -> tuple[str, str]:
    depths = _outside(text)
    for found in re.finditer(rf"(?:^|(?<=\s)){word}(?=[\s(!])", text):
        if depths[found.start()] <= 0:
            return text[: found.start()], text[found.end() :]
    return text, ""


def _options(text: str) -> list[tuple[str, str]]:
    """Options and what stands in their brackets."""
    options, place = [], 0
    for found in re.finditer(r"([A-Za-z_]\w*)", text):
        if found.start() < place:
            continue
        inside, place = "", found.end()
        rest = re.match(r"\s*\(", text[place:])
        if rest:
            inside, place = _inside(text, place + rest.end())
        options.append((found[1], inside.strip()))
    return options


def _inside(text: str, start: int) -> tuple[str, int]:
    depth = 1
    for place in range(start, len(text)):
        depth += (text[place] == "(") - (text[place] == ")")
        if depth == 0:
            return text[start:place], place + 1
    return text[start:], len(text)


def _read(command: Command, pieces: Pieces) -> None:
    name = command_named(command.name) or ""
    estimator = _COMMANDS.get(name, ("", ""))[1]
    if estimator:
        pieces.model["estimator"] = estimator
    elif name != "glm":
        pieces.leave(f"{command.name} {command.body}", "this estimator is not covered")
        return
    read_varlist(_without_link(name, command.body, pieces), pieces)
    if command.condition:
        _sample(command.condition, pieces)
    if command.rows:
        pieces.leave(f"in {command.rows}", "rows chosen by their place in the file; say it as a condition on columns")
    pieces.errors = {"kind": "classical"}
    for option, inside in command.options:
        _option(name, option.lower(), inside, pieces)
    _weights(command.weights, pieces)
    _after(name, pieces, [option.lower() for option, _ in command.options])


def _sample(condition: str, pieces: Pieces) -> None:
    if "`" in condition or "$" in condition:
        pieces.leave(f"if {condition}", "what a macro holds is not in this line")
        return
    add_condition(re.sub(r"~(?!=)", "!", condition), pieces)
    if re.search(r">|!=|~=", condition):
        pieces.hint("In a .do script a missing value counts as larger than any number; here it fails the condition.")


def _option(name: str, option: str, inside: str, pieces: Pieces) -> None:
    if option == "vce":
        _variance(inside, pieces, name)
    elif _ROBUST.match(option) and not inside:
        pieces.robust(small_sample=_factor(name))
    elif _CLUSTER.match(option) and inside:
        _by(inside.split(), pieces, name)
    elif option in ("hc2", "hc3") and not inside:
        pieces.robust(option.upper())
    elif re.match(r"^a(?:b(?:s(?:o(?:rb?)?)?)?)?$", option) and inside:
        _absorbed(inside, pieces)
    elif option in ("e", "exp", "expo", "exposure") and inside:
        pieces.model["exposure"] = inside
    elif option in ("fe", "re", "be", "mle", "pa") and name.startswith("xt"):
        if option != "fe":
            pieces.leave(option, "random, between and population-averaged effects are not covered")
    elif option == "i" and name.startswith("xt") and inside:
        pieces.absorb([inside])
    elif name == "glm" and option in ("family", "f", "fam", "link", "l"):
        _family(option, inside, pieces)
    elif not _HARMLESS.match(option):
        _left_option(option, inside, pieces)


def _left_option(option: str, inside: str, pieces: Pieces) -> None:
    written = f"{option}({inside})" if inside else option
    known = {
        "offset": "give the column whose log it is as exposure",
        "off": "give the column whose log it is as exposure",
        "noc": "models without a constant are not covered",
        "nocons": "models without a constant are not covered",
        "noconstant": "models without a constant are not covered",
    }
    pieces.leave(written, known.get(option, "this option is not carried over"))


def _factor(name: str) -> str:
    """The small-sample factor that a command puts on robust errors where it is not that of HC1."""
    return "n/(n-1)" if name in _LIKELIHOOD else "default"


def _by(columns: list[str], pieces: Pieces, name: str) -> None:
    if any(not re.fullmatch(r"[^\W\d]\w*", each) for each in columns):
        pieces.leave(f"cluster({' '.join(columns)})", "clusters must be columns; make one of the combination first")
        pieces.errors = {}
        return
    pieces.clustered(columns, small_sample="G/(G-1)" if name in _LIKELIHOOD else "default")


def _variance(inside: str, pieces: Pieces, name: str) -> None:
    kind, *columns = re.split(r"[\s,]+", inside) or [""]
    if _CLUSTER.match(kind) and columns:
        _by(columns, pieces, name)
    elif _ROBUST.match(kind):
        pieces.robust(small_sample=_factor(name))
    elif kind in ("hc2", "hc3"):
        pieces.robust(kind.upper())
    elif kind not in ("ols", "oim", "conventional", "unadjusted", "un"):
        pieces.leave(f"vce({inside})", "of standard errors classical, robust and clustered ones are covered")
        pieces.errors = {}


def _absorbed(inside: str, pieces: Pieces) -> None:
    for piece in re.sub(r",.*$", "", inside).split():
        plain = re.sub(r"^(?:i\.|\w+=)", "", piece)
        if re.fullmatch(r"[^\W\d]\w*", plain):
            pieces.absorb([plain])
        else:
            pieces.leave(f"absorb({piece})", "absorbed effects must be columns; make one of the combination first")


def _family(option: str, inside: str, pieces: Pieces) -> None:
    word = inside.split()[0] if inside.split() else ""
    if option.startswith("f"):
        families = {
            "poisson": "poisson",
            "p": "poisson",
            "gamma": "gamma",
            "gam": "gamma",
            "nbinomial": "negbin",
            "nb": "negbin",
        }
        families |= {
            "gaussian": "ols",
            "gau": "ols",
            "binomial": "fractional_logit",
            "bin": "fractional_logit",
            "b": "fractional_logit",
        }
        if word in families:
            pieces.model["estimator"] = families[word]
        else:
            pieces.leave(f"{option}({inside})", "this family is not covered")
        return
    pieces.model["_link"] = word


def _weights(text: str, pieces: Pieces) -> None:
    if not text:
        return
    kind, _, column = text.partition("=")
    found = {"w": "", "weight": ""}.get(kind, _WEIGHTS.get(kind[:1], ""))
    if not re.fullmatch(r"[^\W\d]\w*", column):
        pieces.leave(f"[{text}]", "a weight must be a column")
    elif not found:
        pieces.leave(f"[{text}]", "say whether the weight is a frequency, analytic or a probability weight")
    else:
        pieces.weigh(column, found)
        if found == "probability" and pieces.errors.get("kind") == "classical":
            pieces.robust()
            pieces.hint("With probability weights this command reports robust errors unless told otherwise.")


def _after(name: str, pieces: Pieces, options: list[str]) -> None:
    link = pieces.model.pop("_link", "")
    natural = {
        "ols": ("identity", "i", "id"),
        "fractional_logit": ("logit", "l"),
        "poisson": ("log",),
        "gamma": ("log",),
        "negbin": ("log",),
    }
    estimator = str(pieces.model.get("estimator", ""))
    if name == "glm" and ((link and link not in natural.get(estimator, ())) or (estimator == "gamma" and not link)):
        pieces.leave(
            f"link({shown(link) or 'default'})", "only the usual link of each family is covered, for gamma the log"
        )
        pieces.model.pop("estimator", None)
    if name == "glm" and not estimator:
        pieces.leave("glm", "the family is not known; say the estimator")
    if name.startswith("xt") and "fe" in options and not pieces.model.get("absorb"):
        pieces.leave("fe", "name the panel's unit column as absorbed effect; it is not in this line")
        if pieces.errors.get("kind") == "robust":
            pieces.errors = {}
            pieces.leave("robust", "with panel effects this command clusters by the panel's unit; name its column")
    elif name == "xtreg" and "fe" not in options:
        pieces.model.pop("estimator", None)
        pieces.leave("xtreg", "without the option fe this command fits random effects, which are not covered")


def _without_link(name: str, body: str, pieces: Pieces) -> str:
    """The list of variables without the link that stands before it in `fracreg logit y x`."""
    if name != "fracreg":
        return body
    link, _, rest = body.partition(" ")
    if link != "logit":
        pieces.model.pop("estimator", None)
        pieces.leave(f"fracreg {link}", "only its logit form is covered")
    return rest
