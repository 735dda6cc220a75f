"""Procedures from p-values alone."""

import numpy as np
import pytest
from statsmodels.stats.multitest import multipletests

from mtest.adjust.pvalues import PROCEDURES, adjust_from_p


@pytest.mark.parametrize("procedure", ["Holm", *PROCEDURES])
def test_one_hypothesis_is_left_as_it_is(procedure):
    assert adjust_from_p(np.array([0.037]), procedure=procedure) == pytest.approx([0.037], rel=1e-12)


@pytest.mark.parametrize("procedure", ["Holm", *PROCEDURES])
def test_adjusted_values_lie_between_the_p_value_and_1(procedure):
    p = np.random.default_rng(1).random(40)
    p[:3] = (0.0, 1.0, 1.0)
    adjusted = adjust_from_p(p, procedure=procedure)
    assert np.all(adjusted >= p)
    assert np.all(adjusted <= 1)


def test_none_adjusts_nothing():
    assert adjust_from_p(np.array([0.2, 0.01]), procedure="none").tolist() == [0.2, 0.01]


@pytest.mark.parametrize("bad", [np.nan, -0.1, 1.5])
def test_a_value_that_is_no_p_value_is_refused(bad):
    with pytest.raises(ValueError, match=r"p-values must lie in \[0, 1\]; got"):
        adjust_from_p(np.array([0.2, bad]), procedure="Holm")


@pytest.mark.parametrize("seed", range(5))
def test_holm_is_that_of_statsmodels(seed):
    p = np.random.default_rng(seed).random(30).round(2)
    assert adjust_from_p(p, procedure="Holm") == pytest.approx(multipletests(p, method="holm")[1], rel=1e-12)


@pytest.mark.parametrize("procedure", PROCEDURES)
def test_adjusting_never_loses_the_last_bit(procedure):
    """1 - (1 - p) can lie an ulp below p."""
    for p in np.random.default_rng(2).random((200, 1)):
        assert p[0] <= adjust_from_p(p, procedure=procedure)[0] <= 1
