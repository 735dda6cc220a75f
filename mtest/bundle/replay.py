"""Run a bundle's plan again and compare count by count."""

from __future__ import annotations

import hashlib
import json
from dataclasses import replace
from pathlib import Path

import numpy as np

from mtest.analyse import run_plan
from mtest.bundle.write import MANIFEST
from mtest.errors import DataError, NumericError, UsageError
from mtest.plan.read import read_plan
from mtest.results import AnalysisResult


def replay_bundle(bundle: Path, *, data: Path | None = None, n_jobs: int = 0, report=None) -> int:
    """Return the number of counts compared, all of them equal.

    Parameters
    ----------
    bundle : Path
        A folder that `mtest run` wrote.
    data : Path, optional
        The folder the plan's data paths start from; None: as recorded in the manifest.

    Raises
    ------
    UsageError
        If the folder is not a bundle, or a file in it was changed.
    DataError
        If the data are not those of the bundle.
    NumericError
        If a count differs; the first difference is named.
    """
    bundle = Path(bundle)
    manifest = _manifest(bundle)
    _check_files(bundle, manifest)
    folder = Path(manifest["data_folder"]) if data is None else data
    plan_file = read_plan(bundle / "plan.toml")
    result = run_plan(replace(plan_file, path=folder / manifest["plan_file"]), n_jobs=n_jobs, report=report)
    for name, digest in result.run.data_sha256:
        if manifest["data_sha256"].get(name) != digest:
            raise DataError(f"{folder / name}: the data must be those of the bundle; got other contents.")
    with np.load(bundle / "null.npz") as stored:
        return _compare(result, stored)


def _manifest(bundle: Path) -> dict:
    try:
        return json.loads((bundle / MANIFEST).read_text(encoding="utf-8"))
    except (OSError, ValueError) as error:
        raise UsageError(
            f"{bundle}: a bundle must be a folder with a readable {MANIFEST}; got none. Name a folder that "
            "'mtest run' wrote."
        ) from error


def _check_files(bundle: Path, manifest: dict) -> None:
    faults = []
    for name, digest in manifest["files_sha256"].items():
        path = bundle / name
        if not path.is_file():
            faults.append(f"{path}: every file of the bundle must be there; got none of this name.")
        elif hashlib.sha256(path.read_bytes()).hexdigest() != digest:
            faults.append(f"{path}: a bundle's files must be as written; got a changed file.")
    if faults:
        raise UsageError(faults)


def _compare(result: AnalysisResult, stored) -> int:
    compared = 0
    for k, family in enumerate(result.families):
        for name, counts in family.counts:
            then = stored[f"{k}_count_{name}"]
            compared += len(counts)
            for h, now, before in zip(family.hypotheses, counts, then, strict=True):
                if now != before:
                    raise NumericError(
                        f"{family.name}, {h.endpoint}, {h.arm} vs {h.reference}: the {name.replace('_', '-')} count "
                        f"must be {before}, as in the bundle; got {now}. Compare the versions in {MANIFEST}."
                    )
    return compared
