"""mtest: which differences are real, in randomised studies with many endpoints and several arms."""

from importlib.metadata import version

from mtest.errors import DataError, MtestError, NumericError, PlanError, UsageError
from mtest.notebook import Analysis, JointResult, analyse, joint_test
from mtest.plan.read import PlanFile, read_plan

__version__ = version("mtest")

__all__ = [
    "joint_test",
    "JointResult",
    "read_plan",
    "PlanFile",
    "analyse",
    "Analysis",
    "MtestError",
    "PlanError",
    "UsageError",
    "DataError",
    "NumericError",
]
