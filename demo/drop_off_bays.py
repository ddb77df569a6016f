"""An invented study with data: free drop-off bays at harbours and the worn netting that boats bring ashore.

Design. 84 harbours in three areas; a lottery within areas gives half of them a bay. A boat lands nothing over the
season, or an amount whose logarithm is normal. A bay raises the share of boats that land anything and lowers the
amounts among those that do, since many newcomers land little. So log(kg + 1) moves far more than mean kilograms do.
"""

from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pyreadstat
import statsmodels.api as sm

from paper import PaperSection, ResultsTable, write_paper
from printing import bracketed, percent_of, share_of, starred

TITLE = "Free drop-off bays and the worn netting that boats bring ashore"
AREAS = ("Ostrigg", "Pellenshore", "Varn Reach")
LABELS = {
    "harbour": "Harbour number",
    "area": "Coastal area",
    "bay": "Harbour has a free drop-off bay (1 yes, 0 no)",
    "length_m": "Length of the boat in metres",
    "years": "Years the skipper has fished",
    "km_site": "Kilometres from the harbour to the next disposal site",
    "netting_kg": "Worn netting landed over the season, kilograms",
}
_SEED = 20_260_317
_HARBOURS = 84
_FORMAT_118 = 14
"""What the library that writes .dta files calls the 118th version of the format."""


def draw_landings() -> pd.DataFrame:
    """One row a boat, about 3,000 rows; `years` is missing for a few."""
    draw = np.random.default_rng(_SEED)
    harbours = _draw_harbours(draw)
    boats = harbours.loc[harbours.index.repeat(harbours["boats"])].reset_index(drop=True)
    n = len(boats)
    length = np.round(np.clip(draw.normal(11, 2.8, n), 5, 22), 1)
    years = np.round(draw.gamma(3.2, 5.2, n)).clip(1, 52)
    size = np.log(length / 11)
    lands = draw.random(n) < _logistic(0.10 + 0.80 * boats["bay"] + 0.5 * size + boats["custom"])
    spread = draw.normal(0, 0.80, n)
    kilograms = np.exp(3.35 - 0.06 * boats["bay"] + 0.9 * size + 0.004 * years + boats["custom"] + spread)
    return pd.DataFrame(
        {
            "harbour": boats["harbour"].astype("int16"),
            "area": boats["area"],
            "bay": boats["bay"].astype("int8"),
            "length_m": length,
            "years": np.where(draw.random(n) < 0.014, np.nan, years),
            "km_site": boats["km_site"],
            "netting_kg": np.where(lands, np.round(np.maximum(kilograms, 1.0), 1), 0.0),
        }
    )


def _draw_harbours(draw: np.random.Generator) -> pd.DataFrame:
    area = np.repeat(np.arange(3), _HARBOURS // 3)
    bay = np.concatenate([draw.permutation(np.repeat([0, 1], _HARBOURS // 6)) for _ in AREAS])
    return pd.DataFrame(
        {
            "harbour": np.arange(1, _HARBOURS + 1),
            "area": np.array(AREAS)[area],
            "bay": bay,
            "km_site": np.round(draw.uniform(2, 60, _HARBOURS), 1),
            "custom": draw.normal(0, 0.12, _HARBOURS),
            "boats": draw.integers(28, 45, _HARBOURS),
        }
    )


def _logistic(index: Any) -> Any:
    return 1 / (1 + np.exp(-index))


@dataclass(frozen=True, slots=True)
class Column:
    """A printed column: estimates and errors by term, with what stands below them."""

    estimates: dict[str, float]
    errors: dict[str, float]
    p_values: dict[str, float]
    n: int
    harbours: int
    r_squared: float


_TERMS = {"bay": "Drop-off bay", "length_m": "Length (m)", "years": "Skipper's years", "km_site": "Distance (km)"}


def fit_columns(landings: pd.DataFrame) -> tuple[Column, Column]:
    """The two printed columns: the bay alone with areas, and with the boat's and the harbour's features."""
    return _fit(landings, ["bay"]), _fit(landings, list(_TERMS))


def _fit(landings: pd.DataFrame, terms: list[str]) -> Column:
    """Least squares on log(kg + 1) with area effects, errors clustered by harbour."""
    used = landings.dropna(subset=terms)
    areas = pd.get_dummies(used["area"], drop_first=True, dtype=float)
    design = sm.add_constant(pd.concat([used[terms].astype(float), areas], axis=1))
    model = sm.OLS(np.log(used["netting_kg"] + 1), design)
    fit = model.fit(cov_type="cluster", cov_kwds={"groups": used["harbour"].to_numpy()}, use_t=True)
    return Column(
        {term: float(fit.params[term]) for term in terms},
        {term: float(fit.bse[term]) for term in terms},
        {term: float(fit.pvalues[term]) for term in terms},
        len(used),
        int(used["harbour"].nunique()),
        float(fit.rsquared),
    )


def write_study(folder: Path) -> None:
    """Write data and manuscript; every printed number is computed from the data."""
    landings = draw_landings()
    landings.to_csv(folder / "landings.csv", index=False, lineterminator="\n")
    _write_dta(landings, folder / "landings.dta")
    write_paper(folder / "manuscript.docx", TITLE, _sections(landings))


def _write_dta(landings: pd.DataFrame, path: Path) -> None:
    """Write the same table as a .dta file, unless the file holds it already: the writer stamps the time of day."""
    if path.exists():
        held, about = pyreadstat.read_dta(path)
        if about.column_names_to_labels == LABELS and held.astype(landings.dtypes).equals(landings):
            return
    pyreadstat.write_dta(landings, path, column_labels=LABELS, version=_FORMAT_118)


def _sections(landings: pd.DataFrame) -> tuple[PaperSection, ...]:
    plain, full = fit_columns(landings)
    percent = percent_of(full.estimates["bay"])
    return (
        PaperSection("Abstract", (_abstract(percent, full),)),
        PaperSection("1 Introduction", _introduction()),
        PaperSection("2 Data", _data(landings)),
        PaperSection("3 Method", _method()),
        PaperSection("4 Results", (*_results(percent, full), _table(plain, full))),
        PaperSection("5 Conclusion", (_conclusion(percent),)),
    )


def _abstract(percent: str, full: Column) -> str:
    return (
        "Worn netting that is not brought ashore is often left at sea. We study free drop-off bays, which a lottery "
        f"gave to half of {full.harbours} small harbours. Over one season, a bay increases the amount of netting that "
        f"boats land by {percent} percent. Bays of this kind are cheap, and our estimate can be used to plan how much "
        "material a harbour will have to store."
    )


def _introduction() -> tuple[str, ...]:
    return (
        "Netting wears out. A skipper who replaces a net can carry the old one to a disposal site inland, keep it, or "
        "lose it. Where the way inland is long, little arrives. A drop-off bay is a fenced corner of the quay where "
        "old netting may be left at any hour and without a fee.",
        "Harbours that build a bay have to know how much will come. We therefore ask by how much a bay changes the "
        "amount of netting that is landed.",
    )


def _data(landings: pd.DataFrame) -> tuple[str, ...]:
    boats = f"{len(landings):,}"
    missing = int(landings["years"].isna().sum())
    zero, middle = share_of(landings["netting_kg"] == 0), landings["netting_kg"].median()
    return (
        f"The data cover {boats} boats in {landings['harbour'].nunique()} harbours of three areas, {AREAS[0]}, "
        f"{AREAS[1]} and {AREAS[2]}. Within each area a lottery drew half of the harbours; these received a bay "
        "before the season. Harbour staff weighed the worn netting that each boat landed from the first to the last "
        "day of the season, in kilograms.",
        f"In the season {zero} percent of the boats landed no netting. The median over all boats is {middle:.1f} "
        f"kilograms. For {missing} boats the skipper's years are not recorded; they are left out where that variable "
        "is used.",
    )


def _method() -> tuple[str, ...]:
    return (
        "We estimate log(kg + 1) = a + b bay + c'x + area effects + u by least squares, where kg is the netting a boat "
        "landed over the season, bay is one for boats of a harbour with a drop-off bay, and x holds the length of "
        "the boat in metres, the years the skipper has fished and the distance from the harbour to the next disposal "
        "site. Standard errors are clustered by harbour, the level at which the lottery took place.",
    )


def _results(percent: str, full: Column) -> tuple[str, ...]:
    b, error = full.estimates["bay"], full.errors["bay"]
    return (
        f"Table 1 shows the estimates. In our preferred column (2) the coefficient of the bay is {b:.3f} with a "
        f"standard error of {error:.3f}. A free drop-off bay thus raises the netting landed by {percent} percent. "
        "Longer boats land more.",
        f"Column (1), without the features of boats and harbours, gives much the same. A harbour that now takes in ten "
        f"tonnes in a season should expect {10 * (1 + b):.1f} tonnes once it has a bay.",
    )


def _table(plain: Column, full: Column) -> ResultsTable:
    rows: list[tuple[str, ...]] = [("", "(1)", "(2)")]
    for term, name in _TERMS.items():
        rows.append(
            (name, *(starred(column.estimates.get(term), column.p_values.get(term)) for column in (plain, full)))
        )
        rows.append(("", *(bracketed(column.errors.get(term)) for column in (plain, full))))
    rows.append(("Area effects", "yes", "yes"))
    rows.append(("N", f"{plain.n:,}", f"{full.n:,}"))
    rows.append(("Harbours", str(plain.harbours), str(full.harbours)))
    rows.append(("R-squared", f"{plain.r_squared:.3f}", f"{full.r_squared:.3f}"))
    return ResultsTable(
        "Table 1. Drop-off bays and netting landed. Dependent variable: log(kg + 1)",
        tuple(rows),
        "Least squares. Standard errors clustered by harbour in parentheses. * p < 0.10, ** p < 0.05, *** p < 0.01.",
    )


def _conclusion(percent: str) -> str:
    return (
        f"A bay costs little and, by our estimate, increases what boats land by {percent} percent. We see this as a "
        "case for bays at all small harbours of the three areas."
    )
