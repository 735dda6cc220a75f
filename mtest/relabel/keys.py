"""One random key per subject and draw, addressed by (seed, block) and stable for ever.

Only the raw integers of PCG64DXSM are used: numpy promises that raw streams never change, and makes no such promise
for the methods of Generator. A 64-bit word gives two keys, low half first. A draw always starts on a fresh word, so
a block may be read in batches of any size without changing a key.
"""

from __future__ import annotations

import numpy as np

BLOCK_DRAWS = 1024  # draws per block: part of the format, recorded in every bundle, never changed
GENERATOR = "PCG64DXSM raw 64-bit words, two 32-bit keys each"


class KeyStream:
    """Keys of one block, read in order.

    Parameters
    ----------
    seed : int
    address : tuple of int
        (block,) for the keys that all pairs share; longer tuples for streams that belong to one pair or one draw.
    width : int
        Keys per draw.
    """

    def __init__(self, seed: int, address: tuple[int, ...], width: int) -> None:
        self._bits = np.random.PCG64DXSM(np.random.SeedSequence(seed, spawn_key=address))
        self._width = width
        self._words = (width + 1) // 2

    def read(self, n_draws: int) -> np.ndarray:
        """Return the next (draw, key) uint32 keys."""
        raw = self._bits.random_raw(n_draws * self._words)
        halves = raw.astype("<u8", copy=False).view("<u4").reshape(n_draws, 2 * self._words)
        return halves[:, : self._width]
