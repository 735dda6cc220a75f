"""p-values from drawn relabellings: the plus-one rule, its size, and the confidence sequence."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import stats

from mtest.adjust.montecarlo import confidence_sequence, p_from_counts


def test_plus_one(source):
    """Phipson & Smyth 2010: (b + 1) / (m + 1)."""
    example = source("phipson_smyth_2010")
    p = p_from_counts(np.array(example["data"]["b"]), example["data"]["m"], exact=False)
    assert p == pytest.approx(example["formula"]["plus_one"], abs=1e-12)


@pytest.mark.parametrize("m", [99, 999, 1000])
def test_size_of_plus_one(source, m):
    """Under the null the count is uniform on 0..m, so the size at 0.05 is the share of counts with p <= 0.05."""
    p = p_from_counts(np.arange(m + 1), m, exact=False)
    size = np.mean(p <= 0.05)
    assert size == pytest.approx(source("monte_carlo_size")["plus_one_size"][str(m)], abs=5e-9)


def test_enumerated_p_is_the_plain_share():
    """The identity is one of the 126: nothing is added."""
    assert p_from_counts(np.array([5]), 126, exact=True)[0] == 5 / 126


@pytest.mark.parametrize("s, n", [(0, 1000), (5, 100), (7, 21)])
def test_confidence_sequence_ends_solve_robbins_equation(s, n):
    """Robbins 1970: at both ends (n + 1) times the binomial probability of s is the error; 0 is its own end."""
    low, high = confidence_sequence(np.array([s]), n, error=0.05)
    ends = [high[0]] if s == 0 else [low[0], high[0]]
    assert [(n + 1) * stats.binom.pmf(s, n, p) for p in ends] == pytest.approx([0.05] * len(ends), rel=1e-9)


@pytest.mark.parametrize(
    "s, n, low, high",
    [(0, 1000, "0", "0.0036820839"), (5, 100, "0.016431879", "0.11283491"), (7, 21, "0.14587694", "0.56967548")],
)
def test_confidence_sequence_holds_the_fixed_sample_interval(s, n, low, high):
    """Valid for all n at once, it must be wider than Clopper & Pearson's 95 % interval (from memory, confirmed)."""
    sequence_low, sequence_high = confidence_sequence(np.array([s]), n, error=0.05)
    assert sequence_low[0] <= float(low)
    assert sequence_high[0] >= float(high)


def test_confidence_sequence_rarely_ever_misses():
    """2000 null walks of 2000 draws, p 0.05, error 0.05: the share that EVER leaves is at most 0.05 + 4 SE."""
    rng = np.random.default_rng(5)
    checkpoints = np.unique(np.geomspace(1, 2000, 60).astype(int))
    counts = np.cumsum(rng.random((2000, 2000)) < 0.05, axis=1)
    missed = np.zeros(2000, dtype=bool)
    for n in checkpoints:
        low, high = confidence_sequence(counts[:, n - 1], int(n), error=0.05)
        missed |= (low > 0.05) | (high < 0.05)
    assert missed.mean() <= 0.05 + 4 * np.sqrt(0.05 * 0.95 / 2000)
