"""Where labels come from: drawn by keys, or enumerated one after the other. Both fill the same indicators."""

from __future__ import annotations

from dataclasses import dataclass
from math import comb

import numpy as np

from mtest.relabel.keys import BLOCK_DRAWS, KeyStream
from mtest.relabel.selection import Selector
from mtest.relabel.sets import ReferenceSet, count_relabellings

_CAP = 2**62
_DECISIONS = 0  # branch of a block's address for the mixing decisions; a set's own keys stand under its code


@dataclass(frozen=True, slots=True, kw_only=True)
class DrawnLabels:
    """Labels drawn at random: one shared key per subject, mixed with keys of a pair's own where a share is below 1.

    sets : the reference sets
    share : (subject,) float, each subject's mixing share
    n_draws : int, draws in all
    """

    seed: int
    sets: tuple[ReferenceSet, ...]
    share: np.ndarray
    n_draws: int

    def open_block(self, block: int) -> _DrawnBlock:
        """Return the block's labels, to be read in order."""
        return _DrawnBlock(self, block)


class _DrawnBlock:
    def __init__(self, labels: DrawnLabels, block: int) -> None:
        self._labels = labels
        self._block = block
        self._done = 0
        self._shared = KeyStream(labels.seed, (block,), len(labels.share))
        self._selectors = [Selector(s, seed=labels.seed) for s in labels.sets]
        self._mixed = np.flatnonzero(labels.share < 1)
        self._decisions = KeyStream(labels.seed, (block, _DECISIONS), len(self._mixed))
        # share < 1, so share * 2^32 fits; a key below it means: this draw uses the shared key.
        self._cut = np.floor(labels.share[self._mixed] * 2.0**32).astype(np.uint32)
        self._own: list[tuple[np.ndarray, np.ndarray, KeyStream] | None] = []
        for s in labels.sets:
            inside = np.flatnonzero(np.isin(s.subjects, self._mixed))
            place = np.searchsorted(self._mixed, s.subjects[inside])
            stream = KeyStream(labels.seed, (block, s.code), len(inside))
            self._own.append((inside, place, stream) if len(inside) else None)

    def advance(self, n_draws: int) -> None:
        """Read the keys of the next batch of draws."""
        self._first = self._done
        self._done += n_draws
        self._n = n_draws
        self._keys = self._shared.read(n_draws)
        if len(self._mixed):
            self._use_shared = self._decisions.read(n_draws) < self._cut

    def fill(self, index: int, indicators: list[np.ndarray]) -> None:
        """Write the batch's labels of set `index`; once per set and batch, as a set's own keys are read on the way."""
        keys = np.take(self._keys, self._labels.sets[index].subjects, axis=1)
        own = self._own[index]
        if own is not None:
            inside, place, stream = own
            keys[:, inside] = np.where(self._use_shared[:, place], keys[:, inside], stream.read(self._n))
        self._selectors[index].select(keys, indicators, block=self._block, first_draw=self._first)


@dataclass(frozen=True, slots=True, kw_only=True)
class EnumeratedLabels:
    """Every distinct relabelling of ONE reference set, once each, in a fixed order; blocks are ranges of it."""

    sets: tuple[ReferenceSet, ...]  # exactly one

    @property
    def n_draws(self) -> int:
        return count_relabellings(self.sets[0].sizes)

    def open_block(self, block: int) -> _EnumeratedBlock:
        """Return the block's labels, to be read in order."""
        return _EnumeratedBlock(self.sets[0], block * BLOCK_DRAWS)


class _EnumeratedBlock:
    def __init__(self, reference_set: ReferenceSet, first: int) -> None:
        self._set = reference_set
        self._next = first

    def advance(self, n_draws: int) -> None:
        """Move on to the next batch of relabellings."""
        self._rank = np.arange(self._next, self._next + n_draws, dtype=np.int64)
        self._next += n_draws

    def fill(self, index: int, indicators: list[np.ndarray]) -> None:
        """Write the batch's labels: the rank is a mixed-radix number with a digit per cell and arm but the last."""
        rank = self._rank.copy()
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
