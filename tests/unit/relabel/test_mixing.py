"""The mixing share keeps the covariance that shared keys induce at or below the data's own."""

import numpy as np
import pytest
from scipy.integrate import quad

from mtest.relabel.mixing import common_weight, mixing_shares
from mtest.relabel.sets import key_columns, pair_set
from mtest.relabel.sources import DrawnLabels


@pytest.mark.parametrize(
    ("p", "q"), [((20, 20), (20, 20)), ((15, 90), (15, 90)), ((30, 40), (10, 40)), ((7, 3), (5, 9))]
)
def test_common_weight_is_the_integral_of_the_two_weights(p, q):
    def product(u):
        return (1 / p[0] if u <= p[0] / sum(p) else -1 / p[1]) * (1 / q[0] if u <= q[0] / sum(q) else -1 / q[1])

    cuts = [p[0] / sum(p), q[0] / sum(q)]
    assert common_weight(np.array(p), np.array(q)) == pytest.approx(quad(product, 0, 1, points=cuts)[0], rel=1e-9)


@pytest.mark.parametrize(("reference", "other"), [(90, 15), (60, 20), (40, 20), (20, 20), (15, 40)])
def test_reference_against_equal_arms_has_the_closed_form(reference, other):
    shares = mixing_shares(np.array([[reference, other, other, other]]), ((1, 0), (2, 0), (3, 0)))
    assert shares[0] == pytest.approx([min(1, other / reference), 1, 1, 1])


def test_only_pairs_of_the_family_count():
    sizes = np.array([[90, 15, 15]])
    assert mixing_shares(sizes, ((1, 0),)).tolist() == [[1, 1, 1]]


def test_a_pair_absent_from_a_cell_does_not_count():
    assert mixing_shares(np.array([[90, 15, 0]]), ((1, 0), (2, 0))).tolist() == [[1, 1, 1]]


def test_each_cell_has_shares_of_its_own():
    shares = mixing_shares(np.array([[4, 2, 2], [2, 2, 2]]), ((1, 0), (2, 0)))
    assert shares[:, 0] == pytest.approx([0.5, 1.0])


def relabelled_correlation(sizes, share, *, draws=40_960):
    """Return the correlation of two pairs' mean differences over draws, the reference being arm 0."""
    rng = np.random.default_rng(4)
    arm = np.repeat(np.arange(3), sizes)
    cell = np.zeros(len(arm), dtype=int)
    y = rng.standard_normal(len(arm))
    sets = tuple(pair_set(arm, cell, (k, 0), name="pair") for k in (1, 2))
    reader = DrawnLabels(
        seed=2, sets=sets, share=np.where(arm == 0, share, 1.0), column=key_columns(arm), n_draws=10**9
    ).reader()
    sums = [[], []]
    for block in range(draws // 1024):
        reader.start(block)
        reader.advance(1024)
        for k, s in enumerate(sets):
            z = y[s.subjects] - y[s.subjects].mean()
            sums[k].append(reader.fill(k)[0] @ z)
    return np.corrcoef(np.concatenate(sums[0]), np.concatenate(sums[1]))[0, 1]


@pytest.mark.parametrize(("n0", "n"), [(200, 200), (300, 100), (100, 200)])
def test_relabelled_pairs_correlate_no_more_than_the_data(n0, n):
    """Two arms of n against a reference of n0: the data's correlation is n / (n + n0)."""
    share = mixing_shares(np.array([[n0, n, n]]), ((1, 0), (2, 0)))[0, 0]
    true = n / (n + n0)
    relabelled = relabelled_correlation((n0, n, n), share)
    # The data realise the common arm's variance with relative error sqrt(2/n0); 4 standard errors of it.
    assert relabelled <= true * (1 + 4 * np.sqrt(2 / n0))
    if n <= n0:
        assert relabelled >= true * (1 - 4 * np.sqrt(2 / n0))


def test_without_mixing_a_large_reference_arm_correlates_too_much():
    """What the share is for: with fully shared keys 300:100:100 has correlation near 1/2 + instead of 1/4."""
    assert relabelled_correlation((300, 100, 100), 1.0) > 0.25 * (1 + 8 * np.sqrt(2 / 300))
