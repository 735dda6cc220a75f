"""Statistics from arm sums against textbook formulas computed in the plain way, label by label."""

import numpy as np
import pytest
from scipy import stats
from statsmodels.regression.linear_model import OLS

from mtest.engine.job import Hypotheses, build_job
from mtest.engine.kernel import run_pilot
from mtest.engine.pair import build_pair_panel
from mtest.engine.several import DENOMINATORS, build_several_panel, derive_constants
from mtest.engine.statistics import divide
from mtest.relabel.sets import pair_set, whole_set
from mtest.relabel.sources import EnumeratedLabels
from mtest.scores import SCORES

RNG = np.random.default_rng(11)
N = 24
Y = RNG.normal(5, 2, N)
ARM = RNG.permutation(np.repeat([0, 1], [10, 14]))
STRATUM = np.tile([0, 1, 2], 8)
MISSING = np.where(np.isin(np.arange(N), [2, 7, 8, 20]), np.nan, Y)


def statistic(name, y, arm, stratum, *, cell=None, labels=None):
    """Return the engine's statistic of arm 0 against arm 1, for the labels as they are or as given."""
    cell = stratum if cell is None else cell
    chosen = pair_set(arm, cell, (0, 1), name="pair")
    order = chosen.subjects
    panel = build_pair_panel(
        SCORES[name](y, stratum)[None, order],
        rows=np.array([0]),
        statistic=name,
        reference_set=chosen,
        set_index=0,
        stratum=stratum[order],
    )
    first = (arm if labels is None else labels)[order] == 0
    return panel.compute([first.astype(float)[None, :]])[0, 0]


def one(n=N):
    return np.zeros(n, dtype=int)


@pytest.mark.parametrize("y", [Y, MISSING], ids=["complete", "missing"])
@pytest.mark.parametrize(("name", "equal_var"), [("welch", False), ("pooled", True)])
def test_without_strata_the_t_statistics_are_the_textbook_ones(name, equal_var, y):
    expected = stats.ttest_ind(y[ARM == 0], y[ARM == 1], equal_var=equal_var, nan_policy="omit").statistic
    assert statistic(name, y, ARM, one()) == pytest.approx(expected, rel=1e-12)


@pytest.mark.parametrize("y", [Y, MISSING], ids=["complete", "missing"])
def test_welch_of_another_labelling_is_that_labelling_s_welch(y):
    for seed in range(20):
        labels = np.random.default_rng(seed).permutation(ARM)
        expected = stats.ttest_ind(y[labels == 0], y[labels == 1], equal_var=False, nan_policy="omit").statistic
        assert statistic("welch", y, ARM, one(), labels=labels) == pytest.approx(expected, rel=1e-11)


def test_pooled_with_strata_is_the_t_of_the_linear_model():
    design = np.column_stack([ARM == 0, *(STRATUM == s for s in range(3))]).astype(float)
    assert statistic("pooled", Y, ARM, STRATUM) == pytest.approx(OLS(Y, design).fit().tvalues[0], rel=1e-12)


@pytest.mark.parametrize("name", ["welch", "pooled"])
def test_matched_pairs_give_the_paired_t(name):
    sets = np.repeat(np.arange(12), 2)
    arm = np.array([RNG.permutation([0, 1]) for _ in range(12)]).ravel()
    expected = stats.ttest_rel(Y[arm == 0], Y[arm == 1]).statistic
    assert statistic(name, Y, arm, sets) == pytest.approx(expected, rel=1e-12)


def test_welch_with_strata_is_its_derivation_written_out():
    """T = S / sqrt(A SS_a/nu_a + B SS_b/nu_b), the derivation of `derive_constants` for a pair, in plain loops."""
    r = Y.copy()
    for s in range(3):
        r[STRATUM == s] -= Y[STRATUM == s].mean()
    a_part = b_part = nu_a = nu_b = weight = 0.0
    n_a, n_b = (ARM == 0).sum(), (ARM == 1).sum()
    for s in range(3):
        na, nb = ((ARM == 0) & (STRATUM == s)).sum(), ((ARM == 1) & (STRATUM == s)).sum()
        n = na + nb
        weight += na * nb / n
        a_part += na * nb**2 / n**2
        b_part += nb * na**2 / n**2
        nu_a += na * (1 - 1 / n)
        nu_b += nb * (1 - 1 / n)
    total = r[ARM == 0].sum()
    ss_a = ((r[ARM == 0] - r[ARM == 0].mean()) ** 2).sum()
    ss_b = ((r[ARM == 1] - r[ARM == 1].mean()) ** 2).sum()
    variance = a_part * ss_a / (nu_a - weight / n_a) + b_part * ss_b / (nu_b - weight / n_b)
    # The engine's D is the unweighted difference of arm means of r; the strata's shares differ, so D is not S alone.
    d = r[ARM == 0].mean() - r[ARM == 1].mean()
    scale = total / d
    assert statistic("welch", Y, ARM, STRATUM) == pytest.approx(d * scale / np.sqrt(variance), rel=1e-9)


@pytest.mark.parametrize("name", ["difference", "rank"])
@pytest.mark.parametrize("cells", ["strata", "blocks within one stratum"])
def test_standardised_statistics_have_mean_0_and_variance_1_over_all_relabellings(name, cells):
    arm = np.array([0, 1, 1, 0, 0, 1, 1, 0, 1, 1])
    cell = np.array([0, 0, 0, 0, 1, 1, 1, 2, 2, 2])
    y = np.random.default_rng(3).exponential(size=10).round(1)
    stratum = cell if cells == "strata" else one(10)
    chosen = pair_set(arm, cell, (0, 1), name="pair")
    labels = EnumeratedLabels(sets=(chosen,))
    hypotheses = Hypotheses(
        scores=(SCORES[name](y, stratum),), statistic=(name,), set_index=(0,), first=(0,), second=(1,)
    )
    job = build_job(hypotheses, labels=labels, strata=(stratum,), two_sided=True)
    null = run_pilot(job)[0]
    assert len(null) == labels.n_draws
    assert null.mean() == pytest.approx(0, abs=1e-12)
    assert null.var() == pytest.approx(1, rel=1e-12)


def test_rank_without_strata_is_the_rank_sum_standardised_with_ties():
    y = np.round(MISSING)
    kept = np.isfinite(y)
    ranks = stats.rankdata(y[kept])
    n, n_a = kept.sum(), (ARM[kept] == 0).sum()
    expected = (ranks[ARM[kept] == 0].sum() - n_a * (n + 1) / 2) / np.sqrt(n_a * (n - n_a) / (n - 1) * ranks.var())
    assert statistic("rank", y, ARM, one()) == pytest.approx(expected, rel=1e-12)


def test_score_squared_is_the_chi_squared_with_n_minus_1():
    y = (Y > 5).astype(float)
    table = np.array([[((ARM == a) & (y == v)).sum() for v in (0, 1)] for a in (0, 1)])
    chi2 = stats.chi2_contingency(table, correction=False).statistic
    assert statistic("score", y, ARM, one()) ** 2 == pytest.approx(chi2 * (N - 1) / N, rel=1e-12)


def test_unscaled_difference_with_strata_is_precision_weighted():
    weights, differences = [], []
    for s in range(3):
        a, b = Y[(ARM == 0) & (STRATUM == s)], Y[(ARM == 1) & (STRATUM == s)]
        weights.append(len(a) * len(b) / (len(a) + len(b)))
        differences.append(a.mean() - b.mean())
    expected = np.average(differences, weights=weights)
    design = np.column_stack([ARM == 0, *(STRATUM == s for s in range(3))]).astype(float)
    assert OLS(Y, design).fit().params[0] == pytest.approx(expected, rel=1e-12)
    # Shares of the strata differ between arms here only by chance; the statistic is the arm sum over its weight.
    r = Y - np.array([Y[STRATUM == s].mean() for s in range(3)])[STRATUM]
    assert r[ARM == 0].sum() / sum(weights) == pytest.approx(expected, rel=1e-12)
    assert statistic("unscaled difference", Y, ARM, STRATUM) == pytest.approx(expected, rel=1e-12)


@pytest.mark.parametrize("name", ["welch", "pooled", "difference", "unscaled difference", "rank"])
@pytest.mark.parametrize(("y", "strata"), [(Y, False), (MISSING, False), (Y, True)], ids=["plain", "missing", "strata"])
def test_the_form_for_several_arms_given_two_equals_the_pair_s(name, y, strata):
    stratum = STRATUM if strata else one()
    chosen = whole_set(ARM, stratum, n_arms=2, name="all arms")
    arm, scores = ARM[chosen.subjects], SCORES[name](y, stratum)[None, chosen.subjects]
    constants = derive_constants(scores, reference_set=chosen, stratum=stratum[chosen.subjects], first=0, second=1)
    x, present = np.nan_to_num(scores[0]), np.isfinite(scores[0])
    s, s2, m = ([np.array([[v[arm == k].sum()]]) for k in (0, 1)] for v in (x, x**2, present.astype(float)))
    den2 = DENOMINATORS[name](0, 1, s, s2, m, constants)
    general = (s[0] / m[0] - s[1] / m[1] - constants.mu) / np.sqrt(den2)
    assert general[0, 0] == pytest.approx(statistic(name, y, ARM, stratum), rel=1e-10)


def test_all_arms_pooled_t_uses_the_variance_of_every_arm():
    arm = np.repeat([0, 1, 2], 8)
    chosen = whole_set(arm, one(), n_arms=3, name="all arms")
    panel = build_several_panel(
        SCORES["pooled"](Y, one())[None, :],
        rows=np.array([0]),
        statistic="pooled",
        reference_set=chosen,
        set_index=0,
        stratum=one(),
        first=2,
        second=0,
    )
    indicators = [(arm == k).astype(float)[None, :] for k in (0, 1)]
    within = sum(((Y[arm == k] - Y[arm == k].mean()) ** 2).sum() for k in range(3)) / 21
    expected = (Y[arm == 2].mean() - Y[arm == 0].mean()) / np.sqrt(within * (2 / 8))
    assert panel.compute(indicators)[0, 0] == pytest.approx(expected, rel=1e-12)


def test_nothing_over_nothing_is_0():
    assert statistic("welch", np.full(N, 0.1), ARM, one()) == 0


@pytest.mark.parametrize("name", ["welch", "pooled"])
def test_something_over_nothing_is_infinite_with_its_sign(name):
    y = np.where(ARM == 0, 0.1, 0.7)
    assert statistic(name, y, ARM, one()) == -np.inf
    assert statistic(name, -y, ARM, one()) == np.inf


@pytest.mark.parametrize("name", ["welch", "pooled", "difference", "rank", "score", "unscaled difference"])
def test_an_arm_without_data_in_a_draw_gives_0(name):
    y = np.where(np.arange(N) < 3, (np.arange(N) > 0).astype(float), np.nan)
    labels = np.where(np.arange(N) < 3, 1, 0)
    assert statistic(name, y, ARM, one(), labels=labels) == 0


def test_divide_keeps_ordinary_rows_beside_zero_ones():
    result = divide(
        np.array([[1.0, -2.0, 0.0], [3.0, 3.0, 3.0]]),
        np.array([[0.0, 1e-20, 0.0], [4.0, 9.0, 0.0]]),
        usual=np.array([[1.0], [1.0]]),
    )
    assert result.tolist() == [[np.inf, -np.inf, 0.0], [1.5, 1.0, np.inf]]
