"""What must hold for any data: symmetries, bounds, monotonicity."""

import warnings
from itertools import combinations, pairwise

import numpy as np
import pandas as pd
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

import mtest

P = ["p_unadjusted", "p_single_step", "p_step_down"]
STATISTICS = ["welch", "pooled", "difference", "rank"]
few = settings(max_examples=25, deadline=None, suppress_health_check=[HealthCheck.too_slow])


@st.composite
def studies(draw, *, arms=(2, 3), most=5, missing=True):
    """A small study: (outcomes, arm). Values come from a few whole numbers, so ties and zero variances are common."""
    k = draw(st.integers(*arms))
    sizes = [draw(st.integers(2, most)) for _ in range(k)]
    n, m = sum(sizes), draw(st.integers(1, 4))
    seed = draw(st.integers(0, 10**6))
    rng = np.random.default_rng(seed)
    outcomes = rng.integers(0, draw(st.sampled_from([2, 4, 1000])), size=(n, m)).astype(float)
    arm = np.repeat(np.array(list("abcd"))[:k], sizes)
    if missing and draw(st.booleans()):
        for j in range(m):
            gone = rng.random(n) < 0.2
            for label in np.unique(arm):  # an arm without data is refused
                gone[np.flatnonzero(arm == label)[0]] = False
            outcomes[gone, j] = np.nan
    return outcomes, arm


def counts(result):
    return np.round(result.table[P].to_numpy() * result.n_draws).astype(int)


@few
@given(studies(), st.sampled_from(STATISTICS), st.sampled_from(["two-sided", "greater", "less"]))
def test_adjusted_p_values_are_ordered_and_bounded(study, statistic, alternative):
    outcomes, arm = study
    result = mtest.joint_test(outcomes, arm, statistic=statistic, alternative=alternative, draws=200)
    raw, single, step = (result.table[p].to_numpy() for p in P)
    assert np.all(raw <= step + 1e-12)
    assert np.all(step <= single + 1e-12)
    assert np.all(single <= 1)
    floor = 1 / result.n_draws if result.exact else 1 / (1 + result.n_draws)
    assert np.all(raw >= floor - 1e-12)


@few
@given(studies(), st.sampled_from(STATISTICS))
def test_adjusted_p_values_fall_as_the_statistic_rises(study, statistic):
    outcomes, arm = study
    result = mtest.joint_test(outcomes, arm, statistic=statistic, draws=200)
    order = np.argsort(-result.table["statistic"].abs().to_numpy(), kind="stable")
    for column in ("p_single_step", "p_step_down"):
        assert np.all(np.diff(result.table[column].to_numpy()[order]) >= -1e-12)


@few
@given(studies(), st.sampled_from(STATISTICS), st.integers(0, 3))
def test_a_duplicated_endpoint_leaves_every_adjusted_p_unchanged(study, statistic, which):
    outcomes, arm = study
    which %= outcomes.shape[1]
    plain = mtest.joint_test(outcomes, arm, statistic=statistic, draws=200)
    twice = mtest.joint_test(np.column_stack([outcomes, outcomes[:, which]]), arm, statistic=statistic, draws=200)
    m = len(plain.table)
    assert np.array_equal(counts(plain), counts(twice)[:m])


@few
@given(studies(), st.sampled_from(STATISTICS), st.randoms(use_true_random=False))
def test_endpoint_order_does_not_matter(study, statistic, random):
    outcomes, arm = study
    order = list(range(outcomes.shape[1]))
    random.shuffle(order)
    plain = mtest.joint_test(pd.DataFrame(outcomes), arm, statistic=statistic, draws=200)
    mixed = mtest.joint_test(pd.DataFrame(outcomes)[order], arm, statistic=statistic, draws=200)
    key = ["endpoint", "arm", "reference"]
    left, right = (r.table.set_index(key)[P].sort_index() for r in (plain, mixed))
    pd.testing.assert_frame_equal(left, right)


@few
@given(studies(arms=(2, 2)), st.sampled_from(STATISTICS), st.randoms(use_true_random=False))
def test_subject_order_does_not_matter_when_enumerated(study, statistic, random):
    outcomes, arm = study
    order = list(range(len(arm)))
    random.shuffle(order)
    plain = mtest.joint_test(outcomes, arm, statistic=statistic)
    mixed = mtest.joint_test(outcomes[order], arm[order], statistic=statistic)
    assert plain.exact
    assert np.array_equal(counts(plain), counts(mixed))


@few
@given(studies(arms=(3, 3)), st.sampled_from(STATISTICS))
def test_arm_order_does_not_matter_against_a_reference(study, statistic):
    outcomes, arm = study
    plain = mtest.joint_test(outcomes, pd.Categorical(arm, list("abc")), reference="b", statistic=statistic, draws=200)
    other = mtest.joint_test(outcomes, pd.Categorical(arm, list("cba")), reference="b", statistic=statistic, draws=200)
    key = ["endpoint", "arm", "reference"]
    left, right = (r.table.set_index(key)[P].sort_index() for r in (plain, other))
    assert np.array_equal(left.to_numpy(), right.to_numpy())


@few
@given(
    studies(),
    st.sampled_from(STATISTICS),
    st.floats(0.001, 1000),
    st.floats(-1000, 1000),
)
def test_units_do_not_matter(study, statistic, scale, shift):
    outcomes, arm = study
    plain = mtest.joint_test(outcomes, arm, statistic=statistic, draws=200)
    other = outcomes.copy()
    other[:, 0] = other[:, 0] * scale + shift
    changed = mtest.joint_test(other, arm, statistic=statistic, draws=200)
    assert np.array_equal(counts(plain), counts(changed))


@few
@given(studies(arms=(2, 2)), st.sampled_from(STATISTICS))
def test_swapping_the_arms_mirrors_the_alternatives(study, statistic):
    outcomes, arm = study
    greater = mtest.joint_test(outcomes, arm, reference="a", statistic=statistic, alternative="greater")
    less = mtest.joint_test(outcomes, arm, reference="b", statistic=statistic, alternative="less")
    assert np.array_equal(counts(greater), counts(less))


@few
@given(studies(arms=(2, 2), missing=False), st.sampled_from(STATISTICS))
def test_enumeration_is_a_plain_loop_over_all_labellings(study, statistic):
    """The whole chain against brute force: every labelling, the statistic recomputed from the values each time."""
    outcomes, arm = study
    result = mtest.joint_test(outcomes, arm, reference="b", statistic=statistic)
    n, n_a = len(arm), int((arm == "a").sum())
    null = []
    for chosen in combinations(range(n), n_a):
        first = np.isin(np.arange(n), chosen)
        null.append([brute_statistic(outcomes[:, j], first, statistic) for j in range(outcomes.shape[1])])
    null = np.abs(np.array(null))
    observed = np.abs([brute_statistic(outcomes[:, j], arm == "a", statistic) for j in range(outcomes.shape[1])])
    order = np.argsort(-observed, kind="stable")
    tail = np.array([np.sum(null[:, order[k:]].max(axis=1) >= observed[h] - 1e-9) for k, h in enumerate(order)])
    step = np.empty(len(order), dtype=int)
    step[order] = np.maximum.accumulate(tail)
    expected = np.column_stack(
        [
            (null >= observed - 1e-9).sum(axis=0),
            [(null.max(axis=1) >= t - 1e-9).sum() for t in observed],
            step,
        ]
    )
    assert np.array_equal(counts(result), expected)


def brute_statistic(y, first, statistic):
    """Return a two-sample statistic in the plainest way; 0/0 is 0 and x/0 infinite."""
    if statistic == "rank":
        y = pd.Series(y).rank().to_numpy()
    a, b = y[first], y[~first]
    difference = a.mean() - b.mean()
    if statistic == "welch":
        variance = a.var(ddof=1) / len(a) + b.var(ddof=1) / len(b)
    elif statistic == "pooled":
        within = ((a - a.mean()) ** 2).sum() + ((b - b.mean()) ** 2).sum()
        variance = within / (len(y) - 2) * (1 / len(a) + 1 / len(b))
    else:
        variance = y.var(ddof=1) * (1 / len(a) + 1 / len(b))
    if variance < 1e-18:
        return 0.0 if abs(difference) < 1e-12 else np.copysign(np.inf, difference)
    return difference / np.sqrt(variance)


@pytest.mark.parametrize("n_jobs", [2, 3])
@pytest.mark.parametrize("reference", ["a", None])
def test_workers_change_no_count(n_jobs, reference):
    rng = np.random.default_rng(2)
    outcomes, arm = rng.normal(size=(60, 5)), np.repeat(list("abc"), [30, 20, 10])
    one, several = (
        mtest.joint_test(outcomes, arm, reference=reference, draws=20_000, n_jobs=jobs) for jobs in (1, n_jobs)
    )
    assert np.array_equal(counts(one), counts(several))


def test_more_draws_keep_the_first_ones():
    rng = np.random.default_rng(3)
    outcomes, arm = rng.normal(size=(40, 3)), np.repeat(["a", "b"], 20)
    exceed = []
    for draws in (700, 1024, 1500, 4096):
        result = mtest.joint_test(outcomes, arm, draws=draws)
        assert result.n_draws == draws
        exceed.append(np.round(result.table[P].to_numpy() * (draws + 1) - 1))
    for (fewer, more), added in zip(pairwise(exceed), (324, 476, 2596)):
        assert np.all(fewer <= more)
        assert np.all(more <= fewer + added)


def test_independent_endpoints_bring_single_step_near_sidak():
    """With independent endpoints P(max) = 1 - (1 - p)^m; the null is drawn, so 4 standard errors of it."""
    rng = np.random.default_rng(4)
    m, n = 6, 120
    outcomes, arm = rng.normal(size=(n, m)), np.repeat(["a", "b"], n // 2)
    # Exactly uncorrelated columns: the permutation correlation of the statistics is then 0.
    outcomes = np.linalg.qr(outcomes - outcomes.mean(axis=0))[0]
    table = mtest.joint_test(outcomes, arm, statistic="difference", draws=50_000).table
    sidak = 1 - (1 - table["p_unadjusted"]) ** m
    # One more term: an unequal margin per endpoint, since the maximum is on the statistic's scale.
    error = 4 * np.sqrt(sidak * (1 - sidak) / 50_000) + 4 * m * np.sqrt(table["p_unadjusted"] / 50_000) + 0.005
    assert np.all(np.abs(table["p_single_step"] - sidak) <= error)


@pytest.mark.parametrize("across", ["joint", "boole"])
def test_sampled_agrees_with_enumerated(across):
    rng = np.random.default_rng(6)
    outcomes, arm = rng.integers(0, 6, size=(12, 3)).astype(float), np.repeat(["a", "b"], 6)
    exact = mtest.joint_test(outcomes, arm, across_pairs=across).table[P].to_numpy()
    sampled = mtest.joint_test(outcomes, arm, across_pairs=across, exact_limit=0, draws=40_000).table[P].to_numpy()
    assert np.all(np.abs(exact - sampled) <= 4.5 * np.sqrt(exact * (1 - exact) / 40_000) + 1 / 40_000)


def test_boole_uses_the_same_draws_as_joint():
    """Equal arms: every key is shared, so each pair's own p-values are the same draw by draw."""
    rng = np.random.default_rng(7)
    outcomes, arm = rng.normal(size=(30, 3)), np.repeat(list("abc"), 10)
    joint, boole = (
        mtest.joint_test(outcomes, arm, across_pairs=a, draws=5_000, exact_limit=0) for a in ("joint", "boole")
    )
    assert np.array_equal(joint.table["p_unadjusted"], boole.table["p_unadjusted"])


@pytest.mark.parametrize("statistic", [*STATISTICS, "unscaled difference"])
@pytest.mark.parametrize("exact_limit", [0, 10**6])
def test_arms_that_share_no_stratum_are_not_compared_and_harm_no_one(statistic, exact_limit):
    """What is left of their sum is rounding: the statistic is 0, p is 1, and other hypotheses keep their p-values."""
    rng = np.random.default_rng(0)
    x = rng.normal(size=60)
    arm, site = np.array(["v", "a"] * 20 + ["c"] * 20), np.repeat([0, 1, 2], 20)
    x[arm == "a"] += 3
    table = mtest.joint_test(
        x, arm, reference="v", strata=site, statistic=statistic, draws=1024, exact_limit=exact_limit
    ).table.set_index("arm")
    assert table.loc["c", ["statistic", "p_unadjusted", "p_step_down"]].tolist() == [0.0, 1.0, 1.0]
    assert np.isnan(table.loc["c", "estimate"])
    assert table.loc["a", "p_single_step"] == table.loc["a", "p_unadjusted"] < 0.01


@pytest.mark.parametrize("scale", [1e-170, 1e-300])
@pytest.mark.parametrize("statistic", STATISTICS)
def test_very_small_numbers_are_numbers(scale, statistic):
    rng = np.random.default_rng(1)
    outcomes, arm = rng.normal(size=(20, 2)), np.repeat(["a", "b"], 10)
    plain, tiny = (mtest.joint_test(x, arm, statistic=statistic, draws=999) for x in (outcomes, outcomes * scale))
    assert np.array_equal(counts(plain), counts(tiny))


def test_nothing_is_warned_about():
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        outcomes = np.array([[0.0, 1.0], [0.0, np.nan], [0.0, 3.0], [0.0, 1.0], [0.0, 1.0], [1.0, 1.0]])
        for statistic in [*STATISTICS, "unscaled difference"]:
            for exchange in ("within-pair", "all-arms"):
                mtest.joint_test(outcomes, list("aabbcc"), statistic=statistic, exchange=exchange, draws=99)
