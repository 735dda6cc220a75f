"""One family on arrays: what each procedure decides by, when a run may stop, and what is told about it."""

from dataclasses import replace

import numpy as np
import pytest

from mtest.family import Design, FamilySpec, default_across_pairs, judge_family

MAX_T = ("step-down max-T", "single-step max-T")


def design(*sizes):
    arm = np.repeat(np.arange(len(sizes)), sizes)
    return Design(arm=arm, cell=np.zeros_like(arm), stratum=np.zeros_like(arm), arms=tuple("abcd"[: len(sizes)]))


def asked(values, **changes):
    values = np.asarray(values, dtype=float)
    spec = FamilySpec(
        values=values,
        statistic=("difference",) * values.shape[1],
        sign=(1,) * values.shape[1],
        pairs=((0, 1),),
        two_sided=True,
        exchange="within-pair",
        across_pairs="joint",
        procedure="step-down max-T",
        alpha=0.05,
        at_least=1024,
        at_most=1024,
        seed=1,
        exact_limit=0,
    )
    return replace(spec, **changes)


def noise(n, m, *, seed=5):
    return np.random.default_rng(seed).normal(size=(n, m))


@pytest.mark.parametrize(("procedure", "column"), list(zip(MAX_T, ("p_step_down", "p_single_step"))))
def test_the_procedure_of_the_plan_decides(procedure, column):
    test = judge_family(design(15, 15), asked(noise(30, 5), procedure=procedure))
    assert not np.array_equal(test.p_step_down, test.p_single_step)
    assert np.array_equal(test.p_adjusted, getattr(test, column))


def test_steps_of_a_procedure_on_p_values_are_the_ranks_of_the_p_values():
    test = judge_family(design(15, 15), asked(noise(30, 5), procedure="Holm"))
    ranks = [1 + sum(p < own for p in test.p_unadjusted) for own in test.p_unadjusted]
    assert len(set(ranks)) == 5
    assert test.step.tolist() == ranks
    assert ranks != (np.argsort(test.p_unadjusted) + 1).tolist()  # else a rank and an order could not be told apart


NEARLY = np.array([[3, 5], [1, 4], [2, 7], [3 - 1e-8, 1], [0, 2], [1, 3]])


@pytest.mark.parametrize("procedure", [*MAX_T, "Holm"])
def test_near_ties_counted_give_the_p_of_the_data_in_which_they_are_ties(procedure):
    """A value lies 1e-8 below its twin: more than a tolerance of the statistic's spread, less than a thousand."""
    near = judge_family(design(3, 3), asked(NEARLY, procedure=procedure, exact_limit=20))
    tied = judge_family(design(3, 3), asked(NEARLY.round(), procedure=procedure, exact_limit=20))
    assert near.p_adjusted[0] < near.p_near[0]
    assert np.array_equal(near.p_near, tied.p_adjusted)
    assert near.near_ties.tolist() == (tied.counts["unadjusted"] - near.counts["unadjusted"]).tolist()


@pytest.mark.parametrize("procedure", [*MAX_T, "Holm"])
def test_a_run_goes_on_while_a_decision_is_open_and_stops_once_none_is(procedure):
    """Alpha is put exactly at a p-value, then far from all of them."""
    d, spec = design(15, 15), asked(noise(30, 2), procedure=procedure)
    p = judge_family(d, spec).p_adjusted.min()
    assert 0.02 < p < 0.98
    assert judge_family(d, replace(spec, at_most=8192, alpha=p)).n_draws == 8192
    assert judge_family(d, replace(spec, at_most=8192, alpha=1e-6)).n_draws == 1024


def test_under_boole_a_pair_goes_on_while_open_at_the_level_of_any_number_of_pairs_left():
    """The pair's p is far from alpha and exactly at alpha / 2, which counts while the other pair still holds one."""
    y = noise(45, 1, seed=9)
    y[:15] += 0.55
    spec = asked(y, pairs=((0, 2), (1, 2)), across_pairs="boole", at_least=4096, at_most=4096)
    p = judge_family(design(15, 15, 15), spec).p_unadjusted
    assert 0.02 < p[0] < 0.2
    assert p[1] > 3 * p[0]
    assert judge_family(design(15, 15, 15), replace(spec, at_most=16_384, alpha=2 * p[0])).n_draws == 16_384


def test_an_endpoint_and_its_negative_count_as_one_endpoint():
    y = noise(40, 1)
    test = judge_family(design(20, 20), asked(np.hstack([y, -y])))
    assert test.equivalent_endpoints == pytest.approx(1, rel=1e-12)


def test_correlations_stand_in_the_order_of_the_hypotheses():
    """The endpoint in the middle has the largest statistic, so that the observed order is another one."""
    y = noise(40, 2)
    values = np.column_stack([y[:, 0], y[:, 1] + np.repeat([4, 0], 20), -y[:, 0]])
    correlation = judge_family(design(20, 20), asked(values)).correlation
    assert correlation[0, 2] == pytest.approx(-1, abs=1e-9)
    assert abs(correlation[0, 1]) < 0.5


def test_the_critical_value_is_the_smallest_that_keeps_the_level():
    test = judge_family(design(20, 20), asked(noise(40, 4), at_least=8192, at_most=8192))
    tail = np.cumsum(test.null.counts[::-1])[::-1] / test.n_draws
    place = int(np.flatnonzero(test.null.edges == test.null.critical)[0])
    assert tail[place] <= 0.05 < tail[place - 1]


def test_a_family_is_exact_only_if_every_pair_was_enumerated():
    spec = asked(noise(46, 1), pairs=((1, 0), (2, 0)), across_pairs="boole", exact_limit=20)
    test = judge_family(design(3, 3, 40), spec)
    assert test.n_distinct[0] == ("b vs a", 20)
    assert not test.exact
    assert test.n_draws == 1024
    assert judge_family(design(3, 3, 40), replace(spec, pairs=((1, 0),))).exact


@pytest.mark.parametrize(("exact_limit", "smallest"), [(20, 1 / 20), (0, 1 / 1025)])
def test_the_smallest_attainable_p_is_one_relabelling(exact_limit, smallest):
    assert judge_family(design(3, 3), asked(noise(6, 1), exact_limit=exact_limit)).smallest_p == smallest


@pytest.mark.parametrize(
    ("two_sided", "pairs", "how"),
    [
        (True, ((1, 0), (2, 0), (2, 1)), "joint"),
        (False, ((1, 0), (2, 0)), "joint"),
        (False, ((1, 0), (2, 0), (2, 1)), "boole"),
    ],
)
def test_one_sided_pairs_without_a_common_reference_take_boole(two_sided, pairs, how):
    assert default_across_pairs(two_sided=two_sided, pairs=pairs) == how


def test_the_statistic_keeps_its_sign_where_smaller_is_better():
    two_sided = asked(noise(30, 3))
    one_sided = replace(two_sided, two_sided=False, sign=(1, -1, -1))
    first, second = (judge_family(design(15, 15), spec).statistic for spec in (two_sided, one_sided))
    assert first == pytest.approx(second, rel=1e-12)


def test_the_numbering_of_strata_changes_no_count():
    """The strata have arms of unlike ratio, hence unlike mixing shares."""
    arm = np.concatenate([np.repeat([0, 1, 2], 8), np.repeat([0, 1, 2], [16, 4, 4])])
    stratum = np.repeat([0, 1], 24)
    spec = asked(noise(48, 2), pairs=((1, 0), (2, 0)))
    one, other = (
        judge_family(Design(arm=arm, cell=s, stratum=s, arms=tuple("abc")), spec) for s in (stratum, 1 - stratum)
    )
    assert np.array_equal(one.counts["step_down"], other.counts["step_down"])
