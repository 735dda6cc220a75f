"""A sound plan as text, and the same plan with parts replaced."""

from __future__ import annotations

from collections.abc import Callable

import pytest

SOUND = """
[study]
title = "A study (invented)"
[data]
subjects = "subjects.csv"
subject = "id"
[[data.long]]
file = "visits.csv"
[randomisation]
scheme = "stratified"
arm = "arm"
arms = ["vehicle", "low", "high"]
reference = "vehicle"
strata = ["site"]
[draws]
seed = 1
[[endpoint]]
name = "Pain"
kind = "continuous"
value = { parameter = "PAIN", visit = "W12", column = "change" }
better = "lower"
[[endpoint]]
name = "Sleep"
kind = "ordinal"
value = "sleep"
levels = ["good", "poor"]
better = "lower"
[[endpoint]]
name = "Rash"
kind = "binary"
value = "rash"
event = "yes"
better = "lower"
[[analysis_set]]
name = "per protocol"
where = { kept = "Y" }
[[family]]
name = "All"
endpoints = "all"
comparisons = "each vs reference"
[[family]]
name = "Some"
endpoints = ["Pain", "Sleep"]
comparisons = [["high", "low"], ["high", "vehicle"]]
procedure = "Holm"
analysis_set = "per protocol"
"""


@pytest.fixture
def plan_text() -> Callable[..., str]:
    """Return the function that makes plans."""
    return _with_changes


def _with_changes(*changes: tuple[str, str]) -> str:
    """Return the sound plan with each (old, new) replaced once; an old text that is absent is a mistake in the test."""
    text = SOUND
    for old, new in changes:
        assert old in text, f"{old!r} is not in the sound plan"
        text = text.replace(old, new, 1)
    return text
