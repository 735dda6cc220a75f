"""Observed statistics equal the textbook ones of scipy and statsmodels, on invented data."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest
import statsmodels.formula.api as smf
from scipy import stats
from statsmodels.stats.contingency_tables import StratifiedTable

import mtest

TIGHT = 1e-10  # relative: the same algebra in another order


def _statistic(values, arm, *, statistic, strata=None, reference="r", **options) -> float:
    result = mtest.joint_test(
        values, arm, reference=reference, strata=strata, statistic=statistic, draws=99, exact_limit=0, **options
    )
    return result.table["statistic"][0]


@pytest.fixture(scope="module")
def two():
    """Invented: 11 tested, 17 reference, skewed, unequal variances; seed 1."""
    rng = np.random.default_rng(1)
    return rng.gamma(2, 3, size=11), rng.gamma(2, 1, size=17) + 2


@pytest.fixture(scope="module")
def two_missing(two):
    tested, reference = (x.copy() for x in two)
    tested[[2, 7]] = np.nan
    reference[5] = np.nan
    return tested, reference


ARM = ["t"] * 11 + ["r"] * 17


@pytest.mark.parametrize("statistic, equal_var", [("welch", False), ("pooled", True)])
def test_two_arms_t(two, statistic, equal_var):
    oracle = stats.ttest_ind(*two, equal_var=equal_var).statistic
    assert _statistic(np.concatenate(two), ARM, statistic=statistic) == pytest.approx(oracle, rel=TIGHT)


@pytest.mark.parametrize("statistic, equal_var", [("welch", False), ("pooled", True)])
def test_two_arms_t_with_missing(two_missing, statistic, equal_var):
    oracle = stats.ttest_ind(*two_missing, equal_var=equal_var, nan_policy="omit").statistic
    assert _statistic(np.concatenate(two_missing), ARM, statistic=statistic) == pytest.approx(oracle, rel=TIGHT)


@pytest.mark.parametrize("data", ["two", "two_missing"])
def test_two_arms_difference(request, data):
    """D over its relabelling SD: sqrt(N - 1) times the correlation of value and arm."""
    tested, reference = request.getfixturevalue(data)
    values = np.concatenate([tested, reference])
    present = np.isfinite(values)
    r = stats.pearsonr(values[present], (np.array(ARM) == "t")[present]).statistic
    oracle = r * np.sqrt(present.sum() - 1)
    assert _statistic(values, ARM, statistic="difference") == pytest.approx(oracle, rel=TIGHT)


@pytest.mark.parametrize("data", ["two", "two_missing"])
def test_two_arms_unscaled_difference(request, data):
    tested, reference = request.getfixturevalue(data)
    oracle = np.nanmean(tested) - np.nanmean(reference)
    z = _statistic(np.concatenate([tested, reference]), ARM, statistic="unscaled difference")
    assert z == pytest.approx(oracle, rel=TIGHT)


@pytest.mark.parametrize("data", ["two", "two_missing"])
@pytest.mark.parametrize("digits", [0, 8], ids=["ties", "no ties"])
def test_two_arms_rank(request, data, digits):
    """z^2 is the Kruskal-Wallis H of two groups, corrected for ties."""
    tested, reference = (np.round(x, digits) for x in request.getfixturevalue(data))
    oracle = stats.kruskal(tested, reference, nan_policy="omit").statistic
    z = _statistic(np.concatenate([tested, reference]), ARM, statistic="rank")
    assert z**2 == pytest.approx(oracle, rel=TIGHT)


@pytest.mark.parametrize("data", ["two", "two_missing"])
def test_two_arms_rank_sign(request, data):
    tested, reference = request.getfixturevalue(data)
    oracle = stats.brunnermunzel(tested, reference, nan_policy="omit").statistic  # positive where the FIRST is smaller
    z = _statistic(np.concatenate([tested, reference]), ARM, statistic="rank")
    assert np.sign(z) == -np.sign(oracle)


@pytest.mark.parametrize("data", ["two", "two_missing"])
def test_two_arms_score(request, data):
    """z^2 is (N - 1) / N times Pearson's chi-squared."""
    values = np.concatenate(request.getfixturevalue(data))
    event = np.where(np.isfinite(values), values > 4, np.nan)
    present = np.isfinite(event)
    table = pd.crosstab(np.array(ARM)[present], event[present])
    oracle = stats.chi2_contingency(table, correction=False).statistic * (present.sum() - 1) / present.sum()
    assert _statistic(event, ARM, statistic="score") ** 2 == pytest.approx(oracle, rel=TIGHT)


@pytest.fixture(scope="module")
def pairs():
    """Invented: 14 matched pairs; seed 2."""
    rng = np.random.default_rng(2)
    level = rng.normal(0, 5, size=14)
    return level + rng.normal(1, 1, size=14), level + rng.normal(0, 2, size=14)


def _paired(first, second, **options) -> float:
    arm = ["t"] * len(first) + ["r"] * len(second)
    return _statistic(np.concatenate([first, second]), arm, strata=np.tile(np.arange(len(first)), 2), **options)


@pytest.mark.parametrize("statistic", ["welch", "pooled"])
def test_pairs_t(pairs, statistic):
    oracle = stats.ttest_rel(*pairs).statistic
    assert _paired(*pairs, statistic=statistic) == pytest.approx(oracle, rel=TIGHT)


@pytest.mark.parametrize("statistic", ["welch", "pooled"])
def test_pairs_t_with_a_pair_missing(pairs, statistic):
    """Both members missing: the paired t of the other pairs."""
    first, second = (x.copy() for x in pairs)
    first[3] = second[3] = np.nan
    oracle = stats.ttest_rel(first, second, nan_policy="omit").statistic
    assert _paired(first, second, statistic=statistic) == pytest.approx(oracle, rel=TIGHT)


def test_pairs_difference(pairs):
    """The sum of differences over the root of their sum of squares: its SD over sign flips."""
    d = pairs[0] - pairs[1]
    oracle = d.sum() / np.sqrt((d**2).sum())
    assert _paired(*pairs, statistic="difference") == pytest.approx(oracle, rel=TIGHT)


def test_pairs_rank_is_the_sign_test(pairs):
    """Within a pair the ranks are 1 and 2: z = (wins - losses) / sqrt(pairs)."""
    wins = (pairs[0] > pairs[1]).sum()
    oracle = (2 * wins - 14) / np.sqrt(14)
    assert _paired(*pairs, statistic="rank") == pytest.approx(oracle, rel=TIGHT)


def test_pairs_score_is_mcnemar(pairs):
    """z^2 of 0/1 pairs is McNemar's statistic without continuity correction: (b - c)^2 / (b + c)."""
    first, second = pairs[0] > 0.5, pairs[1] > 0.5
    b, c = (first & ~second).sum(), (~first & second).sum()
    assert b != c
    z = _paired(first.astype(float), second.astype(float), statistic="score")
    assert z**2 == pytest.approx((b - c) ** 2 / (b + c), rel=TIGHT)


@pytest.fixture(scope="module")
def stratified():
    """Invented: 60 subjects, 4 unequal strata, arm shares differing by stratum; seed 4."""
    rng = np.random.default_rng(4)
    stratum = np.repeat(["n", "e", "s", "w"], [9, 14, 16, 21])
    share = np.repeat([0.3, 0.5, 0.6, 0.45], [9, 14, 16, 21])
    arm = np.where(rng.random(60) < share, "t", "r")
    shift = np.repeat([0.0, 3.0, -2.0, 8.0], [9, 14, 16, 21])
    value = np.round(shift + rng.normal(0, 2, size=60) + (arm == "t"), 1)
    return pd.DataFrame({"value": value, "arm": arm, "stratum": stratum})


def _ols(data):
    return smf.ols("value ~ C(arm, Treatment('r')) + C(stratum)", data).fit()


def test_strata_pooled_is_ols_t(stratified):
    oracle = _ols(stratified).tvalues.iloc[1]
    z = _statistic(stratified["value"], stratified["arm"], strata=stratified["stratum"], statistic="pooled")
    assert z == pytest.approx(oracle, rel=TIGHT)


def test_strata_unscaled_difference_is_ols_coefficient(stratified):
    oracle = _ols(stratified).params.iloc[1]
    z = _statistic(
        stratified["value"], stratified["arm"], strata=stratified["stratum"], statistic="unscaled difference"
    )
    assert z == pytest.approx(oracle, rel=TIGHT)


def test_strata_pooled_with_a_stratum_missing_is_ols_t(stratified):
    """Where a whole stratum lacks the endpoint, the model is that of the other strata."""
    value = stratified["value"].where(stratified["stratum"] != "e")
    oracle = _ols(stratified[stratified["stratum"] != "e"]).tvalues.iloc[1]
    z = _statistic(value, stratified["arm"], strata=stratified["stratum"], statistic="pooled")
    assert z == pytest.approx(oracle, rel=TIGHT)


def _van_elteren_q(data) -> float:
    """Return van Elteren's Q by its definition: rank sums weighted 1 / (n + 1), tie-corrected variances."""
    top = variance = 0.0
    for _, part in data.groupby("stratum"):
        ranks, tested, n = stats.rankdata(part["value"]), (part["arm"] == "t").to_numpy(), len(part)
        weight = 1 / (n + 1)
        top += weight * (ranks[tested].sum() - tested.sum() * (n + 1) / 2)
        variance += weight**2 * tested.sum() * (n - tested.sum()) / n * ranks.var(ddof=1)
    return top**2 / variance


def test_strata_rank_is_van_elteren(stratified):
    z = _statistic(stratified["value"], stratified["arm"], strata=stratified["stratum"], statistic="rank")
    assert z**2 == pytest.approx(_van_elteren_q(stratified), rel=TIGHT)


def test_strata_score_is_cmh(stratified):
    data = stratified.assign(event=(stratified["value"] > 1).astype(float))
    tables = [
        np.array([[np.sum(part.loc[part["arm"] == a, "event"] == v) for v in (1, 0)] for a in ("t", "r")])
        for _, part in data.groupby("stratum")
    ]
    oracle = StratifiedTable(tables).test_null_odds(correction=False).statistic
    z = _statistic(data["event"], data["arm"], strata=data["stratum"], statistic="score")
    assert z**2 == pytest.approx(oracle, rel=TIGHT)


@pytest.fixture(scope="module")
def three():
    """Invented: three unequal arms; seed 6."""
    rng = np.random.default_rng(6)
    arm = np.repeat(["r", "a", "b"], [8, 11, 6])
    return pd.DataFrame({"arm": arm, "value": rng.normal(0, 1, size=25) + (arm == "b")})


def test_three_arms_pooled_is_ols_t(three):
    """All arms relabelled: the residual variance of the three-arm model."""
    model = smf.ols("value ~ C(arm, Treatment('r'))", three).fit()
    result = mtest.joint_test(
        three["value"], three["arm"], reference="r", statistic="pooled", exchange="all-arms", draws=99
    )
    assert result.table["statistic"].to_numpy() == pytest.approx(model.tvalues.iloc[1:].to_numpy(), rel=TIGHT)


def test_three_arms_pooled_with_missing_is_ols_t(three):
    data = three.assign(value=three["value"].where(~three.index.isin([1, 9, 20, 22])))
    model = smf.ols("value ~ C(arm, Treatment('r'))", data.dropna()).fit()
    result = mtest.joint_test(
        data["value"], data["arm"], reference="r", statistic="pooled", exchange="all-arms", draws=99
    )
    assert result.table["statistic"].to_numpy() == pytest.approx(model.tvalues.iloc[1:].to_numpy(), rel=TIGHT)


def test_complete_blocks_pooled_is_ols_t():
    """Randomised complete blocks of three arms, all arms relabelled: the t of the model with blocks."""
    rng = np.random.default_rng(8)
    data = pd.DataFrame(
        {"arm": np.tile(["r", "a", "b"], 7), "block": np.repeat(np.arange(7), 3), "value": rng.normal(size=21)}
    )
    model = smf.ols("value ~ C(arm, Treatment('r')) + C(block)", data).fit()
    result = mtest.joint_test(
        data["value"],
        data["arm"],
        reference="r",
        strata=data["block"],
        statistic="pooled",
        exchange="all-arms",
        draws=99,
    )
    assert result.table["statistic"].to_numpy() == pytest.approx(model.tvalues.iloc[1:3].to_numpy(), rel=TIGHT)


@pytest.mark.parametrize("statistic", ["welch", "pooled", "difference", "rank"])
def test_within_pair_ignores_other_arms(three, statistic):
    """A pair's statistic is that of a study of its two arms alone."""
    whole = mtest.joint_test(three["value"], three["arm"], reference="r", statistic=statistic, draws=99)
    alone = three[three["arm"] != "a"]
    own = _statistic(alone["value"], alone["arm"], statistic=statistic)
    assert whole.table["statistic"][1] == pytest.approx(own, rel=TIGHT)
