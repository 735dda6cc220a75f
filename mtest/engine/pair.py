"""Statistics of two arms relabelled between themselves.

Scores are centred within stratum. With S the first arm's sum of scores, S2 its sum of squared scores, T2 everybody's,
and in stratum s of M_s subjects with the endpoint, m_as of them in the first arm and m_bs in the second:

    w = sum_s m_as m_bs / M_s            S / w is the precision-weighted stratified difference in means
    T = (S - E S) / sqrt(c0 + c1 S2 - c2 S^2)

A statistic is nothing but its three coefficients; `COEFFICIENTS` holds them. Under a common variance s2 per subject
var(S) = s2 w. With a variance per arm it is A s2_a + B s2_b, A = sum m_as m_bs^2 / M_s^2, B = sum m_bs m_as^2 / M_s^2,
and an arm's sum of squares about its mean, S2 - S^2/m_a, has s2_a times nu_a = sum_s m_as (1 - 1/M_s) - w / m_a in
expectation (under a common variance). With one stratum all this is the textbook; with matched pairs, the paired t.

Where values are missing, m_as varies with the labels; it is then counted per draw, in strata that miss somebody.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from mtest.engine.statistics import divide, ratio, rounding_bound
from mtest.relabel.sets import ReferenceSet


@dataclass(frozen=True, slots=True, kw_only=True)
class Sums:
    """Sums over strata (for relabelling variances: over cells), each (hypothesis, 1) or (hypothesis, draw)."""

    m_a: np.ndarray
    m_b: np.ndarray
    w: np.ndarray
    a: np.ndarray
    b: np.ndarray
    free_a: np.ndarray
    free_b: np.ndarray
    v: np.ndarray

    def plus(self, other: Sums) -> Sums:
        """Return the sums over both sets of strata."""
        return Sums(**{name: getattr(self, name) + getattr(other, name) for name in Sums.__slots__})


def sum_strata(first: np.ndarray, total: np.ndarray, variance: np.ndarray) -> Sums:
    """Return the sums over the middle axis.

    first : (hypothesis, stratum, draw) subjects of the first arm who have the endpoint
    total : (hypothesis, stratum, 1) subjects who have it; 0 for no stratum
    variance : (hypothesis, stratum, 1) variance of the scores, divisor M - 1
    """
    inverse = ratio(1.0, total)
    second = total - first
    product = first * second * inverse
    free = 1.0 - inverse
    return Sums(
        m_a=first.sum(axis=1),
        m_b=second.sum(axis=1),
        w=product.sum(axis=1),
        a=(product * second * inverse).sum(axis=1),
        b=(product * first * inverse).sum(axis=1),
        free_a=(first * free).sum(axis=1),
        free_b=(second * free).sum(axis=1),
        v=(product * variance).sum(axis=1),
    )


@dataclass(frozen=True, slots=True, kw_only=True)
class Fixed:
    """What labels do not touch, each (hypothesis, 1): sum of squares, residual df, subjects with the endpoint."""

    total2: np.ndarray
    df: np.ndarray
    n: np.ndarray


def welch(u: Sums, f: Fixed):
    """Return coefficients of Welch's t (Welch 1938)."""
    nu_a = u.free_a - ratio(u.w, u.m_a)
    nu_b = u.free_b - ratio(u.w, u.m_b)
    # An arm with one subject has no spread to divide: its sum of squares is 0, and stays 0.
    a = u.a / np.where(nu_a > 1e-9, nu_a, 1.0)
    b = u.b / np.where(nu_b > 1e-9, nu_b, 1.0)
    return b * f.total2, a - b, ratio(a, u.m_a) + ratio(b, u.m_b)


def pooled(u: Sums, f: Fixed):
    """Return coefficients of Student's t; with strata, of the t of the linear model value ~ arm + stratum."""
    df = np.maximum(f.df, 1.0)
    return u.w * f.total2 / df, np.zeros_like(u.w), np.ones_like(u.w) / df


def standardised(u: Sums, f: Fixed):
    """Return coefficients of S over its relabelling SD: difference, rank sum and score z, by their scores.

    The variance is that of simple random sampling within cells (Cochran 1977, Sampling Techniques, theorem 2.2); for
    0/1 scores it is Mantel & Haenszel's (1959), for ranks the tie-corrected one of van Elteren's statistic (1960).
    """
    return u.v, np.zeros_like(u.w), np.zeros_like(u.w)


def unscaled(u: Sums, f: Fixed):
    """Return coefficients of S / w, the stratified difference in means in the data's unit."""
    return u.w**2, np.zeros_like(u.w), np.zeros_like(u.w)


COEFFICIENTS = {
    "welch": welch,
    "pooled": pooled,
    "difference": standardised,
    "unscaled difference": unscaled,
    "rank": standardised,
    "score": standardised,
}


@dataclass(frozen=True, slots=True, kw_only=True)
class PairPanel:
    """Hypotheses of one pair and one statistic, all complete or all with missing values, from one matrix product.

    set_index : which reference set the labels come from
    rows : (hypothesis,) intp, where the statistics go among the rows of their chunk
    stack : (row, subject) float64: scores, squared scores if needed, then who has the endpoint in which stratum
    mu : (hypothesis, 1) E S over relabellings, or None where it is 0
    sums : over the strata in which nobody is missing
    coefficients : c0, c2 where complete; the rows of squares then carry the factor c1
    units : (hypothesis, stratum) rows of the stack's last part, and total, variance: (hypothesis, stratum, 1)
    """

    set_index: int
    rows: np.ndarray
    statistic: str
    stack: np.ndarray
    squares: bool
    mu: np.ndarray | None
    fixed: Fixed
    sums: Sums
    coefficients: tuple[np.ndarray, np.ndarray] | None
    units: np.ndarray
    total: np.ndarray
    variance: np.ndarray

    def compute(self, indicators: list[np.ndarray]) -> np.ndarray:
        """Return (hypothesis, draw) signed statistics; indicators : one (draw, subject) 0/1 float64."""
        products = self.stack @ indicators[0].T
        den2, w = self._denominator(products)
        numerator = products[: len(self.rows)]
        if self.mu is not None:
            numerator -= self.mu
        result = divide(numerator, den2, usual=self._usual(w))
        # Where no stratum holds both arms nothing is compared, and what is left of S is rounding.
        idle = w < 1e-9
        if idle.any():
            result[np.broadcast_to(idle, result.shape)] = 0.0
        return result

    def bound(self, observed: np.ndarray, indicators: list[np.ndarray]) -> np.ndarray:
        """Return (hypothesis,) how far rounding alone can move the observed statistics."""
        den2, w = self._denominator(self.stack @ indicators[0].T)
        return rounding_bound(observed[:, None], den2, self._usual(w))[:, 0]

    def _denominator(self, products: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        h = len(self.rows)
        if self.coefficients is not None:
            u, (c0, c2) = self.sums, self.coefficients
            factor = 1.0
        else:
            first = products[h * (2 if self.squares else 1) :][self.units]
            u = self.sums.plus(sum_strata(first, self.total, self.variance))
            c0, factor, c2 = COEFFICIENTS[self.statistic](u, self.fixed)
        den2 = np.square(products[:h])
        den2 *= -c2
        den2 += c0
        if self.squares:
            den2 += factor * products[h : 2 * h]
        return den2, u.w

    def _usual(self, w: np.ndarray) -> np.ndarray | float:
        return 0.0 if self.statistic == "unscaled difference" else self.fixed.total2 / np.maximum(self.fixed.n, 1) * w


def build_pair_panel(
    scores: np.ndarray,
    *,
    rows: np.ndarray,
    statistic: str,
    reference_set: ReferenceSet,
    set_index: int,
    stratum: np.ndarray,
) -> PairPanel:
    """Return the panel of some hypotheses.

    scores : (hypothesis, subject of the set) centred within stratum, NaN where missing: in all rows or in none
    stratum : (subject of the set,) int; every exchange cell lies within one stratum
    """
    by_cell = COEFFICIENTS[statistic] is standardised
    unit = reference_set.cell if by_cell else np.unique(stratum, return_inverse=True)[1]
    inside = np.eye(unit.max() + 1)[unit]  # (subject, unit)
    present = np.isfinite(scores)
    y = np.where(present, scores, 0.0)
    total = present @ inside
    mean = ratio(y @ inside, total)
    if by_cell:
        y = np.where(present, y - mean[:, unit], 0.0)
    variance = ratio((y**2) @ inside, total - 1)
    first = (reference_set.arm == 0).astype(float) @ inside
    size = inside.sum(axis=0)
    n = total.sum(axis=1, keepdims=True)
    fixed = Fixed(
        total2=np.sum(y**2, axis=1, keepdims=True),
        df=np.maximum(n - (total > 0).sum(axis=1, keepdims=True) - 1.0, 0.0),
        n=n,
    )
    # A stratum with one subject left has nobody to compare: its score is 0, and it does not count as a subject either.
    counts = total > 1
    whole = counts & (total == size)  # nobody is missing
    sums = sum_strata(
        np.where(whole, first, 0.0)[:, :, None], np.where(whole, total, 0.0)[:, :, None], variance[:, :, None]
    )
    mu = _expected_sum(y, reference_set)
    parts, coefficients, squares = [y], None, statistic == "welch"
    units, extra = _unit_rows(present, inside, counts & ~whole)
    if present.all():
        c0, c1, c2 = COEFFICIENTS[statistic](sums, fixed)
        coefficients = (c0, c2)
        # Equal arms without missing values: Welch's denominator does not depend on the sum of squares.
        squares = squares and bool(np.any(c1 != 0))
        parts += [y**2 * c1] if squares else []
    else:
        parts += [y**2] if squares else []
        parts.append(extra)
    return PairPanel(
        set_index=set_index,
        rows=rows,
        statistic=statistic,
        stack=np.concatenate(parts),
        squares=squares,
        mu=mu if np.any(mu) else None,
        fixed=fixed,
        sums=sums,
        coefficients=coefficients,
        units=units[0],
        total=np.where(units[1], np.take_along_axis(total, units[2], axis=1), 0.0)[:, :, None],
        variance=np.take_along_axis(variance, units[2], axis=1)[:, :, None],
    )


def _expected_sum(y: np.ndarray, reference_set: ReferenceSet) -> np.ndarray:
    """Return (hypothesis, 1) E S: each cell's total times the first arm's share; 0 where cells are strata."""
    share = (reference_set.sizes[:, 0] / reference_set.sizes.sum(axis=1))[reference_set.cell]
    mu = np.sum(y * share, axis=1, keepdims=True)
    return np.where(np.abs(mu) > 1e-12 * np.sum(np.abs(y), axis=1, keepdims=True), mu, 0.0)


def _unit_rows(present: np.ndarray, inside: np.ndarray, varying: np.ndarray):
    """Return which rows count the first arm in which stratum, and the rows: one per distinct (stratum, who is there).

    Returns
    -------
    (index, used, unit) : each (hypothesis, k), k the most varying strata any hypothesis has; unused places point at a
        row of zeros
    rows : (row, subject) float64, the row of zeros first
    """
    most = max(int(varying.sum(axis=1).max()), 1)
    index = np.zeros((len(present), most), dtype=np.intp)
    used = np.zeros((len(present), most), dtype=bool)
    unit = np.zeros((len(present), most), dtype=np.intp)
    rows = [np.zeros(present.shape[1])]
    seen: dict[bytes, int] = {}
    for h, strata in enumerate(varying):
        for k, s in enumerate(np.flatnonzero(strata)):
            row = present[h] * inside[:, s]
            key = row.tobytes()
            if key not in seen:
                seen[key] = len(rows)
                rows.append(row)
            index[h, k], used[h, k], unit[h, k] = seen[key], True, s
    return (index, used, unit), np.stack(rows)
