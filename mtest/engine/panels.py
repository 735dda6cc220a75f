"""Panels: hypotheses whose statistics are computed together, from one matrix product.

A panel holds one pair of arms of one reference set, one statistic, and endpoints that are either all complete or all
with missing values. Its stack of score rows times the labels gives every arm sum it needs.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from mtest.engine.constants import Constants, derive_constants
from mtest.engine.statistics import MANY, PAIR, ZERO_SHARE, divide, usual_size
from mtest.relabel.sets import ReferenceSet


@dataclass(frozen=True, slots=True, kw_only=True)
class Panel:
    """See the module's head.

    set_index : which reference set the labels come from
    first, second : local indices of the arms compared
    rows : (hypothesis,) intp, where the statistics go among the rows of their chunk
    stack : (row, subject) float64: scores, then their squares if needed, then availability patterns
    pattern : (hypothesis,) intp into the patterns, or None where complete
    sizes : (arm,) subjects per arm
    coefficients : c0, c2, mu of a complete pair, whose rows of the stack already carry the factors q and c1 (so that
        T = (S - mu) / sqrt(c0 + S2 - c2 S^2)); None where the coefficients vary with the labels
    """

    set_index: int
    n_arms: int
    first: int
    second: int
    statistic: str
    rows: np.ndarray
    stack: np.ndarray
    totals: np.ndarray
    squares: bool
    pattern: np.ndarray | None
    sizes: np.ndarray
    constants: Constants
    coefficients: tuple[np.ndarray, np.ndarray, np.ndarray | None] | None


def build_panel(
    scores: np.ndarray,
    *,
    rows: np.ndarray,
    statistic: str,
    reference_set: ReferenceSet,
    set_index: int,
    stratum: np.ndarray,
    first: int,
    second: int,
) -> Panel:
    """Return the panel of some hypotheses.

    scores : (hypothesis, subject of the set) centred within stratum, NaN where missing: in all rows or in none
    stratum : (subject of the set,) int
    """
    constants = derive_constants(scores, reference_set=reference_set, stratum=stratum, first=first, second=second)
    present = np.isfinite(scores)
    y = np.where(present, scores, 0.0)
    sizes = reference_set.sizes.sum(axis=0).astype(float)
    is_pair = len(sizes) == 2
    pattern = coefficients = None
    parts = [y]
    squares = statistic == "welch"
    if present.all() and is_pair:
        q = 1 / sizes[0] + 1 / sizes[1]
        c0, c1, c2 = PAIR[statistic](sizes[0], sizes[1], constants)
        # Equal arms without missing values: Welch's denominator no longer depends on the sum of squares.
        squares = squares and bool(np.any(c1 != 0))
        parts = [y * q, y**2 * c1] if squares else [y * q]
        coefficients = (c0, c2 / q**2, constants.mu if np.any(constants.mu) else None)
    else:
        parts += [y**2] if squares else []
    if not present.all():
        patterns, pattern = np.unique(present, axis=0, return_inverse=True)
        parts.append(patterns.astype(float))
    stack = np.concatenate(parts)
    return Panel(
        set_index=set_index,
        n_arms=len(sizes),
        first=first,
        second=second,
        statistic=statistic,
        rows=rows,
        stack=stack,
        totals=stack.sum(axis=1, keepdims=True),
        squares=squares,
        pattern=None if pattern is None else pattern.reshape(-1),
        sizes=sizes,
        constants=constants,
        coefficients=coefficients,
    )


def compute_statistics(panel: Panel, indicators: list[np.ndarray]) -> np.ndarray:
    """Return (hypothesis, draw) signed statistics of a panel.

    indicators : per arm of the reference set but the last, (draw, subject) 0/1 float64
    """
    sums = [panel.stack @ indicator.T for indicator in indicators]
    return _from_pair(panel, sums[0]) if panel.n_arms == 2 else _from_many(panel, sums)


def rounding_bound(panel: Panel, observed: np.ndarray, indicators: list[np.ndarray]) -> np.ndarray:
    """Return (hypothesis,) how far rounding alone can move the observed statistic.

    The denominator's rounding error is a few units in the last place of its usual size; where two arms hardly overlap
    it is far smaller than that, and the statistic is huge and correspondingly uncertain.
    """
    den2 = _denominators(panel, [panel.stack @ indicator.T for indicator in indicators])
    q = 1 / panel.sizes[panel.first] + 1 / panel.sizes[panel.second]
    usual = usual_size(panel.statistic, q, panel.constants)
    share = np.where(den2 > 0, usual / np.where(den2 > 0, den2, 1.0), 0.0)
    finite = np.where(np.isfinite(observed), np.abs(observed), 0.0)
    return finite * 64 * np.finfo(float).eps * np.maximum(share[:, 0], 1.0)


def _from_pair(panel: Panel, sums: np.ndarray) -> np.ndarray:
    """T = (S q - mu) / sqrt(c0 + c1 S2 - c2 S^2)."""
    if panel.coefficients is not None:
        mu = panel.coefficients[2]
        den2 = _complete_denominator(panel, sums)
        numerator = sums[: len(panel.rows)]
        if mu is not None:
            numerator = numerator - mu
        q = 1 / panel.sizes[0] + 1 / panel.sizes[1]
        return divide(numerator, den2, floor=ZERO_SHARE * usual_size(panel.statistic, q, panel.constants))
    m, s, _, empty = _arms(panel, [sums])
    q = 1 / m[0] + 1 / m[1]
    den2 = _varying_denominator(panel, sums, m)
    floor = ZERO_SHARE * usual_size(panel.statistic, q, panel.constants)
    result = divide(s[0] * q - panel.constants.mu, den2, floor=floor)
    result[empty] = 0.0
    return result


def _complete_denominator(panel: Panel, sums: np.ndarray) -> np.ndarray:
    """Return c0 + S2 - c2 S^2, the factors already in the stack."""
    c0, c2, _ = panel.coefficients
    h = len(panel.rows)
    den2 = np.square(sums[:h])
    den2 *= -c2
    den2 += c0
    if panel.squares:
        den2 += sums[h:]
    return den2


def _varying_denominator(panel: Panel, sums: np.ndarray, m: list[np.ndarray]) -> np.ndarray:
    """Return c0 + c1 S2 - c2 S^2 where the numbers available vary with the labels."""
    c0, c1, c2 = PAIR[panel.statistic](m[0], m[1], panel.constants)
    h = len(panel.rows)
    den2 = c0 - c2 * np.square(sums[:h])
    if panel.squares:
        den2 += c1 * sums[h : 2 * h]
    return den2


def _denominators(panel: Panel, sums: list[np.ndarray]) -> np.ndarray:
    """Return den2 for the arm sums, (hypothesis, draw)."""
    if panel.coefficients is not None:
        return _complete_denominator(panel, sums[0])
    m, s, s2, _ = _arms(panel, sums)
    if panel.n_arms == 2:
        return _varying_denominator(panel, sums[0], m)
    return MANY[panel.statistic](panel.first, panel.second, s, s2, m, panel.constants)


def _from_many(panel: Panel, sums: list[np.ndarray]) -> np.ndarray:
    m, s, s2, empty = _arms(panel, sums)
    a, b = panel.first, panel.second
    den2 = MANY[panel.statistic](a, b, s, s2, m, panel.constants)
    numerator = s[a] / m[a] - s[b] / m[b] - panel.constants.mu
    floor = ZERO_SHARE * usual_size(panel.statistic, 1 / m[a] + 1 / m[b], panel.constants)
    result = divide(numerator, den2, floor=floor)
    if empty is not None:
        result[empty] = 0.0
    return result


def _arms(panel: Panel, sums: list[np.ndarray]):
    """Return per arm the numbers available, sums and sums of squares, and where an arm of the two has nobody."""
    everyone = [*sums, panel.totals - sum(sums)]
    h = len(panel.rows)
    s = [x[:h] for x in everyone]
    s2 = [x[h : 2 * h] if panel.squares else None for x in everyone]
    if panel.pattern is None:
        return list(panel.sizes), s, s2, None
    start = h * (2 if panel.squares else 1)
    counts = [x[start:][panel.pattern] for x in everyone]
    empty = (counts[panel.first] < 0.5) | (counts[panel.second] < 0.5)
    return [np.maximum(count, 1.0) for count in counts], s, s2, empty
