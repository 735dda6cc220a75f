"""Familywise error of step-down max-T in simulated studies, within binomial limits. The full table is in reports/.

The limit is the 99.9 % binomial limit of a procedure at the nominal level, so a right one fails once in a thousand.
"""

import importlib.util
from pathlib import Path

import pytest

SPEC = importlib.util.spec_from_file_location("scenarios", Path(__file__).with_name("scenarios.py"))
scenarios = importlib.util.module_from_spec(SPEC)
import sys  # noqa: E402

sys.modules["scenarios"] = scenarios  # workers find the module by its name
SPEC.loader.exec_module(scenarios)

STUDIES = 1000
pytestmark = pytest.mark.slow


def rate(scenario, mode):
    return scenarios.count_errors(scenario, mode, studies=STUDIES, seed=7, n_jobs=1) / STUDIES


@pytest.mark.parametrize("scenario", scenarios.TWO_ARMS, ids=lambda s: s.name)
def test_two_arms(scenario):
    assert rate(scenario, "joint") <= scenarios.upper_limit(STUDIES)


@pytest.mark.parametrize("mode", ["joint", "boole"])
@pytest.mark.parametrize("scenario", scenarios.SEVERAL_ARMS, ids=lambda s: s.name)
def test_several_arms_within_pair(scenario, mode):
    assert rate(scenario, mode) <= scenarios.upper_limit(STUDIES)


@pytest.mark.parametrize(
    "scenario", [s for s in scenarios.SEVERAL_ARMS if s.name.endswith("no arm differs")], ids=lambda s: s.name
)
def test_all_arms_under_the_complete_null(scenario):
    assert rate(scenario, "all-arms") <= scenarios.upper_limit(STUDIES)
