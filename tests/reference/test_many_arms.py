"""Several arms of one endpoint: Dunnett, Tukey, analysis of variance."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest
from scipy import stats

import mtest

DRAWS = 50 * 1024


def _arms(groups, names):
    sizes = [len(g) for g in groups]
    return np.concatenate(groups), pd.Categorical(np.repeat(names, sizes), names)


def _dunnett_p(t, sizes, df) -> np.ndarray:
    """Return the two-sided p of max |t| against a reference, by quadrature (Dunnett 1955).

    t : (pair,) ; sizes : (arm,), reference first. Given the reference's mean and the pooled variance the pairs are
    independent: integrate over both.
    """
    b = np.sqrt(np.array(sizes[1:]) / (np.array(sizes[1:]) + sizes[0]))
    z, weight_z = np.polynomial.legendre.leggauss(200)
    z, weight_z = 8.5 * z, 8.5 * weight_z * stats.norm.pdf(8.5 * z)
    u, weight_u = np.polynomial.legendre.leggauss(200)
    low, high = np.sqrt(stats.chi2.ppf([1e-14, 1 - 1e-14], df) / df)
    s = low + (high - low) * (u + 1) / 2
    weight_s = weight_u * (high - low) / 2 * stats.chi2.pdf(s**2 * df, df) * 2 * s * df
    inside = np.ones((len(np.atleast_1d(t)), len(s), len(z)))
    for share in b:
        shift, spread = share * z[None, None, :], np.sqrt(1 - share**2)
        c = np.abs(np.atleast_1d(t))[:, None, None] * s[None, :, None]
        inside *= stats.norm.cdf((c - shift) / spread) - stats.norm.cdf((-c - shift) / spread)
    return 1 - np.einsum("tsz,s,z->t", inside, weight_s, weight_z)


@pytest.fixture(scope="module")
def blood(source):
    data = source("dunnett_1955_blood")["data"]
    return _arms([data["control"], data["a"], data["b"]], ["control", "A", "B"])


@pytest.fixture(scope="module")
def fabric(source):
    data = source("dunnett_1955_fabric")["data"]
    groups = [data[k] for k in ("standard", "one", "two", "three")]
    return _arms(groups, ["standard", "one", "two", "three"])


def _pooled_t(values, arm, reference=None) -> np.ndarray:
    result = mtest.joint_test(values, arm, reference=reference, statistic="pooled", exchange="all-arms", draws=99)
    return result.table["statistic"].to_numpy()


def test_blood_counts_t(source, blood, printed):
    t = _pooled_t(*blood, reference="control")
    assert list(t) == [printed(text) for text in source("dunnett_1955_blood")["printed"]["t"]]


def test_fabric_t(source, fabric, printed):
    t = _pooled_t(*fabric, reference="standard")
    assert list(t) == [printed(text) for text in source("dunnett_1955_fabric")["printed"]["t"]]


def test_blood_counts_p(source, blood):
    """Our t, referred to Dunnett's distribution, gives the quadrature's p."""
    p = _dunnett_p(_pooled_t(*blood, reference="control"), (6, 4, 5), 12)
    assert p == pytest.approx(source("dunnett_1955_blood")["formula"]["p_two_sided"], abs=1e-6)


def test_fabric_p(source, fabric):
    p = _dunnett_p(_pooled_t(*fabric, reference="standard"), (3, 3, 3, 3), 8)
    assert p == pytest.approx(source("dunnett_1955_fabric")["formula"]["p_two_sided"], abs=1e-6)


def _normal_arms(t, sizes) -> tuple[np.ndarray, pd.Categorical]:
    """Return arms of normal quantiles with unit variance whose t against the first arm are as given."""
    groups = [np.zeros(0)] * len(sizes)
    for k, n in enumerate(sizes):
        z = stats.norm.ppf((np.arange(n) + 0.5) / n)
        shift = 0.0 if k == 0 else t[k - 1] * np.sqrt(1 / n + 1 / sizes[0])
        groups[k] = z / z.std(ddof=1) + shift
    return _arms(groups, [f"arm {k}" for k in range(len(sizes))])


@pytest.mark.parametrize("name, sizes", [("dunnett_1955_blood", (6, 4, 5)), ("dunnett_1955_fabric", (3, 3, 3, 3))])
def test_max_t_tends_to_dunnett(source, sampling_limit, name, sizes):
    """Dunnett's t and allocation in arms 40 times as large: max-T by all-arms relabelling is his p for that size.

    Allowance 1 / N besides the sampling limit: a relabelling distribution differs from the normal-theory one in the
    fourth moments, of the order of 1 / N.
    """
    t, sizes = source(name)["printed"]["t"], tuple(40 * n for n in sizes)
    values, arm = _normal_arms([float(x) for x in t], sizes)
    result = mtest.joint_test(
        values, arm, reference="arm 0", statistic="pooled", exchange="all-arms", draws=DRAWS, seed=3
    )
    observed = result.table["statistic"].to_numpy()
    p = _dunnett_p(observed, sizes, len(values) - len(sizes))
    difference = np.abs(result.table["p_single_step"].to_numpy() - p)
    assert np.all(difference <= sampling_limit(p, DRAWS) + 1 / len(values))


@pytest.fixture(scope="module")
def four_arms():
    """Invented: four arms of 200 normal values, means a little apart; seed 20."""
    rng = np.random.default_rng(20)
    return [rng.normal(shift, 1, size=200) for shift in (0.0, 0.1, 0.2, 0.25)]


def test_scipy_dunnett(four_arms, sampling_limit):
    """Single-step max-T against one reference, equal arms of 200. Allowance 2 % of p: scipy's integral is quasi-random
    (0.5 % off in the tail of Dunnett's blood counts); and 1 / N as in `test_max_t_tends_to_dunnett`."""
    oracle = stats.dunnett(*four_arms[1:], control=four_arms[0], rng=np.random.default_rng(1)).pvalue
    values, arm = _arms(four_arms, ["a", "b", "c", "d"])
    result = mtest.joint_test(values, arm, reference="a", statistic="pooled", exchange="all-arms", draws=DRAWS)
    difference = np.abs(result.table["p_single_step"].to_numpy() - oracle)
    assert np.all(difference <= sampling_limit(oracle, DRAWS) + 0.02 * oracle + 1 / len(values))


@pytest.mark.parametrize("statistic", ["welch", "pooled", "difference"])
def test_within_pair_max_t_is_dunnett(four_arms, sampling_limit, statistic):
    """Pairs relabelled apart with shared keys: equal arms keep the correlation 1/2, so max-T is still Dunnett's.

    Each pair's t has its own variance, unlike Dunnett's, so our own t is referred to his distribution. "difference" is
    t / sqrt(1 + t^2 / df) up to its divisor, and is taken back to t first. Allowance 1 / n of an arm: each variance
    comes from two arms only, and its error is not shared.
    """
    values, arm = _arms(four_arms, ["a", "b", "c", "d"])
    result = mtest.joint_test(values, arm, reference="a", statistic=statistic, draws=DRAWS)
    t = result.table["statistic"].to_numpy()
    if statistic == "difference":
        t = t * np.sqrt(398 / (399 - t**2))
    oracle = _dunnett_p(t, (200,) * 4, 398)
    difference = np.abs(result.table["p_single_step"].to_numpy() - oracle)
    assert np.all(difference <= sampling_limit(oracle, DRAWS) + 1 / 200)


def test_scipy_tukey(four_arms, sampling_limit):
    """Single-step max-T over all pairs, all arms relabelled; allowance 1 / N."""
    matrix = stats.tukey_hsd(*four_arms).pvalue
    oracle = np.array([matrix[i, j] for i in range(4) for j in range(i + 1, 4)])
    values, arm = _arms(four_arms, ["a", "b", "c", "d"])
    result = mtest.joint_test(values, arm, statistic="pooled", exchange="all-arms", draws=DRAWS)
    difference = np.abs(result.table["p_single_step"].to_numpy() - oracle)
    assert np.all(difference <= sampling_limit(oracle, DRAWS) + 1 / len(values))


@pytest.fixture(scope="module")
def plants(open_data):
    data = open_data("datasets", "PlantGrowth")
    return mtest.joint_test(
        data["weight"],
        pd.Categorical(data["group"], ["ctrl", "trt1", "trt2"]),
        statistic="pooled",
        exchange="all-arms",
        draws=200_000,
    )


def test_plants_t(source, plants):
    wanted = source("plantgrowth")["formula"]["abs_t"]
    assert np.abs(plants.table["statistic"].to_numpy()) == pytest.approx(wanted, abs=5.001e-8)


def test_plants_hsd_p(source, plants, printed):
    """Our t times sqrt 2, referred to the studentised range, gives Tukey's printed p."""
    p = stats.studentized_range.sf(np.sqrt(2) * np.abs(plants.table["statistic"].to_numpy()), 3, 27)
    # 1e-6 more than the printed half unit: the reference's own integral is no better.
    wanted = [pytest.approx(float(text), abs=1e-6) for text in source("plantgrowth")["printed"]["p_hsd"]]
    assert list(p) == wanted


def test_plants_max_t_near_hsd(source, plants, sampling_limit):
    """The permutation twin of Tukey's test: sampling limit plus 0.002, as the source states."""
    record = source("plantgrowth")
    hsd = np.array([float(text) for text in record["printed"]["p_hsd"]])
    difference = np.abs(plants.table["p_single_step"].to_numpy() - hsd)
    assert np.all(difference <= sampling_limit(hsd, plants.n_draws) + record["twin"]["allowance"])


def test_plants_max_t_twin(source, plants, sampling_limit):
    """Another program's draws of the same p: only the sampling error of both, no allowance."""
    twin = source("plantgrowth")["twin"]
    p = np.array(twin["p"])
    difference = np.abs(plants.table["p_single_step"].to_numpy() - p)
    assert np.all(difference <= sampling_limit(p, plants.n_draws, twin["draws"]))


@pytest.fixture(scope="module")
def headache(source):
    return _arms(source("scipy_tukey_example")["data"]["groups"], ["0", "1", "2"])


def test_scipy_tukey_example(source, headache, printed):
    record = source("scipy_tukey_example")
    p = stats.studentized_range.sf(np.sqrt(2) * np.abs(_pooled_t(*headache)), 3, 12)
    assert p == pytest.approx(record["formula"]["p"], abs=1e-6)
    assert list(p) == [printed(text) for text in record["printed"]["p"]]


@pytest.fixture(scope="module")
def anorexia(open_data):
    data = open_data("MASS", "anorexia")
    return data["Postwt"] - data["Prewt"], pd.Categorical(data["Treat"], ["Cont", "CBT", "FT"])


def test_anorexia_tukey_p(source, anorexia, printed):
    """CBT-Cont, FT-Cont, FT-CBT: unequal arms (Tukey & Kramer)."""
    p = stats.studentized_range.sf(np.sqrt(2) * np.abs(_pooled_t(*anorexia)), 3, 69)
    assert list(p) == [printed(text) for text in source("anorexia")["printed"]["p_tukey"]]


def test_anorexia_means(source, anorexia, printed):
    """Differences of the printed means, each within the sum of their half units."""
    cont, cbt, ft = (float(text) for text in source("anorexia")["printed"]["means"])
    estimate = mtest.joint_test(*anorexia, statistic="pooled", draws=99).table["estimate"].to_numpy()
    assert estimate == pytest.approx([cbt - cont, ft - cont, ft - cbt], abs=1e-4)


@pytest.fixture(scope="module")
def drinking(source):
    """Return M^2 of malformed against not, with the published scores and with equally spaced ones."""
    data = source("graubard_korn_1987")["data"]
    level = np.concatenate([np.repeat(np.arange(5), data[arm]) for arm in ("absent", "present")])
    values = np.column_stack([np.array(data["scores"])[level], level])
    arm = np.repeat(["absent", "present"], [sum(data["absent"]), sum(data["present"])])
    result = mtest.joint_test(values, arm, reference="absent", statistic="difference", draws=99)
    return dict(zip(("m2", "m2_equal_spacing"), result.table["statistic"].to_numpy() ** 2))


def test_alcohol_and_malformation_trend(source, drinking, printed):
    """Cochran & Armitage's M^2 is our squared standardised difference of the drinking scores."""
    assert drinking["m2"] == printed(source("graubard_korn_1987")["printed"]["m2"])


@pytest.mark.parametrize("key", ["m2", "m2_equal_spacing"])
def test_alcohol_and_malformation_trend_digits(source, drinking, key):
    assert drinking[key] == pytest.approx(source("graubard_korn_1987")["formula"][key], abs=1e-9)


def test_tonsils_trend(source, printed):
    """Armitage's trend statistic divides by N where the relabelling variance divides by N - 1."""
    record = source("armitage_1955")
    counts = [record["data"]["carriers"], record["data"]["others"]]
    values = np.concatenate([np.repeat(np.arange(3), c) for c in counts])
    arm = np.repeat(["carrier", "other"], [sum(c) for c in counts])
    z = mtest.joint_test(values, arm, reference="other", statistic="difference", draws=99).table["statistic"][0]
    trend = z**2 * len(values) / (len(values) - 1)
    assert trend == printed(record["printed"]["trend"])
    assert trend == pytest.approx(record["formula"]["trend"], abs=1e-9)
