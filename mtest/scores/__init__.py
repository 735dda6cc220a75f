"""Each endpoint as numbers that add up over an arm.

`SCORES` is the table to extend for a new kind: statistic name -> function (values, stratum) -> centred scores.
"""

from __future__ import annotations

from mtest.scores.binary import binary_scores
from mtest.scores.continuous import continuous_scores
from mtest.scores.ordinal import ordinal_scores

SCORES = {
    "welch": continuous_scores,
    "pooled": continuous_scores,
    "difference": continuous_scores,
    "unscaled difference": continuous_scores,
    "rank": ordinal_scores,
    "score": binary_scores,
}

__all__ = ["SCORES", "binary_scores", "continuous_scores", "ordinal_scores"]
