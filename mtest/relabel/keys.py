"""Random keys per subject and draw, addressed by (seed, block) and stable for ever.

Only the raw integers of PCG64DXSM are used: numpy promises that raw streams never change, and makes no such promise
for the methods of Generator. A 64-bit word gives several keys, low bits first. A draw always starts on a fresh word,
so a block may be read in batches of any size without changing a key.
"""

from __future__ import annotations

import numpy as np

BLOCK_DRAWS = 1024  # draws per block: part of the format, recorded in every bundle, never changed
COARSE_BITS = 16  # of a key; ties at a border are resolved with fresh keys of FINE_BITS, so nothing is lost
FINE_BITS = 32
GENERATOR = "PCG64DXSM raw 64-bit words, four 16-bit keys each; ties at a border resolved with fresh 32-bit keys"

_DTYPE = {COARSE_BITS: "<u2", FINE_BITS: "<u4"}


class KeyStream:
    """Keys of one block, read in order.

    Parameters
    ----------
    seed : int
    address : tuple of int
        (block,) for the keys that all pairs share; longer tuples for streams that belong to one pair of arms.
    width : int
        Keys per draw.
    bits : int
        Bits per key.
    """

    def __init__(self, seed: int, address: tuple[int, ...], width: int, *, bits: int = COARSE_BITS) -> None:
        self._bits = np.random.PCG64DXSM(np.random.SeedSequence(seed, spawn_key=address))
        self._width = width
        self._per_word = 64 // bits
        self._words = -(-width // self._per_word)
        self._dtype = _DTYPE[bits]

    def read(self, n_draws: int) -> np.ndarray:
        """Return the next (draw, key) unsigned keys."""
        raw = self._bits.random_raw(n_draws * self._words)
        keys = raw.astype("<u8", copy=False).view(self._dtype).reshape(n_draws, self._per_word * self._words)
        return keys[:, : self._width]
