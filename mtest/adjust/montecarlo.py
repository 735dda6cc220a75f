"""p-values from counts, and how sure the draws make us of them."""

from __future__ import annotations

import numpy as np
from scipy.special import gammaln, xlog1py, xlogy

SEQUENCE_ERROR = 0.01  # chance that a confidence sequence ever misses its p-value


def p_from_counts(counts: np.ndarray, n: int, *, exact: bool) -> np.ndarray:
    """Return p-values from counts of draws at or above the observed statistic.

    Enumerated: counts / n, the identity being one of the n. Drawn: (1 + counts) / (1 + n), which is never 0 and
    never too small (Phipson & Smyth 2010, Statistical Applications in Genetics and Molecular Biology 9:39).
    """
    counts = np.asarray(counts, dtype=float)
    return counts / n if exact else (1 + counts) / (1 + n)


def confidence_sequence(counts: np.ndarray, n: int, *, error: float = SEQUENCE_ERROR) -> tuple[np.ndarray, np.ndarray]:
    """Return bounds (low, high) that hold for all n at once with probability 1 - error.

    The set of p with (n + 1) C(n, S) p^S (1 - p)^(n - S) > error, S the count.

    Parameters
    ----------
    counts : (hypothesis,) int
    n : int
        Draws; 0 gives (0, 1).

    References
    ----------
    Robbins (1970), Annals of Mathematical Statistics 41:1397, example 1 (a uniform mixture of binomials).
    """
    s = np.asarray(counts, dtype=float)
    constant = np.log(n + 1) + gammaln(n + 1) - gammaln(s + 1) - gammaln(n - s + 1) - np.log(error)

    def excess(p):
        return constant + xlogy(s, p) + xlog1py(n - s, -p)

    centre = s / n if n else np.full_like(s, 0.5)
    low = _bisect(excess, np.zeros_like(s), centre, rising=True)
    high = _bisect(excess, centre, np.ones_like(s), rising=False)
    return low, high


def _bisect(function, left: np.ndarray, right: np.ndarray, *, rising: bool) -> np.ndarray:
    """Return where a monotone function crosses 0, on its outer side; the end of the range if it does not."""
    with np.errstate(divide="ignore"):  # log 0 at the ends is -inf, which is meant
        for _ in range(50):  # halvings: 1e-15, the resolution of a p-value
            middle = (left + right) / 2
            positive = function(middle) > 0
            move_right = positive == rising
            right = np.where(move_right, middle, right)
            left = np.where(move_right, left, middle)
    return left if rising else right
