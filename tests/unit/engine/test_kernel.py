"""The block function: what chunks, rounding and draws without a comparison may not change."""

from itertools import combinations

import numpy as np
import pytest

import mtest

P = ["p_unadjusted", "p_single_step", "p_step_down"]


@pytest.mark.parametrize("alternative", ["two-sided", "greater"])
def test_the_length_of_chunks_changes_no_p_value(monkeypatch, alternative):
    rng = np.random.default_rng(3)
    outcomes, arm = rng.normal(size=(30, 8)), np.repeat(list("abc"), 10)
    outcomes[arm == "c"] += np.linspace(0, 2, 8)

    def p_values():
        result = mtest.joint_test(outcomes, arm, reference="a", alternative=alternative, draws=1024)
        return result.table[P].to_numpy()

    whole = p_values()
    monkeypatch.setattr("mtest.engine.job.CHUNK_ROWS", 3)
    assert np.array_equal(p_values(), whole)


@pytest.mark.parametrize("seed", range(20))
def test_arms_that_hardly_overlap_still_tie_with_their_mirror_image(seed):
    """Welch's t is near a million here, and rounding moves it by far more than 1e-9 of its spread."""
    rng = np.random.default_rng(seed)
    outcomes = np.concatenate([rng.normal(size=4) * 1e-6, 1 + rng.normal(size=4) * 1e-6])
    result = mtest.joint_test(outcomes, np.repeat(["a", "b"], 4), reference="a")
    assert round(result.table["p_unadjusted"][0] * result.n_draws) == 2


@pytest.mark.parametrize("exchange", ["within-pair", "all-arms"])
def test_a_draw_that_leaves_an_arm_without_values_counts_as_no_difference(exchange):
    """Three values of nine subjects in three arms; their centred sum is not exactly 0 in floating point."""
    values = np.array([0.1, np.nan, np.nan, 0.2, np.nan, np.nan, 0.7, np.nan, np.nan])
    arm = np.repeat(["a", "b", "c"], 3)
    result = mtest.joint_test(values, arm, statistic="unscaled difference", exchange=exchange, across_pairs="boole")
    row = result.table.set_index(["arm", "reference"]).loc[("b", "a")]
    inside = np.arange(9) if exchange == "all-arms" else np.arange(6)
    count = total = 0
    for first in combinations(inside, 3):
        for second in combinations([k for k in inside if k not in first], 3):
            b, a = values[list(first)], values[list(second)]
            b, a = b[np.isfinite(b)], a[np.isfinite(a)]
            total += 1
            count += len(a) > 0 and len(b) > 0 and abs(b.mean() - a.mean()) >= 0.1 - 1e-9
    assert row["p_unadjusted"] == pytest.approx(count / total, rel=1e-12)
