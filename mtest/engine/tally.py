"""Tallies: integers that add up over draws, in any order."""

from __future__ import annotations

from dataclasses import dataclass, fields

import numpy as np


@dataclass(frozen=True, slots=True, kw_only=True)
class Thresholds:
    """What the draws are compared with, in observed order.

    count : (hypothesis,) observed statistic less its tolerance
    near : (hypothesis,) observed statistic less a thousand tolerances
    edges : (bin,) lower edges of the histogram of the maximum
    """

    count: np.ndarray
    near: np.ndarray
    edges: np.ndarray


@dataclass(slots=True, kw_only=True)
class Tally:
    """Counts over draws; hypotheses in observed order.

    raw : draws with the hypothesis' own statistic at or above the observed one
    step : draws with the maximum over the hypothesis and all below it at or above the observed one
    raw_near, step_near : the same, counted with a thousand times the tolerance
    single, single_near : (hypothesis + 1,) draws whose overall maximum reaches exactly that many (sorted) thresholds
    maximum : (bin + 1,) histogram of the overall maximum
    """

    n: int
    raw: np.ndarray
    raw_near: np.ndarray
    step: np.ndarray
    step_near: np.ndarray
    single: np.ndarray
    single_near: np.ndarray
    maximum: np.ndarray

    def add(self, other: Tally) -> None:
        """Add another tally's counts to this one."""
        for field in fields(self):
            setattr(self, field.name, getattr(self, field.name) + getattr(other, field.name))

    def single_step(self, thresholds: Thresholds) -> np.ndarray:
        """Return (hypothesis,) draws whose overall maximum is at or above each observed statistic."""
        return _at_or_above(self.single, thresholds.count)

    def single_step_near(self, thresholds: Thresholds) -> np.ndarray:
        """Return the same, counted with a thousand times the tolerance."""
        return _at_or_above(self.single_near, thresholds.near)


def _at_or_above(reached: np.ndarray, thresholds: np.ndarray) -> np.ndarray:
    """Return per threshold the draws at or above it, from the draws that reach exactly 0, 1, ... thresholds."""
    by_rank = np.cumsum(reached[::-1])[::-1][1:]
    rank = np.empty(len(thresholds), dtype=np.intp)
    rank[np.argsort(thresholds, kind="stable")] = np.arange(len(rank))
    return by_rank[rank]


def empty_tally(thresholds: Thresholds) -> Tally:
    """Return a tally of no draws."""
    m = len(thresholds.count)
    zero = [np.zeros(m, dtype=np.int64) for _ in range(4)]
    return Tally(
        n=0,
        raw=zero[0],
        raw_near=zero[1],
        step=zero[2],
        step_near=zero[3],
        single=np.zeros(m + 1, dtype=np.int64),
        single_near=np.zeros(m + 1, dtype=np.int64),
        maximum=np.zeros(len(thresholds.edges) + 1, dtype=np.int64),
    )


class Counter:
    """Count batches of statistics into a tally, chunk by chunk from the smallest observed statistics up."""

    def __init__(self, thresholds: Thresholds) -> None:
        self._thresholds = thresholds
        self._sorted = np.sort(thresholds.count)
        self._sorted_near = np.sort(thresholds.near)
        self.tally = empty_tally(thresholds)

    def count_chunk(self, statistics: np.ndarray, running: np.ndarray, rows: slice) -> None:
        """Count one chunk and raise the running maximum.

        statistics : (hypothesis of the chunk, draw), overwritten with the maxima over the hypothesis and all below
        running : (draw,) maximum over the chunks below, overwritten
        """
        count, near = self._thresholds.count[rows, None], self._thresholds.near[rows, None]
        tally = self.tally
        _count_rows(statistics, count, near, tally.raw[rows], tally.raw_near[rows])
        if running.min() >= count.max():
            # In every draw something below already reaches all thresholds of the chunk: common in large families.
            tally.step[rows] += len(running)
            tally.step_near[rows] += len(running)
            np.maximum(running, statistics.max(axis=0), out=running)
            return
        below = running
        # Rows are contiguous over draws, so each maximum runs at memory speed; accumulate along axis 0 does not.
        for row in statistics[::-1]:
            below = np.maximum(row, below, out=row)
        running[:] = below
        _count_rows(statistics, count, near, tally.step[rows], tally.step_near[rows])

    def close_batch(self, maxima: np.ndarray) -> None:
        """Count the overall maxima of a batch."""
        tally = self.tally
        tally.n += len(maxima)
        for counts, levels in ((tally.single, self._sorted), (tally.single_near, self._sorted_near)):
            counts += np.bincount(np.searchsorted(levels, maxima, side="right"), minlength=len(counts))
        bins = np.searchsorted(self._thresholds.edges, maxima, side="right")
        tally.maximum += np.bincount(bins, minlength=len(tally.maximum))


def _count_rows(statistics, count, near, counts: np.ndarray, near_counts: np.ndarray) -> None:
    """Add each row's number of draws at or above its two thresholds."""
    numbers = _true_per_row(statistics >= count)
    counts += numbers
    nearly = statistics >= near
    # Near ties are rare: one count over all rows mostly shows that there are none.
    near_counts += numbers if np.count_nonzero(nearly) == numbers.sum() else _true_per_row(nearly)


def _true_per_row(flags: np.ndarray) -> np.ndarray:
    """Return (row,) the number of true flags; eight to a byte, several times faster than summing them."""
    return np.bitwise_count(np.packbits(flags, axis=1)).sum(axis=1, dtype=np.int64)
