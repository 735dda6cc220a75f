"""A bundle is whole or absent, and its manifest vouches for every file, the plan and the run."""

import hashlib
import json

import pytest

import mtest
from mtest.bundle.replay import replay_bundle

PLAN = """
[study]
title = "Two arms (invented data)"
[data]
subjects = "subjects.csv"
subject = "id"
[randomisation]
scheme = "complete"
arm = "arm"
arms = ["gel", "vehicle"]
reference = "vehicle"
[draws]
seed = 23
[[endpoint]]
name = "Pain"
kind = "continuous"
value = "pain"
better = "lower"
[[family]]
name = "All"
endpoints = "all"
comparisons = "each vs reference"
alpha = 0.01
"""


@pytest.fixture
def analysis(tmp_path):
    """Two subjects an arm: six relabellings, too few for the level, which is a warning of the family."""
    (tmp_path / "subjects.csv").write_text("id,arm,pain\n1,gel,1\n2,gel,2\n3,vehicle,4\n4,vehicle,7\n")
    (tmp_path / "plan.toml").write_text(PLAN)
    return mtest.analyse(mtest.read_plan(tmp_path / "plan.toml"), n_jobs=1)


def digest(path):
    return hashlib.sha256(path.read_bytes()).hexdigest()


def test_the_manifest_vouches_for_every_file_the_plan_the_data_and_the_seed(analysis, tmp_path):
    folder = tmp_path / "bundle"
    analysis.write(folder)
    manifest = json.loads((folder / "manifest.json").read_text(encoding="utf-8"))
    others = [path for path in folder.iterdir() if path.name != "manifest.json"]
    assert manifest["files_sha256"] == {path.name: digest(path) for path in others}
    assert manifest["plan_sha256"] == digest(tmp_path / "plan.toml") == digest(folder / "plan.toml")
    assert manifest["data_sha256"] == {"subjects.csv": digest(tmp_path / "subjects.csv")}
    assert manifest["seed"] == 23


def test_the_manifest_keeps_the_warnings_of_each_family(analysis, tmp_path):
    analysis.write(tmp_path / "bundle")
    (family,) = json.loads((tmp_path / "bundle" / "manifest.json").read_text(encoding="utf-8"))["families"]
    assert family["warnings"] == list(analysis.result.families[0].warnings)
    assert len(family["warnings"]) == 1


@pytest.mark.parametrize("earlier", [False, True])
def test_a_failure_half_way_leaves_what_was_there_before(analysis, tmp_path, monkeypatch, earlier):
    if earlier:
        analysis.write(tmp_path / "bundle")
    before = {path: digest(path) for path in tmp_path.rglob("*") if path.is_file()}

    def full(*_, **__):
        raise OSError("no space left")

    monkeypatch.setattr("mtest.bundle.write.write_word", full)
    with pytest.raises(OSError, match="no space left"):
        analysis.write(tmp_path / "bundle")
    assert {path: digest(path) for path in tmp_path.rglob("*") if path.is_file()} == before
    assert {path.name for path in tmp_path.iterdir() if path.is_dir()} == ({"bundle"} if earlier else set())


def test_replay_names_a_file_that_is_gone(analysis, tmp_path):
    analysis.write(tmp_path / "bundle")
    (tmp_path / "bundle" / "tables.docx").unlink()
    with pytest.raises(mtest.UsageError, match=r"tables\.docx: every file of the bundle must be there; got none"):
        replay_bundle(tmp_path / "bundle")
