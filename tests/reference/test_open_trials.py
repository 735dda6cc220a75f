"""Published trials whose data are open: the counts, percentages and tests their papers print."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import stats

import mtest
from mtest.estimate.binary import risk_difference, risk_ratio
from mtest.estimate.model_test import model_p


def _one_stratum(values) -> np.ndarray:
    return np.zeros(len(values), dtype=int)


def _counts(events, inside) -> list[int]:
    present = np.isfinite(events) & inside
    return [int(events[present].sum()), int(present.sum())]


@pytest.fixture(scope="module")
def gargle(source, open_data):
    """Return (subject, time) any sore throat, NaN where missing, and who had licorice."""
    data = open_data("medicaldata", "licorice_gargle")
    score = data[source("ruetzler_2013")["endpoint"]["names"]].to_numpy(dtype=float)
    return np.where(np.isfinite(score), score > 0, np.nan), (data["treat"] == 1).to_numpy()


@pytest.mark.parametrize("time", range(3))
@pytest.mark.parametrize("arm", ["licorice", "sugar"])
def test_gargle_percent(source, gargle, printed, time, arm):
    """Printed as whole percentages."""
    record = source("ruetzler_2013")
    sore, licorice = gargle
    events, n = _counts(sore[:, time], licorice == (arm == "licorice"))
    assert [events, n] == record["endpoint"][arm][time]
    assert 100 * events / n == printed(record["printed"][f"percent_{arm}"][time])


@pytest.mark.parametrize("time", range(3))
def test_gargle_risk_ratio(source, gargle, printed, time):
    sore, licorice = gargle
    effect = risk_ratio(sore[:, time], licorice, stratum=_one_stratum(licorice))
    assert effect.estimate == printed(source("ruetzler_2013")["printed"]["risk_ratio"][time])


def test_gargle_joint_test_counts_the_available(source, gargle):
    """Missing values are counted out per endpoint and arm."""
    sore, licorice = gargle
    table = mtest.joint_test(sore, licorice, reference=False, statistic="score", draws=99).table
    record = source("ruetzler_2013")["endpoint"]
    assert list(table["n_arm"]) == [n for _, n in record["licorice"]]
    assert list(table["n_reference"]) == [n for _, n in record["sugar"]]


@pytest.fixture(scope="module")
def pancreatitis(open_data):
    data = open_data("medicaldata", "indo_rct")
    return (data["outcome"] == "1_yes").to_numpy(dtype=float), (data["rx"] == "1_indomethacin").to_numpy()


def test_pancreatitis_counts(source, pancreatitis):
    wanted = source("elmunzer_2012")["counts"]
    counts = [_counts(pancreatitis[0], pancreatitis[1]), _counts(pancreatitis[0], ~pancreatitis[1])]
    assert counts == [wanted["indomethacin"], wanted["placebo"]]


def test_pancreatitis_risk_difference(source, pancreatitis):
    """The printed percentages differ by 7.7 points; each is rounded to 0.1."""
    record = source("elmunzer_2012")["printed"]
    effect = risk_difference(*pancreatitis, stratum=_one_stratum(pancreatitis[0]))
    wanted = float(record["percent_indomethacin"]) - float(record["percent_placebo"])
    assert 100 * effect.estimate == pytest.approx(wanted, abs=0.1)


def test_pancreatitis_chi2_p(source, pancreatitis, printed):
    p, _ = model_p(
        "binary", "score", values=pancreatitis[0], in_arm=pancreatitis[1], stratum=_one_stratum(pancreatitis[0])
    )
    record = source("elmunzer_2012")
    assert p == pytest.approx(record["formula"]["p_chi2"], abs=1e-9)
    assert p == printed(record["printed"]["p"])


@pytest.mark.parametrize("alternative", ["less", "greater"])
def test_pancreatitis_relabelling_p_is_fisher(source, pancreatitis, sampling_limit, alternative):
    """One-sided, drawn: Fisher's exact p within the sampling limit."""
    wanted = source("elmunzer_2012")["counts"]
    (a, n1), (c, n0) = wanted["indomethacin"], wanted["placebo"]
    oracle = stats.fisher_exact([[a, n1 - a], [c, n0 - c]], alternative=alternative).pvalue
    result = mtest.joint_test(*pancreatitis, reference=False, statistic="score", alternative=alternative, draws=100_000)
    limit = float(sampling_limit(oracle, result.n_draws))
    assert result.table["p_unadjusted"][0] == pytest.approx(oracle, abs=limit)


@pytest.fixture(scope="module")
def tuberculosis(open_data):
    data = open_data("medicaldata", "strep_tb")
    grade = data["radiologic_6m"].str[0].astype(float).to_numpy()  # 1 death .. 6 considerable improvement
    return grade, (data["arm"] == "Streptomycin").to_numpy()


@pytest.mark.parametrize("event, grade", [("improved", 6), ("died", 1)])
def test_tuberculosis_counts(source, tuberculosis, event, grade):
    wanted = source("mrc_1948")["counts"]
    hit, treated = (tuberculosis[0] == grade).astype(float), tuberculosis[1]
    assert [_counts(hit, treated), _counts(hit, ~treated)] == [
        wanted[f"{event}_streptomycin"],
        wanted[f"{event}_control"],
    ]


@pytest.mark.parametrize("event, grade", [("improved", 6), ("died", 1)])
def test_tuberculosis_risk_difference(source, tuberculosis, event, grade):
    """The two printed percentages are whole, so their difference holds to one point."""
    treated, control = (float(text) for text in source("mrc_1948")["printed"][f"{event}_percent"])
    hit = (tuberculosis[0] == grade).astype(float)
    effect = risk_difference(hit, tuberculosis[1], stratum=_one_stratum(hit))
    assert 100 * effect.estimate == pytest.approx(treated - control, abs=1)


def test_tuberculosis_rank_p(source, tuberculosis, printed):
    """Printed with continuity correction: half a unit of U, in SDs that our z gives."""
    grade, treated = tuberculosis
    table = mtest.joint_test(grade, treated, reference=False, statistic="rank", draws=99).table
    distance = abs(table["estimate"][0] - 0.5) * 55 * 52
    p = 2 * stats.norm.sf(abs(table["statistic"][0]) * (distance - 0.5) / distance)
    assert p == printed(source("mrc_1948")["printed"]["p_rank_with_continuity"])


@pytest.mark.parametrize("event, grade", [("died", 1), ("improved", 6)])
def test_tuberculosis_fisher(source, tuberculosis, printed, event, grade):
    """Fisher's printed two-sided p from the data (scipy's rule): the data are the paper's."""
    hit, treated = tuberculosis[0] == grade, tuberculosis[1]
    table = [[np.sum(hit & t), np.sum(~hit & t)] for t in (treated, ~treated)]
    assert stats.fisher_exact(table).pvalue == printed(source("mrc_1948")["printed"][f"p_fisher_{event}"])


def test_tuberculosis_deaths_relabelling_p(tuberculosis, sampling_limit):
    """One-sided, drawn: Fisher's exact p within the sampling limit."""
    died, treated = (tuberculosis[0] == 1).astype(float), tuberculosis[1]
    oracle = stats.fisher_exact([[4, 51], [14, 38]], alternative="less").pvalue
    result = mtest.joint_test(died, treated, reference=False, statistic="score", alternative="less", draws=100_000)
    limit = float(sampling_limit(oracle, result.n_draws))
    assert result.table["p_unadjusted"][0] == pytest.approx(oracle, abs=limit)


@pytest.fixture(scope="module")
def polyps(open_data):
    data = open_data("medicaldata", "polyps")
    return data, (data["treatment"] == "sulindac").to_numpy()


@pytest.mark.parametrize("month", ["number3m", "number12m"])
def test_polyps_difference_of_means(source, polyps, month):
    """The two printed means are rounded to 0.001."""
    data, treated = polyps
    treated_mean, control_mean = (float(text) for text in source("giardiello_1993_polyps")["means"][month])
    table = mtest.joint_test(data[month], treated, reference=False, statistic="welch", draws=99).table
    assert table["estimate"][0] == pytest.approx(treated_mean - control_mean, abs=0.001)


@pytest.mark.parametrize("month", ["number3m", "number12m"])
def test_polyps_rank_p(source, polyps, printed, month):
    """With continuity correction: half a unit of U, in SDs that our z gives; two missing at 12 months."""
    data, treated = polyps
    table = mtest.joint_test(data[month], treated, reference=False, statistic="rank", draws=99).table
    distance = abs(table["estimate"][0] - 0.5) * table["n_arm"][0] * table["n_reference"][0]
    p = 2 * stats.norm.sf(abs(table["statistic"][0]) * (distance - 0.5) / distance)
    assert p == printed(source("giardiello_1993_polyps")["rank_with_continuity"][month])
