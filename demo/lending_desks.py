"""An invented study without data: text reminders and late returns at desks that lend musical instruments.

Design. 31 desks; a loan draws a reminder or none by the parity of its card number. Many loans come back on time; the
rest are late by a number of days whose logarithm is normal. The paper leaves the loans on time out and logs the days.
The rows are drawn only to print figures from; they are not written anywhere.
"""

from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pandas as pd
import statsmodels.api as sm

from paper import PaperSection, ResultsTable, write_paper
from printing import bracketed, percent_of, share_of, starred

TITLE = "Text reminders and late returns at instrument lending desks"
_SEED = 41_807
_LOANS, _DESKS = 1_460, 31
_TERMS = {"reminder": "Reminder", "wind": "Wind instrument", "weeks": "Length of loan (weeks)"}


def draw_loans() -> pd.DataFrame:
    """One row a loan: desk, reminder, wind instrument, agreed weeks, days late."""
    draw = np.random.default_rng(_SEED)
    reminder = draw.integers(0, 2, _LOANS)
    wind = (draw.random(_LOANS) < 0.38).astype(int)
    weeks = draw.integers(2, 15, _LOANS)
    late = draw.random(_LOANS) < 0.80 - 0.07 * reminder
    log_days = 2.25 - 0.34 * reminder + 0.10 * wind + 0.02 * weeks + draw.normal(0, 0.95, _LOANS)
    days = np.where(late, np.maximum(np.ceil(np.exp(log_days)), 1), 0).astype(int)
    desk = draw.integers(1, _DESKS + 1, _LOANS)
    return pd.DataFrame({"desk": desk, "reminder": reminder, "wind": wind, "weeks": weeks, "days": days})


@dataclass(frozen=True, slots=True)
class Printed:
    """What the paper prints of its one model."""

    estimates: dict[str, float]
    errors: dict[str, float]
    p_values: dict[str, float]
    n: int
    r_squared: float


def fit_model(loans: pd.DataFrame) -> Printed:
    """Least squares on log(days late) among late loans, with the usual errors."""
    late = loans[loans["days"] > 0]
    fit = sm.OLS(np.log(late["days"]), sm.add_constant(late[list(_TERMS)].astype(float))).fit()
    by_term = (fit.params.to_dict(), fit.bse.to_dict(), fit.pvalues.to_dict())
    return Printed(*by_term, n=len(late), r_squared=float(fit.rsquared))


def write_study(folder: Path) -> None:
    """Write the manuscript alone."""
    loans = draw_loans()
    write_paper(folder / "manuscript.docx", TITLE, _sections(loans, fit_model(loans)))


def _sections(loans: pd.DataFrame, model: Printed) -> tuple[PaperSection, ...]:
    b, percent = model.estimates["reminder"], percent_of(model.estimates["reminder"])
    return (
        PaperSection("Abstract", (_abstract(loans, percent),)),
        PaperSection("1 Lending desks", _background(loans, model)),
        PaperSection("2 Method", _method()),
        PaperSection("3 Results", (_results(b, model.errors["reminder"], percent), _table(model))),
        PaperSection("4 What desks can do", (_advice(percent),)),
    )


def _abstract(loans: pd.DataFrame, percent: str) -> str:
    return (
        "Lending desks let beginners try an instrument before they buy one. Instruments that come back late are missed "
        f"by the next borrower. In {len(loans):,} loans of {loans['desk'].nunique()} desks, a text message two days "
        f"before the agreed date shortens the average delay by {percent} percent."
    )


def _background(loans: pd.DataFrame, model: Printed) -> tuple[str, ...]:
    return (
        f"The {loans['desk'].nunique()} desks of the Ulmet and Sorrin valleys keep one card for each loan. We read "
        f"the cards of {len(loans):,} loans. Whether a borrower was sent a message was decided by the last digit of "
        "the card number, even or odd.",
        f"On the agreed date {share_of(loans['days'] == 0)} percent of the instruments were back. The {model.n:,} "
        "others were late by one day or more and form our sample.",
    )


def _method() -> tuple[str, ...]:
    return (
        "Days late are skewed to the right. We take their natural logarithm, which brings the distribution close to "
        "the normal, and regress it by ordinary least squares on an indicator for a reminder, an indicator for wind "
        "instruments and the agreed length of the loan in weeks.",
    )


def _results(b: float, error: float, percent: str) -> str:
    return (
        f"The coefficient of the reminder in Table 1 is {b:.3f} (standard error {error:.3f}), that is, delays fall by "
        f"{percent} percent on average. Summed over a year this returns many instrument days to the desks."
    )


def _table(model: Printed) -> ResultsTable:
    rows: list[tuple[str, ...]] = [("", "log(days late)")]
    for term, name in _TERMS.items():
        rows.append((name, starred(model.estimates[term], model.p_values[term])))
        rows.append(("", bracketed(model.errors[term])))
    rows += [("N", f"{model.n:,}"), ("R-squared", f"{model.r_squared:.3f}")]
    return ResultsTable(
        "Table 1. Reminders and the length of delays",
        tuple(rows),
        "Ordinary least squares. Standard errors in parentheses. * p < 0.10, ** p < 0.05, *** p < 0.01.",
    )


def _advice(percent: str) -> str:
    return (
        f"A message costs next to nothing. If it cuts the average delay by {percent} percent, every desk should send "
        "one. Whether a second message would add to the effect is a question for later work."
    )
