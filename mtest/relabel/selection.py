"""From keys to labels: in each cell the lowest keys go to the first arm, the next to the second, and so on.

A threshold is enough; nobody is shuffled. A key that ties exactly at a threshold would give an arm too many subjects:
such a draw of such a set is resolved with fresh keys. Whether a draw is tied does not depend on who in a cell holds
which key, so every relabelling stays equally likely.
"""

from __future__ import annotations

import numpy as np

from mtest.relabel.keys import KeyStream
from mtest.relabel.sets import ReferenceSet

_FRESH = 1  # the branch of a block's address under which fresh keys are drawn; longer than any other address


class Selector:
    """Labels of one reference set from its subjects' keys.

    Parameters
    ----------
    reference_set : ReferenceSet
    seed : int
        For the fresh keys of tied draws.
    """

    def __init__(self, reference_set: ReferenceSet, *, seed: int) -> None:
        self._set = reference_set
        self._seed = seed
        self._n = len(reference_set.subjects)
        self._buffers: dict[str, np.ndarray] = {}
        self._one_cell = len(reference_set.sizes) == 1
        start = np.concatenate([[0], np.cumsum(reference_set.sizes.sum(axis=1))[:-1]])
        last = start[:, None] + np.cumsum(reference_set.sizes, axis=1)  # one past the last place of each arm
        # Places of the sorted keys that close an arm; -1 where no subject of the cell lies below the border.
        self._borders = [np.where(last[:, k] > start, last[:, k] - 1, -1) for k in range(last.shape[1] - 1)]
        self._open = [last[:, k] < start + reference_set.sizes.sum(axis=1) for k in range(last.shape[1] - 1)]
        # Cells stand in the high half of a 64-bit key, counted from 1, so that one sort orders all cells at once.
        self._high = (reference_set.cell.astype(np.uint64) + 1) << np.uint64(32)
        self._below = (np.arange(len(reference_set.sizes), dtype=np.uint64) + 1 << np.uint64(32)) - np.uint64(1)

    def take(self, keys: np.ndarray) -> np.ndarray:
        """Return the set's columns of (draw, subject of the study) keys, in a buffer of this selector's."""
        out = self._buffer("keys", keys, np.uint32)
        # mode="clip": "raise" would go through a copy; the columns are known to exist.
        return np.take(keys, self._set.subjects, axis=1, out=out, mode="clip")

    def select(self, keys: np.ndarray, *, block: int, first_draw: int) -> list[np.ndarray]:
        """Return who is in each arm but the last: per arm, (draw, subject) 0/1 float64, in buffers of this selector's.

        Parameters
        ----------
        keys : (draw, subject) uint32
        block, first_draw : int
            Where the draws stand, for the address of fresh keys.
        """
        values = (
            keys if self._one_cell else np.bitwise_or(keys, self._high, out=self._buffer("values", keys, np.uint64))
        )
        ordered = self._buffer("ordered", keys, values.dtype)
        ordered[:] = values
        ordered.sort(axis=1)
        indicators = [self._buffer(f"arm {k}", keys, np.float64) for k in range(len(self._borders))]
        tied = self._thresholds(ordered, values, indicators)
        for draw in np.flatnonzero(tied):
            self._resolve(indicators, draw=int(draw), block=block, first_draw=first_draw)
        return indicators

    def _buffer(self, name: str, keys: np.ndarray, dtype) -> np.ndarray:
        """Return a (draw, subject) array that is kept for the next batch: fresh memory costs as much as sorting."""
        kept = self._buffers.get(name)
        if kept is None or len(kept) < len(keys):
            kept = self._buffers[name] = np.empty((len(keys), self._n), dtype=dtype)
        return kept[: len(keys)]

    def _thresholds(self, ordered, values, indicators) -> np.ndarray:
        """Write the indicators and return (draw,) bool, true where a border is tied."""
        tied = np.zeros(len(values), dtype=bool)
        lower: np.ndarray | None = None
        for border, is_open, indicator in zip(self._borders, self._open, indicators, strict=True):
            upper = self._spread(ordered, border)
            np.less_equal(values, upper, out=indicator, casting="unsafe")
            if lower is not None:
                indicator *= values > lower
            lower = upper
            inside = is_open & (border >= 0)
            at = border[inside]
            tied |= np.any(ordered[:, at] == ordered[:, at + 1], axis=1)
        return tied

    def _spread(self, ordered: np.ndarray, border: np.ndarray) -> np.ndarray:
        """Return each subject's threshold, (draw, subject), or (draw, 1) where there is one cell."""
        if self._one_cell:
            return ordered[:, border]  # an arm of the set is never empty over all cells
        thresholds = ordered[:, border]
        empty = border < 0
        thresholds[:, empty] = self._below[empty]
        return np.take(thresholds, self._set.cell, axis=1)

    def _resolve(self, indicators, *, draw: int, block: int, first_draw: int) -> None:
        """Draw fresh keys for one draw of this set until no border is tied."""
        for attempt in range(1000):
            address = (block, _FRESH, first_draw + draw, attempt, *self._set.code)
            keys = KeyStream(self._seed, address, self._n).read(1)
            values = keys if self._one_cell else keys | self._high
            rows = [indicator[draw : draw + 1] for indicator in indicators]
            if not self._thresholds(np.sort(values, axis=1), values, rows).any():
                return
        raise AssertionError("a thousand tied draws in a row: the key stream is broken")
