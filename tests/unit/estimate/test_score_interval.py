"""Score intervals: published limits, statsmodels, a numerical maximum of the likelihood, and the test they invert."""

import itertools
import math
import warnings

import pytest
from scipy import optimize, stats
from statsmodels.stats.proportion import confint_proportions_2indep

from mtest.estimate.score_interval import Counts, _difference_z, score_limits


def counts(events_arm, n_arm, events_reference, n_reference):
    return Counts(
        events_arm=float(events_arm),
        n_arm=float(n_arm),
        events_reference=float(events_reference),
        n_reference=float(n_reference),
    )


@pytest.mark.parametrize(
    ("table", "published"),
    [((56, 70, 48, 80), (0.0533, 0.3377)), ((9, 10, 3, 10), (0.1821, 0.8370))],
)
def test_difference_has_the_published_limits(table, published):
    """Newcombe 1998, Statistics in Medicine 17:873, Table II, method 5 (Mee), from memory."""
    assert score_limits("difference", counts(*table), level=0.95) == pytest.approx(published, abs=5e-5)


@pytest.mark.parametrize("table", [(56, 70, 48, 80), (9, 10, 3, 10), (1, 7, 5, 90), (2, 30, 2, 8)])
@pytest.mark.parametrize("value", [-0.7, -0.2, 0.05, 0.6])
def test_constrained_proportion_maximises_the_likelihood(table, value):
    """Against a bounded numerical maximiser, which knows nothing of the cubic."""
    x1, n1, x0, n0 = table

    def loss(p):
        q = p + value
        return -(x1 * math.log(q) + (n1 - x1) * math.log(1 - q) + x0 * math.log(p) + (n0 - x0) * math.log(1 - p))

    bounds = (max(0.0, -value) + 1e-12, min(1.0, 1 - value) - 1e-12)
    p = optimize.minimize_scalar(loss, bounds=bounds, method="bounded", options={"xatol": 1e-12}).x
    spread = math.sqrt((p + value) * (1 - p - value) / n1 + p * (1 - p) / n0)
    # The maximiser finds p to the square root of the precision of the likelihood.
    assert _difference_z(counts(*table), value) == pytest.approx((x1 / n1 - x0 / n0 - value) / spread, rel=1e-6)


@pytest.mark.parametrize(("contrast", "compare"), [("ratio", "ratio"), ("odds ratio", "odds-ratio")])
@pytest.mark.parametrize("table", [(56, 70, 48, 80), (9, 10, 3, 10), (6, 7, 2, 7), (30, 100, 45, 300)])
def test_ratio_limits_agree_with_statsmodels(contrast, compare, table):
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        reference = confint_proportions_2indep(*table, method="score", compare=compare, correction=False)
    # Their root finder stops at 2e-12 on the limit's own scale.
    assert score_limits(contrast, counts(*table), level=0.95) == pytest.approx(reference, rel=1e-9)


@pytest.mark.parametrize("sizes", [(1, 1), (1, 6), (2, 3), (7, 4), (9, 9)])
@pytest.mark.parametrize(("contrast", "null"), [("difference", 0), ("ratio", 1), ("odds ratio", 1)])
def test_interval_excludes_no_effect_exactly_where_pearson_rejects(sizes, contrast, null):
    """All tables of the sizes, with 0.90 and 0.99; none lies within 1e-6 of the critical value."""
    n1, n0 = sizes
    for x1, x0, level in itertools.product(range(n1 + 1), range(n0 + 1), (0.90, 0.99)):
        share = (x1 + x0) / (n1 + n0)
        spread = share * (1 - share) * (1 / n1 + 1 / n0)
        chi2 = (x1 / n1 - x0 / n0) ** 2 / spread if spread else 0.0
        critical = stats.chi2.isf(1 - level, 1)
        assert abs(chi2 - critical) > 1e-6
        low, high = score_limits(contrast, counts(x1, n1, x0, n0), level=level)
        if not math.isnan(low):
            assert (chi2 > critical) == (not low <= null <= high)


def test_estimate_on_the_edge_is_its_own_limit():
    assert score_limits("difference", counts(5, 5, 0, 4), level=0.95)[1] == 1.0
    assert score_limits("ratio", counts(0, 5, 3, 4), level=0.95)[0] == 0.0
    assert score_limits("odds ratio", counts(5, 5, 3, 4), level=0.95)[1] == math.inf


def test_large_arms_are_no_trouble():
    """With a million a side the score interval is the normal one to within its own width's thousandth."""
    low, high = score_limits("difference", counts(5e5, 1e6, 4.99e5, 1e6), level=0.95)
    reach = 1.959963984540054 * math.sqrt(0.5 / 1e6)
    assert (low, high) == pytest.approx((0.001 - reach, 0.001 + reach), abs=2e-3 * reach)
