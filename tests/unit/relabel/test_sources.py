"""Where keys come from: every stream has an address of its own."""

import numpy as np

from mtest.relabel.keys import COARSE_BITS, KeyStream
from mtest.relabel.sets import key_columns, pair_set
from mtest.relabel.sources import DrawnLabels


def test_no_two_streams_of_a_run_share_an_address(monkeypatch):
    """Large cells, so that draws are tied and fresh keys are read; a reference arm with keys of its own."""
    seen = []

    class Recorded(KeyStream):
        def __init__(self, seed, address, width, *, bits=COARSE_BITS):
            seen.append(address)
            super().__init__(seed, address, width, bits=bits)

    for module in ("sources", "selection"):
        monkeypatch.setattr(f"mtest.relabel.{module}.KeyStream", Recorded)
    arm = np.repeat([0, 1, 2], [4000, 2000, 2000])
    cell = np.zeros(len(arm), dtype=int)
    sets = tuple(pair_set(arm, cell, (k, 0), name="pair") for k in (1, 2))
    share = np.where(arm == 0, 0.5, 1.0)
    reader = DrawnLabels(seed=1, sets=sets, share=share, column=key_columns(arm), n_draws=2048).reader()
    for block in (0, 1):
        reader.start(block)
        reader.advance(64)
        for index in range(len(sets)):
            reader.fill(index)
    # Per block: shared keys, mixing decisions, and own and fresh keys of either pair.
    assert len(seen) == len(set(seen)) == 2 * 6
