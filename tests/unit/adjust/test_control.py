"""The control statement follows from what was run."""

from dataclasses import replace
from itertools import product
from typing import get_args

import pytest

from mtest.adjust.control import WhatWasRun, control_statement
from mtest.plan.records import Procedure

PAIRS = {"one pair": ((1, 0),), "common reference": ((1, 0), (2, 0)), "all pairs": ((1, 0), (2, 0), (2, 1))}
CASES = list(
    product(get_args(Procedure), ("within-pair", "all-arms"), ("joint", "boole"), PAIRS, (True, False), (True, False))
)
RUN = WhatWasRun(
    procedure="step-down max-T",
    exchange="within-pair",
    across_pairs="joint",
    pairs=PAIRS["common reference"],
    n_arms=3,
    two_sided=True,
    exact=False,
    stratified=False,
    statistics=("welch", "welch"),
)


def statement(**changes):
    return control_statement(replace(RUN, **changes))


@pytest.mark.parametrize(("procedure", "exchange", "across", "pairs", "two_sided", "exact"), CASES)
def test_every_combination_has_a_statement(procedure, exchange, across, pairs, two_sided, exact):
    text = statement(
        procedure=procedure,
        exchange=exchange,
        across_pairs=across,
        pairs=PAIRS[pairs],
        two_sided=two_sided,
        exact=exact,
    )
    assert "{" not in text
    assert text.endswith(".")
    assert ("enumerated" in text) is exact


def test_one_pair_is_strong_and_exact():
    assert "strong control across endpoints, exact in finite samples" in statement(pairs=PAIRS["one pair"])


def test_joint_pairs_are_called_asymptotic_across_pairs():
    assert "Across pairs: strong control in large samples" in statement()


def test_boole_is_exact_across_pairs():
    assert "strong control across endpoints and pairs, exact in finite samples" in statement(across_pairs="boole")


@pytest.mark.parametrize("procedure", ["step-down max-T", "Holm"])
def test_all_arms_never_claims_strong_exact_control(procedure):
    text = statement(exchange="all-arms", procedure=procedure, statistics=("welch", "rank"))
    assert "exact in finite samples" not in text
    assert "not guaranteed, not even in large samples" in text or "may be invalid, even in large samples" in text


def test_all_arms_in_strata_claims_nothing_for_partial_nulls_even_with_welch():
    """A third arm's effect leaks into a pair through the stratum means: 100 of 100 studies rejected wrongly."""
    assert "holds in large samples only" in statement(exchange="all-arms")
    assert "not guaranteed, not even in large samples" in statement(exchange="all-arms", stratified=True)


def test_two_arms_relabelled_together_are_called_a_pair():
    assert statement(exchange="all-arms", n_arms=2, pairs=((1, 0),)) == statement(n_arms=2, pairs=((1, 0),))


@pytest.mark.parametrize("pairs", [PAIRS["all pairs"], ((1, 0), (2, 1))])
def test_one_sided_joint_without_a_common_reference_is_not_called_controlled(pairs):
    assert "Across pairs: not guaranteed" in statement(two_sided=False, pairs=pairs)
    assert "not guaranteed" not in statement(two_sided=True, pairs=pairs)
    assert "not guaranteed" not in statement(two_sided=False)


@pytest.mark.parametrize("procedure", ["Benjamini-Hochberg", "Benjamini-Yekutieli"])
def test_false_discovery_rate_is_not_called_familywise(procedure):
    assert statement(procedure=procedure).startswith("False discovery rate, not the familywise error rate")


def test_no_adjustment_is_said():
    assert "chance of some false rejection is not controlled" in statement(procedure="none")
