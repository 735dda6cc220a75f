"""From arm sums to statistics.

For a pair of arms alone the second arm's sums follow from the first's, and every statistic is

    T = (S q - mu) / sqrt(c0 + c1 S2 - c2 S^2),        q = 1/m_a + 1/m_b,

S and S2 being the first arm's sums of scores and of squared scores. A statistic is therefore nothing but its three
coefficients, functions of the numbers available (m_a, m_b) and of the constants that labels do not touch.
`PAIR` holds them; `MANY` holds the forms for a pair inside a relabelling of more arms.
"""

from __future__ import annotations

import numpy as np

from mtest.engine.constants import Constants

# A denominator below this share of its usual size is zero: nothing but rounding is left in it.
ZERO_SHARE = 1e-12


def welch_pair(m_a, m_b, c: Constants):
    """Return coefficients of Welch's t: (s_a^2/m_a) g_a + (s_b^2/m_b) g_b (Welch 1938)."""
    a = c.g_first / (m_a * np.maximum(m_a - 1, 1))
    b = c.g_second / (m_b * np.maximum(m_b - 1, 1))
    return b * c.total2, a - b, a / m_a + b / m_b


def pooled_pair(m_a, m_b, c: Constants):
    """Return coefficients of Student's t, the residual variance pooled: with strata, of the linear model's t."""
    q = 1 / m_a + 1 / m_b
    df = np.maximum(c.df, 1)
    return c.total2 * c.h * q / df, np.zeros_like(c.h), q**2 / df


def standardised_pair(m_a, m_b, c: Constants):
    """Return coefficients of D over its relabelling SD: difference, rank sum and score z, by their scores."""
    return c.v * (1 / m_a + 1 / m_b), np.zeros_like(c.h), np.zeros_like(c.h)


def unscaled_pair(m_a, m_b, c: Constants):
    """Return coefficients of the plain difference in means (precision-weighted over strata), in the data's unit."""
    return c.h**2 + 0 * m_a, np.zeros_like(c.h), np.zeros_like(c.h)


def welch_many(first, second, sums, sums2, m, c: Constants):
    """Return den2 of Welch's t between two of several arms."""
    terms = [
        g * (sums2[k] - sums[k] ** 2 / m[k]) / (m[k] * np.maximum(m[k] - 1, 1))
        for k, g in ((first, c.g_first), (second, c.g_second))
    ]
    return terms[0] + terms[1]


def pooled_many(first, second, sums, sums2, m, c: Constants):
    """Return den2 of the t with the variance pooled over all arms relabelled together."""
    between = sum(s**2 / n for s, n in zip(sums, m, strict=True))
    return (c.total2 - between / c.h) / np.maximum(c.df, 1) * c.h * (1 / m[first] + 1 / m[second])


def standardised_many(first, second, sums, sums2, m, c: Constants):
    """Return den2 of D over its relabelling SD."""
    return c.v * (1 / m[first] + 1 / m[second]) + 0 * sums[0]


def unscaled_many(first, second, sums, sums2, m, c: Constants):
    """Return den2 of the plain difference."""
    return c.h**2 + 0 * sums[0]


PAIR = {
    "welch": welch_pair,
    "pooled": pooled_pair,
    "difference": standardised_pair,
    "unscaled difference": unscaled_pair,
    "rank": standardised_pair,
    "score": standardised_pair,
}
MANY = {
    "welch": welch_many,
    "pooled": pooled_many,
    "difference": standardised_many,
    "unscaled difference": unscaled_many,
    "rank": standardised_many,
    "score": standardised_many,
}


def divide(numerator: np.ndarray, den2: np.ndarray, *, floor: np.ndarray) -> np.ndarray:
    """Return numerator / sqrt(den2), with 0/0 = 0 and x/0 infinite with the sign of x; both arguments are overwritten.

    numerator, den2 : (hypothesis, draw) ; floor : den2 at and below which a denominator is zero, broadcastable
    """
    zero = den2 <= floor
    if not zero.any():
        np.sqrt(den2, out=den2)
        return np.divide(numerator, den2, out=numerator)
    limit = np.where(np.abs(numerator) <= np.sqrt(floor), 0.0, np.copysign(np.inf, numerator))
    den2[zero] = 1.0
    np.sqrt(den2, out=den2)
    np.divide(numerator, den2, out=numerator)
    np.copyto(numerator, limit, where=zero)
    return numerator


def usual_size(statistic: str, q, c: Constants) -> np.ndarray:
    """Return the size den2 usually has, the yardstick for what counts as zero; 0 where it is not a variance."""
    return 0.0 * c.variance * q if statistic == "unscaled difference" else c.variance * q
