"""Two models on the same rows as one estimate: a pair of numbers with its covariance, and the interval that holds.

With clusters each number is found again without each cluster in turn. Without, influence rows with scores divided by
one minus the leverage carry the error; where few rows carry it, a symmetric bootstrap-t takes the place of t.
"""

from collections.abc import Callable, Mapping, Sequence
from contextlib import suppress
from dataclasses import dataclass, replace

import numpy as np
import numpy.typing as npt
from scipy.special import stdtrit

from reviewkit.estimators.fit import Codes, Fit, Sample, cluster_sums, pull
from reviewkit.estimators.least_squares import fit_least_squares
from reviewkit.estimators.poisson import fit_poisson
from reviewkit.estimators.resampling import coefficient_draws, fit_at, resampled_estimates
from reviewkit.implied import Contrast, MeanModel, coefficient_influence, effect, effect_influence
from reviewkit.refusals import NotEstimable

Array = npt.NDArray[np.float64]
Mask = npt.NDArray[np.bool_]
Progress = Callable[[str], None]
"""Told in a few words what is being done."""

FEW_ROWS = 20.0
"""Effective rows under which t gives way to the bootstrap-t (measured in DEVELOPERS.md)."""
VERY_FEW_ROWS = 10.0
"""Effective rows under which a conclusion is marked weak."""
DRAWS = 999
MOST_RESAMPLED = 60
"""Coefficients beyond which a model is not resampled; with few effective rows nothing is concluded then."""
_MOST_CELLS = 100_000_000  # of all clusters' cross-products together, 0.8 GB
_BLOCK_CELLS = 32_000  # of a matrix with a column a row held at once, so that it stays in cache
_SETTLED = 1e-10
_MOST_STEPS = 25
_SINGULAR = 1e-12  # share of the largest size under which a direction is left free by the other clusters
_ROUNDING = 1e-8

FITTERS: Mapping[str, Callable[[Sample, Array | None], Fit]] = {"ols": fit_least_squares, "poisson": fit_poisson}


@dataclass(frozen=True, slots=True)
class Side:
    """One of the two models, and the number that is compared."""

    fit: Fit
    rows: npt.NDArray[np.int64]
    """Places of its rows among the rows of both, (n,)."""
    codes: Codes | None
    """Cluster of each of its rows, counted among the clusters of both, (n,)."""
    place: int | None
    """The coefficient compared; None where an implied effect is."""
    model: MeanModel | None = None
    of: Contrast | None = None

    def value(self, on_basis: Array, weights: Array) -> float:
        """The compared number at other coefficients and weights (n,), such as those without a cluster."""
        sample = self.fit.sample
        coefficients = sample.basis.map @ on_basis
        if self.place is not None:
            return float(coefficients[self.place])
        assert self.model is not None  # noqa: S101
        assert self.of is not None  # noqa: S101
        residuals = sample.y - sample.offset - sample.basis.z @ on_basis if self.model.smeared else sample.y
        return effect(self.model, self.of, coefficients, residuals, weights)

    def rests_on(self, kept: Mask) -> Array:
        """The rows whose products with the coefficients make the number from the rows that are kept, (m, k)."""
        if self.place is not None:
            return np.eye(len(self.fit.coefficients))[[self.place]]
        assert self.of is not None  # noqa: S101
        return np.vstack((self.of.first[kept], self.of.second[kept]))

    def influence(self, jackknifed: bool) -> tuple[float, Array]:
        """The compared number and each observation's influence on it, (n,)."""
        if self.place is not None:
            return coefficient_influence(self.fit, self.place, jackknifed)
        assert self.model is not None  # noqa: S101
        assert self.of is not None  # noqa: S101
        return effect_influence(self.model, self.of, self.fit, jackknifed)


@dataclass(frozen=True, slots=True)
class Joint:
    """The submitted and the alternative number as one estimate."""

    submitted: float
    alternative: float
    covariance: Array
    """(2, 2), submitted first."""
    df: float
    method: str
    """leave-one-cluster-out, robust, or bootstrap-t."""
    effective: float
    """Effective rows behind the difference, or effective clusters."""
    draws: Array | None = None
    """Bootstrap draws (B, 5): both numbers, then their variances and covariance."""
    failed_draws: int = 0

    def contrast(self, ratio: float) -> tuple[float, float]:
        """alternative - ratio · submitted, and its error."""
        v = self.covariance
        variance = v[1, 1] - 2 * ratio * v[0, 1] + ratio**2 * v[0, 0]
        return self.alternative - ratio * self.submitted, float(np.sqrt(max(variance, 0.0)))

    def critical(self, ratio: float, level: float) -> float:
        """The two-sided critical value of contrast(ratio) at `level`, such as 0.95."""
        if self.draws is None:
            return float(stdtrit(self.df, 0.5 + level / 2))
        s, a, v_s, v_a, c = self.draws.T
        error = np.sqrt(np.maximum(v_a - 2 * ratio * c + ratio**2 * v_s, 0))
        gap = np.abs((a - ratio * s) - (self.alternative - ratio * self.submitted))
        return float(np.quantile(gap[error > 0] / error[error > 0], level, method="higher"))

    def interval_of(self, which: int, level: float) -> tuple[float, float]:
        """The interval of the submitted (0) or the alternative (1) number."""
        value = (self.submitted, self.alternative)[which]
        half = self._critical_of(which, level) * float(np.sqrt(self.covariance[which, which]))
        return value - half, value + half

    def _critical_of(self, which: int, level: float) -> float:
        if self.draws is None:
            return self.critical(0.0, level)
        centre = (self.submitted, self.alternative)[which]
        error = np.sqrt(self.draws[:, 2 + which])
        gaps = np.abs(self.draws[:, which] - centre)[error > 0] / error[error > 0]
        return float(np.quantile(gaps, level, method="higher"))


def estimate_joint(submitted: Side, alternative: Side, rows: int, seed: int, progress: Progress | None = None) -> Joint:
    """The pair with its covariance, by the rule for the data at hand; `rows` counts the rows of both models.

    Raises:
        NotEstimable: A model has no such number, or cannot be fitted again without some cluster.
    """
    if submitted.codes is not None and alternative.codes is not None:
        return _without_each_cluster(submitted, alternative, progress)
    return _by_rows(submitted, alternative, rows, seed, progress)


def _by_rows(submitted: Side, alternative: Side, rows: int, seed: int, progress: Progress | None) -> Joint:
    numbers, psi = [], np.zeros((2, rows))
    multiplicity = np.ones(rows)
    for which, side in enumerate((submitted, alternative)):
        value, influences = side.influence(jackknifed=True)
        numbers.append(value)
        psi[which, side.rows] = influences
        multiplicity[side.rows] = side.fit.sample.multiplicity
    covariance = (psi * multiplicity) @ psi.T
    difference = psi[1] - psi[0]
    fourth = float(multiplicity @ difference**4)
    effective = float(multiplicity @ difference**2) ** 2 / fourth if fourth > 0 else float("inf")
    df = min(submitted.fit.degrees_of_freedom, alternative.fit.degrees_of_freedom)
    joint = Joint(numbers[0], numbers[1], covariance, df, "robust", effective)
    widest = max(len(side.fit.coefficients) for side in (submitted, alternative))
    if effective >= FEW_ROWS or widest > MOST_RESAMPLED:
        return joint
    draws, failed = _bootstrap((submitted, alternative), _observations(difference, multiplicity), seed, progress)
    return replace(joint, method="bootstrap-t", draws=draws, failed_draws=failed)


def _bootstrap(sides: tuple[Side, Side], owner: Codes, seed: int, progress: Progress | None) -> tuple[Array, int]:
    """Both numbers and their covariance in resamples of observations; a draw that cannot be fitted is left out."""
    random = np.random.default_rng(seed)
    rows = int(owner.max()) + 1
    width = max(1, min(DRAWS, _BLOCK_CELLS // rows))
    blocks: list[Array] = []
    for start in range(0, DRAWS, width):
        if progress:
            progress(f"resampling rows, {start:,} of {DRAWS:,}")
        counts = _counts(random, owner, (min(width, DRAWS - start), rows))
        blocks.append(_draws(sides, counts))
    draws = np.concatenate(blocks)
    usable = np.isfinite(draws).all(axis=1)
    failed = int(DRAWS - usable.sum())
    if failed > DRAWS / 2:
        raise NotEstimable("bootstrap", f"{failed:,} of {DRAWS:,} resamples could not be fitted")
    return draws[usable], failed


def _observations(difference: Array, multiplicity: Array) -> Codes:
    """The row of each observation, in the order of the rows' influence, so that draws do not hang on the row order."""
    order = np.argsort(difference, kind="stable")
    return np.repeat(order, multiplicity[order].astype(int))


def _counts(random: np.random.Generator, owner: Codes, shape: tuple[int, int]) -> Array:
    """How often each row is drawn when observations are drawn with replacement, (resamples, rows)."""
    resamples, rows = shape
    drawn = owner[random.integers(owner.size, size=(resamples, owner.size))]
    drawn += np.arange(0, resamples * rows, rows)[:, None]
    return np.bincount(drawn.ravel(), minlength=resamples * rows).reshape(shape).astype(float)


def _draws(sides: tuple[Side, Side], counts: Array) -> Array:
    """Five numbers for each resample (B, rows), fitted all at once; what that leaves is fitted one by one."""
    both = all(side.place is not None for side in sides)
    draws = _coefficient_draws(sides, counts) if both else _effect_draws(sides, counts)
    for number in np.flatnonzero(~np.isfinite(draws).all(axis=1)):
        with suppress(NotEstimable, np.linalg.LinAlgError):
            draws[number] = _draw(sides, counts[number])
    return draws


def _effect_draws(sides: tuple[Side, Side], counts: Array) -> Array:
    draws = np.full((len(counts), 5), np.nan)
    found = [resampled_estimates(side.fit, counts[:, side.rows]) for side in sides]
    for number in np.flatnonzero(np.isfinite(np.hstack(found)).all(axis=1)):
        again = [
            replace(side, fit=fit_at(side.fit, estimates[number], counts[number, side.rows]))
            for side, estimates in zip(sides, found, strict=True)
        ]
        with suppress(NotEstimable, np.linalg.LinAlgError):
            draws[number] = _five(again, counts[number])
    return draws


def _coefficient_draws(sides: tuple[Side, Side], counts: Array) -> Array:
    numbers, psi = np.empty((2, len(counts))), np.zeros((2, *counts.shape))
    for which, side in enumerate(sides):
        assert side.place is not None  # noqa: S101
        numbers[which], psi[which][:, side.rows] = coefficient_draws(side.fit, side.place, counts[:, side.rows])
    pairs = ((0, 0), (1, 1), (0, 1))
    return np.array([*numbers, *(np.einsum("bi,bi,bi->b", counts, psi[p], psi[q]) for p, q in pairs)]).T


def _draw(sides: tuple[Side, Side], counts: Array) -> tuple[float, ...]:
    return _five([_resampled(side, counts[side.rows]) for side in sides], counts)


def _five(sides: Sequence[Side], counts: Array) -> tuple[float, ...]:
    """Both numbers of a resample, their variances and their covariance."""
    numbers, psi = [], np.zeros((2, counts.size))
    for which, side in enumerate(sides):
        value, influences = side.influence(jackknifed=True)
        numbers.append(value)
        psi[which, side.rows] = influences
    (v_s, c), (_, v_a) = (psi * counts) @ psi.T
    return numbers[0], numbers[1], v_s, v_a, c


def _resampled(side: Side, counts: Array) -> Side:
    """The same side on the rows drawn, each as often as it was drawn."""
    kept = counts > 0
    fit = FITTERS[side.fit.estimator](_counted(side.fit.sample, counts), side.fit.on_basis)
    model, of = side.model, side.of
    if model is not None and of is not None:
        model = replace(model, index_offset=model.index_offset[kept], factor=model.factor[kept])
        of = replace(of, first=of.first[kept], second=of.second[kept])
    return replace(side, fit=fit, rows=side.rows[kept], model=model, of=of)


def _counted(old: Sample, counts: Array) -> Sample:
    """The rows of a sample that count, each as often as it does."""
    kept = counts > 0
    return replace(
        old,
        basis=replace(old.basis, z=old.basis.z[kept]),
        y=old.y[kept],
        weights=old.weights[kept],
        multiplicity=counts[kept],
        offset=old.offset[kept],
        clusters=None,
    )


def _without_each_cluster(submitted: Side, alternative: Side, progress: Progress | None) -> Joint:
    """Both numbers with each cluster left out in turn; V = (G-1)/G · sum of (without - whole)², t with G-1."""
    assert submitted.codes is not None  # noqa: S101
    assert alternative.codes is not None  # noqa: S101
    groups = int(max(submitted.codes.max(), alternative.codes.max())) + 1
    if groups < 2:
        raise NotEstimable("comparison", "there is one cluster only", "two or more clusters")
    whole, apart = [], np.zeros((2, groups))
    for which, side in enumerate((submitted, alternative)):
        weights = side.fit.sample.weights * side.fit.sample.multiplicity
        whole.append(side.value(side.fit.on_basis, weights))
        apart[which] = _values_without(side, groups, progress) - whole[which]
    covariance = (groups - 1) / groups * apart @ apart.T
    return Joint(whole[0], whole[1], covariance, groups - 1.0, "leave-one-cluster-out", float(groups))


def _values_without(side: Side, groups: int, progress: Progress | None) -> Array:
    """The compared number without each cluster, (G,)."""
    assert side.codes is not None  # noqa: S101
    on_basis = coefficients_without(side.fit, side.codes, groups, side.rests_on)
    if side.place is not None:
        return np.asarray(on_basis @ side.fit.sample.basis.map[side.place])
    weights = side.fit.sample.weights * side.fit.sample.multiplicity
    values = np.empty(groups)
    for group in range(groups):
        values[group] = side.value(on_basis[group], weights * (side.codes != group))
        if progress and group % 20 == 0:
            progress(f"leaving out each cluster, {group:,} of {groups:,}")
    return values


def coefficients_without(fit: Fit, codes: Codes, groups: int, rests_on: Callable[[Mask], Array] | None = None) -> Array:
    """Coefficients on the basis without each cluster, (G, k), from the clusters' own cross-products.

    Least squares is exact after one step. For an exponential mean each further step uses the exact score without the
    cluster and the cross-products of the whole fit less the cluster's; what does not settle so is fitted by itself.
    Where a covariate stands on one cluster alone, such as its dummy, coefficients without it are not unique: that is no
    matter if the rows of `rests_on` do not see it.

    Raises:
        NotEstimable: The model, or the number that rests on those rows, cannot be had without some cluster.
    """
    if groups * len(fit.coefficients) ** 2 > _MOST_CELLS:
        large = f"{len(fit.coefficients):,} coefficients and {groups:,} clusters are too many for it"
        raise NotEstimable("leaving out each cluster", large, remedy="Use fewer classes of factors")
    grams, whole = _cluster_grams(fit, codes, groups)
    inverses, free = _inverses(whole - grams, np.sqrt(np.diag(whole)))
    for group, directions in free.items():
        rows = np.eye(len(whole)) if rests_on is None else rests_on(codes != group)
        if np.abs(rows @ fit.sample.basis.map @ directions).max() > _ROUNDING * np.abs(rows).max():
            raise NotEstimable("leaving out a cluster", "a covariate stands on one cluster alone")
    z = fit.sample.basis.z
    score = cluster_sums((fit.residuals * fit.sample.weights * fit.sample.multiplicity)[:, None] * z, codes, groups)
    on_basis = fit.on_basis - np.einsum("gij,gj->gi", inverses, score)
    return on_basis if fit.estimator == "ols" else _settle_without(fit, codes, on_basis, inverses)


def _inverses(left: Array, scale: Array) -> tuple[Array, dict[int, Array]]:
    """Inverses of cross-products, (G, k, k); for groups that have none, the directions (k, m) that they leave free."""
    sizes, vectors = np.linalg.eigh(left / np.outer(scale, scale))
    free = sizes <= _SINGULAR * sizes[:, -1:]
    vectors = vectors / scale[:, None]
    parts = np.divide(1.0, sizes, out=np.zeros_like(sizes), where=~free)
    inverses = (vectors * parts[:, None, :]) @ vectors.transpose(0, 2, 1)
    return inverses, {int(group): vectors[group][:, free[group]] for group in np.flatnonzero(free.any(axis=1))}


def _cluster_grams(fit: Fit, codes: Codes, groups: int) -> tuple[Array, Array]:
    """Cross-products of each cluster, (G, k, k), and of all rows, (k, k)."""
    z = fit.sample.basis.z
    weights = fit.sample.weights * fit.sample.multiplicity * fit.curvature
    k = z.shape[1]
    grams = np.empty((groups, k, k))
    for row in range(k):
        weighted = weights * z[:, row]
        for column in range(row, k):
            grams[:, row, column] = grams[:, column, row] = np.bincount(codes, weighted * z[:, column], groups)
    return grams, grams.sum(axis=0)


def _settle_without(fit: Fit, codes: Codes, on_basis: Array, inverses: Array) -> Array:
    z, sample = fit.sample.basis.z, fit.sample
    weighted = (sample.weights * sample.multiplicity)[:, None] * z
    groups, width = len(on_basis), max(1, _BLOCK_CELLS // len(z))
    seen = weighted.T @ sample.y - cluster_sums(weighted * sample.y[:, None], codes, groups)
    moving = np.ones(groups, dtype=bool)
    with np.errstate(over="ignore", invalid="ignore"):  # what runs away is fitted by itself
        for _ in range(_MOST_STEPS):
            own = np.exp(np.einsum("ij,ij->i", z, on_basis[codes]) + sample.offset)
            score = seen + cluster_sums(weighted * own[:, None], codes, groups)
            for start in range(0, groups, width):
                block = slice(start, start + width)
                score[block] -= np.exp(on_basis[block] @ z.T + sample.offset) @ weighted
            step = np.einsum("gij,gj->gi", inverses, score)
            on_basis = on_basis + step
            moving = ~(np.abs(step).max(axis=1) < _SETTLED)
            if not moving.any():
                return on_basis
    for group in np.flatnonzero(moving):
        on_basis[group] = _fitted_without(fit, codes == group)
    return on_basis


def _fitted_without(fit: Fit, left_out: Mask) -> Array:
    counts = np.where(left_out, 0.0, fit.sample.multiplicity)
    try:
        return FITTERS[fit.estimator](_counted(fit.sample, counts), fit.on_basis).on_basis
    except NotEstimable as error:
        raise NotEstimable(
            "leaving out a cluster", "the estimate without some cluster does not come to rest"
        ) from error


def effective_clusters(fit: Fit, codes: Codes, groups: int, place: int) -> float:
    """G / (1 + CV²) of the clusters' shares in the variation of one column after the others; at most G."""
    gradient = np.zeros(len(fit.coefficients))
    gradient[place] = 1.0
    weights = fit.sample.weights * fit.sample.multiplicity * fit.curvature
    share = cluster_sums(pull(fit, gradient) ** 2 * weights, codes, groups)
    return float(groups / (1 + share.var() / share.mean() ** 2))
