"""Strata: Cochran-Mantel-Haenszel, mean scores, van Elteren, on published and open data."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest
from scipy import stats
from statsmodels.stats.contingency_tables import StratifiedTable

import mtest
from mtest.estimate.binary import odds_ratio
from mtest.estimate.model_test import model_p


def _statistic(values, arm, reference, strata, statistic) -> float:
    result = mtest.joint_test(
        values, arm, reference=reference, strata=strata, statistic=statistic, draws=99, exact_limit=0
    )
    return result.table["statistic"][0]


def _codes(labels) -> np.ndarray:
    return pd.factorize(pd.Series(labels))[0]


@pytest.fixture(scope="module")
def rabbits(source):
    """Return cured, delayed (the reference is: no delay), level; one row per rabbit."""
    rows = [
        (cured, delayed, level)
        for level, table in enumerate(source("rabbits_penicillin")["data"]["tables"])
        for delayed, counts in enumerate(table)
        for cured, n in zip((1, 0), counts, strict=True)
        for _ in range(n)
    ]
    return np.array(rows, dtype=float).T


def test_rabbits_cmh(source, rabbits):
    cured, delayed, level = rabbits
    z = _statistic(cured, delayed, 1.0, level, "score")
    assert z**2 == pytest.approx(source("rabbits_penicillin")["formula"]["cmh_uncorrected"], abs=1e-9)


def test_rabbits_cured_without_delay(source, rabbits):
    cured, delayed, _ = rabbits
    assert cured[delayed == 0].sum() == source("rabbits_penicillin")["counts"]["cured_without_delay"]


def test_rabbits_cmh_printed(source, rabbits, printed):
    """Published with continuity correction: half a rabbit off |S - E(S)|, in SDs that our z gives."""
    cured, delayed, level = rabbits
    z = _statistic(cured, delayed, 1.0, level, "score")
    observed = cured[delayed == 0].sum()
    expected = sum(cured[level == k].sum() * (delayed[level == k] == 0).mean() for k in range(5))
    distance = abs(observed - expected)
    record = source("rabbits_penicillin")
    corrected = (z * (distance - 0.5) / distance) ** 2
    assert corrected == printed(record["printed"]["cmh_with_continuity"])
    assert stats.chi2.sf(corrected, 1) == printed(record["printed"]["p_cmh_with_continuity"])


def test_rabbits_model_p(source, rabbits):
    cured, delayed, level = rabbits
    p, name = model_p("binary", "score", values=cured, in_arm=delayed == 0, stratum=level.astype(int))
    wanted = stats.chi2.sf(source("rabbits_penicillin")["formula"]["cmh_uncorrected"], 1)
    assert (p, name) == (pytest.approx(wanted, abs=1e-9), "Cochran-Mantel-Haenszel")


def test_rabbits_odds_ratio(source, rabbits):
    cured, delayed, level = rabbits
    effect = odds_ratio(cured, delayed == 0, stratum=level.astype(int))
    assert effect.estimate == pytest.approx(float(source("rabbits_penicillin")["printed"]["odds_ratio"]), rel=1e-12)


@pytest.mark.parametrize("alternative, key", [("greater", "p_exact_one_sided"), ("two-sided", "p_exact_two_sided")])
def test_rabbits_exact_p(source, rabbits, sampling_limit, alternative, key):
    """The exact conditional test, by drawn relabellings: 3.6e14 are too many to enumerate."""
    cured, delayed, level = rabbits
    result = mtest.joint_test(
        cured, delayed, reference=1.0, strata=level, statistic="score", alternative=alternative, draws=200_000
    )
    exact = source("rabbits_penicillin")["formula"][key]
    assert result.table["p_unadjusted"][0] == pytest.approx(exact, abs=float(sampling_limit(exact, result.n_draws)))


def test_rabbits_exact_p_enumerated(source, rabbits, counts_of):
    """Levels 2 and 4 alone have 924^2 relabellings: equal to the product of their hypergeometric laws."""
    cured, delayed, level = rabbits
    inside = np.isin(level, (1, 3))
    result = mtest.joint_test(
        cured[inside],
        delayed[inside],
        reference=1.0,
        strata=level[inside],
        statistic="score",
        alternative="greater",
        exact_limit=924**2,
    )
    # Cured among the six without delay: hypergeometric(12, 3, 6) and (12, 11, 6); observed 3 + 5.
    x, y = np.arange(4), np.arange(7)
    law = np.outer(stats.hypergeom(12, 3, 6).pmf(x), stats.hypergeom(12, 11, 6).pmf(y))
    wanted = law[np.add.outer(x, y) >= 8].sum() * 924**2
    assert counts_of(result, "p_unadjusted") == [round(wanted)]


@pytest.fixture(scope="module")
def arthritis(open_data):
    """The level "None" of Improved is read as missing, and refilled."""
    data = open_data("vcd", "Arthritis")
    improved = data["Improved"].fillna("None").map({"None": 0, "Some": 1, "Marked": 2})
    return improved.to_numpy(dtype=float), data["Treatment"].to_numpy(), data["Sex"].to_numpy()


@pytest.mark.parametrize(
    "key, sex, treatment",
    [
        ("female_placebo", "Female", "Placebo"),
        ("female_active", "Female", "Treated"),
        ("male_placebo", "Male", "Placebo"),
        ("male_active", "Male", "Treated"),
    ],
)
def test_arthritis_table(source, arthritis, key, sex, treatment):
    """The refilled data are the published table."""
    inside = (arthritis[2] == sex) & (arthritis[1] == treatment)
    counts = np.bincount(arthritis[0][inside].astype(int), minlength=3)
    assert list(counts) == source("koch_edwards_1988")["counts"][key]


@pytest.mark.parametrize(
    "statistic, stratified, key",
    [("difference", True, "mean_score"), ("rank", True, "van_elteren"), ("difference", False, "unstratified")],
)
def test_arthritis_q(source, arthritis, statistic, stratified, key):
    improved, treatment, sex = arthritis
    z = _statistic(improved, treatment, "Placebo", sex if stratified else None, statistic)
    assert z**2 == pytest.approx(source("koch_edwards_1988")["formula"][key], abs=1e-8)


def test_arthritis_mean_score_printed(source, arthritis, printed):
    improved, treatment, sex = arthritis
    q = _statistic(improved, treatment, "Placebo", sex, "difference") ** 2
    assert q == printed(source("koch_edwards_1988")["printed"]["mean_score"])


def test_arthritis_model_p(source, arthritis):
    improved, treatment, sex = arthritis
    p, name = model_p("ordinal", "rank", values=improved, in_arm=treatment == "Treated", stratum=_codes(sex))
    wanted = source("koch_edwards_1988")["formula"]["p_van_elteren"]
    assert (p, name) == (pytest.approx(wanted, abs=1e-9), "van Elteren, normal approximation")


@pytest.fixture(scope="module")
def lanza(open_data):
    data = open_data("HSAUR", "Lanza")
    return data["classification"].to_numpy(dtype=float), data["treatment"].to_numpy(), data["study"].to_numpy()


@pytest.mark.parametrize("statistic, key", [("difference", "mean_score"), ("rank", "van_elteren")])
def test_lanza_q(source, lanza, statistic, key):
    z = _statistic(lanza[0], lanza[1], "Placebo", lanza[2], statistic)
    assert z**2 == pytest.approx(source("lanza")["formula"][key], abs=1e-7)


def test_lanza_by_study(source, lanza):
    q = [
        _statistic(lanza[0][lanza[2] == s], lanza[1][lanza[2] == s], "Placebo", None, "difference") ** 2
        for s in ("I", "II", "III", "IV")
    ]
    assert q == pytest.approx(source("lanza")["formula"]["mean_score_by_study"], abs=5e-6)


def test_lanza_model_p(source, lanza):
    """A p of 1.8e-21: to a relative 1e-9, since Q's ten digits fix no more."""
    p, _ = model_p("ordinal", "rank", values=lanza[0], in_arm=lanza[1] == "Misoprostol", stratum=_codes(lanza[2]))
    assert p == pytest.approx(stats.chi2.sf(source("lanza")["formula"]["van_elteren"], 1), rel=1e-7)


@pytest.fixture(scope="module")
def respiratory(open_data):
    """Return (subject, month) good at months 1 to 4, treatment and centre of the 111 subjects."""
    data = open_data("HSAUR", "respiratory")
    good = (data.assign(good=data["status"] == "good").pivot(index="subject", columns="month", values="good")).astype(
        float
    )
    first = data[data["month"] == 0].set_index("subject").loc[good.index]
    return good[[1, 2, 3, 4]].to_numpy(), first["treatment"].to_numpy(), first["centre"].to_numpy()


def test_respiratory_odds_ratio(source, respiratory):
    good, treatment, centre = respiratory
    ratios = [odds_ratio(good[:, k], treatment == "treatment", stratum=centre).estimate for k in range(4)]
    assert ratios == pytest.approx(source("koch_1990_respiratory")["formula"]["odds_ratio"], abs=1e-8)


def test_respiratory_chi2(source, respiratory):
    good, treatment, centre = respiratory
    result = mtest.joint_test(good, treatment, reference="placebo", strata=centre, statistic="score", draws=99)
    wanted = source("koch_1990_respiratory")["formula"]["chi2"]
    assert result.table["statistic"].to_numpy() ** 2 == pytest.approx(wanted, abs=1e-8)


def test_respiratory_is_statsmodels_cmh(respiratory):
    good, treatment, centre = respiratory
    oracle = []
    for k in range(4):
        tables = [
            [[np.sum(good[(centre == c) & (treatment == t), k] == v) for v in (1, 0)] for t in ("treatment", "placebo")]
            for c in (1, 2)
        ]
        oracle.append(StratifiedTable([np.array(t) for t in tables]).test_null_odds(correction=False).statistic)
    z = [_statistic(good[:, k], treatment, "placebo", centre, "score") for k in range(4)]
    assert np.square(z) == pytest.approx(oracle, rel=1e-12)
