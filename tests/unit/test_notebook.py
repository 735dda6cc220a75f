"""What `joint_test` refuses, in one sentence each."""

import numpy as np
import pytest

import mtest

OUTCOMES = np.array([[0.0, 1], [1, 0], [0, 1], [1, 1], [0, 0], [1, 0]])
ARM = ["a", "a", "a", "b", "b", "b"]


def test_an_arm_of_one_subject_is_refused():
    with pytest.raises(mtest.DataError, match=r"arm 'b' must have at least two subjects; got 1\."):
        mtest.joint_test(OUTCOMES[:4], ARM[:4])


def test_an_infinite_value_is_refused_by_its_place():
    outcomes = OUTCOMES.copy()
    outcomes[2, 1] = -np.inf
    with pytest.raises(mtest.DataError, match=r"outcomes\[2, 1\] must be finite, or NaN where missing; got -inf\."):
        mtest.joint_test(outcomes, ARM)


def test_the_score_statistic_takes_0_and_1_only():
    with pytest.raises(mtest.DataError, match=r"endpoint 1 must hold 0 and 1 for statistic 'score'; got 2\."):
        mtest.joint_test(OUTCOMES * [1, 2], ARM, statistic="score")


def test_an_arm_without_values_is_refused():
    outcomes = OUTCOMES.copy()
    outcomes[3:, 0] = np.nan
    with pytest.raises(mtest.DataError, match=r"endpoint 0 must have data in every arm; got none in arm 'b'\."):
        mtest.joint_test(outcomes, ARM)


def test_a_misspelt_word_is_answered_with_the_nearest():
    with pytest.raises(mtest.UsageError, match=r"got 'welsh'\. Did you mean 'welch'\?"):
        mtest.joint_test(OUTCOMES, ARM, statistic="welsh")
