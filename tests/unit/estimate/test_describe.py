"""Counts, means and standard deviations of the arms."""

import math

import numpy as np

from mtest.estimate.describe import describe


def test_each_arm_is_counted_with_its_missing_values():
    values = np.array([1.0, 2, 4, np.nan, 10, np.nan, np.nan])
    shown = describe(values, np.array([1, 1, 1, 1, 0, 0, 0], dtype=bool))
    assert (shown.n_arm, shown.missing_arm, shown.n_reference, shown.missing_reference) == (3, 1, 1, 2)


def test_mean_and_deviation_by_hand():
    """2, 4, 6, 8: mean 5, sum of squares 20 on 3 degrees of freedom."""
    shown = describe(np.array([2.0, 4, 6, 8, 1, 1]), np.array([0, 0, 0, 0, 1, 1], dtype=bool))
    assert (shown.mean_reference, shown.mean_arm, shown.sd_arm) == (5.0, 1.0, 0.0)
    assert shown.sd_reference == math.sqrt(20 / 3)


def test_empty_arm_and_single_subject_are_not_a_number():
    shown = describe(np.array([3.0]), np.array([True]))
    assert shown.mean_arm == 3.0
    assert math.isnan(shown.sd_arm) and math.isnan(shown.mean_reference) and math.isnan(shown.sd_reference)
    assert shown.n_reference == 0


def test_constant_column_has_no_spread_in_the_last_bit():
    shown = describe(np.full(7, 0.1), np.arange(7) < 3)
    assert (shown.sd_arm, shown.sd_reference, shown.mean_reference) == (0.0, 0.0, 0.1)
