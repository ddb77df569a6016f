"""Does the interval of the difference hold? `python tests/studies/difference.py [--draws 2000]` draws, fits and counts.

Two groups, a log-normal outcome with log SD 1 in one group and another in the other, least squares of the log against
Poisson quasi-likelihood. The two coefficients then lie (σ₁² − σ₀²) / 2 apart in the limit. In two groups all that the
program computes are sums by group, which is how thousands of draws with their resamples become possible here; the first
draws of every setting are made by the program's own functions as well and must be the same, resamples included. With
clusters every draw is made by the program. A shift of the effect moves both coefficients by the same amount and nothing
else, so one draw tells the conclusions at every size of the effect.
"""

import argparse
import os
import sys
import time
from dataclasses import dataclass, replace
from math import sqrt
from pathlib import Path
from typing import Any

os.environ["OPENBLAS_NUM_THREADS"] = "1"

import numpy as np

sys.path.insert(0, str(Path(__file__).resolve().parents[2]))
sys.path.insert(0, str(Path(__file__).resolve().parents[1]))

from specifying import specification, table

from reviewkit.comparison import LEVEL, agrees, differs
from reviewkit.design_matrix import Design, build_design
from reviewkit.fitting import fit_model
from reviewkit.joint import _BLOCK_CELLS, DRAWS, FEW_ROWS, Joint, Side, _counts, _observations, estimate_joint
from reviewkit.specification import Estimator, Specification
from studies.record import save

SEED = 20261201
SHARE = 0.05
CLUSTERS = 200
CLUSTER_SHARE = 0.2  # of the log variance that is common to a cluster
COVERAGE_BARS = {500: (0.92, 0.97), 5000: (0.935, 0.965)}
MOST_FALSE = 0.055
CHECKED = 3
POWER_EFFECTS = (4.0, 3.0, 2.0, 1.0, 0.5, 0.1)


@dataclass(frozen=True, slots=True)
class Setting:
    """One setting of the draws."""

    rows: int
    spread: float
    """Log SD of the second group; the first has 1."""
    clusters: int = 0

    @property
    def gap(self) -> float:
        """What the difference of the coefficients tends to."""
        return (self.spread**2 - 1) / 2


SETTINGS = tuple(
    Setting(rows, spread)
    for rows, spreads in (
        (500, (0.8, 1.0, sqrt(1.05), 1.2)),
        (5000, (0.8, 1.0, 1.2)),
        (10_000, (1.0, sqrt(1.05), 1.2)),
    )
    for spread in spreads
)


def study(setting: Setting, draws: int, seed: int = SEED) -> list[Joint]:
    """Both coefficients with their covariance in each draw, with no effect on the log."""
    random = np.random.default_rng([seed, setting.rows, round(1000 * setting.spread), setting.clusters])
    spec, design = _prepared(setting)
    found = []
    for number in range(draws):
        y = _outcome(setting, design, random)
        found.append(program_joint(spec, design, y) if setting.clusters else sums_joint(y, design.x[:, 1] == 1))
        if number < CHECKED and not setting.clusters:
            _must_be_same(found[-1], program_joint(spec, design, y))
    return found


def _prepared(setting: Setting) -> tuple[Specification, Design]:
    group = np.arange(setting.rows) % 2.0
    columns = {"y": np.ones(setting.rows), "group": group}
    errors: dict[str, Any] = {"kind": "robust"}
    if setting.clusters:
        columns["cluster"] = np.arange(setting.rows) % setting.clusters
        errors = {"kind": "cluster", "by": ["cluster"]}
    spec = specification(outcome={"column": "y", "transform": "log"}, model={"terms": ["group"]}, errors=errors)
    return spec, build_design(spec, table(**columns).frame)


def _outcome(setting: Setting, design: Design, random: np.random.Generator) -> Any:
    noise = random.normal(size=setting.rows)
    if design.clusters is not None:
        common = random.normal(size=setting.clusters)[design.clusters]
        noise = sqrt(CLUSTER_SHARE) * common + sqrt(1 - CLUSTER_SHARE) * noise
    return np.exp(noise * np.where(design.x[:, 1] == 1, setting.spread, 1.0))


def program_joint(spec: Specification, design: Design, y: Any) -> Joint:
    """Both models of one draw, fitted and paired by the program's own functions."""
    drawn, every = replace(design, y=y), np.ones(design.rows, dtype=bool)
    sides = [
        Side(made.fit, made.rows, drawn.clusters, made.design.names.index("group"))
        for made in (fit_model(spec, kind, drawn, every) for kind in (Estimator.OLS, Estimator.POISSON))
    ]
    return estimate_joint(sides[0], sides[1], drawn.rows, seed=1)


def sums_joint(y: Any, second: Any) -> Joint:
    """The same from sums by group: coefficients, HC3-type covariance, effective rows, resamples where these are few."""
    log_y, every = np.log(y), np.ones((1, y.size))
    columns = _columns(log_y, y / y.mean(), second)
    s, a, v_s, v_a, c = _numbers(every @ columns)[0]
    gap = np.empty(y.size)
    for here in (second, ~second):
        gap[here] = (y[here] / y[here].mean() - 1 - log_y[here] + log_y[here].mean()) / (here.sum() - 1)
    gap[~second] *= -1
    effective = float((gap**2).sum() ** 2 / (gap**4).sum())
    joint = Joint(s, a, np.array([[v_s, c], [c, v_a]]), y.size - 2.0, "robust", effective)
    if effective >= FEW_ROWS:
        return joint
    random, owner = np.random.default_rng(1), _observations(gap, np.ones(y.size))
    width = max(1, min(DRAWS, _BLOCK_CELLS // y.size))
    sizes = [min(width, DRAWS - start) for start in range(0, DRAWS, width)]
    draws = [_numbers(_counts(random, owner, (size, y.size)) @ columns) for size in sizes]
    return replace(joint, method="bootstrap-t", draws=np.concatenate(draws))


def _columns(log_y: Any, y: Any, second: Any) -> Any:
    moments = np.column_stack([np.ones(y.size), log_y, y, log_y**2, y**2, log_y * y])
    return np.hstack([moments * second[:, None], moments * ~second[:, None]])


def _numbers(sums: Any) -> Any:
    """Both coefficients, their variances and covariance from sums by group (B, 12), (B, 5)."""
    found = []
    for n, of_log, of_y, of_log2, of_y2, of_both in np.split(sums.T, 2):
        mean = of_y / n
        variances = (of_log2 - of_log**2 / n, (of_y2 - of_y * mean) / mean**2, (of_both - of_log * mean) / mean)
        found.append([of_log / n, np.log(mean), *(each / (n - 1) ** 2 for each in variances)])
    one, none = np.array(found)
    return np.vstack([one[:2] - none[:2], one[2:] + none[2:]]).T


def _must_be_same(ours: Joint, program: Joint) -> None:
    pairs = [(ours.covariance, program.covariance), (ours.effective, program.effective)]
    pairs += [(ours.submitted, program.submitted), (ours.alternative, program.alternative)]
    pairs += [(ours.draws, program.draws)] if ours.draws is not None and program.draws is not None else []
    if ours.method != program.method or not all(np.allclose(a, b, rtol=1e-7, atol=1e-10) for a, b in pairs):
        raise RuntimeError("the sums by group are not what the program computes")


def shifted(joint: Joint, effect: float) -> Joint:
    """The same draw had the outcome of the second group been exp(effect) times as large."""
    draws = None if joint.draws is None else joint.draws + np.array([effect, effect, 0, 0, 0])
    return replace(joint, submitted=joint.submitted + effect, alternative=joint.alternative + effect, draws=draws)


def coverage(setting: Setting, joints: list[Joint]) -> dict[str, Any]:
    """How often the interval of the difference holds what it should, and by which method it was made."""
    misses = [_miss(setting, joint) for joint in joints]
    gaps = [joint.alternative - joint.submitted for joint in joints]
    bar = (0.92, 0.97) if setting.clusters else COVERAGE_BARS.get(setting.rows)
    held = misses.count(0) / len(joints)
    return {
        "rows": setting.rows,
        "clusters": setting.clusters,
        "spread": round(setting.spread, 4),
        "gap": setting.gap,
        "draws": len(joints),
        "coverage": held,
        "missed_below": misses.count(-1) / len(joints),
        "missed_above": misses.count(1) / len(joints),
        "bar": f"{bar[0]} to {bar[1]}" if bar else "",
        "met": bar[0] <= held <= bar[1] if bar else None,
        "mean_difference": float(np.mean(gaps)),
        "sd_of_difference": float(np.std(gaps)),
        "mean_error": float(np.mean([joint.contrast(1.0)[1] for joint in joints])),
        "by_method": _by_method(joints, misses),
    }


def _miss(setting: Setting, joint: Joint) -> int:
    """0 where the interval holds the true gap, -1 where it lies below it, 1 where it lies above."""
    difference, error = joint.contrast(1.0)
    half = joint.critical(1.0, LEVEL) * error
    return int(difference + half < setting.gap) * -1 + int(difference - half > setting.gap)


def _by_method(joints: list[Joint], misses: list[int]) -> dict[str, dict[str, float]]:
    found = {}
    bounds = {"robust": (20.0, np.inf), "bootstrap-t, 10 to 20": (10.0, 20.0), "bootstrap-t, under 10": (0.0, 10.0)}
    if joints[0].method == "leave-one-cluster-out":
        bounds = {"leave-one-cluster-out": (0.0, np.inf)}
    for name, (low, high) in bounds.items():
        here = [miss == 0 for joint, miss in zip(joints, misses, strict=True) if low <= joint.effective < high]
        if here:
            found[name] = {"share": len(here) / len(joints), "coverage": sum(here) / len(here)}
    return found


def conclusions(setting: Setting, joints: list[Joint], effect: float) -> dict[str, Any]:
    """How often each conclusion is reached at one size of the effect on the log."""
    moved = [shifted(joint, effect) for joint in joints]
    error = float(np.std([joint.alternative - joint.submitted for joint in joints]))
    relative = abs(setting.gap / effect)
    differ = sum(bool(differs(joint, SHARE)) for joint in moved) / len(moved)
    agree = sum(bool(agrees(joint, SHARE)) for joint in moved) / len(moved)
    wrong = relative <= SHARE + 1e-9
    return {
        "rows": setting.rows,
        "spread": round(setting.spread, 4),
        "effect": effect,
        "true_gap_percent": 100 * relative,
        "beyond_in_errors": (abs(setting.gap) - SHARE * abs(effect)) / error,
        "differs": differ,
        "agrees": agree,
        "bar": f"differs at most {MOST_FALSE}" if wrong else "",
        "met": differ <= MOST_FALSE if wrong else None,
    }


def effects_of(setting: Setting) -> list[float]:
    """Sizes of the effect at which the true gap is 0, 3, 5 or 6 % of it, with both signs."""
    if setting.gap == 0:
        return [0.1, 0.5, 2.0]
    return [sign * setting.gap / share for share in (0.03, 0.05, 0.06) for sign in (1, -1)]


def whole(draws: int) -> dict[str, Any]:
    """Every setting of the study."""
    covered, concluded, power = [], [], []
    for setting in SETTINGS:
        joints = _told(setting, draws)
        covered.append(coverage(setting, joints))
        if setting.spread >= 1 and setting.rows != 5000:
            concluded += [conclusions(setting, joints, effect) for effect in effects_of(setting)]
        if setting.spread == 1.2:
            power += [conclusions(setting, joints, effect) for effect in POWER_EFFECTS]
    for spread in (0.8, 1.0, 1.2):
        setting = Setting(2000, spread, CLUSTERS)
        covered.append(coverage(setting, _told(setting, draws // 2)))
    return {"coverage": covered, "conclusions": concluded, "power": power}


def _told(setting: Setting, draws: int) -> list[Joint]:
    start = time.monotonic()
    joints = study(setting, draws)
    covered = coverage(setting, joints)["coverage"]
    print(f"{setting}: coverage {covered:.4f} after {time.monotonic() - start:.0f} s", flush=True)
    return joints


def main() -> None:
    """Run the study and write what it found beside this script."""
    asked = argparse.ArgumentParser(description=__doc__)
    asked.add_argument("--draws", type=int, default=2000, help="draws a setting (default 2000)")
    draws = asked.parse_args().draws
    command = f"python tests/studies/difference.py --draws {draws}"
    save("difference", {"seed": SEED, "command": command}, whole(draws))


if __name__ == "__main__":
    main()
