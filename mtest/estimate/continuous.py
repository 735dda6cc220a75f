"""Differences of means, unstratified (Welch) or within strata (linear model), with their intervals."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from scipy import stats

from mtest.estimate.pair import Pair, available_pair, stratum_sums
from mtest.results import Effect

# Residual sums of squares below this share of the total are rounding, not spread: sums of squares of up to a
# million float64 values carry a relative error near 1e-26 when they should be zero.
ROUNDING_SHARE = 1e-24


@dataclass(frozen=True, slots=True, kw_only=True)
class Contrast:
    """A difference of means, its standard error and the degrees of freedom of t; NaN where not computable."""

    estimate: float
    se: float
    df: float


_NO_CONTRAST = Contrast(estimate=math.nan, se=math.nan, df=math.nan)


def mean_difference(values: np.ndarray, in_arm: np.ndarray, *, stratum: np.ndarray, level: float = 0.95) -> Effect:
    """Return the mean of the tested arm less that of the reference, with its t interval.

    Parameters
    ----------
    values : (subject,) float
        Of the pair's subjects; NaN = missing, set aside.
    in_arm : (subject,) bool
        True in the tested arm, False in the reference.
    stratum : (subject,) int
        All equal: unstratified.
    level : float
        Of the interval, between 0 and 1.

    Returns
    -------
    Effect
        One stratum: Welch's difference. Several: the precision-weighted mean of the differences within strata.
        Where the standard error is zero or cannot be computed the interval is NaN: an interval without width would
        state a certainty that constant data do not give.

    Notes
    -----
    Several strata: in the linear model y_i = stratum_s(i) + beta z_i + e_i (z = 1 in the tested arm), centring y and z
    within strata takes the stratum terms out. With d_s the difference within stratum s and w_s = n_as n_bs / n_s,

        sum (z - zbar_s)^2 = sum_s w_s,   sum (z - zbar_s)(y - ybar_s) = sum_s w_s d_s,

    so beta = sum_s w_s d_s / sum_s w_s, se^2 = RSS / (N - S - 1) / sum_s w_s. A stratum with one arm only has weight
    zero, but its spread informs RSS. Spread is taken as equal in both arms and all strata there, unlike in Welch's.

    References
    ----------
    Welch, B. L. (1947), Biometrika 34, 28-35.
    """
    pair = available_pair(values, in_arm, stratum=stratum)
    contrast = linear_contrast(pair) if pair.stratified else welch_contrast(pair)
    low, high = _t_limits(contrast, level)
    return Effect(
        measure="mean difference",
        method="linear model with strata, t" if pair.stratified else "Welch t",
        estimate=contrast.estimate,
        se=contrast.se,
        low=low,
        high=high,
        null=0.0,
        level=level,
    )


def standardised_difference(
    values: np.ndarray, in_arm: np.ndarray, *, stratum: np.ndarray, level: float = 0.95
) -> Effect:
    """Return the mean difference in units of the pooled standard deviation (Hedges' g), with its normal interval.

    Parameters and NaN as in `mean_difference`.

    Notes
    -----
    d = beta / s, with beta and s (residual standard deviation on df = N - S - 1) of the linear model with strata; one
    stratum gives the usual pooled standard deviation on N - 2. g = J d with J = 1 - 3 / (4 df - 1) takes out most of
    the small-sample bias; its large-sample variance is J^2 (1 / sum_s w_s + d^2 / (2 df)). J is 0 on one degree of
    freedom: g is NaN there, for 0 would read as "no difference, known exactly".

    References
    ----------
    Hedges, L. V. (1981), Journal of Educational Statistics 6, 107-128.
    """
    pair = available_pair(values, in_arm, stratum=stratum)
    contrast = linear_contrast(pair)
    estimate = se = math.nan
    if contrast.se > 0 and contrast.df > 1:
        unit_se = 1 / math.sqrt(_weights(pair).sum())
        d = contrast.estimate / contrast.se * unit_se
        shrink = 1 - 3 / (4 * contrast.df - 1)
        estimate = shrink * d
        se = shrink * math.sqrt(unit_se**2 + d**2 / (2 * contrast.df))
    z = stats.norm.isf((1 - level) / 2)
    return Effect(
        measure="standardised difference",
        method="Hedges g, residual SD within strata, normal" if pair.stratified else "Hedges g, normal",
        estimate=estimate,
        se=se,
        low=estimate - z * se,
        high=estimate + z * se,
        null=0.0,
        level=level,
    )


def welch_contrast(pair: Pair) -> Contrast:
    """Return Welch's difference, strata ignored."""
    if not (pair.in_arm.any() and not pair.in_arm.all()):
        return _NO_CONTRAST
    # Subtracting a value of the data makes constant data exactly zero, whatever the rounding of their mean.
    origin = pair.values[0]
    arm, reference = pair.values[pair.in_arm] - origin, pair.values[~pair.in_arm] - origin
    estimate = float(arm.mean() - reference.mean())
    if arm.size < 2 or reference.size < 2:
        return Contrast(estimate=estimate, se=math.nan, df=math.nan)
    parts = np.array([_variance(arm) / arm.size, _variance(reference) / reference.size])
    total = float(parts.sum())
    if total == 0:
        return Contrast(estimate=estimate, se=0.0, df=math.nan)
    shares = parts / total  # as shares, so that tiny variances do not underflow when squared
    df = 1 / float((shares**2 / (np.array([arm.size, reference.size]) - 1)).sum())
    return Contrast(estimate=estimate, se=math.sqrt(total), df=df)


def linear_contrast(pair: Pair) -> Contrast:
    """Return the arm's coefficient in value ~ arm + stratum; one stratum gives Student's pooled difference."""
    if not pair.has_contrast:
        return _NO_CONTRAST
    n = pair.n_arm + pair.n_reference
    _, first = np.unique(pair.stratum, return_index=True)
    y = pair.values - pair.values[first][pair.stratum]
    y = y - (stratum_sums(pair, y) / n)[pair.stratum]
    z = pair.in_arm - (pair.n_arm / n)[pair.stratum]
    weight = float(_weights(pair).sum())
    estimate = float(z @ y) / weight
    residual = y - estimate * z
    rss = float(residual @ residual)
    if rss <= ROUNDING_SHARE * float(y @ y):
        rss = 0.0
    df = y.size - n.size - 1
    se = math.sqrt(rss / df / weight) if df > 0 else math.nan
    return Contrast(estimate=estimate, se=se, df=float(df))


def _weights(pair: Pair) -> np.ndarray:
    """Return w_s = n_as n_bs / n_s, (stratum,)."""
    return pair.n_arm * pair.n_reference / (pair.n_arm + pair.n_reference)


def _variance(column: np.ndarray) -> float:
    """Return the sample variance, exactly zero for constant data."""
    return 0.0 if np.ptp(column) == 0 else float(column.var(ddof=1))


def _t_limits(contrast: Contrast, level: float) -> tuple[float, float]:
    """Return the t limits; NaN where the standard error is zero or unknown."""
    if not contrast.se > 0:
        return math.nan, math.nan
    reach = float(stats.t.isf((1 - level) / 2, contrast.df)) * contrast.se
    return contrast.estimate - reach, contrast.estimate + reach
