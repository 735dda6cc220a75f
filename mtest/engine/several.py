"""Statistics of two arms inside a relabelling of several.

D = S_a/m_a - S_b/m_b is the difference of two arms' mean scores, scores being centred within stratum over all arms. A
statistic is (D - mu) / sqrt(den2). The constants are functions of who is available, of the strata and of the arm
sizes, never of the labels; where the number available in an arm and stratum varies with the labels, its expectation is
used in them (available * arm share), so that with missing values in strata the statistic is near the textbook's, not
equal to it. Where arms have unequal shares of the strata, a third arm's effect enters D through the stratum means: the
relabelling is exact when no arm differs, and says nothing sure about a pair otherwise.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from mtest.engine.statistics import divide, ratio, rounding_bound
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

    cell_mean = ratio(x @ in_cell, n_cell)
    cell_s2 = ratio((x**2) @ in_cell - n_cell * cell_mean**2, n_cell - 1)
    lean = ratio(m_first, a) - ratio(m_second, b)  # an unequal share of a cell in the two arms
    spread = ratio(m_first, a**2) + ratio(m_second, b**2) - ratio(lean**2, n_cell)
    q = ratio(1.0, a) + ratio(1.0, b)

    ms_first, ms_second, n_stratum = m_first @ of_cell, m_second @ of_cell, n_cell @ of_cell
    cbar = ratio(ratio(ms_first, a) - ratio(ms_second, b), n_stratum)
    shared_variance = q - _total(n_stratum * cbar**2)
    part_first = _total(ms_first * (ratio(1.0, a) - cbar) ** 2)
    part_second = _total(ms_second * (ratio(1.0, b) + cbar) ** 2)
    # Other arms' subjects enter only through unequal shares in strata; their part goes to both terms alike.
    lift = ratio(shared_variance, part_first + part_second)
    n = _total(n_stratum)
    return Constants(
        n=n,
        total2=_total(x**2),
        mu=_total(cell_mean * lean),
        h=ratio(shared_variance, q),
        g_first=_inflation(part_first * lift, ms_first, n_stratum),
        g_second=_inflation(part_second * lift, ms_second, n_stratum),
        v=ratio(_total(cell_s2 * spread), q),
        df=np.maximum(n - _total(n_stratum > 0) - (len(reference_set.arms) - 1), 0),
    )


def _inflation(part: np.ndarray, m: np.ndarray, n: np.ndarray) -> np.ndarray:
    """Return the factor on an arm's variance term; 1 with one stratum, and where the arm leaves no freedom."""
    total = _total(m)
    freedom = total - _total(ratio(m, n)) - ratio(total - _total(ratio(m**2, n)), total)
    factor = part * total * ratio(total - 1, freedom)
    return np.where((freedom > 1e-9) & (factor > 0), factor, 1.0)


def _strata_of_cells(cell: np.ndarray, stratum: np.ndarray) -> np.ndarray:
    """Return (cell, stratum) 0/1: which stratum each cell lies in."""
    _, place = np.unique(stratum, return_inverse=True)
    nested = np.zeros((cell.max() + 1, place.max() + 1))
    nested[cell, place] = 1.0
    return nested


def _total(x: np.ndarray) -> np.ndarray:
    return np.sum(x, axis=1, keepdims=True, dtype=float)


def welch(first, second, sums, sums2, m, c: Constants):
    """Return den2 of Welch's t between two of several arms."""
    terms = [
        g * (sums2[k] - sums[k] ** 2 / m[k]) / (m[k] * np.maximum(m[k] - 1, 1))
        for k, g in ((first, c.g_first), (second, c.g_second))
    ]
    return terms[0] + terms[1]


def pooled(first, second, sums, sums2, m, c: Constants):
    """Return den2 of the t with the variance pooled over all arms relabelled together."""
    between = sum(s**2 / n for s, n in zip(sums, m))
    return (c.total2 - between / c.h) / np.maximum(c.df, 1) * c.h * (1 / m[first] + 1 / m[second])


def standardised(first, second, sums, sums2, m, c: Constants):
    """Return den2 of D over its relabelling SD."""
    return np.broadcast_to(c.v * (1 / m[first] + 1 / m[second]), sums[0].shape).copy()


def unscaled(first, second, sums, sums2, m, c: Constants):
    """Return den2 of the plain difference."""
    return np.broadcast_to(c.h**2, sums[0].shape).copy()


DENOMINATORS = {
    "welch": welch,
    "pooled": pooled,
    "difference": standardised,
    "unscaled difference": unscaled,
    "rank": standardised,
    "score": standardised,
}


@dataclass(frozen=True, slots=True, kw_only=True)
class SeveralPanel:
    """Hypotheses of one pair of arms and one statistic, all complete or all with missing values.

    set_index, rows : as in `PairPanel`
    first, second : local indices of the arms compared
    stack : (row, subject) float64: scores, squared scores if needed, then availability patterns
    totals : (row, 1) the stack summed over subjects
    pattern : (hypothesis,) intp into the patterns, or None where complete
    sizes : (arm,) subjects per arm
    """

    set_index: int
    rows: np.ndarray
    statistic: str
    first: int
    second: int
    stack: np.ndarray
    totals: np.ndarray
    squares: bool
    pattern: np.ndarray | None
    sizes: np.ndarray
    constants: Constants

    def compute(self, indicators: list[np.ndarray]) -> np.ndarray:
        """Return (hypothesis, draw) signed statistics; indicators : per arm but the last, (draw, subject) 0/1."""
        numerator, den2, m, empty = self._parts(indicators)
        result = divide(numerator, den2, usual=self._usual(m))
        if empty is not None:
            result[empty] = 0.0
        return result

    def bound(self, observed: np.ndarray, indicators: list[np.ndarray]) -> np.ndarray:
        """Return (hypothesis,) how far rounding alone can move the observed statistics."""
        _, den2, m, _ = self._parts(indicators)
        return rounding_bound(observed[:, None], den2, self._usual(m))[:, 0]

    def _parts(self, indicators: list[np.ndarray]):
        """Return D - mu, den2, the numbers available per arm, and where one of the two arms has nobody."""
        sums = [self.stack @ indicator.T for indicator in indicators]
        everyone = [*sums, self.totals - sum(sums)]
        h, a, b = len(self.rows), self.first, self.second
        s = [x[:h] for x in everyone]
        s2 = [x[h : 2 * h] if self.squares else None for x in everyone]
        m, empty = list(self.sizes), None
        if self.pattern is not None:
            counts = [x[h * (2 if self.squares else 1) :][self.pattern] for x in everyone]
            empty = (counts[a] < 0.5) | (counts[b] < 0.5)
            m = [np.maximum(count, 1.0) for count in counts]
        den2 = DENOMINATORS[self.statistic](a, b, s, s2, m, self.constants)
        return s[a] / m[a] - s[b] / m[b] - self.constants.mu, den2, m, empty

    def _usual(self, m) -> np.ndarray | float:
        if self.statistic == "unscaled difference":
            return 0.0
        c = self.constants
        return c.total2 / np.maximum(c.n, 1) * (1 / m[self.first] + 1 / m[self.second])


def build_several_panel(
    scores: np.ndarray,
    *,
    rows: np.ndarray,
    statistic: str,
    reference_set: ReferenceSet,
    set_index: int,
    stratum: np.ndarray,
    first: int,
    second: int,
) -> SeveralPanel:
    """Return the panel of some hypotheses; arguments as in `build_pair_panel`."""
    present = np.isfinite(scores)
    y = np.where(present, scores, 0.0)
    squares = statistic == "welch"
    parts = [y, y**2] if squares else [y]
    pattern = None
    if not present.all():
        patterns, pattern = np.unique(present, axis=0, return_inverse=True)
        pattern = pattern.reshape(-1)
        parts.append(patterns.astype(float))
    stack = np.concatenate(parts)
    return SeveralPanel(
        set_index=set_index,
        rows=rows,
        statistic=statistic,
        first=first,
        second=second,
        stack=stack,
        totals=stack.sum(axis=1, keepdims=True),
        squares=squares,
        pattern=pattern,
        sizes=reference_set.sizes.sum(axis=0).astype(float),
        constants=derive_constants(scores, reference_set=reference_set, stratum=stratum, first=first, second=second),
    )
