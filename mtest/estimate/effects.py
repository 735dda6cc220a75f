"""Which effect is shown for which statistic: the table to extend for a new kind of endpoint."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from mtest.estimate.binary import odds_ratio, risk_difference, risk_ratio
from mtest.estimate.continuous import mean_difference, standardised_difference
from mtest.estimate.ordinal import probability_better
from mtest.results import Effect

_MEANS = (mean_difference, standardised_difference)
_RISKS = (risk_difference, risk_ratio, odds_ratio)

# Kind of endpoint -> its effects, the main one first. The rank statistic shows P(better) whatever the kind.
_EFFECTS: dict[str, tuple[Callable[..., Effect], ...]] = {"continuous": _MEANS, "binary": _RISKS}


def estimate_effects(
    kind: str,
    statistic: str,
    *,
    values: np.ndarray,
    in_arm: np.ndarray,
    stratum: np.ndarray,
    better: str,
    level: float = 0.95,
) -> tuple[Effect, ...]:
    """Return the effects of one hypothesis, the main one first.

    Parameters
    ----------
    kind, statistic, better : str
        As in the plan.
    values : (subject,) float
        Of the pair's subjects; NaN where missing.
    in_arm : (subject,) bool
        True in the tested arm, False in the reference.
    stratum : (subject,) int
    level : float
        Of the intervals.
    """
    if kind == "ordinal" or statistic == "rank":
        return (probability_better(values, in_arm, stratum=stratum, better=better, level=level),)
    return tuple(effect(values, in_arm, stratum=stratum, level=level) for effect in _EFFECTS[kind])
