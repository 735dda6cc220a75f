"""Counts against plain loops, and tallies that add up."""

import numpy as np
import pytest

from mtest.engine.tally import Counter, Thresholds

RNG = np.random.default_rng(5)
OBSERVED = np.array([3.0, 2.0, 2.0, 1.0, 0.5])
NULL = np.abs(RNG.normal(size=(5, 400))).round(1)  # rounded, so that there are ties


def counted(null, *, chunk=5, batch=400):
    thresholds = Thresholds(count=OBSERVED - 1e-9, near=OBSERVED - 0.101, edges=np.linspace(0, 4, 9))
    counter = Counter(thresholds)
    for start in range(0, null.shape[1], batch):
        part = null[:, start : start + batch].copy()
        running = np.full(part.shape[1], -np.inf)
        for last in range(5, 0, -chunk):
            rows = slice(max(last - chunk, 0), last)
            counter.count_chunk(part[rows], running, rows)
        counter.close_batch(running)
    return counter.tally, thresholds


def test_unadjusted_counts_are_those_of_a_plain_loop():
    tally, _ = counted(NULL)
    assert tally.raw.tolist() == [sum(x >= t for x in row) for row, t in zip(NULL, OBSERVED)]


def test_step_down_counts_compare_with_the_maximum_of_the_tail():
    tally, _ = counted(NULL)
    assert tally.step.tolist() == [sum(NULL[k:, r].max() >= OBSERVED[k] for r in range(400)) for k in range(5)]


def test_single_step_counts_compare_with_the_overall_maximum():
    tally, thresholds = counted(NULL)
    expected = [sum(NULL[:, r].max() >= t for r in range(400)) for t in OBSERVED]
    assert tally.single_step(thresholds).tolist() == expected


def test_near_ties_are_counted_with_the_wider_threshold():
    tally, _ = counted(NULL)
    assert tally.raw_near.tolist() == [sum(x >= t - 0.101 for x in row) for row, t in zip(NULL, OBSERVED)]
    assert (tally.raw_near > tally.raw).any()


def test_the_histogram_holds_every_maximum_once():
    tally, _ = counted(NULL)
    assert tally.maximum.sum() == 400
    assert tally.maximum[-1] == sum(NULL.max(axis=0) >= 4)


@pytest.mark.parametrize(("chunk", "batch"), [(1, 400), (1, 3), (2, 100), (2, 1), (5, 7)])
def test_chunks_and_batches_change_no_count(chunk, batch):
    whole, _ = counted(NULL)
    parts, _ = counted(NULL, chunk=chunk, batch=batch)
    for name in ("raw", "raw_near", "step", "step_near", "single", "single_near", "maximum"):
        assert np.array_equal(getattr(whole, name), getattr(parts, name)), name


def test_tallies_add_up():
    first, _ = counted(NULL[:, :150])
    second, _ = counted(NULL[:, 150:])
    whole, _ = counted(NULL)
    first.add(second)
    assert first.n == whole.n
    assert np.array_equal(first.step, whole.step)
    assert np.array_equal(first.single, whole.single)
