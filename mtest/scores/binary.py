"""Scores of a binary endpoint: 0 and 1, centred within stratum."""

from __future__ import annotations

import numpy as np

from mtest.scores.centring import centre


def binary_scores(values: np.ndarray, stratum: np.ndarray) -> np.ndarray:
    """Return (subject,) 0/1 less their stratum's proportion; NaN stays NaN.

    An arm's sum is the numerator of the Cochran-Mantel-Haenszel statistic (Mantel & Haenszel 1959).
    """
    return centre(values, stratum)
