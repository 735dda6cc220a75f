"""Observed statistics within strata, single values missing: the textbook value of the subjects that are there.

Kept apart because the engine puts the EXPECTED number available in an arm and stratum in place of the actual one
(mtest/engine/constants.py): its p-values stay valid, but the statistic shown is then not the textbook's.
"""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest
import statsmodels.formula.api as smf
from scipy import stats
from statsmodels.stats.contingency_tables import StratifiedTable

import mtest

TIGHT = 1e-10  # relative: the same algebra in another order


@pytest.fixture(scope="module")
def patchy():
    """Invented: 60 subjects in 4 strata, some values missing in either arm of every stratum; seed 4."""
    rng = np.random.default_rng(4)
    sizes = [9, 14, 16, 21]
    arm = np.where(rng.random(60) < np.repeat([0.3, 0.5, 0.6, 0.45], sizes), "t", "r")
    value = np.round(rng.normal(0, 2, size=60) + (arm == "t"), 1)
    value[rng.random(60) < 0.12] = np.nan
    return pd.DataFrame({"value": value, "arm": arm, "stratum": np.repeat(list("nesw"), sizes)})


def _row(data, statistic, column="value") -> pd.Series:
    return mtest.joint_test(
        data[column], data["arm"], reference="r", strata=data["stratum"], statistic=statistic, draws=99
    ).table.iloc[0]


def _ols(data):
    return smf.ols("value ~ C(arm, Treatment('r')) + C(stratum)", data.dropna()).fit()


def test_estimate_is_ols_coefficient(patchy):
    assert _row(patchy, "pooled")["estimate"] == pytest.approx(_ols(patchy).params.iloc[1], rel=TIGHT)


def test_pooled_is_ols_t(patchy):
    assert _row(patchy, "pooled")["statistic"] == pytest.approx(_ols(patchy).tvalues.iloc[1], rel=TIGHT)


def test_unscaled_difference_is_the_estimate_beside_it(patchy):
    row = _row(patchy, "unscaled difference")
    assert row["statistic"] == pytest.approx(row["estimate"], rel=TIGHT)


@pytest.mark.parametrize("statistic", ["welch", "difference", "rank"])
def test_equals_the_study_of_the_subjects_that_are_there(patchy, statistic):
    """As it does in one stratum, for all statistics."""
    oracle = _row(patchy.dropna(), statistic)["statistic"]
    assert _row(patchy, statistic)["statistic"] == pytest.approx(oracle, rel=TIGHT)


def test_score_is_cmh(patchy):
    data = patchy.assign(event=(patchy["value"] > 1).astype(float).where(patchy["value"].notna()))
    there = data.dropna()
    tables = [
        np.array([[np.sum(part.loc[part["arm"] == a, "event"] == v) for v in (1, 0)] for a in ("t", "r")])
        for _, part in there.groupby("stratum")
    ]
    oracle = StratifiedTable(tables).test_null_odds(correction=False).statistic
    assert _row(data, "score", "event")["statistic"] ** 2 == pytest.approx(oracle, rel=TIGHT)


@pytest.mark.parametrize("statistic", ["welch", "pooled"])
def test_pairs_with_one_member_missing_are_the_paired_t_of_the_others(statistic):
    rng = np.random.default_rng(2)
    first, second = rng.normal(1, 1, size=14), rng.normal(0, 2, size=14)
    second[3] = np.nan
    data = pd.DataFrame(
        {
            "value": np.concatenate([first, second]),
            "arm": np.repeat(["t", "r"], 14),
            "stratum": np.tile(np.arange(14), 2),
        }
    )
    oracle = stats.ttest_rel(first, second, nan_policy="omit").statistic
    assert _row(data, statistic)["statistic"] == pytest.approx(oracle, rel=TIGHT)
