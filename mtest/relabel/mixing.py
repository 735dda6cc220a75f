"""The mixing share: how often the pairs of a family may use a subject's key in common.

Pairs (a, k) and (b, k) share the subjects of arm k. In a draw, the subject with key u has the weight
w(u) = 1/n_first for u <= n_first/(n_first + n_second), else -1/n_second, in the pair's mean difference. Over draws the
two differences therefore covary, through arm k, by n_k E[w_p w_q] per unit variance; the data's own covariance is
1/n_k. If each subject's key is common to all pairs only with probability lambda_k (and otherwise each pair has a key
of its own) the former becomes lambda_k n_k E[w_p w_q], and it does not exceed the latter when

    lambda_k <= (1 / n_k^2) / E[w_p w_q]      for all pairs p, q that contain k.

Both weights fall with u and have mean zero, so E[w_p w_q] > 0 always (Chebyshev's sum inequality). For a reference
arm of n_0 against arms of n it is 1/(n n_0), hence lambda = min(1, n/n_0).
"""

from __future__ import annotations

from itertools import combinations

import numpy as np


def mixing_shares(sizes: np.ndarray, pairs: tuple[tuple[int, int], ...]) -> np.ndarray:
    """Return lambda per cell and arm, 1 where all pairs may share every key.

    Parameters
    ----------
    sizes : (cell, arm) int
        Subjects of each arm in each exchange cell.
    pairs : tuple of (tested, reference)
        The pairs of the family; only these count.

    Returns
    -------
    (cell, arm) float in (0, 1]
    """
    shares = np.ones(sizes.shape)
    for cell, row in enumerate(sizes):
        live = [pair for pair in pairs if row[pair[0]] and row[pair[1]]]
        for arm in range(len(row)):
            touching = [pair for pair in live if arm in pair]
            for p, q in combinations(touching, 2):
                bound = 1 / row[arm] ** 2 / common_weight(row[list(p)], row[list(q)])
                shares[cell, arm] = min(shares[cell, arm], bound)
    # A bound of 1 reached by equal sizes comes out a rounding error below it.
    shares[shares > 1 - 1e-12] = 1.0
    return shares


def common_weight(p: np.ndarray, q: np.ndarray) -> float:
    """Return E[w_p w_q], the integral over a uniform key u of the product of two pairs' weights.

    p, q : (2,) int, sizes (first, second) of the two pairs; the first gets the lowest keys.
    """
    cuts = sorted({0.0, p[0] / (p[0] + p[1]), q[0] / (q[0] + q[1]), 1.0})
    middles = np.add(cuts[:-1], cuts[1:]) / 2
    return float(np.sum(np.diff(cuts) * _weight(p, middles) * _weight(q, middles)))


def _weight(pair: np.ndarray, key: np.ndarray) -> np.ndarray:
    return np.where(key <= pair[0] / (pair[0] + pair[1]), 1 / pair[0], -1 / pair[1])
