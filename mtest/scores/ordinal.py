"""Scores of an ordinal endpoint: midranks within stratum, weighted so that strata combine efficiently."""

from __future__ import annotations

import numpy as np
from scipy.stats import rankdata

from mtest.scores.centring import centre


def ordinal_scores(values: np.ndarray, stratum: np.ndarray) -> np.ndarray:
    """Return (subject,) midranks within stratum divided by (stratum's n + 1), centred; NaN stays NaN.

    References
    ----------
    van Elteren (1960), Bulletin of the International Statistical Institute 37: locally most powerful weights
    1 / (n_s + 1). With one stratum this is the Wilcoxon rank sum, up to a constant.
    """
    scores = np.full(values.shape, np.nan)
    present = np.isfinite(values)
    for label in np.unique(stratum[present]):
        inside = present & (stratum == label)
        scores[inside] = rankdata(values[inside]) / (inside.sum() + 1)
    return centre(scores, stratum)
