"""Where labels come from: drawn by keys, or enumerated one after the other. Both fill the same indicators."""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise
from math import comb

import numpy as np

from mtest.relabel.keys import BLOCK_DRAWS, COARSE_BITS, KeyStream
from mtest.relabel.selection import Selector
from mtest.relabel.sets import ReferenceSet, count_relabellings

_CAP = 2**62
_DECISIONS = 0  # branch of a block's address for the mixing decisions: (block, 0); own keys: (block, code of the pair)


@dataclass(frozen=True, slots=True, kw_only=True)
class DrawnLabels:
    """Labels drawn at random: one shared key per subject, mixed with keys of a pair's own where a share is below 1.

    sets : the reference sets
    share : (subject,) float, each subject's mixing share
    column : (subject,) int, each subject's place among the keys of a draw
    n_draws : int, draws in all
    """

    seed: int
    sets: tuple[ReferenceSet, ...]
    share: np.ndarray
    column: np.ndarray
    n_draws: int

    def reader(self) -> DrawnReader:
        """Return a reader of these labels, block by block."""
        return DrawnReader(self)


class DrawnReader:
    """Labels of one block after the other; its buffers are reused, so what it returns holds until the next batch."""

    def __init__(self, labels: DrawnLabels) -> None:
        self._labels = labels
        self._selectors = [Selector(s, seed=labels.seed) for s in labels.sets]
        self._runs = [_runs(labels.column[s.subjects]) for s in labels.sets]
        # The subjects who have mixing decisions and own keys, in the order of the columns.
        self._mixed = np.argsort(labels.column)[np.sort(labels.column[labels.share < 1])]
        # share < 1, so share * 2^16 fits; a key below it means: this draw uses the shared key. Rounding down is
        # conservative.
        self._cut = np.floor(labels.share[self._mixed] * 2.0**COARSE_BITS).astype(np.uint16)
        self._inside = [np.flatnonzero(np.isin(s.subjects, self._mixed)) for s in labels.sets]
        place = np.empty(len(labels.share), dtype=np.intp)
        place[self._mixed] = np.arange(len(self._mixed))
        self._place = [place[s.subjects[i]] for s, i in zip(labels.sets, self._inside)]

    def start(self, block: int) -> None:
        """Go to the start of a block."""
        seed, sets = self._labels.seed, self._labels.sets
        for selector in self._selectors:
            selector.start(block)
        self._shared = KeyStream(seed, (block,), len(self._labels.share))
        if len(self._mixed):
            self._decisions = KeyStream(seed, (block, _DECISIONS), len(self._mixed))
            self._own = [KeyStream(seed, (block, *s.code), len(i)) for s, i in zip(sets, self._inside)]

    def advance(self, n_draws: int) -> None:
        """Read the keys of the next batch of draws."""
        self._n = n_draws
        self._keys = self._shared.read(n_draws)
        if len(self._mixed):
            self._use_shared = self._decisions.read(n_draws) < self._cut

    def fill(self, index: int) -> list[np.ndarray]:
        """Return the batch's labels of set `index`: per arm but the last, (draw, subject) 0/1 float64.

        To be called once per set and batch, as a set's own keys are read on the way.
        """
        selector, inside = self._selectors[index], self._inside[index]
        keys = selector.take(self._keys, self._runs[index])
        if len(inside):
            use_shared = self._use_shared[:, self._place[index]]
            keys[:, inside] = np.where(use_shared, keys[:, inside], self._own[index].read(self._n))
        return selector.select(keys)


def _runs(columns: np.ndarray) -> list[tuple[slice, slice]]:
    """Return the pieces (to, from) in which neighbouring columns can be copied together; two for a pair of arms."""
    starts = np.concatenate([[0], np.flatnonzero(np.diff(columns) != 1) + 1, [len(columns)]]).tolist()
    return [(slice(a, b), slice(int(columns[a]), int(columns[a]) + b - a)) for a, b in pairwise(starts)]


@dataclass(frozen=True, slots=True, kw_only=True)
class EnumeratedLabels:
    """Every distinct relabelling of ONE reference set, once each, in a fixed order; blocks are ranges of it."""

    sets: tuple[ReferenceSet, ...]  # exactly one

    @property
    def n_draws(self) -> int:
        return count_relabellings(self.sets[0].sizes)

    def reader(self) -> EnumeratedReader:
        """Return a reader of these labels, block by block."""
        return EnumeratedReader(self.sets[0])


class EnumeratedReader:
    """Relabellings of one set, a range of ranks at a time."""

    def __init__(self, reference_set: ReferenceSet) -> None:
        self._set = reference_set

    def start(self, block: int) -> None:
        """Go to the start of a block."""
        self._next = block * BLOCK_DRAWS

    def advance(self, n_draws: int) -> None:
        """Move on to the next batch of relabellings."""
        self._rank = np.arange(self._next, self._next + n_draws, dtype=np.int64)
        self._next += n_draws

    def fill(self, index: int) -> list[np.ndarray]:
        """Return the batch's labels: the rank is a mixed-radix number with a digit per cell and arm but the last."""
        rank = self._rank
        indicators = [np.empty((len(rank), len(self._set.subjects))) for _ in self._set.arms[:-1]]
        for cell, counts in enumerate(self._set.sizes):
            members = np.flatnonzero(self._set.cell == cell)
            free = np.ones((len(rank), len(members)), dtype=bool)
            left = int(counts.sum())
            for arm, indicator in enumerate(indicators):
                size = int(counts[arm])
                rank, digit = np.divmod(rank, comb(left, size))
                chosen = _choose(digit, free, left, size)
                indicator[:, members] = chosen
                free &= ~chosen
                left -= size
        return indicators


def _choose(digit: np.ndarray, free: np.ndarray, left: int, size: int) -> np.ndarray:
    """Return (draw, member) bool, the subset number `digit` of `size` among the `left` free members of each draw."""
    # Entries above the number of relabellings are never reached; the cap keeps them inside 64 bits.
    table = np.array([[min(comb(n, k), _CAP) for k in range(size + 1)] for n in range(left + 1)], dtype=np.int64)
    digit = digit.copy()
    remaining = np.full(len(digit), left)
    wanted = np.full(len(digit), size)
    chosen = np.zeros(free.shape, dtype=bool)
    for member in range(free.shape[1]):
        is_free = free[:, member]
        # Subsets that take this member come first: C(remaining - 1, wanted - 1) of them.
        ways = np.where(wanted > 0, table[np.maximum(remaining - 1, 0), np.maximum(wanted - 1, 0)], 0)
        take = is_free & (digit < ways)
        digit -= np.where(is_free & ~take, ways, 0)
        chosen[:, member] = take
        wanted -= take
        remaining -= is_free
    return chosen
