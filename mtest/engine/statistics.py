"""Dividing by a standard error that may be zero."""

from __future__ import annotations

import numpy as np

# A squared denominator below this share of its usual size is zero: nothing but rounding is left in it.
ZERO_SHARE = 1e-12


def divide(numerator: np.ndarray, den2: np.ndarray, *, usual: np.ndarray | float) -> np.ndarray:
    """Return numerator / sqrt(den2), with 0/0 = 0 and x/0 infinite with the sign of x; both arguments are overwritten.

    Parameters
    ----------
    numerator, den2 : (hypothesis, draw)
    usual : broadcastable
        The usual size of den2, the yardstick for what counts as zero; 0 where den2 cannot vanish.
    """
    floor = ZERO_SHARE * np.atleast_2d(usual)
    # Only the smallest denominator of a row is looked at: comparing all of them would cost as much as their roots.
    if np.all(den2.min(axis=1, keepdims=True) > np.max(floor, axis=-1, keepdims=True)):
        np.sqrt(den2, out=den2)
        return np.divide(numerator, den2, out=numerator)
    zero = den2 <= floor
    limit = np.where(np.abs(numerator) <= np.sqrt(floor), 0.0, np.copysign(np.inf, numerator))
    den2[zero] = 1.0
    np.sqrt(den2, out=den2)
    np.divide(numerator, den2, out=numerator)
    np.copyto(numerator, limit, where=zero)
    return numerator


def rounding_bound(observed: np.ndarray, den2: np.ndarray, usual: np.ndarray | float) -> np.ndarray:
    """Return how far rounding alone can move an observed statistic, in the shape of `observed`.

    The denominator's rounding error is a few units in the last place of its usual size; where two arms hardly overlap
    the denominator is far smaller than that, and the statistic is huge and correspondingly uncertain.
    """
    share = np.where(den2 > 0, usual / np.where(den2 > 0, den2, 1.0), 0.0)
    finite = np.where(np.isfinite(observed), np.abs(observed), 0.0)
    return finite * 64 * np.finfo(float).eps * np.maximum(share, 1.0)


def ratio(x, y) -> np.ndarray:
    """Return x / y with 0 where y is not positive: such a cell or arm contributes nothing."""
    y = np.asarray(y, dtype=float)
    return np.where(y > 0, x, 0.0) / np.where(y > 0, y, 1.0)
