"""From keys to labels: in each cell the lowest keys go to the first arm, the next to the second, and so on.

A threshold is enough; nobody is shuffled. A key that ties exactly at a border between arms would give an arm too many
subjects: such a draw of such a set is resolved with fresh, longer keys. Whether a draw is tied does not depend on who
in a cell holds which key, so every relabelling stays equally likely, however short the keys are.
"""

from __future__ import annotations

import numpy as np

from mtest.relabel.keys import COARSE_BITS, FINE_BITS, KeyStream
from mtest.relabel.sets import ReferenceSet

_FRESH = 1  # the last part of the address under which a set's fresh keys stand


class _Layout:
    """How keys of a width are compared: as they are with one cell, else with the cell's number in the high bits.

    The cell counts from 1, so that a threshold below every key of the first cell exists.
    """

    def __init__(self, reference_set: ReferenceSet, bits: int) -> None:
        cells = np.arange(1, len(reference_set.sizes) + 1, dtype=np.uint64)
        self.one_cell = len(cells) == 1
        narrow = {COARSE_BITS: np.uint16, FINE_BITS: np.uint32}[bits]
        wide = np.uint32 if bits == COARSE_BITS and len(cells) < 2**16 - 1 else np.uint64
        self.dtype = np.dtype(narrow if self.one_cell else wide)
        self.high = (cells[reference_set.cell] << np.uint64(bits)).astype(wide)
        self.below = ((cells << np.uint64(bits)) - np.uint64(1)).astype(wide)


class Selector:
    """Labels of one reference set from its subjects' keys; its buffers are reused from batch to batch.

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
        self._coarse = _Layout(reference_set, COARSE_BITS)
        self._fine = _Layout(reference_set, FINE_BITS)
        size = reference_set.sizes.sum(axis=1)
        start = np.cumsum(size) - size
        last = start[:, None] + np.cumsum(reference_set.sizes, axis=1)  # one past the last place of each arm
        n_borders = reference_set.sizes.shape[1] - 1
        # Places of the sorted keys that close an arm; -1 where no subject of the cell lies below the border.
        self._borders = [np.where(last[:, k] > start, last[:, k] - 1, -1) for k in range(n_borders)]
        # Borders with subjects on both sides, the only ones that can be tied.
        self._real = [b[(b >= 0) & (last[:, k] < start + size)] for k, b in enumerate(self._borders)]

    def start(self, block: int) -> None:
        """Go to the start of a block."""
        self._block = block
        self._fresh: KeyStream | None = None

    def take(self, keys: np.ndarray, runs: list[tuple[slice, slice]]) -> np.ndarray:
        """Return the set's columns of (draw, column) keys, run by run (to, from), in a buffer of this selector's."""
        out = self._buffer("keys", len(keys), keys.dtype)
        for to, source in runs:
            out[:, to] = keys[:, source]
        return out

    def select(self, keys: np.ndarray) -> list[np.ndarray]:
        """Return who is in each arm but the last: per arm, (draw, subject) 0/1 float64, in buffers of this selector's.

        Parameters
        ----------
        keys : (draw, subject) uint16
            Of the draws that follow those of the last call, in the block started.
        """
        values = keys
        if not self._coarse.one_cell:
            values = np.bitwise_or(keys, self._coarse.high, out=self._buffer("values", len(keys), self._coarse.dtype))
        ordered = self._buffer("ordered", len(keys), values.dtype)
        ordered[:] = values
        ordered.sort(axis=1)
        indicators = [self._buffer(f"arm {k}", len(keys), np.dtype(float)) for k in range(len(self._borders))]
        tied = np.flatnonzero(self._label(self._coarse, ordered, values, indicators))
        if len(tied):
            for indicator, rows in zip(indicators, self._resolve(len(tied))):
                indicator[tied] = rows
        return indicators

    def _resolve(self, n_draws: int) -> list[np.ndarray]:
        """Return labels from fresh keys for the block's next tied draws, tied ones again until none is."""
        if self._fresh is None:
            address = (self._block, *self._set.code, _FRESH)
            self._fresh = KeyStream(self._seed, address, self._n, bits=FINE_BITS)
        indicators = [np.empty((n_draws, self._n)) for _ in self._borders]
        left = np.arange(n_draws)
        while len(left):
            keys = self._fresh.read(len(left))
            values = keys if self._fine.one_cell else keys | self._fine.high
            rows = [np.empty((len(left), self._n)) for _ in self._borders]
            tied = self._label(self._fine, np.sort(values, axis=1), values, rows)
            for indicator, row in zip(indicators, rows):
                indicator[left] = row
            left = left[tied]
        return indicators

    def _label(self, layout: _Layout, ordered, values, indicators) -> np.ndarray:
        """Write the indicators and return (draw,) bool, true where a border is tied."""
        tied = np.zeros(len(values), dtype=bool)
        lower: np.ndarray | None = None
        for border, real, indicator in zip(self._borders, self._real, indicators):
            upper = self._thresholds(layout, ordered, border)
            np.less_equal(values, upper, out=indicator, casting="unsafe")
            if lower is not None:
                indicator *= values > lower
            lower = upper
            tied |= np.any(ordered[:, real] == ordered[:, real + 1], axis=1)
        return tied

    def _thresholds(self, layout: _Layout, ordered: np.ndarray, border: np.ndarray) -> np.ndarray:
        """Return each subject's threshold, (draw, subject), or (draw, 1) where there is one cell."""
        if layout.one_cell:
            return ordered[:, border]  # an arm of the set is never empty over all cells
        thresholds = ordered[:, border]
        empty = border < 0
        thresholds[:, empty] = layout.below[empty]
        return np.take(thresholds, self._set.cell, axis=1)

    def _buffer(self, name: str, n_draws: int, dtype: np.dtype) -> np.ndarray:
        """Return a (draw, subject) array that is kept for the next batch: fresh memory costs as much as sorting."""
        kept = self._buffers.get(name)
        if kept is None or len(kept) < n_draws:
            kept = self._buffers[name] = np.empty((n_draws, self._n), dtype=dtype)
        return kept[:n_draws]
