"""Published exact tests of two arms, and of pairs, enumerated by the engine: equal counts."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import stats

import mtest
from mtest.estimate.model_test import model_p


def test_tea_tasting_all_cups_right_is_1_of_70(source, two_arms, counts_of):
    tea = source("fisher_1935_tea")
    milk, said = (np.array(tea["data"][k]) for k in ("milk_first", "said_so_all_right"))
    result = two_arms(said[milk == 1], said[milk == 0], statistic="score", alternative="greater")
    assert (result.n_draws, counts_of(result, "p_unadjusted")) == (
        tea["counts"]["relabellings"],
        [tea["counts"]["all_right"]],
    )


def test_tea_tasting_three_of_four_right_is_17_of_70(source, two_arms, counts_of):
    tea = source("fisher_1935_tea")
    milk, said = (np.array(tea["data"][k]) for k in ("milk_first", "said_so_three_right"))
    result = two_arms(said[milk == 1], said[milk == 0], statistic="score", alternative="greater")
    assert counts_of(result, "p_unadjusted") == [tea["counts"]["three_right"]]


@pytest.fixture
def maize(open_data):
    return open_data("boot", "darwin")["y"].to_numpy(dtype=float)


def test_maize_sum_of_differences(source, paired, maize):
    result = paired(maize, statistic="unscaled difference")
    assert result.table["estimate"][0] * 15 == pytest.approx(source("fisher_1935_maize")["counts"]["sum"], rel=1e-12)


@pytest.mark.parametrize("statistic", ["unscaled difference", "difference", "pooled", "welch"])
@pytest.mark.parametrize("alternative, key", [("greater", "one_sided"), ("two-sided", "two_sided")])
def test_maize_sign_flips(source, paired, counts_of, maize, statistic, alternative, key):
    """863 and 1726 of 32768; every statistic is a monotone function of the sum, so the counts are the same."""
    wanted = source("fisher_1935_maize")["counts"]
    result = paired(maize, statistic=statistic, alternative=alternative)
    assert (result.n_draws, counts_of(result, "p_unadjusted")) == (wanted["relabellings"], [wanted[key]])


def test_maize_patterns_above_and_equal(source, paired, counts_of, maize):
    """The lower tail holds all patterns but the 835 above; the two tails share the 28 equal ones."""
    wanted = source("fisher_1935_maize")["counts"]
    less = counts_of(paired(maize, statistic="unscaled difference", alternative="less"), "p_unadjusted")[0]
    greater = counts_of(paired(maize, statistic="unscaled difference", alternative="greater"), "p_unadjusted")[0]
    above = wanted["relabellings"] - less
    assert (above, greater - above) == (wanted["above"], wanted["equal"])


def test_maize_t(source, paired, maize, printed):
    wanted = source("fisher_1935_maize")
    t = paired(maize, statistic="welch").table["statistic"][0]
    assert t == printed(wanted["printed"]["t"])
    assert t == pytest.approx(wanted["formula"]["t"], abs=1e-9)


def test_maize_t_p(source, maize, printed):
    wanted = source("fisher_1935_maize")
    p, _ = model_p(
        "continuous",
        "welch",
        values=np.concatenate([maize, 0 * maize]),
        in_arm=np.repeat([True, False], 15),
        stratum=np.tile(np.arange(15), 2),
    )
    assert p == printed(wanted["printed"]["p_t_two_sided"])
    assert p == pytest.approx(wanted["formula"]["p_t_two_sided"], abs=1e-9)


@pytest.mark.parametrize("alternative, key", [("greater", "p_one_sided"), ("two-sided", "p_two_sided")])
def test_maize_signed_rank(source, paired, maize, alternative, key):
    wanted = source("wilcoxon_1945_maize")
    signed = np.sign(maize) * stats.rankdata(np.abs(maize))
    result = paired(signed, statistic="unscaled difference", alternative=alternative)
    assert result.exact
    assert result.table["p_unadjusted"][0] == float(wanted["printed"][key])


def test_maize_signed_rank_sums(source, paired, maize):
    wanted = source("wilcoxon_1945_maize")["counts"]
    signed = np.sign(maize) * stats.rankdata(np.abs(maize))
    estimate = paired(signed, statistic="unscaled difference").table["estimate"][0]
    assert estimate * 15 == pytest.approx(wanted["w_plus"] - wanted["w_minus"], rel=1e-12)


@pytest.mark.parametrize("statistic", ["unscaled difference", "difference", "pooled"])
@pytest.mark.parametrize("alternative, key", [("less", "lower"), ("two-sided", "two_sided")])
def test_pitman(source, two_arms, counts_of, statistic, alternative, key):
    """5 of 126 counts |deviation from the permutation mean|: the null of a difference of means is centred at 0."""
    pitman = source("pitman_1937")
    result = two_arms(pitman["data"]["a"], pitman["data"]["b"], statistic=statistic, alternative=alternative)
    wanted = pitman["counts"]
    assert (result.n_draws, counts_of(result, "p_unadjusted")) == (wanted["relabellings"], [wanted[key]])


def test_membranes_rank_sum(source, two_arms, counts_of, printed):
    membranes = source("hollander_wolfe_1973_membranes")
    result = two_arms(membranes["data"]["x"], membranes["data"]["y"], statistic="rank", alternative="greater")
    assert counts_of(result, "p_unadjusted") == [membranes["counts"]["rank_greater"]]
    assert result.table["p_unadjusted"][0] == printed(membranes["printed"]["p_greater"])


def test_membranes_u(source, two_arms):
    """P(better) times the number of pairs of subjects is Mann and Whitney's U."""
    membranes = source("hollander_wolfe_1973_membranes")
    result = two_arms(membranes["data"]["x"], membranes["data"]["y"], statistic="rank")
    assert result.table["estimate"][0] * 50 == pytest.approx(membranes["counts"]["u"], rel=1e-12)


def test_membranes_mean_difference(source, two_arms, counts_of):
    membranes = source("hollander_wolfe_1973_membranes")
    result = two_arms(membranes["data"]["x"], membranes["data"]["y"], statistic="difference", alternative="greater")
    assert counts_of(result, "p_unadjusted") == [membranes["counts"]["mean_greater"]]


@pytest.fixture
def depression(source):
    return source("hollander_wolfe_1973_depression")


def _differences(depression) -> np.ndarray:
    return np.round(np.subtract(depression["data"]["x"], depression["data"]["y"]), 3)


def test_depression_signed_rank(depression, paired, counts_of, printed):
    d = _differences(depression)
    signed = np.sign(d) * stats.rankdata(np.abs(d))
    result = paired(signed, statistic="unscaled difference", alternative="greater")
    assert counts_of(result, "p_unadjusted") == [depression["counts"]["rank_greater"]]
    assert result.table["p_unadjusted"][0] == printed(depression["printed"]["p_greater"])


def test_depression_v(depression, paired):
    """V is the sum of positive ranks: half of (sum of signed ranks + 45)."""
    d = _differences(depression)
    signed = np.sign(d) * stats.rankdata(np.abs(d))
    estimate = paired(signed, statistic="unscaled difference").table["estimate"][0]
    assert (estimate * 9 + 45) / 2 == pytest.approx(depression["counts"]["v"], rel=1e-12)


def test_depression_mean(depression, paired, counts_of):
    result = paired(_differences(depression), statistic="difference", alternative="greater")
    assert counts_of(result, "p_unadjusted") == [depression["counts"]["mean_greater"]]


def test_age_at_diagnosis(source, two_arms, counts_of, printed):
    shier = source("shier_2004")
    result = two_arms(shier["data"]["males"], shier["data"]["females"], statistic="rank")
    assert counts_of(result, "p_unadjusted") == [shier["counts"]["two_sided"]]
    assert result.table["p_unadjusted"][0] == printed(shier["printed"]["p_two_sided"])


def test_age_at_diagnosis_u(source, two_arms):
    shier = source("shier_2004")
    result = two_arms(shier["data"]["males"], shier["data"]["females"], statistic="rank")
    assert result.table["estimate"][0] * 20 == pytest.approx(shier["counts"]["u"], rel=1e-12)


@pytest.fixture
def sleep(open_data):
    data = open_data("datasets", "sleep").sort_values(["group", "ID"])
    return data.loc[data["group"] == 2, "extra"].to_numpy(), data.loc[data["group"] == 1, "extra"].to_numpy()


def test_sleep_t(source, paired, sleep, printed):
    t = paired(np.round(sleep[0] - sleep[1], 1), statistic="welch").table["statistic"][0]
    assert t == printed(source("student_1908_sleep")["printed"]["t"])


def test_sleep_t_p(source, sleep, printed):
    p, _ = model_p(
        "continuous",
        "pooled",
        values=np.concatenate(sleep),
        in_arm=np.repeat([True, False], 10),
        stratum=np.tile(np.arange(10), 2),
    )
    assert p == printed(source("student_1908_sleep")["printed"]["p_t"])


@pytest.mark.parametrize("alternative, key", [("greater", "flips_greater"), ("two-sided", "flips_two_sided")])
def test_sleep_sign_flips(source, counts_of, sleep, alternative, key):
    """The raw values are given, one of them a zero difference that is not exact in binary."""
    wanted = source("student_1908_sleep")["counts"]
    result = mtest.joint_test(
        np.concatenate(sleep),
        np.repeat(["b", "a"], 10),
        reference="a",
        strata=np.tile(np.arange(10), 2),
        statistic="difference",
        alternative=alternative,
    )
    assert (result.n_draws, counts_of(result, "p_unadjusted")) == (wanted["flips"], [wanted[key]])


def test_sleep_unpaired(source, two_arms, counts_of, sleep):
    wanted = source("student_1908_sleep")["counts"]
    result = two_arms(*sleep, statistic="difference", alternative="greater")
    assert (result.n_draws, counts_of(result, "p_unadjusted")) == (
        wanted["separations"],
        [wanted["separations_greater"]],
    )


def test_sleep_unpaired_two_sided(source, two_arms, sleep):
    result = two_arms(*sleep, statistic="difference")
    wanted = source("student_1908_sleep")["formula"]["p_separations_two_sided"]
    assert result.table["p_unadjusted"][0] == pytest.approx(wanted, abs=1e-9)


@pytest.mark.parametrize("alternative, key", [("less", "lower"), ("two-sided", "two_sided")])
def test_recovery_times(source, two_arms, counts_of, alternative, key):
    """3 of 35 and 4 of 35: two-sided is not twice one-sided."""
    ernst = source("ernst_2004")
    result = two_arms(ernst["data"]["a"], ernst["data"]["b"], statistic="unscaled difference", alternative=alternative)
    assert counts_of(result, "p_unadjusted") == [ernst["counts"][key]]


def test_recovery_times_difference(source, two_arms):
    ernst = source("ernst_2004")
    result = two_arms(ernst["data"]["a"], ernst["data"]["b"], statistic="unscaled difference")
    assert result.table["statistic"][0] == pytest.approx(ernst["counts"]["difference"], rel=1e-12)


@pytest.fixture
def room(open_data):
    data = open_data("HSAUR", "roomwidth")
    feet = (data["unit"] == "feet").to_numpy()
    return np.where(feet, data["width"], data["width"] * 3.28), feet


@pytest.mark.parametrize("statistic, key", [("pooled", "student"), ("welch", "welch")])
def test_room_width_t(source, room, printed, statistic, key):
    wanted = source("hand_1994_roomwidth")
    t = mtest.joint_test(room[0], room[1], reference=False, statistic=statistic, draws=99).table["statistic"][0]
    assert t == printed(wanted["printed"][f"t_{key}"])
    assert t == pytest.approx(wanted["formula"][f"t_{key}"], abs=1e-9)


@pytest.mark.parametrize("statistic, key", [("pooled", "student"), ("welch", "welch")])
def test_room_width_t_p(source, room, printed, statistic, key):
    wanted = source("hand_1994_roomwidth")
    p, _ = model_p("continuous", statistic, values=room[0], in_arm=room[1], stratum=np.zeros(len(room[0]), dtype=int))
    assert p == printed(wanted["printed"][f"p_{key}"])
    assert p == pytest.approx(wanted["formula"][f"p_{key}"], abs=1e-9)


def test_room_width_u(source, room):
    result = mtest.joint_test(room[0], room[1], reference=False, statistic="rank", draws=99)
    assert result.table["estimate"][0] * 69 * 44 == pytest.approx(source("hand_1994_roomwidth")["counts"]["w"])


def test_room_width_rank_p(source, room, printed):
    """The published p has a continuity correction, which ours has not: half a unit of U, in SDs that our z gives."""
    wanted = source("hand_1994_roomwidth")
    z = mtest.joint_test(room[0], room[1], reference=False, statistic="rank", draws=99).table["statistic"][0]
    distance = abs(wanted["counts"]["w"] - 69 * 44 / 2)
    p = 2 * stats.norm.sf(abs(z) * (distance - 0.5) / distance)
    assert p == printed(wanted["printed"]["p_rank_with_continuity"])
    assert p == pytest.approx(wanted["formula"]["p_rank_with_continuity"], abs=1e-9)


@pytest.fixture
def remission(open_data):
    data = open_data("MASS", "gehan")
    return data["time"].to_numpy(), data["cens"].to_numpy(), (data["treat"] == "6-MP").to_numpy(), data["pair"]


def _gehan_scores(time, event) -> np.ndarray:
    """Return (subject,) the number of subjects surely outlived less the number that surely outlived."""
    outlived = ((time[:, None] > time) | ((time[:, None] == time) & (event[:, None] < event))) & (event == 1)
    return outlived.sum(axis=1) - outlived.sum(axis=0)


def test_gehan_z(source, remission, printed):
    """Gehan's z has the permutation variance: the standardised difference of his scores."""
    time, event, treated, _ = remission
    wanted = source("freireich_1963")
    scores = _gehan_scores(time, event)
    z = mtest.joint_test(scores, treated, reference=False, statistic="difference", draws=99).table["statistic"][0]
    assert z == printed(wanted["printed"]["z_gehan"])
    assert z == pytest.approx(wanted["formula"]["z_gehan"], abs=1e-9)


def test_gehan_w(source, remission):
    """Scores add up to 0, so the difference of the two means is W (1/21 + 1/21)."""
    time, event, treated, _ = remission
    result = mtest.joint_test(_gehan_scores(time, event), treated, reference=False, statistic="difference", draws=99)
    assert result.table["estimate"][0] * 21 / 2 == pytest.approx(source("freireich_1963")["counts"]["w_gehan"])


def test_log_rank_with_permutation_variance(source, remission):
    """Scores event - Nelson-Aalen: 15.24, not the hypergeometric variance's 16.79."""
    time, event, treated, _ = remission
    hazard = {t: event[time == t].sum() / (time >= t).sum() for t in np.unique(time)}
    scores = event - np.array([sum(h for u, h in hazard.items() if u <= t) for t in time])
    z = mtest.joint_test(scores, treated, reference=False, statistic="difference", draws=99).table["statistic"][0]
    assert z**2 == pytest.approx(source("freireich_1963")["formula"]["chi2_log_rank_permutation"], abs=1e-8)


@pytest.fixture
def preference(remission) -> list[float]:
    """1 per pair that prefers 6-MP, -1 per pair that prefers placebo."""
    time, event, treated, pair = remission
    return [
        float(np.sign(_gehan_scores(time[pair == k], event[pair == k])[treated[pair == k]][0])) for k in np.unique(pair)
    ]


def test_sequential_preferences_counted(source, preference):
    wanted = source("freireich_1963")["counts"]
    assert (preference.count(1), preference.count(-1)) == (wanted["preferred_6mp"], wanted["preferred_placebo"])


def test_sequential_preferences_sign_test(source, preference, paired, counts_of):
    """The sign test by all 2^21 flips."""
    wanted = source("freireich_1963")
    result = paired(preference, statistic="difference", exact_limit=wanted["counts"]["flips"])
    exact = wanted["formula"]["p_sign_two_sided"] * wanted["counts"]["flips"]
    assert counts_of(result, "p_unadjusted") == [round(exact)]
