"""Tables that speak of the same words hold the same words."""

from typing import get_args

import pytest

from mtest.adjust.control import FROM_P
from mtest.adjust.pvalues import PROCEDURES as FROM_STATSMODELS
from mtest.engine.pair import COEFFICIENTS
from mtest.engine.several import DENOMINATORS
from mtest.plan.records import DEFAULT_STATISTIC, Kind, MissingRule, Procedure, Scheme, StatisticName
from mtest.plan.rules import STATISTICS as ALLOWED
from mtest.report import wording
from mtest.scores import SCORES


@pytest.mark.parametrize("table", [SCORES, COEFFICIENTS, DENOMINATORS, wording.STATISTICS])
def test_every_statistic_has_scores_forms_and_words(table):
    assert set(table) == set(get_args(StatisticName))


def test_every_kind_has_a_default_among_the_statistics_it_allows():
    assert set(DEFAULT_STATISTIC) == set(ALLOWED) == set(get_args(Kind))
    assert all(DEFAULT_STATISTIC[kind] in ALLOWED[kind] for kind in ALLOWED)


def test_every_procedure_from_p_values_has_a_statement():
    assert set(FROM_P) == {*FROM_STATSMODELS, "Holm", "none"}
    assert set(get_args(Procedure)) == {*FROM_P, "step-down max-T", "single-step max-T"}


def test_every_scheme_and_missing_rule_has_words():
    assert set(wording.SCHEMES) == set(get_args(Scheme))
    assert set(wording.MISSING_RULES) == set(get_args(MissingRule))
