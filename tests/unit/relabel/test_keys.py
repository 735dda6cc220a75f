"""Keys are addressed by (seed, block) and stable for ever."""

import hashlib

import numpy as np

from mtest.relabel.keys import KeyStream
from mtest.relabel.sets import pair_set
from mtest.relabel.sources import DrawnLabels


def test_first_raw_words_are_those_of_the_generator():
    bits = np.random.PCG64DXSM(np.random.SeedSequence(417, spawn_key=(0,)))
    words = [int(w) for w in bits.random_raw(2)]
    coarse = [words[k // 4] >> (16 * (k % 4)) & 0xFFFF for k in range(5)]
    assert list(KeyStream(417, (0,), 5).read(1)[0]) == coarse
    fine = [words[0] & 0xFFFFFFFF, words[0] >> 32, words[1] & 0xFFFFFFFF]
    assert list(KeyStream(417, (0,), 3, bits=32).read(1)[0]) == fine


def test_golden_hash_of_the_first_labels():
    """A change here means that no earlier bundle can be replayed: raise the bundle's format."""
    arm = np.repeat([0, 1], [5, 6])
    labels = DrawnLabels(
        seed=417,
        sets=(pair_set(arm, np.zeros(11, dtype=int), (0, 1), name="pair"),),
        share=np.ones(11),
        column=np.arange(11),
        n_draws=2048,
    )
    reader = labels.reader()
    digest = hashlib.sha256()
    for block in (0, 1):
        reader.start(block)
        reader.advance(1024)
        digest.update(reader.fill(0)[0].astype(np.uint8).tobytes())
    assert digest.hexdigest() == "b06991996846dca79ec84c006541e943a258ea8cd2214f9584100ca528c63b35"


def test_batches_do_not_change_a_key():
    whole = KeyStream(3, (5,), 7).read(12)
    stream = KeyStream(3, (5,), 7)
    parts = [stream.read(n) for n in (1, 4, 7)]
    assert np.array_equal(whole, np.concatenate(parts))


def test_blocks_and_branches_have_streams_of_their_own():
    streams = [KeyStream(3, address, 8).read(1).tobytes() for address in ((0,), (1,), (0, 0), (0, 1), (1, 0))]
    assert len(set(streams)) == len(streams)
