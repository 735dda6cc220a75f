"""The textbook test that stands beside each re-randomisation p-value."""

from __future__ import annotations

import math
from collections.abc import Callable

import numpy as np
from scipy import stats

from mtest.errors import UsageError
from mtest.estimate.continuous import Contrast, linear_contrast, welch_contrast
from mtest.estimate.pair import Pair, available_pair, stratum_sums

_TAILS: dict[str, Callable] = {
    "two-sided": lambda law, value: 2 * law.sf(abs(value)),
    "greater": lambda law, value: law.sf(value),
    "less": lambda law, value: law.cdf(value),
}


def model_p(
    kind: str,
    statistic: str,
    *,
    values: np.ndarray,
    in_arm: np.ndarray,
    stratum: np.ndarray,
    alternative: str = "two-sided",
) -> tuple[float, str]:
    """Return the textbook p-value of "no difference between the arms" and the name of its test.

    Parameters
    ----------
    kind : "continuous", "ordinal" or "binary"
    statistic : str
        The statistic of the re-randomisation test. For a continuous endpoint "rank" leads to the rank test and "pooled"
        to Student's; every other statistic, and the other kinds whatever their statistic, to the default of the kind.
    values : (subject,) float
        Of the pair's subjects; NaN = missing, set aside. Binary: 0 or 1.
    in_arm : (subject,) bool
        True in the tested arm, False in the reference.
    stratum : (subject,) int
        All equal: unstratified.
    alternative : "two-sided", "greater" or "less"
        "greater": the tested arm's values are larger than the reference's.

    Returns
    -------
    (float, str)
        p is 1, whatever the alternative, where the compared values do not vary within strata; NaN where the test
        cannot be computed (no stratum with both arms, no degrees of freedom, spread zero although the arms differ).

    Raises
    ------
    UsageError
        `kind` or `alternative` is not one of those named.

    References
    ----------
    van Elteren (1960), Bull. Int. Stat. Inst. 37, 351-361; Mantel & Haenszel (1959), J. Natl. Cancer Inst. 22, 719-748.
    """
    if kind not in _DEFAULT:
        raise UsageError(f"model_p: kind must be one of {_list(_DEFAULT)}; got {kind!r}; name the endpoint's kind.")
    if alternative not in _TAILS:
        raise UsageError(
            f"model_p: alternative must be one of {_list(_TAILS)}; got {alternative!r}; name the direction."
        )
    pair = available_pair(values, in_arm, stratum=stratum)
    one, several = _SPECIAL.get((kind, statistic), _DEFAULT[kind])
    name, test = several if pair.stratified else one
    if not pair.has_contrast:
        return math.nan, name
    if _is_constant(pair):
        return 1.0, name
    return test(pair, alternative), name


def _t_p(contrast: Contrast, alternative: str) -> float:
    if not contrast.se > 0:
        return math.nan
    return float(_TAILS[alternative](stats.t(contrast.df), contrast.estimate / contrast.se))


def _welch_p(pair: Pair, alternative: str) -> float:
    return _t_p(welch_contrast(pair), alternative)


def _linear_p(pair: Pair, alternative: str) -> float:
    return _t_p(linear_contrast(pair), alternative)


def _van_elteren_p(pair: Pair, alternative: str) -> float:
    """Return the normal p of the rank sums, each stratum weighted 1 / (n_s + 1), with the permutation variance."""
    ranks = _midranks(pair)
    return _scores_p(pair, ranks / (pair.n_arm + pair.n_reference + 1)[pair.stratum], alternative)


def _cochran_mantel_haenszel_p(pair: Pair, alternative: str) -> float:
    return _scores_p(pair, pair.values, alternative)


def _pearson_p(pair: Pair, alternative: str) -> float:
    # Pearson's variance divides by N where the permutation variance divides by N - 1.
    return _scores_p(pair, pair.values, alternative, divide_by_n=True)


def _scores_p(pair: Pair, scores: np.ndarray, alternative: str, divide_by_n: bool = False) -> float:
    """Return the normal p of the arm's sum of scores (subject,), centred and scaled within strata."""
    n = pair.n_arm + pair.n_reference
    centred = scores - (stratum_sums(pair, scores) / n)[pair.stratum]
    squares = stratum_sums(pair, centred**2)
    # A stratum of one subject holds one arm only: its squares and its share n_a n_b are zero.
    divisor = n if divide_by_n else np.maximum(n - 1, 1)
    variance = float((pair.n_arm * pair.n_reference / n * squares / divisor).sum())
    if not variance > 0:
        return math.nan
    total = float(centred[pair.in_arm].sum())
    return float(_TAILS[alternative](stats.norm, total / math.sqrt(variance)))


def _midranks(pair: Pair) -> np.ndarray:
    """Return the midrank of each subject within its stratum, (subject,)."""
    ranks = np.empty(pair.values.size)
    for s in range(pair.n_arm.size):
        here = pair.stratum == s
        ranks[here] = stats.rankdata(pair.values[here])
    return ranks


def _is_constant(pair: Pair) -> bool:
    """Return whether no stratum that holds both arms has two different values."""
    both = ((pair.n_arm > 0) & (pair.n_reference > 0))[pair.stratum]
    _, first = np.unique(pair.stratum, return_index=True)
    return bool(np.all((pair.values == pair.values[first][pair.stratum])[both]))


def _list(names) -> str:
    return ", ".join(repr(name) for name in names)


_LINEAR = ("linear model with strata, t", _linear_p)
_RANK = (("Mann-Whitney, normal approximation", _van_elteren_p), ("van Elteren, normal approximation", _van_elteren_p))

# kind -> (test for one stratum, test for several), each a name and a function of the pair and the alternative
_DEFAULT = {
    "continuous": (("Welch t", _welch_p), _LINEAR),
    "ordinal": _RANK,
    "binary": (("score z (Pearson chi-squared)", _pearson_p), ("Cochran-Mantel-Haenszel", _cochran_mantel_haenszel_p)),
}
_SPECIAL = {
    ("continuous", "pooled"): (("Student t", _linear_p), _LINEAR),
    ("continuous", "rank"): _RANK,
}
