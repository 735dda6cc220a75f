"""Reference sets: whose labels are exchanged with whose."""

from __future__ import annotations

from dataclasses import dataclass
from math import comb, prod

import numpy as np


@dataclass(frozen=True, slots=True, kw_only=True)
class ReferenceSet:
    """Subjects whose arm labels are exchanged, within cells, with the arm sizes of each cell kept.

    name : for messages and tables, e.g. "4 % vs vehicle"
    code : the set's own address among the key streams: the place of each arm's first subject, so that the names and
        the order of arms change no draw of the same (tested, reference) pair
    arms : indices of the arms in the study; the first gets the lowest keys
    subjects : (subject,) intp, positions among the study's subjects, arm by arm as in `key_columns`
    arm : (subject,) intp, index into `arms`
    cell : (subject,) intp, 0 .. n_cells - 1
    sizes : (cell, arm) intp
    """

    name: str
    code: tuple[int, ...]
    arms: tuple[int, ...]
    subjects: np.ndarray
    arm: np.ndarray
    cell: np.ndarray
    sizes: np.ndarray


def pair_set(arm: np.ndarray, cell: np.ndarray, pair: tuple[int, int], *, name: str) -> ReferenceSet:
    """Return the reference set of the subjects of two arms: pair = (tested, reference)."""
    return _reference_set(arm, cell, pair, name=name)


def whole_set(arm: np.ndarray, cell: np.ndarray, *, n_arms: int, name: str) -> ReferenceSet:
    """Return the reference set of all subjects and arms."""
    return _reference_set(arm, cell, tuple(range(n_arms)), name=name)


def _reference_set(arm, cell, arms, *, name) -> ReferenceSet:
    local = np.full(arm.max() + 1, -1)
    local[list(arms)] = np.arange(len(arms))
    subjects = np.argsort(key_columns(arm))
    subjects = subjects[local[arm[subjects]] >= 0]
    _, cells = np.unique(cell[subjects], return_inverse=True)
    arms_of = local[arm[subjects]]
    sizes = np.zeros((cells.max() + 1, len(arms)), dtype=np.intp)
    np.add.at(sizes, (cells, arms_of), 1)
    code = tuple(int(np.flatnonzero(arm == k)[0]) for k in arms)
    return ReferenceSet(name=name, code=code, arms=arms, subjects=subjects, arm=arms_of, cell=cells, sizes=sizes)


def key_columns(arm: np.ndarray) -> np.ndarray:
    """Return (subject,) the column of each subject among the keys: arm by arm, in the order arms first appear.

    Keys are independent and alike, so any fixed order will do; this one lets a pair's keys be copied in two pieces, and
    does not depend on the names of the arms.
    """
    _, first, code = np.unique(arm, return_index=True, return_inverse=True)
    columns = np.empty(len(arm), dtype=np.intp)
    columns[np.argsort(first[code], kind="stable")] = np.arange(len(arm))
    return columns


def count_relabellings(sizes: np.ndarray) -> int:
    """Return the number of distinct relabellings as an exact integer: a product of multinomials over cells."""
    return prod(_multinomial([int(n) for n in row]) for row in sizes)


def _multinomial(counts: list[int]) -> int:
    """Return (sum counts)! / prod(counts!)."""
    total, ways = 0, 1
    for count in counts:
        total += count
        ways *= comb(total, count)
    return ways
