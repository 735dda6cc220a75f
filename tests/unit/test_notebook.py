"""What `joint_test` refuses, in one sentence each."""

from datetime import datetime

import numpy as np
import pandas as pd
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
    with pytest.raises(mtest.DataError, match=r"outcomes column 1 must be finite, .* got -inf at subject 2"):
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


FRAME = pd.DataFrame(OUTCOMES, columns=["pain", "sleep"])
BAD_CALLS = {
    "outcomes None": ({"outcomes": None}, r"outcomes must be a \(subject, endpoint\) table of numbers; got None"),
    "outcomes empty": ({"outcomes": np.empty((0, 2))}, r"at least one subject and one endpoint; got ndarray of shape"),
    "outcomes 3-d": (
        {"outcomes": np.zeros((6, 2, 2))},
        r"must be a \(subject, endpoint\) table of numbers; got ndarray",
    ),
    "outcomes ragged": ({"outcomes": [[1, 2], [3]] * 3}, r"table of numbers; got list"),
    "outcomes text": ({"outcomes": FRAME.assign(pain="x")}, r"outcomes column 'pain' must hold numbers, .*; got 'x'"),
    "outcomes numeric text": ({"outcomes": FRAME.astype(str)}, r"outcomes column 'pain' must hold numbers"),
    "outcomes dates": ({"outcomes": FRAME.assign(sleep=datetime(2026, 1, 1))}, r"outcomes column 'sleep' must hold"),
    "outcomes complex": ({"outcomes": OUTCOMES * 1j}, r"outcomes column 0 must hold numbers"),
    "outcomes names twice": (
        {"outcomes": FRAME.set_axis(["a", "a"], axis=1)},
        r"distinct column names; got \['a', 'a'\]",
    ),
    "arm None": ({"arm": None}, r"arm must be one label per subject; got None\. Pass one column\."),
    "arm a table": ({"arm": pd.DataFrame({"arm": ARM})}, r"arm must be one label per subject; got DataFrame of shape"),
    "arm 2-d": ({"arm": np.array(ARM)[:, None]}, r"arm must be one label per subject; got ndarray of shape \(6, 1\)"),
    "arm a set": ({"arm": {"a", "b"}}, r"arm must be one label per subject; got set"),
    "arm text": ({"arm": "aaabbb"}, r"arm must be one label per subject; got 'aaabbb'"),
    "arm too short": ({"arm": ARM[:4]}, r"arm must have one label per subject \(6\); got 4\. Are outcomes transposed"),
    "arm missing": ({"arm": [*ARM[:5], None]}, r"arm\[5\] must not be empty"),
    "arm alone": ({"arm": ["a"] * 6}, r"arm must hold at least two arms; got only \['a'\]"),
    "strata a table": ({"strata": FRAME}, r"strata must be one label per subject; got DataFrame"),
    "reference unknown": ({"reference": "c"}, r"reference must be one of the arms \['a', 'b'\]; got 'c'"),
    "statistic per endpoint": (
        {"statistic": ["welch"]},
        r"statistic must be one name or one per endpoint \(2\); got 1",
    ),
    "alternative": (
        {"alternative": "bigger"},
        r"alternative must be one of 'two-sided', 'greater', 'less'; got 'bigger'",
    ),
    "exchange": ({"exchange": "all arms"}, r"got 'all arms'\. Did you mean 'all-arms'\?"),
    "across_pairs": ({"across_pairs": "bool"}, r"across_pairs must be one of .* Did you mean 'boole'\?"),
    "draws": ({"draws": -5}, r"draws must be a whole number of at least 99; got -5"),
    "draws a fraction": ({"draws": 1e4}, r"draws must be a whole number of at least 99; got 10000\.0"),
    "seed": ({"seed": None}, r"seed must be a whole number of at least 0; got None"),
    "n_jobs": ({"n_jobs": -1}, r"n_jobs must be a whole number of at least 0; got -1"),
}


@pytest.mark.parametrize("case", BAD_CALLS)
def test_a_bad_call_is_one_sentence_of_our_own(case):
    changes, sentence = BAD_CALLS[case]
    with pytest.raises(mtest.MtestError, match=sentence):
        mtest.joint_test(**({"outcomes": OUTCOMES, "arm": ARM} | changes))


@pytest.mark.parametrize("name", ["arm", "strata"])
def test_pandas_objects_in_another_order_are_not_aligned_silently(name):
    labels = pd.Series(ARM, index=FRAME.index)
    call = {"outcomes": FRAME, "arm": labels} | {name: labels.iloc[::-1]}
    with pytest.raises(
        mtest.UsageError, match=rf"{name} must have the same index as outcomes, .* {name}\.to_numpy\(\)"
    ):
        mtest.joint_test(**call)


def test_the_same_index_and_plain_arrays_are_accepted():
    labels = pd.Series(ARM, index=FRAME.index)
    with_index = mtest.joint_test(FRAME, labels, strata=labels.map({"a": 1, "b": 1}))
    assert with_index.table["p_unadjusted"].equals(mtest.joint_test(OUTCOMES, ARM).table["p_unadjusted"])


@pytest.mark.parametrize("dtype", ["Int64", "Float64", "bool", "int8", object])
def test_every_numeric_dtype_is_read(dtype):
    table = mtest.joint_test(FRAME.astype(dtype), ARM).table
    assert table["p_step_down"].equals(mtest.joint_test(FRAME, ARM).table["p_step_down"])


def test_analyse_takes_what_read_plan_gives():
    with pytest.raises(mtest.UsageError, match=r"plan must come from mtest\.read_plan\(path\); got str"):
        mtest.analyse("plan.toml")


def test_results_print_in_a_few_lines():
    assert len(repr(mtest.joint_test(OUTCOMES, ARM))) < 700
