"""What stays fixed under relabelling: the constants of each hypothesis' statistic.

Notation of this room: D = S_a/m_a - S_b/m_b is the difference of two arms' mean scores, S an arm's sum of scores
centred within stratum, m an arm's number of subjects with the endpoint. A statistic is (D - mu) / sqrt(den2). All
constants below are functions of who is available, of the strata and of the arm sizes, never of the labels; where the
number available in an arm varies with the labels, its expectation is used: in each cell, available * arm share.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from mtest.relabel.sets import ReferenceSet


@dataclass(frozen=True, slots=True, kw_only=True)
class Constants:
    """Constants of the hypotheses of one panel, each (hypothesis, 1).

    n : subjects available in the reference set
    total2 : sum of squared scores
    mu : mean of D over relabellings (0 when cells are the strata)
    h : var(D) under a common variance, over its value 1/m_a + 1/m_b without strata
    g_first, g_second : the same for each arm's own variance term, with the degrees of freedom that strata cost
    v : relabelling variance of D, over 1/m_a + 1/m_b
    df : residual degrees of freedom of the linear model with strata and arms
    """

    n: np.ndarray
    total2: np.ndarray
    mu: np.ndarray
    h: np.ndarray
    g_first: np.ndarray
    g_second: np.ndarray
    v: np.ndarray
    df: np.ndarray

    @property
    def variance(self) -> np.ndarray:
        """Return the pooled variance of the scores, the yardstick for what counts as zero."""
        return self.total2 / np.maximum(self.n, 1)


def derive_constants(
    scores: np.ndarray, *, reference_set: ReferenceSet, stratum: np.ndarray, first: int, second: int
) -> Constants:
    """Return the constants of D between arms `first` and `second` of a reference set.

    Parameters
    ----------
    scores : (hypothesis, subject) float
        Centred within stratum; NaN where missing.
    stratum : (subject,) int
        Strata of the scores; every exchange cell lies within one stratum.
    first, second : int
        Local indices of the arms compared.

    Notes
    -----
    With c_i = 1/m_a, -1/m_b or 0 and P the projection on strata, D = c'(I - P)y, so under a common variance
    var(D) = s2 [sum_i c_i^2 - sum_s M_s cbar_s^2]; an arm's centred sum of squares has expectation
    s2 [m_a - sum_s m_as/M_s - (m_a - sum_s m_as^2/M_s)/m_a]. With one stratum h = g = 1 and the statistics are the
    textbook ones; with matched pairs they are the paired t. The relabelling moments are those of simple random
    sampling within cells (Cochran 1977, Sampling Techniques, theorem 2.2 and section 5A).
    """
    present = np.isfinite(scores).astype(float)
    x = np.where(present > 0, scores, 0.0)
    in_cell = np.eye(len(reference_set.sizes))[reference_set.cell]  # (subject, cell)
    of_cell = _strata_of_cells(reference_set.cell, stratum)

    n_cell = present @ in_cell  # (hypothesis, cell), available
    size = reference_set.sizes.sum(axis=1)
    m_first = n_cell * (reference_set.sizes[:, first] / size)
    m_second = n_cell * (reference_set.sizes[:, second] / size)
    a, b = _total(m_first), _total(m_second)

    cell_mean = _ratio(x @ in_cell, n_cell)
    cell_s2 = _ratio((x**2) @ in_cell - n_cell * cell_mean**2, n_cell - 1)
    lean = _ratio(m_first, a) - _ratio(m_second, b)  # an unequal share of a cell in the two arms
    spread = _ratio(m_first, a**2) + _ratio(m_second, b**2) - _ratio(lean**2, n_cell)
    q = _ratio(1.0, a) + _ratio(1.0, b)

    ms_first, ms_second, n_stratum = m_first @ of_cell, m_second @ of_cell, n_cell @ of_cell
    cbar = _ratio(_ratio(ms_first, a) - _ratio(ms_second, b), n_stratum)
    shared_variance = q - _total(n_stratum * cbar**2)
    part_first = _total(ms_first * (_ratio(1.0, a) - cbar) ** 2)
    part_second = _total(ms_second * (_ratio(1.0, b) + cbar) ** 2)
    # Other arms' subjects enter only through unequal shares in strata; their part goes to both terms alike.
    lift = _ratio(shared_variance, part_first + part_second)
    n = _total(n_stratum)
    return Constants(
        n=n,
        total2=_total(x**2),
        mu=_total(cell_mean * lean),
        h=_ratio(shared_variance, q),
        g_first=_inflation(part_first * lift, ms_first, n_stratum),
        g_second=_inflation(part_second * lift, ms_second, n_stratum),
        v=_ratio(_total(cell_s2 * spread), q),
        df=np.maximum(n - _total(n_stratum > 0) - (len(reference_set.arms) - 1), 0),
    )


def _inflation(part: np.ndarray, m: np.ndarray, n: np.ndarray) -> np.ndarray:
    """Return the factor on an arm's variance term; 1 with one stratum, and where the arm leaves no freedom."""
    total = _total(m)
    freedom = total - _total(_ratio(m, n)) - _ratio(total - _total(_ratio(m**2, n)), total)
    factor = part * total * _ratio(total - 1, freedom)
    return np.where((freedom > 1e-9) & (factor > 0), factor, 1.0)


def _strata_of_cells(cell: np.ndarray, stratum: np.ndarray) -> np.ndarray:
    """Return (cell, stratum) 0/1: which stratum each cell lies in."""
    _, place = np.unique(stratum, return_inverse=True)
    nested = np.zeros((cell.max() + 1, place.max() + 1))
    nested[cell, place] = 1.0
    return nested


def _total(x: np.ndarray) -> np.ndarray:
    return np.sum(x, axis=1, keepdims=True, dtype=float)


def _ratio(x, y) -> np.ndarray:
    """Return x / y with 0 where y is not positive: such a cell or arm contributes nothing."""
    y = np.asarray(y, dtype=float)
    return np.where(y > 0, x, 0.0) / np.where(y > 0, y, 1.0)
