"""Step-down adjustment, and Boole's inequality across pairs against the full closed test."""

from itertools import chain, combinations

import numpy as np
import pytest

from mtest.adjust.maxt import across_pairs_single_step, across_pairs_step_down, step_down


def test_step_down_is_a_running_maximum():
    assert step_down(np.array([0.01, 0.05, 0.03, 0.2])).tolist() == [0.01, 0.05, 0.05, 0.2]


def random_pairs(seed):
    """Return null statistics and observed ones, (draw, hypothesis) and (hypothesis,), and the pair of each hypothesis.

    Integers, so that ties occur; the first draw is the observed one.
    """
    rng = np.random.default_rng(seed)
    pair = np.array([0, 0, 0, 1, 1, 2])
    null = rng.poisson(3, size=(40, 6)) + rng.poisson(2, size=(40, 1))
    null[0] += rng.poisson(3, size=6)
    return null, null[0], pair


def local_p(null, observed, pair, members):
    """Return Boole's local p-value of an intersection: pairs involved times the smallest of their max-T p-values."""
    members = np.array(members)
    smallest = []
    for k in np.unique(pair[members]):
        own = members[pair[members] == k]
        smallest.append(np.mean(null[:, own].max(axis=1) >= observed[own].max()))
    return min(1.0, len(smallest) * min(smallest))


@pytest.mark.parametrize("seed", range(100))
def test_boole_across_pairs_is_a_short_cut_of_the_closed_test(seed):
    null, observed, pair = random_pairs(seed)
    everything = range(6)
    subsets = list(chain.from_iterable(combinations(everything, r) for r in range(1, 7)))
    closed = [max(local_p(null, observed, pair, s) for s in subsets if h in s) for h in everything]

    orders, tails = [], []
    for k in range(3):
        own = np.flatnonzero(pair == k)
        own = own[np.argsort(-observed[own], kind="stable")]
        orders.append(own)
        tails.append(np.array([np.mean(null[:, own[i:]].max(axis=1) >= observed[own[i]]) for i in range(len(own))]))
    adjusted = np.empty(6)
    for own, p in zip(orders, across_pairs_step_down(tails)[0]):
        adjusted[own] = p
    assert adjusted == pytest.approx(closed, abs=1e-12)


def test_steps_number_the_hypotheses_in_the_order_considered():
    _, steps = across_pairs_step_down([np.array([0.01, 0.2]), np.array([0.03])])
    assert [s.tolist() for s in steps] == [[1, 3], [2]]


def test_single_step_multiplies_by_the_number_of_pairs():
    adjusted = across_pairs_single_step([np.array([0.01, 0.2]), np.array([0.6])])
    assert [p.tolist() for p in adjusted] == [[0.02, 0.4], [1.0]]
