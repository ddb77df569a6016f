"""Specifications and tables for the tests of numbers, built as a reader of a file would."""

from typing import Any

import numpy as np
import pandas as pd

from reviewkit.readers.tables import Table
from reviewkit.reestimation import Reestimation, reestimate
from reviewkit.specification import Specification, specification_from


def table(**columns: Any) -> Table:
    return Table("data.csv", pd.DataFrame(columns), "0" * 64, {})


def specification(**tables: Any) -> Specification:
    return specification_from({"data": "data.csv", **tables}, "specification")


def refit(data: Table, **tables: Any) -> Reestimation:
    return reestimate(specification(**tables), data)


def amounts(rows: int = 400, clusters: int = 25, seed: int = 5) -> Table:
    """An amount with zeros, a two-valued covariate assigned by cluster, a covariate, a class, weights, exposure."""
    random = np.random.default_rng(seed)
    cluster = np.arange(rows) % clusters
    treated = (cluster % 2).astype(float)
    size = random.lognormal(1, 0.5, rows)
    mean = np.exp(1 + 0.3 * treated + 0.4 * np.log(size) + 0.2 * random.normal(size=clusters)[cluster])
    y = np.round(random.gamma(1.5, mean / 1.5), 2)
    y[random.random(rows) < 0.25 - 0.1 * treated] = 0
    return table(
        y=y,
        treated=treated,
        size=size,
        region=random.choice(["east", "north", "west"], rows),
        cluster=cluster,
        days=random.integers(10, 31, rows).astype(float),
        w=random.integers(1, 4, rows).astype(float),
    )
