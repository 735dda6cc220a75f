"""Adjustment from p-values alone, through statsmodels; but Holm's, which every report needs, by itself."""

from __future__ import annotations

import warnings

import numpy as np
from statsmodels.stats.multitest import multipletests

# Our word for a procedure -> statsmodels' word.
PROCEDURES = {
    "Bonferroni": "bonferroni",
    "Sidak": "sidak",
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
        "Holm", a key of `PROCEDURES`, or "none".

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
    if procedure == "Holm":
        return _holm(p)
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", RuntimeWarning)  # log1p(-1) at p = 1 in the Sidak methods; the result is 1
        adjusted = multipletests(p, method=PROCEDURES[procedure])[1]
    # Adjusting can lose the last bit (1 - (1 - p)^1): never below the p-value itself, never above 1.
    return np.clip(adjusted, p, 1.0)


def _holm(p: np.ndarray) -> np.ndarray:
    """Return Holm's adjusted p-values (Holm 1979, Scandinavian Journal of Statistics 6:65).

    statsmodels' own calls the garbage collector each time, a tenth of a second in a large program.
    """
    order = np.argsort(p, kind="stable")
    adjusted = np.empty_like(p)
    adjusted[order] = np.minimum(1.0, np.maximum.accumulate(p[order] * np.arange(len(p), 0, -1)))
    return adjusted
