"""Risk difference, risk ratio and odds ratio: score intervals in one stratum, Mantel-Haenszel over several."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from scipy import stats

from mtest.estimate.pair import Pair, available_pair, stratum_sums
from mtest.estimate.score_interval import Counts, score_limits
from mtest.results import Effect


def risk_difference(values: np.ndarray, in_arm: np.ndarray, *, stratum: np.ndarray, level: float = 0.95) -> Effect:
    """Return the tested arm's proportion less the reference's.

    Parameters
    ----------
    values : (subject,) float
        Of the pair's subjects; 1 = event, 0 = none, NaN = missing, set aside.
    in_arm : (subject,) bool
        True in the tested arm, False in the reference.
    stratum : (subject,) int
        All equal: unstratified.
    level : float
        Of the interval, between 0 and 1.

    Returns
    -------
    Effect
        One stratum: the score interval without a factor N / (N - 1) (Mee 1984), which excludes 0 exactly where the
        Pearson chi-squared test without continuity correction rejects; `se` is the unpooled one. Several:
        Mantel-Haenszel with the variance of Sato (1989), right both for few large and for many small strata; normal
        interval kept within -1 and 1, NaN where that variance is not positive.

    References
    ----------
    Mee, R. W. (1984), Biometrics 40, 1175-1176.
    Sato, T. (1989), Biometrics 45, 1323-1324 (variance of the Mantel-Haenszel difference of Greenland & Robins 1985).
    """
    return _effect(_DIFFERENCE, values, in_arm, stratum=stratum, level=level)


def risk_ratio(values: np.ndarray, in_arm: np.ndarray, *, stratum: np.ndarray, level: float = 0.95) -> Effect:
    """Return the tested arm's proportion over the reference's.

    Parameters and NaN as in `risk_difference`.

    Returns
    -------
    Effect
        `se` is that of the LOGARITHM. One stratum: score interval (Koopman 1984), agreeing with the Pearson
        chi-squared test. Several: Mantel-Haenszel with the variance of Greenland & Robins (1985) on the log
        scale. Without events in the reference the estimate is infinite (NaN without events at all), without events in
        the tested arm it is 0; the score interval is then open to that side, the Mantel-Haenszel interval NaN.

    References
    ----------
    Koopman, P. A. R. (1984), Biometrics 40, 513-517.
    Greenland, S. & Robins, J. M. (1985), Biometrics 41, 55-68.
    """
    return _effect(_RATIO, values, in_arm, stratum=stratum, level=level)


def odds_ratio(values: np.ndarray, in_arm: np.ndarray, *, stratum: np.ndarray, level: float = 0.95) -> Effect:
    """Return the tested arm's odds over the reference's.

    Parameters and NaN as in `risk_difference`.

    Returns
    -------
    Effect
        `se` is that of the LOGARITHM. One stratum: score interval without continuity correction (Cornfield 1956),
        agreeing with the Pearson chi-squared test. Several: Mantel-Haenszel with the variance of Robins, Breslow &
        Greenland (1986) on the log scale. Zero cells as in `risk_ratio`.

    References
    ----------
    Robins, J., Breslow, N. & Greenland, S. (1986), Biometrics 42, 311-323.
    Cornfield, J. (1956), Proceedings of the Third Berkeley Symposium 4, 135-148.
    """
    return _effect(_ODDS, values, in_arm, stratum=stratum, level=level)


@dataclass(frozen=True, slots=True, kw_only=True)
class _Measure:
    """One measure: how it is estimated, with its standard error, in one stratum and over several.

    methods : the names of the two, in this order
    """

    name: str
    null: float
    contrast: str
    methods: tuple[str, str]
    plain: Callable[[Counts], tuple[float, float]]
    combined: Callable[[_Tables], tuple[float, float]]
    limits: Callable[[float, float, float], tuple[float, float]]


def _effect(measure: _Measure, values, in_arm, *, stratum, level: float) -> Effect:
    pair = available_pair(values, in_arm, stratum=stratum)
    if pair.stratified:
        estimate, se = measure.combined(_tables(pair))
        low, high = measure.limits(estimate, se, level)
    else:
        counts = _counts(pair)
        estimate, se = measure.plain(counts)
        low, high = score_limits(measure.contrast, counts, level=level)
    return Effect(
        measure=measure.name,
        method=measure.methods[pair.stratified],
        estimate=estimate,
        se=se,
        low=low,
        high=high,
        null=measure.null,
        level=level,
    )


@dataclass(frozen=True, slots=True, kw_only=True)
class _Tables:
    """Events and sizes of both arms, each (stratum,), of the strata that hold both arms."""

    a: np.ndarray  # events in the tested arm
    b: np.ndarray  # events in the reference
    n1: np.ndarray
    n0: np.ndarray


def _tables(pair: Pair) -> _Tables:
    both = (pair.n_arm > 0) & (pair.n_reference > 0)
    return _Tables(
        a=stratum_sums(pair, pair.values * pair.in_arm)[both],
        b=stratum_sums(pair, pair.values * ~pair.in_arm)[both],
        n1=pair.n_arm[both],
        n0=pair.n_reference[both],
    )


def _counts(pair: Pair) -> Counts:
    return Counts(
        events_arm=float(pair.values[pair.in_arm].sum()),
        n_arm=float(pair.in_arm.sum()),
        events_reference=float(pair.values[~pair.in_arm].sum()),
        n_reference=float((~pair.in_arm).sum()),
    )


def _mantel_haenszel_difference(t: _Tables) -> tuple[float, float]:
    """Return the estimate and the root of Sato's variance (NaN where that is negative)."""
    if t.a.size == 0:
        return math.nan, math.nan
    n = t.n1 + t.n0
    weight = float((t.n1 * t.n0 / n).sum())
    estimate = float(((t.a * t.n0 - t.b * t.n1) / n).sum()) / weight
    p = float(((t.n1**2 * t.b - t.n0**2 * t.a + t.n1 * t.n0 * (t.n0 - t.n1) / 2) / n**2).sum())
    q = float(((t.a * (t.n0 - t.b) + t.b * (t.n1 - t.a)) / (2 * n)).sum())
    variance = (estimate * p + q) / weight**2
    return estimate, math.sqrt(variance) if variance >= 0 else math.nan


def _mantel_haenszel_risk_ratio(t: _Tables) -> tuple[float, float]:
    """Return the estimate and the standard error of its logarithm (NaN with a zero sum)."""
    n = t.n1 + t.n0
    r, s = float((t.a * t.n0 / n).sum()), float((t.b * t.n1 / n).sum())
    if r == 0 or s == 0:
        return _quotient(r, s), math.nan
    variance = float((((t.a + t.b) * t.n1 * t.n0 - t.a * t.b * n) / n**2).sum()) / (r * s)
    return r / s, math.sqrt(max(variance, 0.0))


def _mantel_haenszel_odds_ratio(t: _Tables) -> tuple[float, float]:
    """Return the estimate and the standard error of its logarithm (NaN with a zero sum)."""
    n = t.n1 + t.n0
    c, d = t.n1 - t.a, t.n0 - t.b
    r, s = t.a * d / n, t.b * c / n
    p, q = (t.a + d) / n, (t.b + c) / n
    r_sum, s_sum = float(r.sum()), float(s.sum())
    if r_sum == 0 or s_sum == 0:
        return _quotient(r_sum, s_sum), math.nan
    variance = (
        (p * r).sum() / (2 * r_sum**2) + (p * s + q * r).sum() / (2 * r_sum * s_sum) + (q * s).sum() / (2 * s_sum**2)
    )
    return r_sum / s_sum, math.sqrt(float(variance))


def _plain_difference(counts: Counts) -> tuple[float, float]:
    if min(counts.n_arm, counts.n_reference) == 0:
        return counts.risk_difference, math.nan
    p1, p0 = counts.events_arm / counts.n_arm, counts.events_reference / counts.n_reference
    return counts.risk_difference, math.sqrt(p1 * (1 - p1) / counts.n_arm + p0 * (1 - p0) / counts.n_reference)


def _plain_risk_ratio(counts: Counts) -> tuple[float, float]:
    if min(counts.events_arm, counts.events_reference) == 0:
        return counts.risk_ratio, math.nan
    variance = 1 / counts.events_arm - 1 / counts.n_arm + 1 / counts.events_reference - 1 / counts.n_reference
    return counts.risk_ratio, math.sqrt(max(variance, 0.0))


def _plain_odds_ratio(counts: Counts) -> tuple[float, float]:
    cells = (
        counts.events_arm,
        counts.n_arm - counts.events_arm,
        counts.events_reference,
        counts.n_reference - counts.events_reference,
    )
    return counts.odds_ratio, math.nan if min(cells) == 0 else math.sqrt(sum(1 / cell for cell in cells))


def _quotient(numerator: float, denominator: float) -> float:
    """Return the ratio of two sums that are not negative; 0/0 is NaN, x/0 infinite."""
    if denominator == 0:
        return math.inf if numerator > 0 else math.nan
    return numerator / denominator


def _normal_limits(estimate: float, se: float, level: float) -> tuple[float, float]:
    """Return normal limits; NaN where the standard error is zero or unknown."""
    if not se > 0:
        return math.nan, math.nan
    reach = float(stats.norm.isf((1 - level) / 2)) * se
    return estimate - reach, estimate + reach


def _log_limits(estimate: float, se: float, level: float) -> tuple[float, float]:
    """Return limits that are normal on the log scale; NaN where the standard error is zero or unknown."""
    if not se > 0:
        return math.nan, math.nan
    low, high = _normal_limits(math.log(estimate), se, level)
    return math.exp(low), math.exp(high)


def _limits_within_1(estimate: float, se: float, level: float) -> tuple[float, float]:
    low, high = _normal_limits(estimate, se, level)
    return (max(low, -1.0), min(high, 1.0)) if se > 0 else (low, high)


_DIFFERENCE = _Measure(
    name="risk difference",
    null=0.0,
    contrast="difference",
    methods=("score (Mee)", "Mantel-Haenszel, Sato variance"),
    plain=_plain_difference,
    combined=_mantel_haenszel_difference,
    limits=_limits_within_1,
)
_RATIO = _Measure(
    name="risk ratio",
    null=1.0,
    contrast="ratio",
    methods=("score (Koopman), SE of log", "Mantel-Haenszel, Greenland-Robins, SE of log"),
    plain=_plain_risk_ratio,
    combined=_mantel_haenszel_risk_ratio,
    limits=_log_limits,
)
_ODDS = _Measure(
    name="odds ratio",
    null=1.0,
    contrast="odds ratio",
    methods=("score, SE of log", "Mantel-Haenszel, Robins-Breslow-Greenland, SE of log"),
    plain=_plain_odds_ratio,
    combined=_mantel_haenszel_odds_ratio,
    limits=_log_limits,
)
