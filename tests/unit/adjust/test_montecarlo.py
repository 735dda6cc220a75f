"""p-values from counts, and the confidence sequence."""

import numpy as np
import pytest
from scipy.special import comb

from mtest.adjust.montecarlo import confidence_sequence, p_from_counts


def test_drawn_p_values_are_never_0():
    assert p_from_counts(np.array([0, 5, 99]), 99, exact=False).tolist() == [0.01, 0.06, 1.0]


def test_enumerated_p_values_are_shares():
    assert p_from_counts(np.array([1, 20]), 20, exact=True).tolist() == [0.05, 1.0]


@pytest.mark.parametrize(("count", "n"), [(0, 10), (3, 10), (10, 10), (17, 40)])
def test_the_bounds_solve_robbins_equation(count, n):
    low, high = (float(x[0]) for x in confidence_sequence(np.array([count]), n, error=0.01))

    def value(p):
        return (n + 1) * comb(n, count) * p**count * (1 - p) ** (n - count)

    if count > 0:
        assert value(low) == pytest.approx(0.01, rel=1e-6)
    else:
        assert low == 0
    if count < n:
        assert value(high) == pytest.approx(0.01, rel=1e-6)
    else:
        assert high == 1


def test_no_draws_say_nothing():
    assert [x.tolist() for x in confidence_sequence(np.array([0]), 0)] == [[0.0], [1.0]]


def test_the_sequence_holds_at_all_looks_at_once():
    """Ville: P(p leaves the sequence at any n) <= error; 2,000 runs of 1,000 draws, looked at after every draw."""
    p, error, runs, n = 0.05, 0.05, 2000, 1000
    draws = np.random.default_rng(8).random((runs, n)) < p
    counts = np.cumsum(draws, axis=1)
    missed = np.zeros(runs, dtype=bool)
    for k in range(10, n + 1, 10):
        low, high = confidence_sequence(counts[:, k - 1], k, error=error)
        missed |= (p < low) | (p > high)
    assert missed.mean() <= error + 4 * np.sqrt(error * (1 - error) / runs)


def test_many_draws_narrow_the_sequence():
    low, high = confidence_sequence(np.array([5_000]), 100_000)
    assert 0.046 < low[0] < 0.05 < high[0] < 0.054


def test_the_sequence_of_the_report_misses_once_in_a_hundred():
    counts = np.array([0, 3, 60])
    assert np.array_equal(confidence_sequence(counts, 1000), confidence_sequence(counts, 1000, error=0.01))
