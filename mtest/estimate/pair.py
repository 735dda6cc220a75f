"""The subjects of two arms whose value is known, with their strata counted."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np


@dataclass(frozen=True, slots=True, kw_only=True)
class Pair:
    """Subjects with a value, of the tested arm and the reference.

    values : (subject,) float, no NaN
    in_arm : (subject,) bool, True in the tested arm
    stratum : (subject,) intp, 0 ... n_strata - 1, each of them held by at least one subject
    stratified : whether the subjects handed in, missing values or not, lie in several strata
    n_arm, n_reference : (stratum,) float counts
    """

    values: np.ndarray
    in_arm: np.ndarray
    stratum: np.ndarray
    stratified: bool
    n_arm: np.ndarray
    n_reference: np.ndarray

    @property
    def has_contrast(self) -> bool:
        """Whether at least one stratum holds subjects of both arms."""
        return bool(np.any((self.n_arm > 0) & (self.n_reference > 0)))


def available_pair(values: np.ndarray, in_arm: np.ndarray, *, stratum: np.ndarray) -> Pair:
    """Return the subjects whose value is known.

    Parameters
    ----------
    values : (subject,) float, NaN = missing
    in_arm : (subject,) bool, True in the tested arm
    stratum : (subject,) int; all equal means unstratified

    Notes
    -----
    Whether the comparison is stratified is read before missing values are set aside, so that the method of an
    estimate belongs to the design and not to who happened to be measured.
    """
    values = np.asarray(values, dtype=float)
    in_arm = np.asarray(in_arm, dtype=bool)
    stratum = np.asarray(stratum)
    known = ~np.isnan(values)
    names, codes = np.unique(stratum[known], return_inverse=True)
    return Pair(
        values=values[known],
        in_arm=in_arm[known],
        stratum=codes.astype(np.intp),
        stratified=np.unique(stratum).size > 1,
        n_arm=np.bincount(codes[in_arm[known]], minlength=names.size).astype(float),
        n_reference=np.bincount(codes[~in_arm[known]], minlength=names.size).astype(float),
    )


def stratum_sums(pair: Pair, column: np.ndarray) -> np.ndarray:
    """Return the sum of a column (subject,) in each stratum (stratum,)."""
    return np.bincount(pair.stratum, weights=column, minlength=pair.n_arm.size)
