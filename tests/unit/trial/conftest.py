"""A small sound study as files, and the same study with parts replaced."""

from __future__ import annotations

from pathlib import Path

import pytest

from mtest.plan.read import parse_plan
from mtest.trial.arrays import Trial
from mtest.trial.assemble import assemble

PLAN = """
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
arms = ["vehicle", "gel"]
reference = "vehicle"
strata = ["site", "sex"]
[draws]
seed = 1
[[endpoint]]
name = "Pain"
kind = "continuous"
value = { parameter = "PAIN", visit = "W12", column = "change" }
better = "lower"
unit = "mm"
group = "Pain"
[[endpoint]]
name = "Sleep"
kind = "ordinal"
value = "sleep"
levels = ["good", "fair", "poor"]
better = "lower"
[[endpoint]]
name = "Rash"
kind = "binary"
value = "rash"
better = "lower"
[[analysis_set]]
name = "kept"
where = { kept = "Y" }
[[family]]
name = "All"
endpoints = "all"
comparisons = "each vs reference"
"""

# Lines count from 1 with the header; subject 007 stands in line 2, and the order is not that of the identifiers.
SUBJECTS = """id,arm,site,sex,sleep,rash,kept,block,dose
007,gel,A,F,good,0,Y,1,1
003,vehicle,A,F,fair,1,Y,1,1
001,gel,A,M,poor,1,Y,1,2
002,vehicle,A,M,good,0,N,1,2
004,gel,B,F,fair,1,Y,1,1
005,vehicle,B,F,good,0,Y,1,1
006,gel,B,M,poor,1,Y,2,2.0
008,vehicle,B,M,poor,1,Y,2,2.0
"""
VISITS = """id,parameter,visit,change
001,PAIN,W12,-11
002,PAIN,W12,-12.5
003,PAIN,W12,-13
004,PAIN,W12,-14
005,PAIN,W12,-15
006,PAIN,W12,-16
007,PAIN,W12,-17
008,PAIN,W12,-18
001,PAIN,W4,-1
001,MOOD,W4,3
"""

Change = tuple[str, str]


class Study:
    """The sound study, to be changed and assembled."""

    def __init__(self, folder: Path) -> None:
        self.folder = folder

    def assemble(
        self, *, plan: tuple[Change, ...] = (), subjects: tuple[Change, ...] = (), visits: tuple[Change, ...] = ()
    ) -> tuple[Trial, dict[str, str]]:
        """Write the files with each (old, new) replaced once, and assemble them."""
        (self.folder / "subjects.csv").write_text(_changed(SUBJECTS, subjects), encoding="utf-8")
        (self.folder / "visits.csv").write_text(_changed(VISITS, visits), encoding="utf-8")
        return self.again(plan=plan)

    def again(self, *, plan: tuple[Change, ...] = ()) -> tuple[Trial, dict[str, str]]:
        """Assemble whatever files there are."""
        return assemble(parse_plan(_changed(PLAN, plan), "p.toml"), self.folder)


@pytest.fixture
def study(tmp_path: Path) -> Study:
    """Return the sound study in an empty folder."""
    return Study(tmp_path)


@pytest.fixture
def sound_files() -> dict[str, str]:
    """Return the sound study's files."""
    return {"subjects.csv": SUBJECTS, "visits.csv": VISITS}


def _changed(text: str, changes: tuple[Change, ...]) -> str:
    for old, new in changes:
        assert old in text, f"{old!r} is not in the sound study"
        text = text.replace(old, new, 1)
    return text
