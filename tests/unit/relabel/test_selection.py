"""Every relabelling is equally likely, ties included."""

from collections import Counter

import numpy as np
import pytest
from scipy.stats import chi2

from mtest.relabel.selection import Selector
from mtest.relabel.sets import count_relabellings, key_columns, pair_set, whole_set
from mtest.relabel.sources import DrawnLabels, EnumeratedLabels

DESIGNS = {
    "one cell, two arms": ([0, 0, 0, 1, 1, 1], [0] * 6),
    "two cells, one of them lopsided": ([0, 1, 1, 0, 0, 1], [0, 0, 0, 1, 1, 1]),
    "a cell with one arm only": ([0, 0, 1, 1, 0, 0], [0, 0, 0, 0, 1, 1]),
    "matched pairs": ([0, 1, 1, 0, 0, 1], [0, 0, 1, 1, 2, 2]),
    "three arms": ([0, 0, 1, 1, 2, 2], [0] * 6),
    "three arms in two cells, an arm missing from one": ([0, 1, 2, 0, 1, 1], [0, 0, 0, 1, 1, 1]),
}


def reference_set(design):
    arm, cell = (np.array(x) for x in DESIGNS[design])
    n_arms = int(arm.max()) + 1
    if n_arms == 2:
        return pair_set(arm, cell, (0, 1), name="pair")
    return whole_set(arm, cell, n_arms=n_arms, name="all arms")


def codes(indicators):
    """Return (draw,) bytes: the arm of each subject, the last arm as 0."""
    total = sum((k + 1) * indicator for k, indicator in enumerate(indicators))
    return [row.tobytes() for row in total.astype(np.uint8)]


def drawn(chosen, *, blocks=40):
    reader = DrawnLabels(seed=1, sets=(chosen,), share=np.ones(6), column=np.arange(6), n_draws=10**6).reader()
    for block in range(blocks):
        reader.start(block)
        reader.advance(1024)
        yield reader.fill(0)


@pytest.mark.parametrize("design", DESIGNS)
def test_enumeration_gives_each_distinct_relabelling_once(design):
    chosen = reference_set(design)
    labels = EnumeratedLabels(sets=(chosen,))
    reader = labels.reader()
    reader.start(0)
    reader.advance(labels.n_draws)
    seen = codes(reader.fill(0))
    assert len(seen) == len(set(seen)) == count_relabellings(chosen.sizes)


@pytest.mark.parametrize("design", DESIGNS)
def test_draws_are_uniform_over_the_enumerated_relabellings(design):
    chosen = reference_set(design)
    seen = Counter(code for indicators in drawn(chosen) for code in codes(indicators))
    n = count_relabellings(chosen.sizes)
    assert len(seen) == n
    expected = 40 * 1024 / n
    statistic = sum((count - expected) ** 2 / expected for count in seen.values())
    assert statistic <= chi2.ppf(1 - 1e-6, max(n - 1, 1))


@pytest.mark.parametrize("design", DESIGNS)
def test_arm_sizes_are_kept_in_every_cell(design):
    chosen = reference_set(design)
    for indicators in drawn(chosen, blocks=1):
        for k, indicator in enumerate(indicators):
            for cell, sizes in enumerate(chosen.sizes):
                assert np.all(indicator[:, chosen.cell == cell].sum(axis=1) == sizes[k])


def selected(chosen, keys):
    selector = Selector(chosen, seed=9)
    selector.start(0)
    return selector.select(np.array(keys, dtype=np.uint16))


@pytest.mark.parametrize("design", ["one cell, two arms", "matched pairs", "three arms"])
def test_keys_tied_at_a_border_are_resolved_uniformly_with_fresh_keys(design):
    """All keys equal: every label must come from the fresh keys."""
    chosen = reference_set(design)
    selector = Selector(chosen, seed=9)
    keys = np.full((512, 6), 77, dtype=np.uint16)
    seen = Counter()
    for block in range(40):
        selector.start(block)
        seen.update(codes(selector.select(keys)))
    n = count_relabellings(chosen.sizes)
    expected = 40 * 512 / n
    statistic = sum((count - expected) ** 2 / expected for count in seen.values())
    assert len(seen) == n
    assert statistic <= chi2.ppf(1 - 1e-6, n - 1)


def test_fresh_keys_that_tie_again_are_drawn_again(monkeypatch):
    """The first fresh keys are made to tie too; the next ones decide."""
    calls = []

    class Stub:
        def __init__(self, *_, **__):
            pass

        def read(self, n_draws):
            calls.append(n_draws)
            return np.array([[5] * 6 if len(calls) == 1 else [1, 2, 3, 4, 5, 6]] * n_draws, dtype=np.uint32)

    monkeypatch.setattr("mtest.relabel.selection.KeyStream", Stub)
    labels = selected(reference_set("one cell, two arms"), [[7] * 6])[0]
    assert labels[0].tolist() == [1, 1, 1, 0, 0, 0]
    assert calls == [1, 1]


def test_only_the_tied_draw_gets_fresh_keys():
    keys = [[1, 2, 3, 4, 5, 6], [9, 9, 9, 9, 9, 9], [6, 5, 4, 3, 2, 1]]
    first = selected(reference_set("one cell, two arms"), keys)[0]
    assert first[0].tolist() == [1, 1, 1, 0, 0, 0]
    assert first[2].tolist() == [0, 0, 0, 1, 1, 1]
    assert first[1].sum() == 3


def test_a_tie_away_from_the_border_changes_nothing():
    assert selected(reference_set("one cell, two arms"), [[1, 1, 3, 4, 8, 8]])[0][0].tolist() == [1, 1, 1, 0, 0, 0]


def test_the_extreme_keys_are_ordinary_keys():
    chosen = reference_set("two cells, one of them lopsided")
    assert chosen.subjects.tolist() == [0, 3, 4, 1, 2, 5]
    keys = np.array([0, 2**16 - 1, 5, 0, 2**16 - 1, 7])[chosen.subjects]
    expected = np.array([1, 0, 0, 1, 0, 1])[chosen.subjects]
    assert selected(chosen, [keys])[0][0].tolist() == expected.tolist()


def test_batches_do_not_change_the_labels_of_tied_draws():
    """A large cell, so that ties at the border are common: a block read whole and in parts gives the same labels."""
    arm = np.repeat([0, 1], 2000)
    chosen = pair_set(arm, np.zeros(4000, dtype=int), (0, 1), name="pair")
    reader = DrawnLabels(seed=3, sets=(chosen,), share=np.ones(4000), column=np.arange(4000), n_draws=10**6).reader()
    reader.start(2)
    reader.advance(1024)
    whole = reader.fill(0)[0].copy()
    reader.start(2)
    parts = []
    for size in (1, 500, 523):
        reader.advance(size)
        parts.append(reader.fill(0)[0].copy())
    assert np.array_equal(whole, np.concatenate(parts))
    assert np.all(whole.sum(axis=1) == 2000)


def test_more_cells_than_16_bits_hold_are_kept_apart():
    n = 70_000
    arm, cell = np.tile([0, 1], n), np.repeat(np.arange(n), 2)
    chosen = pair_set(arm, cell, (0, 1), name="pair")
    reader = DrawnLabels(seed=3, sets=(chosen,), share=np.ones(2 * n), column=np.arange(2 * n), n_draws=10**6).reader()
    reader.start(0)
    reader.advance(4)
    by_cell = reader.fill(0)[0][:, np.argsort(chosen.cell, kind="stable")]
    assert np.all(by_cell.reshape(4, n, 2).sum(axis=2) == 1)


def test_the_number_of_relabellings_is_an_exact_integer():
    arm, cell = np.repeat([0, 1, 2, 3], 78), np.arange(312) % 16
    sizes = whole_set(arm, cell, n_arms=4, name="all arms").sizes
    by_hand = 1
    from math import factorial

    for row in sizes:
        ways = factorial(int(row.sum()))
        for count in row:
            ways //= factorial(int(count))
        by_hand *= ways
    assert count_relabellings(sizes) == by_hand
    assert by_hand > 10**100


def test_enumeration_of_a_very_unequal_set_stays_inside_64_bits():
    arm = np.array([0] * 200 + [1])
    chosen = pair_set(arm, np.zeros(201, dtype=int), (0, 1), name="pair")
    labels = EnumeratedLabels(sets=(chosen,))
    reader = labels.reader()
    reader.start(0)
    reader.advance(labels.n_draws)
    assert len(set(codes(reader.fill(0)))) == 201


def test_a_block_of_an_enumeration_is_a_range_of_it():
    arm = np.array([0] * 6 + [1] * 7)
    chosen = pair_set(arm, np.zeros(13, dtype=int), (0, 1), name="pair")
    reader = EnumeratedLabels(sets=(chosen,)).reader()
    reader.start(0)
    reader.advance(1716)
    whole = codes(reader.fill(0))
    reader.start(1)
    reader.advance(692)
    assert codes(reader.fill(0)) == whole[1024:]


def test_own_keys_of_a_pair_do_not_depend_on_other_pairs():
    arm, cell = np.repeat([0, 1, 2], [8, 3, 3]), np.zeros(14, dtype=int)
    share = np.where(arm == 0, 0.4, 1.0)
    pair = pair_set(arm, cell, (2, 0), name="c vs a")
    other = pair_set(arm, cell, (1, 0), name="b vs a")
    alone = DrawnLabels(seed=5, sets=(pair,), share=share, column=key_columns(arm), n_draws=10**6).reader()
    both = DrawnLabels(seed=5, sets=(other, pair), share=share, column=key_columns(arm), n_draws=10**6).reader()
    for reader in (alone, both):
        reader.start(3)
        reader.advance(100)
    assert np.array_equal(alone.fill(0)[0], both.fill(1)[0])
