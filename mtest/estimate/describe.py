"""What is shown of each arm beside an effect: counts, mean, standard deviation."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np


@dataclass(frozen=True, slots=True, kw_only=True)
class Description:
    """Counts, mean and standard deviation of the two arms of a pair, named as in `HypothesisResult`."""

    n_arm: int
    n_reference: int
    missing_arm: int
    missing_reference: int
    mean_arm: float
    mean_reference: float
    sd_arm: float
    sd_reference: float


def describe(values: np.ndarray, in_arm: np.ndarray) -> Description:
    """Return counts, mean and standard deviation of the tested arm and the reference.

    Parameters
    ----------
    values : (subject,) float
        Of the pair's subjects; NaN = missing, counted and set aside. For a 0/1 endpoint the mean is the proportion.
    in_arm : (subject,) bool
        True in the tested arm, False in the reference.

    Returns
    -------
    Description
        The mean is NaN without subjects, the standard deviation with fewer than two.
    """
    values = np.asarray(values, dtype=float)
    in_arm = np.asarray(in_arm, dtype=bool)
    n_arm, missing_arm, mean_arm, sd_arm = _summary(values[in_arm])
    n_reference, missing_reference, mean_reference, sd_reference = _summary(values[~in_arm])
    return Description(
        n_arm=n_arm,
        n_reference=n_reference,
        missing_arm=missing_arm,
        missing_reference=missing_reference,
        mean_arm=mean_arm,
        mean_reference=mean_reference,
        sd_arm=sd_arm,
        sd_reference=sd_reference,
    )


def _summary(column: np.ndarray) -> tuple[int, int, float, float]:
    """Return n, missing, mean, SD of one arm's values."""
    known = column[~np.isnan(column)]
    if known.size == 0:
        return 0, column.size, math.nan, math.nan
    # From a value of the data: a constant column has exactly its own mean and no spread.
    centred = known - known[0]
    mean = float(known[0] + centred.mean())
    sd = float(centred.std(ddof=1)) if known.size > 1 else math.nan
    return known.size, column.size - known.size, mean, sd
