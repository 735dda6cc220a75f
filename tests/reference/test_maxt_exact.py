"""Exact joint max-T by enumeration: equal counts, column by column.

These are own constructions on open data, made by plain loops before the engine was: anchors, not outside evidence.
"""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest
from scipy import stats

import mtest

COLUMNS = ("p_unadjusted", "p_single_step", "p_step_down")


@pytest.fixture(scope="module")
def hand(source):
    return source("hand_maxt")


@pytest.fixture(scope="module")
def hand_results(hand, two_arms):
    data = hand["data"]
    return {
        key: two_arms(data["treated"], data["control"], statistic=statistic)
        for key, statistic in (("difference", "unscaled difference"), ("t", "pooled"))
    }


@pytest.mark.parametrize("column", COLUMNS)
@pytest.mark.parametrize("key", ["difference", "t"])
def test_hand_counts(hand, hand_results, counts_of, key, column):
    assert counts_of(hand_results[key], column) == hand[key][column]


@pytest.mark.parametrize("key", ["difference", "t"])
def test_hand_statistics(hand, hand_results, key):
    assert hand_results[key].table["statistic"].to_numpy() == pytest.approx(hand[key]["statistic"], rel=5e-8)


@pytest.fixture(scope="module")
def polyps(open_data):
    data = open_data("medicaldata", "polyps")
    return data[data["number12m"].notna()]


@pytest.fixture(scope="module")
def polyp_results(polyps):
    arm = polyps["treatment"].to_numpy()
    months = polyps[["number3m", "number12m"]].to_numpy(dtype=float)
    change = np.log(months / polyps[["baseline"]].to_numpy())
    ranks = stats.rankdata(months, axis=0)
    asked = {
        "t": (change, "pooled"),
        "difference": (change, "unscaled difference"),
        "ranks": (ranks, "unscaled difference"),
    }
    return {
        key: mtest.joint_test(values, arm, reference="placebo", statistic=statistic)
        for key, (values, statistic) in asked.items()
    }


@pytest.mark.parametrize(
    "key, column",
    [
        (key, column)
        for key in ("t", "difference", "ranks")
        for column in COLUMNS
        if (key, column) != ("difference", COLUMNS[0])
    ],
)
def test_polyps_counts(source, polyp_results, counts_of, key, column):
    """9 v 11: unscaled, the noisier endpoint swamps the other (27249 v 385 of 167960); ranks are unstandardised."""
    wanted = source("giardiello_1993_polyps")
    assert polyp_results[key].n_draws == wanted["relabellings"]["n"]
    assert counts_of(polyp_results[key], column) == wanted[key][column]


@pytest.mark.parametrize("key", ["t", "difference"])
def test_polyps_statistics(source, polyp_results, key):
    """Published unsigned, to seven decimals."""
    wanted = source("giardiello_1993_polyps")[key]["statistic"]
    assert np.abs(polyp_results[key].table["statistic"].to_numpy()) == pytest.approx(wanted, abs=5.001e-8)


@pytest.fixture(scope="module")
def rank_sum_of_both(polyps):
    """O'Brien (1984): each subject's ranks added over the endpoints."""
    ranks = stats.rankdata(polyps[["number3m", "number12m"]].to_numpy(dtype=float), axis=0).sum(axis=1)
    return ranks, polyps["treatment"].to_numpy()


def test_polyps_obrien_exact_one_sided(source, rank_sum_of_both, counts_of):
    result = mtest.joint_test(*rank_sum_of_both, reference="placebo", statistic="difference", alternative="less")
    assert counts_of(result, "p_unadjusted") == [source("giardiello_1993_polyps")["rank_sum_of_both"]["fewer"]]


def test_polyps_obrien_exact_two_sided(source, rank_sum_of_both):
    result = mtest.joint_test(*rank_sum_of_both, reference="placebo", statistic="difference")
    wanted = source("giardiello_1993_polyps")["rank_sum_of_both"]["p_two_sided"]
    assert result.table["p_unadjusted"][0] == pytest.approx(wanted, abs=1e-9)


def test_polyps_obrien_t(source, rank_sum_of_both):
    result = mtest.joint_test(*rank_sum_of_both, reference="placebo", statistic="pooled")
    wanted = source("giardiello_1993_polyps")["rank_sum_of_both"]["t"]
    assert abs(result.table["statistic"][0]) == pytest.approx(wanted, abs=1e-9)


@pytest.fixture(scope="module")
def scurvy_result(source, open_data):
    data = open_data("medicaldata", "scurvy")
    severity = data[source("lind_scurvy")["citrus"]["endpoints"]].apply(lambda column: column.str[0].astype(int))
    arm = np.where(data["treatment"] == "citrus", "citrus", "rest")
    return mtest.joint_test(severity, arm, reference="rest", statistic="unscaled difference", alternative="less")


@pytest.mark.parametrize("column", COLUMNS)
def test_scurvy_counts(source, scurvy_result, counts_of, column):
    wanted = source("lind_scurvy")["citrus"]
    assert scurvy_result.n_draws == wanted["relabellings"]
    assert counts_of(scurvy_result, column) == wanted[column]


def test_scurvy_differences(source, scurvy_result):
    wanted = source("lind_scurvy")["citrus"]["difference"]
    assert scurvy_result.table["statistic"].to_numpy() == pytest.approx(wanted, rel=1e-12)


@pytest.fixture(scope="module")
def scurvy_six_arms(source, open_data):
    """Every other arm less citrus, twenty differences, all arms relabelled; drawn, 7484400 being many."""
    data = open_data("medicaldata", "scurvy")
    severity = data[source("lind_scurvy")["citrus"]["endpoints"]].apply(lambda column: column.str[0].astype(int))
    return mtest.joint_test(
        severity,
        data["treatment"],
        reference="citrus",
        statistic="unscaled difference",
        alternative="greater",
        exchange="all-arms",
        draws=100_000,
    )


def test_scurvy_six_arms_single_step(source, scurvy_six_arms, sampling_limit):
    """P(largest of 20 differences >= d) from all 62370 distinct relabelings, for each difference that was observed."""
    exact = source("lind_scurvy")["six_arms"]
    table = scurvy_six_arms.table
    p = np.array([exact["at_least"][f"{d:g}"] for d in table["statistic"]]) / exact["relabellings"]
    assert np.all(np.abs(table["p_single_step"] - p) <= sampling_limit(p, scurvy_six_arms.n_draws))


@pytest.fixture(scope="module")
def means(open_data):
    data = open_data("carData", "OBrienKaiser")
    frame = {phase: data[[f"{phase}.{k}" for k in range(1, 6)]].mean(axis=1) for phase in ("pre", "post", "fup")}
    return pd.DataFrame(frame), pd.Categorical(data["treatment"], ["control", "A", "B"])


def _all_arms(values, arm, statistic):
    return mtest.joint_test(values, arm, statistic=statistic, exchange="all-arms", exact_limit=2_000_000)


@pytest.fixture(scope="module")
def change_results(means):
    values, arm = means
    change = pd.DataFrame({"post": values["post"] - values["pre"], "fup": values["fup"] - values["pre"]})
    return {
        key: _all_arms(change, arm, statistic) for key, statistic in (("fixed", "difference"), ("pooled3", "pooled"))
    }


@pytest.mark.parametrize("column", COLUMNS)
@pytest.mark.parametrize("key", ["fixed", "pooled3"])
def test_three_arms_counts(source, change_results, counts_of, key, column):
    """E4: six hypotheses, every count of 1441440."""
    assert counts_of(change_results[key], column) == source("obrien_kaiser_1985")[f"E4_{key}"][column]


def test_three_arms_number_of_relabellings(source, change_results):
    assert change_results["fixed"].n_draws == source("obrien_kaiser_1985")["relabellings"]["n"]


def test_three_arms_pooled_t(source, change_results):
    wanted = source("obrien_kaiser_1985")["E4_pooled3"]["statistic"]
    assert np.abs(change_results["pooled3"].table["statistic"].to_numpy()) == pytest.approx(wanted, abs=5.001e-8)


@pytest.fixture(scope="module")
def level_results(means):
    values, arm = means
    return {
        key: _all_arms(values, arm, statistic) for key, statistic in (("fixed", "difference"), ("pooled3", "pooled"))
    }


@pytest.mark.parametrize("column", ["unadjusted", "single_step"])
@pytest.mark.parametrize("key", ["fixed", "pooled3"])
def test_nine_hypotheses(source, level_results, counts_of, key, column):
    """E5: B against control at follow-up, among nine."""
    count = counts_of(level_results[key], f"p_{column}")[7]
    assert count == source("obrien_kaiser_1985")["E5_B_control_fup"][f"{key}_{column}"]


@pytest.fixture(scope="module")
def post_minus_pre(means):
    values, arm = means
    return (values["post"] - values["pre"]).to_numpy(), arm


def test_within_pair_counts(source, post_minus_pre):
    """E6: each pair relabelled among its own subjects."""
    wanted = source("obrien_kaiser_1985")["E6_post_minus_pre"]
    result = mtest.joint_test(*post_minus_pre, statistic="difference", exchange="within-pair", across_pairs="boole")
    assert [n for _, n in result.n_distinct] == wanted["within_pair_relabellings"]
    counts = result.table["p_unadjusted"].to_numpy() * wanted["within_pair_relabellings"]
    assert counts == pytest.approx(wanted["within_pair_count"], abs=1e-6)


@pytest.fixture(scope="module")
def one_endpoint_all_arms(post_minus_pre):
    return _all_arms(*post_minus_pre, "difference")


def test_global_maximum_count(source, one_endpoint_all_arms, counts_of):
    """E6: the largest of the three scaled differences, all arms relabelled."""
    wanted = source("obrien_kaiser_1985")["E6_post_minus_pre"]["global_maximum"]
    assert min(counts_of(one_endpoint_all_arms, "p_single_step")) == wanted


def test_closed_test_of_three_pairs(source, post_minus_pre, one_endpoint_all_arms):
    """E6: a pair is rejected if the global test and its own reject: the larger p. Three arms have no other subsets."""
    own = mtest.joint_test(*post_minus_pre, statistic="difference", across_pairs="boole").table["p_unadjusted"]
    everyone = one_endpoint_all_arms.table["p_single_step"].min()
    wanted = source("obrien_kaiser_1985")["E6_post_minus_pre"]["closed"]
    assert np.maximum(own.to_numpy(), everyone) == pytest.approx(wanted, abs=1e-9)
