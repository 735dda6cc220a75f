"""Score intervals for two proportions: the values of a contrast that its score test does not reject.

References
----------
Miettinen, O. & Nurminen, M. (1985), Statistics in Medicine 4, 213-226: the constrained estimates. Their factor
N / (N - 1) is left out, so that at the null value the test is Pearson's chi-squared without continuity correction.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

from scipy import optimize, stats


@dataclass(frozen=True, slots=True, kw_only=True)
class Counts:
    """Events and sizes of two arms (whole numbers held as floats)."""

    events_arm: float
    n_arm: float
    events_reference: float
    n_reference: float

    @property
    def risk_difference(self) -> float:
        if min(self.n_arm, self.n_reference) == 0:
            return math.nan
        return self.events_arm / self.n_arm - self.events_reference / self.n_reference

    @property
    def risk_ratio(self) -> float:
        """Return the ratio: infinite without events in the reference, NaN without any."""
        if min(self.n_arm, self.n_reference) == 0:
            return math.nan
        return _divide(self.events_arm * self.n_reference, self.events_reference * self.n_arm)

    @property
    def odds_ratio(self) -> float:
        """Return the cross-product ratio: infinite or NaN where its denominator is zero."""
        return _divide(
            self.events_arm * (self.n_reference - self.events_reference),
            self.events_reference * (self.n_arm - self.events_arm),
        )


def score_limits(contrast: str, counts: Counts, *, level: float) -> tuple[float, float]:
    """Return the score interval of a contrast of two proportions.

    Parameters
    ----------
    contrast : "difference", "ratio" or "odds ratio"
    counts : Counts
    level : float

    Returns
    -------
    (float, float)
        NaN where the estimate is. An estimate on the edge of its range is itself the limit on that side.

    Notes
    -----
    The score z falls from plus to minus infinity as the contrast's value rises, so each limit is one root, sought
    on a scale that runs over all real numbers: log for ratios, artanh for the difference.
    """
    statistic, estimate, least, most, take_back, start = _CONTRASTS[contrast](counts)
    if math.isnan(estimate):
        return math.nan, math.nan
    z = float(stats.norm.isf((1 - level) / 2))
    low = least if estimate == least else take_back(_root(lambda u: statistic(counts, take_back(u)) - z, start))
    high = most if estimate == most else take_back(_root(lambda u: statistic(counts, take_back(u)) + z, start))
    return low, high


def _difference_z(counts: Counts, value: float) -> float:
    """Return the score z of risk difference = value, -1 < value < 1."""
    x1, n1, x0, n0 = counts.events_arm, counts.n_arm, counts.events_reference, counts.n_reference
    n, x = n1 + n0, x1 + x0
    # The likelihood equation for p0 with p1 = p0 + value, times p0 (1 - p0) p1 (1 - p1):
    # (x1 - n1 p1) p0 (1 - p0) + (x0 - n0 p0) p1 (1 - p1) = 0, multiplied out as n p0^3 + c2 p0^2 + c1 p0 + c0; the
    # root wanted is the middle one, by the cosine formula. Checked against a numerical maximum: the form in
    # statsmodels 0.15 has x0 for n0 in c1 and misses published limits.
    c2 = (n1 + 2 * n0) * value - n - x
    c1 = (n0 * value - n - 2 * x0) * value + x
    c0 = x0 * value * (1 - value)
    q = (c2 / (3 * n)) ** 3 - c1 * c2 / (6 * n**2) + c0 / (2 * n)
    p = math.copysign(math.sqrt(max((c2 / (3 * n)) ** 2 - c1 / (3 * n), 0.0)), q)
    angle = (math.pi + math.acos(min(1.0, max(-1.0, q / p**3 if p else 0.0)))) / 3
    p0 = min(max(2 * p * math.cos(angle) - c2 / (3 * n), 0.0, -value), 1.0, 1 - value)
    p1 = min(max(p0 + value, 0.0), 1.0)
    return _ratio(x1 / n1 - x0 / n0 - value, math.sqrt(p1 * (1 - p1) / n1 + p0 * (1 - p0) / n0))


def _ratio_z(counts: Counts, value: float) -> float:
    """Return the score z of risk ratio = value > 0."""
    x1, n1, x0, n0 = counts.events_arm, counts.n_arm, counts.events_reference, counts.n_reference
    a, b, c = (n1 + n0) * value, n1 * value + x1 + n0 + x0 * value, x1 + x0
    # The smaller root of a p^2 - b p + c, in the form that does not cancel.
    p0 = 2 * c / (b + math.sqrt(max(b * b - 4 * a * c, 0.0)))
    p1 = min(value * p0, 1.0)
    spread = math.sqrt(max(p1 * (1 - p1) / n1 + value**2 * p0 * (1 - p0) / n0, 0.0))
    return _ratio(x1 / n1 - value * x0 / n0, spread)


def _odds_ratio_z(counts: Counts, value: float) -> float:
    """Return the score z of odds ratio = value > 0."""
    x1, n1, x0, n0 = counts.events_arm, counts.n_arm, counts.events_reference, counts.n_reference
    a, b, c = n0 * (value - 1), (n1 - x1 - x0) * value + n0 + x1 + x0, x1 + x0
    root = math.sqrt(max(b * b + 4 * a * c, 0.0))
    p0 = 2 * c / (b + root) if b > 0 else (root - b) / (2 * a)
    odds = value * p0
    p1 = odds / (1 - p0 + odds)
    spread1, spread0 = n1 * p1 * (1 - p1), n0 * p0 * (1 - p0)
    if spread1 <= 0 or spread0 <= 0:
        return 0.0
    return (x1 - n1 * p1) * math.sqrt(1 / spread1 + 1 / spread0)


def _difference(counts: Counts):
    estimate = counts.risk_difference
    return _difference_z, estimate, -1.0, 1.0, math.tanh, math.atanh(estimate) if abs(estimate) < 1 else 0.0


def _risk_ratio(counts: Counts):
    return _ratio_z, counts.risk_ratio, 0.0, math.inf, math.exp, _log(counts.risk_ratio)


def _odds_ratio(counts: Counts):
    return _odds_ratio_z, counts.odds_ratio, 0.0, math.inf, math.exp, _log(counts.odds_ratio)


_CONTRASTS = {"difference": _difference, "ratio": _risk_ratio, "odds ratio": _odds_ratio}


def _log(ratio: float) -> float:
    """Return where the search starts: the logarithm, or 0 where that is not finite."""
    return math.log(ratio) if 0 < ratio < math.inf else 0.0


def _root(falling: Callable[[float], float], start: float) -> float:
    """Return the root of a falling function, bracketed outwards from `start`."""
    low = high = start
    step = 0.25
    while falling(low) < 0:
        low, step = low - step, 2 * step
    step = 0.25
    while falling(high) > 0:
        high, step = high + step, 2 * step
    return low if low == high else float(optimize.brentq(falling, low, high, xtol=1e-13, rtol=1e-13))


def _ratio(numerator: float, denominator: float) -> float:
    """Return numerator / denominator; 0/0 is 0, x/0 infinite with the sign of x."""
    if denominator == 0:
        return math.copysign(math.inf, numerator) if numerator else 0.0
    return numerator / denominator


def _divide(numerator: float, denominator: float) -> float:
    """Return the ratio of two counts' products; 0/0 is NaN, x/0 infinite."""
    if denominator == 0:
        return math.inf if numerator > 0 else math.nan
    return numerator / denominator
