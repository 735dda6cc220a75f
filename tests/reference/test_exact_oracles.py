"""Enumerated p-values equal those of scipy's exact tests, on invented data."""

from __future__ import annotations

from itertools import combinations
from math import comb

import numpy as np
import pytest
from scipy import stats

import mtest


def _p(tested, reference, **options) -> float:
    values = np.concatenate([tested, reference]).astype(float)
    arm = ["t"] * len(tested) + ["r"] * len(reference)
    result = mtest.joint_test(values, arm, reference="r", **options)
    assert result.exact
    return result.table["p_unadjusted"][0]


@pytest.mark.parametrize("alternative", ["two-sided", "greater", "less"])
@pytest.mark.parametrize("sizes", [(3, 4), (5, 6), (8, 7), (2, 12)])
def test_mann_whitney(sizes, alternative):
    """Without ties the null is symmetric, so scipy's doubled tail and our |z| agree."""
    rng = np.random.default_rng(sum(sizes))
    tested, reference = rng.normal(0.8, 1, size=sizes[0]), rng.normal(size=sizes[1])
    oracle = stats.mannwhitneyu(tested, reference, alternative=alternative, method="exact").pvalue
    assert _p(tested, reference, statistic="rank", alternative=alternative) == pytest.approx(oracle, abs=1e-12)


def test_mann_whitney_with_missing():
    """A missing value is relabelled with its subject: sizes vary, so p is the mean over how many each arm keeps."""
    tested, reference = np.array([4.0, 6.0, np.nan, 9.0]), np.array([1.0, 5.0, 2.0])
    # Of the 35, 20 leave the missing subject with the tested arm (3 v 3) and 15 with the reference (4 v 2).
    values = np.array([4.0, 6.0, 9.0, 1.0, 5.0, 2.0])
    ranks, sd = stats.rankdata(values), stats.rankdata(values).std(ddof=1)

    def z(chosen):
        inside = np.isin(np.arange(6), chosen)
        spread = sd * np.sqrt(1 / inside.sum() + 1 / (~inside).sum())
        return (ranks[inside].mean() - ranks[~inside].mean()) / spread

    null = [z(c) for k in (3, 4) for c in combinations(range(6), k)]
    oracle = np.mean(np.array(null) >= z((0, 1, 2)) - 1e-9)
    assert len(null) == 35
    assert _p(tested, reference, statistic="rank", alternative="greater") == pytest.approx(oracle, abs=1e-12)


@pytest.mark.parametrize("alternative", ["greater", "less"])
@pytest.mark.parametrize("table", [(3, 1, 1, 3), (5, 1, 2, 5), (7, 2, 3, 6), (0, 6, 3, 5), (4, 4, 4, 4)])
def test_fisher_one_sided(table, alternative):
    """Two-sided rules differ (scipy orders tables by probability), one-sided ones cannot."""
    a, b, c, d = table
    oracle = stats.fisher_exact([[a, b], [c, d]], alternative=alternative).pvalue
    tested, reference = np.repeat([1, 0], [a, b]), np.repeat([1, 0], [c, d])
    assert _p(tested, reference, statistic="score", alternative=alternative) == pytest.approx(oracle, abs=1e-12)


@pytest.mark.parametrize("table", [(3, 1, 1, 3), (5, 1, 2, 5), (7, 2, 3, 6), (0, 6, 3, 5)])
def test_score_two_sided_is_hypergeometric(table):
    """Our two-sided rule is |events - expected|, from the hypergeometric law."""
    a, b, c, d = table
    law = stats.hypergeom(a + b + c + d, a + c, a + b)
    events = np.arange(a + b + 1)
    far = np.abs(events - law.mean()) >= abs(a - law.mean()) - 1e-9
    tested, reference = np.repeat([1, 0], [a, b]), np.repeat([1, 0], [c, d])
    assert _p(tested, reference, statistic="score") == pytest.approx(law.pmf(events[far]).sum(), abs=1e-12)


def _welch(x, y, axis=-1):
    return stats.ttest_ind(x, y, equal_var=False, axis=axis).statistic


def _student(x, y, axis=-1):
    return stats.ttest_ind(x, y, axis=axis).statistic


def _means(x, y, axis=-1):
    return np.mean(x, axis=axis) - np.mean(y, axis=axis)


ORACLES = {"welch": _welch, "pooled": _student, "difference": _means, "unscaled difference": _means}


@pytest.mark.parametrize("alternative", ["two-sided", "greater", "less"])
@pytest.mark.parametrize("statistic", sorted(ORACLES))
def test_permutation_test_two_arms(statistic, alternative):
    """scipy.stats.permutation_test over all 462; two-sided by the absolute statistic, since scipy doubles the tail."""
    rng = np.random.default_rng(13)
    tested, reference = np.round(rng.gamma(2, 2, size=5), 2), np.round(rng.gamma(2, 1, size=6), 2)
    measure, side = ORACLES[statistic], alternative
    if alternative == "two-sided":
        measure, side = (lambda x, y, axis=-1: np.abs(ORACLES[statistic](x, y, axis=axis))), "greater"
    oracle = stats.permutation_test(
        (tested, reference), measure, vectorized=True, n_resamples=np.inf, alternative=side
    ).pvalue
    assert _p(tested, reference, statistic=statistic, alternative=alternative) == pytest.approx(oracle, abs=1e-12)


@pytest.mark.parametrize("alternative", ["greater", "less"])
@pytest.mark.parametrize("statistic", ["difference", "welch"])
def test_permutation_test_pairs(statistic, alternative):
    """permutation_type "samples": members of a pair swapped, 2^9 ways; the paired t is monotone in the mean."""
    rng = np.random.default_rng(14)
    first, second = np.round(rng.normal(1, 2, size=9), 2), np.round(rng.normal(0, 2, size=9), 2)
    oracle = stats.permutation_test(
        (first, second),
        _means,
        vectorized=True,
        permutation_type="samples",
        n_resamples=np.inf,
        alternative=alternative,
    ).pvalue
    result = _p(first, second, statistic=statistic, alternative=alternative, strata=np.tile(np.arange(9), 2))
    assert result == pytest.approx(oracle, abs=1e-12)


@pytest.fixture(scope="module")
def three_endpoints():
    """Invented: 5 v 6 subjects, three correlated endpoints, three values missing; seed 15."""
    rng = np.random.default_rng(15)
    values = rng.normal(size=(11, 3)) + rng.normal(size=(11, 1)) + np.repeat([1.2, 0.0], [5, 6])[:, None]
    values[[1, 7, 9], [0, 1, 1]] = np.nan
    return values


def _max_t_oracle(values, columns, threshold) -> float:
    """Return the p of max |Welch t| over endpoints, by scipy's enumeration of who is in the first arm."""

    def maximum(first, second):
        t = stats.ttest_ind(
            values[first.astype(int)][:, columns],
            values[second.astype(int)][:, columns],
            equal_var=False,
            nan_policy="omit",
        ).statistic
        return np.max(np.abs(t))

    null = stats.permutation_test(
        (np.arange(5), np.arange(5, 11)), maximum, vectorized=False, n_resamples=np.inf, alternative="greater"
    ).null_distribution
    assert len(null) == comb(11, 5)
    return float(np.mean(null >= threshold - 1e-9))


@pytest.fixture(scope="module")
def joint(three_endpoints):
    arm = ["t"] * 5 + ["r"] * 6
    return mtest.joint_test(three_endpoints, arm, reference="r", statistic="welch").table


@pytest.mark.parametrize("endpoint", range(3))
def test_single_step_max_t(three_endpoints, joint, endpoint):
    """Missing values included."""
    oracle = _max_t_oracle(three_endpoints, [0, 1, 2], abs(joint["statistic"][endpoint]))
    assert joint["p_single_step"][endpoint] == pytest.approx(oracle, abs=1e-12)


def test_step_down_max_t(three_endpoints, joint):
    """Each endpoint against the maximum over itself and those below it in the observed order, made monotone."""
    order = np.argsort(-joint["statistic"].abs().to_numpy())
    highest, oracle = 0.0, np.empty(3)
    for k, endpoint in enumerate(order):
        threshold = abs(joint["statistic"][endpoint])
        highest = max(highest, _max_t_oracle(three_endpoints, list(order[k:]), threshold))
        oracle[endpoint] = highest
    assert joint["p_step_down"].to_numpy() == pytest.approx(oracle, abs=1e-12)
