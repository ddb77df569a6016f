"""Tests of the form of both means, in a score form that holds under unequal variance and within clusters.

Powers of the centred and scaled index are added to each model: the square alone (link test) and square and cube
(RESET). A test after least squares on a transform is about the mean of the transformed outcome, one after Poisson about
the mean of the outcome itself, so that neither is a contest between the two. Sources: Ramsey (1969), Pregibon (1980);
score form robust to unequal variance: Wooldridge (1991), doi 10.1016/0304-4076(91)90010-Q (from memory); adjustment
within a model by Holm (1979).
"""

import numpy as np
import numpy.typing as npt
from scipy.special import gammaincc

from reviewkit.estimators.fit import Fit, cluster_sums, scores, weighted_gram
from reviewkit.exhibit import Cell, Exhibit
from reviewkit.facts import Fact, Source, SourceKind, Standing
from reviewkit.wording import p_value

Array = npt.NDArray[np.float64]

NAME = "mean-form"
TESTS = (("RESET, square and cube of the index", (2, 3)), ("link test, square of the index", (2,)))
"""The first is the primary one."""
SIZE = 0.05


def mean_form_exhibit(model: str, submitted: Fit, alternative: Fit | None, outcome: str) -> Exhibit:
    """Both tests of both models, with p values adjusted within a model; `outcome` is the outcome as regressed."""
    rows: list[tuple[Cell, ...]] = []
    facts: list[Fact] = []
    told = []
    for side, fit in (("submitted", submitted), ("alternative", alternative)):
        if fit is None:
            continue
        name = f"least squares on {outcome}" if fit.estimator == "ols" else "Poisson, mean of the outcome"
        found = [(test, score_test(fit, powers)) for test, powers in TESTS]
        adjusted = holm([result[2] for _, result in found if result])
        rows += [(name, test, None, None, None, None) for test, result in found if result is None]
        done = [(test, *result) for test, result in found if result]
        rows += [(name, *each, corrected) for each, corrected in zip(done, adjusted, strict=True)]
        primary = adjusted[0] if found[0][1] else None
        told.append(_told(name, primary))
        if primary is not None:
            source = Source(SourceKind.EXHIBIT, NAME)
            facts.append(Fact(f"form.{side}_p", primary, Standing.DONE, source, f"model:{model}"))
    columns = ("model", "test", "statistic", "df", "p", "p_adjusted")
    return Exhibit(NAME, "Tests of the form of the mean", columns, tuple(rows), " ".join(told), facts=tuple(facts))


def score_test(fit: Fit, powers: tuple[int, ...]) -> tuple[float, int, float] | None:
    """Statistic, degrees of freedom and p of adding powers of the index, without fitting the larger model.

    Powers that the terms already hold, as with a single two-valued covariate, are left out. None where nothing is left
    to test, or where there are too few clusters for it.
    """
    added = _left_over(fit, powers)
    if added.shape[1] == 0:
        return None
    times = fit.sample.multiplicity
    rows = scores(fit)[:, None] * added
    total = times @ rows
    if fit.sample.clusters is None:
        meat = (rows * times[:, None]).T @ rows
    else:
        if fit.sample.cluster_count <= 2 * added.shape[1]:
            return None
        sums = cluster_sums(rows * times[:, None], fit.sample.clusters, fit.sample.cluster_count)
        meat = sums.T @ sums
    statistic = float(total @ np.linalg.solve(meat, total))
    return statistic, added.shape[1], float(gammaincc(added.shape[1] / 2, statistic / 2))


def _left_over(fit: Fit, powers: tuple[int, ...]) -> Array:
    """The powers of the index less their weighted fit on the terms, (n, q), without those that the terms hold."""
    z = fit.sample.basis.z
    weights = fit.sample.weights * fit.sample.multiplicity * fit.curvature
    centred = fit.index - np.average(fit.index, weights=fit.sample.weights * fit.sample.multiplicity)
    spread = float(np.sqrt(np.mean(centred**2)))
    if spread == 0:
        return np.empty((len(z), 0))
    columns: list[Array] = []
    gram = weighted_gram(z, weights)
    for power in powers:
        added = (centred / spread) ** power
        before = np.column_stack([z, *columns]) if columns else z
        inner = weighted_gram(before, weights) if columns else gram
        rest = added - before @ np.linalg.solve(inner, before.T @ (weights * added))
        if weights @ rest**2 > 1e-8 * (weights @ added**2):
            columns.append(added - z @ np.linalg.solve(gram, z.T @ (weights * added)))
    return np.column_stack(columns) if columns else np.empty((len(z), 0))


def holm(p: list[float]) -> list[float]:
    """Adjusted p values by Holm's step-down procedure, in the order given."""
    order = sorted(range(len(p)), key=lambda place: p[place])
    adjusted, floor = [0.0] * len(p), 0.0
    for rank, place in enumerate(order):
        floor = max(floor, min(1.0, (len(p) - rank) * p[place]))
        adjusted[place] = floor
    return adjusted


def _told(name: str, p: float | None) -> str:
    if p is None:
        return f"{name}: there is nothing to test, or too few clusters to do so."
    if p < SIZE:
        return f"{name}: the test speaks against this form of the mean ({p_value(p)})."
    return f"{name}: we found no sign against this form of the mean ({p_value(p)})."
