"""Scores of a continuous endpoint: the values, centred within stratum."""

from __future__ import annotations

import numpy as np

from mtest.scores.centring import centre


def continuous_scores(values: np.ndarray, stratum: np.ndarray) -> np.ndarray:
    """Return (subject,) values less their stratum's mean; NaN stays NaN.

    Centring first keeps sums of squares accurate, and makes an arm's sum the precision-weighted stratified
    difference: sum over strata of n_a n_b / (n_a + n_b) times the stratum's difference in means.
    """
    return centre(values, stratum)
