"""Every plan in configs/ runs, and its bundle is whole, honest and repeatable."""

import csv
import json
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

import mtest
from mtest.bundle.replay import replay_bundle

ROOT = Path(__file__).parents[2]
PLANS = sorted((ROOT / "configs").glob("*.toml"))
COLUMNS = [
    *("family", "endpoint", "kind", "arm", "reference", "n_arm", "n_reference", "missing_arm", "missing_reference"),
    *("effect", "estimate", "ci_low", "ci_high", "ci_simultaneous_low", "ci_simultaneous_high"),
    *("statistic", "statistic_value", "p_model", "p_unadjusted", "p_single_step", "p_step_down", "p_holm"),
    *("p_adjusted", "p_adjusted_low", "p_adjusted_high", "step", "rejected", "control"),
]
FILES = {"plan.toml", "results.csv", "results.json", "null.npz", "manifest.json", "report.html", "tables.docx"}


@pytest.fixture(scope="module", params=PLANS, ids=lambda path: path.stem)
def bundle(request, tmp_path_factory):
    folder = tmp_path_factory.mktemp(request.param.stem) / "bundle"
    analysis = mtest.analyse(mtest.read_plan(request.param), n_jobs=1)
    analysis.write(folder)
    return request.param, analysis, folder


def test_the_bundle_holds_these_files(bundle):
    assert {path.name for path in bundle[2].iterdir()} == FILES


def test_results_have_the_columns_of_the_design(bundle):
    assert list(pd.read_csv(bundle[2] / "results.csv").columns) == COLUMNS


def test_results_read_back_to_the_same_numbers(bundle):
    _, analysis, folder = bundle
    with (folder / "results.csv").open(encoding="utf-8", newline="") as file:
        rows = list(csv.DictReader(file))
    for column in ("estimate", "statistic_value", "p_adjusted", "p_model"):
        read = [float(row[column] or "nan") for row in rows]
        assert np.array_equal(read, analysis.table[column], equal_nan=True)


def test_json_holds_one_object_per_hypothesis(bundle):
    _, analysis, folder = bundle
    rows = json.loads((folder / "results.json").read_text(encoding="utf-8"))
    assert [row["endpoint"] for row in rows] == list(analysis.table["endpoint"])


def test_decisions_are_those_of_the_unrounded_p_values(bundle):
    for family in bundle[1].result.families:
        for h in family.hypotheses:
            assert h.rejected == (h.p_adjusted <= family.alpha)


def test_adjusted_p_values_lie_inside_their_monte_carlo_interval(bundle):
    for family in bundle[1].result.families:
        for h in family.hypotheses:
            assert 0 <= h.p_adjusted_low <= h.p_adjusted <= h.p_adjusted_high <= 1
            assert h.p_unadjusted <= h.p_adjusted + 1e-12


def test_the_data_are_said_to_be_invented(bundle):
    _, analysis, folder = bundle
    assert "invented data" in analysis.result.study.title
    assert "invented data" in (folder / "report.html").read_text(encoding="utf-8")


def test_replay_finds_the_same_counts(bundle):
    _, analysis, folder = bundle
    hypotheses = sum(len(family.hypotheses) for family in analysis.result.families)
    assert replay_bundle(folder, n_jobs=2) == 3 * hypotheses


def test_the_same_run_gives_the_same_bytes_but_for_the_date(bundle, tmp_path):
    path, _, folder = bundle
    mtest.analyse(mtest.read_plan(path), n_jobs=2).write(tmp_path / "again")
    for file in FILES - {"manifest.json"}:
        assert (folder / file).read_bytes() == (tmp_path / "again" / file).read_bytes(), file
    first, again = (json.loads((f / "manifest.json").read_text()) for f in (folder, tmp_path / "again"))
    assert first.pop("finished_utc")
    assert again.pop("finished_utc")
    assert first == again


def test_configs_hold_a_demo_with_four_arms_and_fourteen_endpoints():
    plan = mtest.read_plan(ROOT / "configs" / "neck-pain.toml").plan
    assert len(plan.randomisation.arms) == 4
    kinds = [endpoint.kind for endpoint in plan.endpoint]
    assert (kinds.count("continuous"), kinds.count("ordinal"), kinds.count("binary")) == (8, 3, 3)
