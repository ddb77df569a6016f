"""How fast, beside statsmodels, in pairs: `python tests/studies/speed.py [--runs 5]`; ratios hold where times drift.

Each pair is run in turn, A B A B …, on the same arrays with BLAS held to one thread; medians are told. Bars in seconds
are held against processor seconds, which other programs on the machine disturb least; ratios are of elapsed time. On a
machine at rest the two are the same, as all is done in one thread. Memory is the extra peak of a fresh process over
what it held before the fit, as a multiple of the design matrix.
"""

import argparse
import os
import platform
import subprocess
import sys
import time
from collections.abc import Callable
from pathlib import Path
from statistics import median
from typing import Any

for name in ("OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS", "MKL_NUM_THREADS"):
    os.environ[name] = "1"

import numpy as np  # noqa: E402

ROOT = Path(__file__).resolve().parents[2]
sys.path[:0] = [str(ROOT), str(ROOT / "tests")]

SEED = 7
COVARIATES = 10
SECONDS_AT_1E5 = 0.1
SHARE_OF_GLM_AT_1E6 = 1 / 8
SECONDS_OF_HELP = 0.2

MEMORY = """
import resource, sys
sys.path[:0] = sys.argv[1:3]
from studies.speed import amounts, our_fit
x, y = amounts(int(sys.argv[4]))
our_fit("poisson", *amounts(1000))
before = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
our_fit(sys.argv[3], x, y)
print((resource.getrusage(resource.RUSAGE_SELF).ru_maxrss - before) * 1024 / x.nbytes)
"""


def amounts(rows: int) -> tuple[Any, Any]:
    """A design of a constant, eight normal and two two-valued covariates, and an amount with zeros."""
    random = np.random.default_rng(SEED)
    x = random.normal(size=(rows, COVARIATES + 1))
    x[:, 0] = 1.0
    x[:, -2:] = x[:, -2:] > 0
    y = random.gamma(0.8, np.exp(1 + x[:, 1:] @ np.linspace(-0.3, 0.3, COVARIATES)))
    y[random.random(rows) < 0.2] = 0.0
    return x, y


def our_fit(estimator: str, x: Any, y: Any) -> Any:
    """From a design matrix to coefficients with robust errors."""
    from reviewkit.estimators.basis import well_conditioned
    from reviewkit.estimators.covariance import infer
    from reviewkit.estimators.fit import Sample
    from reviewkit.joint import FITTERS
    from reviewkit.specification import ErrorKind, Errors

    ones = np.ones(len(y))
    fit = FITTERS[estimator](Sample(well_conditioned(x), y, ones, ones, np.zeros(len(y))), None)
    return fit.coefficients, infer(fit, Errors(ErrorKind.ROBUST, "HC1")).std_errors


def their_fit(estimator: str, x: Any, y: Any) -> Any:
    """The same by statsmodels on arrays, with its HC0 errors."""
    import statsmodels.api as sm

    model = sm.GLM(y, x, family=sm.families.Poisson()) if estimator == "poisson" else sm.OLS(y, x)
    made = model.fit(cov_type="HC0")
    return made.params, made.bse


def paired(ours: Callable[[], Any], theirs: Callable[[], Any], runs: int) -> tuple[float, float, float]:
    """Medians of the seconds of both, run in turn after a first run of each, and of our processor seconds."""
    ours(), theirs()
    mine, other, processor = [], [], []
    for _ in range(runs):
        before = time.process_time()
        mine.append(seconds(ours))
        processor.append(time.process_time() - before)
        other.append(seconds(theirs))
    return median(mine), median(other), median(processor)


def seconds(what: Callable[[], Any]) -> float:
    """Of one run."""
    start = time.perf_counter()
    what()
    return time.perf_counter() - start


def fits(runs: int) -> list[dict[str, Any]]:
    """Robust fits at three sizes."""
    found = []
    for estimator in ("poisson", "ols"):
        for rows in (1000, 100_000, 1_000_000):
            found.append(_fits(estimator, rows, runs))
            print(found[-1], flush=True)
    return found


def _fits(estimator: str, rows: int, runs: int) -> dict[str, Any]:
    x, y = amounts(rows)
    (b, error), (b_theirs, error_theirs) = our_fit(estimator, x, y), their_fit(estimator, x, y)
    factor = (rows / (rows - x.shape[1])) ** 0.5
    gap = max(np.abs((b - b_theirs) / error).max(), np.abs(error / (factor * error_theirs) - 1).max())
    mine, other, processor = paired(lambda: our_fit(estimator, x, y), lambda: their_fit(estimator, x, y), runs)
    bar, met = _bar(estimator, rows, processor, mine / other)
    return {
        "what": f"{estimator}, robust, k = {COVARIATES}",
        "rows": rows,
        "seconds": mine,
        "processor_seconds": processor,
        "statsmodels_seconds": other,
        "share": mine / other,
        "largest_gap_in_errors": float(gap),
        "bar": bar,
        "met": met,
    }


def _bar(estimator: str, rows: int, taken: float, share: float) -> tuple[str, bool | None]:
    if estimator == "poisson" and rows == 100_000:
        return f"under {SECONDS_AT_1E5} processor seconds", taken < SECONDS_AT_1E5
    if estimator == "poisson" and rows == 1_000_000:
        return f"at most {SHARE_OF_GLM_AT_1E6} of statsmodels", share <= SHARE_OF_GLM_AT_1E6
    return "", None


def without_clusters(rows: int, groups: int) -> list[dict[str, Any]]:
    """Leaving out each cluster: all from the whole fit, against a fit of statsmodels without each of some clusters."""
    found = []
    for estimator in ("poisson", "ols"):
        found.append(_without_clusters(estimator, rows, groups))
        print(found[-1], flush=True)
    return found


def _without_clusters(estimator: str, rows: int, groups: int) -> dict[str, Any]:
    from reviewkit.estimators.basis import well_conditioned
    from reviewkit.estimators.fit import Sample
    from reviewkit.joint import FITTERS, coefficients_without

    x, y = amounts(rows)
    codes, ones, some = np.arange(rows) % groups, np.ones(rows), 25
    fit = FITTERS[estimator](Sample(well_conditioned(x), y, ones, ones, np.zeros(rows)), None)

    def naive() -> None:
        for group in range(some):
            _plain_fit(estimator, x[codes != group], y[codes != group])

    mine, theirs, _ = paired(lambda: coefficients_without(fit, codes, groups), naive, 5)
    theirs *= groups / some
    return {
        "what": f"{estimator} without each of {groups} clusters",
        "rows": rows,
        "seconds": mine,
        f"statsmodels_seconds ({some} fits scaled up)": theirs,
        "share": mine / theirs,
    }


def _plain_fit(estimator: str, x: Any, y: Any) -> Any:
    import statsmodels.api as sm

    return (sm.GLM(y, x, family=sm.families.Poisson()) if estimator == "poisson" else sm.OLS(y, x)).fit().params


def whole_process(runs: int) -> list[dict[str, Any]]:
    """`reviewkit --help` from start to end of its process, and the memory of a fit."""
    command = [sys.executable, "-m", "reviewkit", "--help"]
    _run(command)
    helps: tuple[list[float], list[float]] = ([], [])
    bare: tuple[list[float], list[float]] = ([], [])
    for _ in range(2 * runs):
        for taken, each in ((helps, command), (bare, [sys.executable, "-c", "pass"])):
            before = _of_children()
            taken[0].append(seconds(lambda each=each: _run(each)))
            taken[1].append(_of_children() - before)
    found: list[dict[str, Any]] = [
        {
            "what": "reviewkit --help, elapsed seconds, fastest run",
            "value": min(helps[0]),
            "note": f"median {median(helps[0]):.3f}, of the processor {median(helps[1]):.3f}; "
            f"an empty program: {min(bare[0]):.3f}, {median(bare[0]):.3f}, {median(bare[1]):.3f}",
            "bar": f"under {SECONDS_OF_HELP}",
            "met": min(helps[0]) < SECONDS_OF_HELP,
        }
    ]
    for estimator in ("poisson", "ols"):
        text = _run([sys.executable, "-c", MEMORY, str(ROOT), str(ROOT / "tests"), estimator, "1000000"])
        found.append(
            {
                "what": f"{estimator}, extra peak memory at 1,000,000 rows",
                "value": float(text),
                "note": "multiple of the design matrix, its well-conditioned copy included",
                "bar": "",
                "met": None,
            }
        )
    return found


def _of_children() -> float:
    """Processor seconds of all finished child processes."""
    times = os.times()
    return times.children_user + times.children_system


def _run(command: list[str]) -> str:
    return subprocess.run(command, cwd=str(ROOT), capture_output=True, text=True, check=True).stdout


def threads() -> str:
    """BLAS libraries in use with their threads."""
    from threadpoolctl import threadpool_info

    return "; ".join(f"{each['internal_api']} {each['version']}: {each['num_threads']}" for each in threadpool_info())


def main() -> None:
    """Run all and write what was found beside this script."""
    from studies.record import save

    asked = argparse.ArgumentParser(description=__doc__)
    asked.add_argument("--runs", type=int, default=5, help="interleaved runs of each (default 5)")
    runs = asked.parse_args().runs
    how = {
        "seed": SEED,
        "command": f"python tests/studies/speed.py --runs {runs}",
        "machine": f"{platform.machine()}, {platform.system()}, {os.cpu_count()} processors shared with others",
        "load_at_start": round(os.getloadavg()[0], 1) if hasattr(os, "getloadavg") else None,
        "blas_threads": threads(),
    }
    tables = {"process": whole_process(runs), "fits": fits(runs), "without_clusters": without_clusters(10_000, 500)}
    save("speed", how, tables)


if __name__ == "__main__":
    main()
