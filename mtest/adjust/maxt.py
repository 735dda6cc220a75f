"""max-T adjustment from counts of draws.

Hypotheses stand in the observed order T_(1) >= ... >= T_(m). Step-down compares T_(k) with the maximum over
{(k), ..., (m)}; a running maximum then makes the p-values monotone (Westfall & Young 1993, Resampling-Based Multiple
Testing, section 2.3 and algorithm 4.1).
"""

from __future__ import annotations

import numpy as np


def step_down(p_of_tails: np.ndarray) -> np.ndarray:
    """Return step-down adjusted p-values, (hypothesis,), from each hypothesis' p against the maximum of its tail."""
    return np.maximum.accumulate(p_of_tails)


def across_pairs_step_down(p_of_tails: list[np.ndarray]) -> tuple[list[np.ndarray], list[np.ndarray]]:
    """Return step-down adjusted p-values and steps per pair, with Boole's inequality across pairs.

    Parameters
    ----------
    p_of_tails : per pair, (hypothesis of the pair,) float
        In the pair's observed order: p of the maximum over the hypothesis and all below it, within the pair.

    Returns
    -------
    adjusted : per pair, (hypothesis,) float
    steps : per pair, (hypothesis,) int, 1 for the hypothesis considered first

    Notes
    -----
    With R the hypotheses left, c(R) the number of pairs that still hold one, the local p-value of R is
    c(R) * min over pairs of the pair's tail p, valid by Boole's inequality since each tail p is. The pair with the
    smallest tail p gives up its first hypothesis. For any I containing it, I within R, the pair's tail p and c can only
    be smaller: so this is a short cut of the closed test (Marcus, Peritz & Gabriel 1976), and controls the familywise
    error strongly wherever each pair's test is valid.
    """
    adjusted = [np.empty(len(p)) for p in p_of_tails]
    steps = [np.empty(len(p), dtype=int) for p in p_of_tails]
    place = [0] * len(p_of_tails)
    highest = 0.0
    for step in range(1, sum(len(p) for p in p_of_tails) + 1):
        left = [k for k, p in enumerate(p_of_tails) if place[k] < len(p)]
        best = min(left, key=lambda k: p_of_tails[k][place[k]])
        highest = max(highest, min(1.0, len(left) * p_of_tails[best][place[best]]))
        adjusted[best][place[best]] = highest
        steps[best][place[best]] = step
        place[best] += 1
    return adjusted, steps


def across_pairs_single_step(p_single_step: list[np.ndarray]) -> list[np.ndarray]:
    """Return single-step p-values with Boole's inequality across pairs: the number of pairs times each pair's own."""
    return [np.minimum(1.0, len(p_single_step) * p) for p in p_single_step]
