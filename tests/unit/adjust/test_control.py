"""The control statement follows from what was run."""

from itertools import product
from typing import get_args

import pytest

from mtest.adjust.control import control_statement
from mtest.plan.records import Procedure

CASES = list(product(get_args(Procedure), ("within-pair", "all-arms"), ("joint", "boole"), (1, 3), (True, False)))


@pytest.mark.parametrize(("procedure", "exchange", "across", "pairs", "exact"), CASES)
def test_every_combination_has_a_statement(procedure, exchange, across, pairs, exact):
    text = control_statement(
        procedure=procedure, exchange=exchange, across_pairs=across, n_pairs=pairs, exact=exact, studentised=True
    )
    assert "{" not in text
    assert text.endswith(".")
    assert ("enumerated" in text) is exact


def statement(**changes):
    run = {
        "procedure": "step-down max-T",
        "exchange": "within-pair",
        "across_pairs": "joint",
        "n_pairs": 3,
        "exact": False,
        "studentised": True,
    }
    return control_statement(**(run | changes))


def test_one_pair_is_strong_and_exact():
    assert "strong control across endpoints, exact in finite samples" in statement(n_pairs=1)


def test_joint_pairs_are_called_asymptotic_across_pairs():
    assert "Across pairs: strong control, asymptotic" in statement()


def test_boole_is_exact_across_pairs():
    assert "strong control across endpoints and pairs, exact in finite samples" in statement(across_pairs="boole")


@pytest.mark.parametrize("procedure", ["step-down max-T", "Holm"])
def test_all_arms_never_claims_strong_exact_control(procedure):
    text = statement(exchange="all-arms", procedure=procedure, studentised=False)
    assert "exact in finite samples" not in text
    assert "not guaranteed, not even in large samples" in text or "may be invalid, even in large samples" in text


@pytest.mark.parametrize("procedure", ["Benjamini-Hochberg", "Benjamini-Yekutieli"])
def test_false_discovery_rate_is_not_called_familywise(procedure):
    assert statement(procedure=procedure).startswith("False discovery rate, not the familywise error rate")


def test_no_adjustment_is_said():
    assert "chance of some false rejection is not controlled" in statement(procedure="none")
