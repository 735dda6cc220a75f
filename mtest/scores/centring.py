"""Centring within stratum, shared by the kinds of endpoint."""

from __future__ import annotations

import numpy as np


def centre(scores: np.ndarray, stratum: np.ndarray) -> np.ndarray:
    """Return (subject,) scores less the mean of their stratum's present scores; NaN stays NaN.

    Scores that are all equal in a stratum become exactly 0, so that a constant endpoint is 0/0 and not noise.
    """
    present = np.isfinite(scores)
    centred = np.full(scores.shape, np.nan)
    if not present.any():
        return centred
    labels, place = np.unique(stratum[present], return_inverse=True)
    x = scores[present]
    low, high = np.full(len(labels), np.inf), np.full(len(labels), -np.inf)
    np.minimum.at(low, place, x)
    np.maximum.at(high, place, x)
    # From the middle of the range first: a constant stratum is then exactly 0, and large offsets cost no digits.
    x = x - ((low + high) / 2)[place]
    mean = np.bincount(place, weights=x) / np.bincount(place)
    centred[present] = x - mean[place]
    return centred
