"""What was observed, as frozen arrays: every randomised subject, in the order of their identifiers."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np


@dataclass(frozen=True, slots=True, kw_only=True)
class EndpointData:
    """One endpoint's values; subjects are in the order of `Trial.subject_ids`.

    values : (subject,) float64, NaN where missing (under rule "worst-score" the missing of an ordinal endpoint have
        already been given the worst rank's value, and `n_filled` counts them)
    n_filled : (arm,) int, subjects whose missing value was replaced by the endpoint's rule
    """

    name: str
    kind: str
    statistic: str
    better: str
    missing: str
    unit: str
    group: str
    values: np.ndarray
    n_filled: np.ndarray


@dataclass(frozen=True, slots=True, kw_only=True)
class Trial:
    """The study as observed: one entry per randomised subject.

    arm : (subject,) intp, index into `arms` (the plan's order)
    stratum : (subject,) intp, within which scores are centred or ranked; zeros where the scheme has no strata
    cell : (subject,) intp, within which arm labels are exchanged (strata, blocks within strata, or sets)
    sets : analysis set name -> (subject,) bool
    """

    subject_ids: tuple[str, ...]
    arms: tuple[str, ...]
    arm: np.ndarray
    stratum: np.ndarray
    stratum_names: tuple[str, ...]
    cell: np.ndarray
    endpoints: tuple[EndpointData, ...]
    sets: dict[str, np.ndarray]
    warnings: tuple[str, ...]
