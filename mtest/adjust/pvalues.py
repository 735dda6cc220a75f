"""Adjustment from p-values alone, through statsmodels."""

from __future__ import annotations

import warnings

import numpy as np
from statsmodels.stats.multitest import multipletests

# Our word for a procedure -> statsmodels' word.
PROCEDURES = {
    "Bonferroni": "bonferroni",
    "Sidak": "sidak",
    "Holm": "holm",
    "Holm-Sidak": "holm-sidak",
    "Hochberg": "simes-hochberg",
    "Hommel": "hommel",
    "Benjamini-Hochberg": "fdr_bh",
    "Benjamini-Yekutieli": "fdr_by",
}


def adjust_from_p(p: np.ndarray, *, procedure: str) -> np.ndarray:
    """Return adjusted p-values, (hypothesis,), in the order given.

    Parameters
    ----------
    p : (hypothesis,) float in [0, 1]
        NaN is refused: statsmodels would carry it along and still count it as a hypothesis.
    procedure : str
        A key of `PROCEDURES`, or "none".

    Raises
    ------
    ValueError
        If a p-value is NaN or outside [0, 1].
    """
    p = np.asarray(p, dtype=float)
    if not np.all((p >= 0) & (p <= 1)):
        raise ValueError(f"p-values must lie in [0, 1]; got {p[~((p >= 0) & (p <= 1))][:3]}")
    if procedure == "none" or len(p) == 0:
        return p.copy()
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", RuntimeWarning)  # log1p(-1) at p = 1 in the Sidak methods; the result is 1
        adjusted = multipletests(p, method=PROCEDURES[procedure])[1]
    # Adjusting can lose the last bit (1 - (1 - p)^1): never below the p-value itself, never above 1.
    return np.clip(adjusted, p, 1.0)
