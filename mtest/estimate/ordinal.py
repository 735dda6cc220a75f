"""The probability that a subject of the tested arm fares better than one of the reference."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from scipy import stats

from mtest.errors import UsageError
from mtest.estimate.pair import Pair, available_pair
from mtest.results import Effect

_SIGN = {"higher": 1.0, "lower": -1.0}


def probability_better(
    values: np.ndarray, in_arm: np.ndarray, *, stratum: np.ndarray, better: str, level: float = 0.95
) -> Effect:
    """Return P(the tested arm's value is better) + P(tie) / 2, with an interval that stays between 0 and 1.

    Parameters
    ----------
    values : (subject,) float
        Of the pair's subjects; only their order matters; NaN = missing, set aside.
    in_arm : (subject,) bool
        True in the tested arm, False in the reference.
    stratum : (subject,) int
        All equal: unstratified. Otherwise only subjects of one stratum are compared with each other.
    better : "higher" or "lower"
    level : float
        Of the interval, between 0 and 1.

    Returns
    -------
    Effect
        `method` names how the interval was made; NaN where it cannot be.

    Raises
    ------
    UsageError
        `better` is neither "higher" nor "lower".

    Notes
    -----
    In stratum s let V_i, for a subject of the tested arm, be the share of the reference's subjects (ties half) that it
    beats, and for a subject of the reference the share of the tested arm's subjects that beat it: its placement. Both
    arms' placements have the mean theta_s, and Var(theta_s) is estimated by S2_a / n_a + S2_b / n_b with their sample
    variances (Brunner & Munzel 2000, where placements are written as differences of midranks).

    Several strata: theta = sum w_s theta_s / sum w_s with w_s = n_a n_b / (n_a + n_b + 1), the weights of van Elteren
    (1960), best under no effect without ties. The strata's variances add up with weight w_s^2. A stratum with only
    one subject in an arm has no variance of its own; its distance from the common theta,
    w_s^2 (theta_s - theta)^2 / (1 - w_s / W), W = sum w_s, takes its place: unbiased where such strata are
    alike, too large where their expectations differ. This also serves matched pairs.

    Interval: logit(theta) -+ t se / (theta (1 - theta)), taken back (delta method), so it never leaves (0, 1); t has
    Satterthwaite's degrees of freedom over all these variance terms, for one stratum those of Brunner & Munzel.
    In simulations (normal values, 95 %) it covered in 94 to 99.8 %, the more the smaller the arms; without the logit,
    clipped at 0 and 1, in 88 to 90 % where theta was 0.92.
    Complete separation (every comparison won, or every one lost) has no estimated variance. There the interval is
    one-sided in effect and exact: m = sum_s min(n_a, n_b) comparisons without a common subject are independent, so
    P(all won) <= theta^m, and the nearer limit is the theta with theta^m = (1 - level) / 2 (common theta assumed).
    Constant data, where all is tied, have no interval.

    References
    ----------
    Brunner, E. & Munzel, U. (2000), Biometrical Journal 42, 17-25.
    van Elteren, P. H. (1960), Bulletin of the International Statistical Institute 37, 351-361.
    """
    if better not in _SIGN:
        raise UsageError(f"probability_better: better must be 'higher' or 'lower'; got {better!r}; name the direction.")
    pair = available_pair(_SIGN[better] * np.asarray(values, dtype=float), in_arm, stratum=stratum)
    strata = [part for s in range(pair.n_arm.size) if (part := _stratum(pair, s)) is not None]
    method = "placements in strata, van Elteren weights, logit t" if pair.stratified else "Brunner-Munzel, logit t"
    estimate = se = low = high = math.nan
    if strata:
        estimate, variance, df = _combine(strata)
        se = math.sqrt(variance)
        if estimate in (0.0, 1.0):
            method = "exact bound at complete separation"
            low, high = _separated_limits(estimate, sum(part.n_separate for part in strata), level)
        elif se > 0:
            low, high = _logit_limits(estimate, se, df, level)
    return Effect(
        measure="P(better)", method=method, estimate=estimate, se=se, low=low, high=high, null=0.5, level=level
    )


@dataclass(frozen=True, slots=True, kw_only=True)
class _Stratum:
    """One stratum's theta, weight, and (variance term, degrees of freedom) per arm; none if an arm has one subject."""

    theta: float
    weight: float
    n_separate: int
    terms: tuple[tuple[float, int], ...]


def _stratum(pair: Pair, s: int) -> _Stratum | None:
    """Return the placements' summary of stratum s, None unless both arms are there."""
    here = pair.stratum == s
    arm, reference = pair.values[here & pair.in_arm], pair.values[here & ~pair.in_arm]
    n_a, n_b = arm.size, reference.size
    if min(n_a, n_b) == 0:
        return None
    won = _beaten(arm, reference) / (2 * n_b)
    lost = 1 - _beaten(reference, arm) / (2 * n_a)
    terms = (
        ((float(won.var(ddof=1)) / n_a, n_a - 1), (float(lost.var(ddof=1)) / n_b, n_b - 1)) if min(n_a, n_b) > 1 else ()
    )
    return _Stratum(
        # From whole numbers: a complete separation is then exactly 0 or 1.
        theta=float(_beaten(arm, reference).sum()) / (2 * n_a * n_b),
        weight=n_a * n_b / (n_a + n_b + 1),
        n_separate=min(n_a, n_b),
        terms=terms,
    )


def _beaten(these: np.ndarray, those: np.ndarray) -> np.ndarray:
    """Return, for each of `these`, 2 #(those below it) + #(those tied with it), whole numbers."""
    ordered = np.sort(those)
    return np.searchsorted(ordered, these, side="left") + np.searchsorted(ordered, these, side="right")


def _combine(strata: list[_Stratum]) -> tuple[float, float, float]:
    """Return theta, its variance (NaN if not estimable) and Satterthwaite's degrees of freedom."""
    weights = np.array([part.weight for part in strata])
    shares = weights / weights.sum()
    thetas = np.array([part.theta for part in strata])
    # Rounding must not move a common 0 or 1 off the edge.
    theta = float(thetas[0]) if np.ptp(thetas) == 0 else float(shares @ thetas)
    terms: list[tuple[float, int]] = []
    for share, part in zip(shares, strata, strict=True):
        if part.terms:
            terms += [(share**2 * variance, df) for variance, df in part.terms]
        elif len(strata) == 1:
            return theta, math.nan, math.nan
        else:
            terms.append((share**2 * (part.theta - theta) ** 2 / (1 - share), 1))
    variances = np.array([variance for variance, _ in terms])
    total = float(variances.sum())
    # Placements are shares of whole numbers below 1e9: what is smaller than this is rounding of a constant.
    if total < 1e-30:
        return theta, 0.0, math.nan
    df = 1 / float(((variances / total) ** 2 / np.array([df for _, df in terms])).sum())
    return theta, total, df


def _logit_limits(estimate: float, se: float, df: float, level: float) -> tuple[float, float]:
    """Return the limits computed on the logit and taken back."""
    centre = math.log(estimate / (1 - estimate))
    reach = float(stats.t.isf((1 - level) / 2, df)) * se / (estimate * (1 - estimate))
    low, high = (0.5 * (1 + math.tanh((centre + step) / 2)) for step in (-reach, reach))
    return low, high


def _separated_limits(estimate: float, n_separate: int, level: float) -> tuple[float, float]:
    """Return the limits where every comparison was won (estimate 1) or lost (0)."""
    nearest = ((1 - level) / 2) ** (1 / n_separate)
    return (nearest, 1.0) if estimate == 1.0 else (0.0, 1 - nearest)
