"""The errors mtest raises, drawn as a tree.

    MtestError             exit code 1   (a bug of ours, if it is not one of the following)
    ├── PlanError          exit code 2   the analysis plan breaks a rule
    ├── UsageError         exit code 2   a call or a command breaks a rule
    ├── DataError          exit code 3   the data break a rule
    └── NumericError       exit code 4   a number is not what it was promised to be

Every message is one sentence a fault: *where: rule; got; do.*
"""

from __future__ import annotations

from collections.abc import Sequence


class MtestError(Exception):
    """Carry one or more faults, each a sentence, and the exit code they lead to."""

    exit_code = 1

    def __init__(self, faults: str | Sequence[str]) -> None:
        self.faults: tuple[str, ...] = (faults,) if isinstance(faults, str) else tuple(faults)
        super().__init__("\n".join(self.faults))

    def __reduce__(self):
        # Exceptions cross process borders by pickle; the default would call __init__ with the joined text.
        return (type(self), (self.faults,))


class PlanError(MtestError):
    """The analysis plan breaks a rule; all its faults at once."""

    exit_code = 2


class UsageError(MtestError):
    """A function call or a command line breaks a rule."""

    exit_code = 2


class DataError(MtestError):
    """The data break a rule; the rows are named."""

    exit_code = 3


class NumericError(MtestError):
    """A number is not what it was promised to be: a replay that finds another count."""

    exit_code = 4
