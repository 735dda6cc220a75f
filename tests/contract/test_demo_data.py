"""The example plans are sound, and their invented data are what their generators write, byte for byte."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest

from mtest.plan.read import read_plan
from mtest.trial.assemble import assemble

CONFIGS = Path(__file__).parents[2] / "configs"
PLANS = sorted(CONFIGS.glob("*.toml"))
GENERATORS = sorted(CONFIGS.glob("*/make_data.py"))


@pytest.mark.parametrize("script", GENERATORS, ids=lambda path: path.parent.name)
def test_the_generator_writes_the_committed_files(script, tmp_path):
    subprocess.run([sys.executable, str(script), str(tmp_path)], check=True)
    committed = {path.name: path.read_bytes() for path in script.parent.glob("*.csv")}
    assert committed
    assert {path.name: path.read_bytes() for path in tmp_path.iterdir()} == committed


@pytest.mark.parametrize("path", PLANS, ids=lambda path: path.stem)
def test_every_example_plan_reads_and_fits_its_data(path):
    trial, hashes = assemble(read_plan(path).plan, path.parent)
    assert len(trial.subject_ids) > 0
    assert hashes


@pytest.mark.parametrize("path", PLANS, ids=lambda path: path.stem)
def test_every_example_says_that_its_data_are_invented(path):
    assert "(invented data)" in read_plan(path).plan.study.title


def test_all_example_data_have_a_generator():
    assert {path.parent for path in CONFIGS.glob("*/*.csv")} == {script.parent for script in GENERATORS}


def test_the_neck_pain_study_is_as_described():
    """312 people, 8 sites by 2 severities, four arms near 78, 14 endpoints of three kinds, all correlated with pain."""
    trial, _ = assemble(read_plan(CONFIGS / "neck-pain.toml").plan, CONFIGS)
    assert len(trial.subject_ids) == 312
    assert len(trial.stratum_names) == 16
    assert set(np.bincount(trial.arm)) <= set(range(74, 83))
    kinds = [endpoint.kind for endpoint in trial.endpoints]
    assert [kinds.count(kind) for kind in ("continuous", "ordinal", "binary")] == [8, 3, 3]
    rare = trial.endpoints[-1].values
    assert 0.02 <= rare.mean() <= 0.04


def test_the_permuted_blocks_keep_the_arms_even_in_every_stratum():
    """Blocks of eight hold two of each arm, so that within a stratum two arms differ by two at most."""
    trial, _ = assemble(read_plan(CONFIGS / "neck-pain.toml").plan, CONFIGS)
    counts = np.array([np.bincount(trial.arm[trial.stratum == code], minlength=4) for code in range(16)])
    assert (counts.max(axis=1) - counts.min(axis=1) <= 2).all()


def test_dropout_rises_over_the_visits_and_is_higher_on_the_highest_dose():
    trial, _ = assemble(read_plan(CONFIGS / "neck-pain.toml").plan, CONFIGS)
    missing = {endpoint.name: np.isnan(endpoint.values) for endpoint in trial.endpoints}
    late, early = missing["Pain at rest, change to week 12"], missing["Pain at rest, change to week 4"]
    assert late.mean() > early.mean() > 0
    shares = [late[trial.arm == arm].mean() for arm in range(4)]
    assert max(shares) == shares[3]


def test_the_matched_sets_are_ten_pairs_of_both_arms():
    trial, _ = assemble(read_plan(CONFIGS / "matched-sites.toml").plan, CONFIGS)
    assert np.bincount(trial.cell).tolist() == [2] * 10
    assert all(set(trial.arm[trial.cell == code]) == {0, 1} for code in range(10))
