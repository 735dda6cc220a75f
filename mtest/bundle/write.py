"""Write what a run leaves behind: a bundle is whole or absent."""

from __future__ import annotations

import hashlib
import json
import math
import shutil
import tempfile
from pathlib import Path

import numpy as np
import pandas as pd

from mtest.errors import UsageError
from mtest.report.page import render_page
from mtest.report.word import write_word
from mtest.results import AnalysisResult, HypothesisResult, to_dict

MANIFEST = "manifest.json"
FORMAT = 1  # of the bundle; raised when a file or a column changes its meaning


def results_table(result: AnalysisResult) -> pd.DataFrame:
    """Return one row per hypothesis, in the plan's order: the columns of results.csv."""
    return pd.DataFrame([_row(h, family.control) for family in result.families for h in family.hypotheses])


def _row(h: HypothesisResult, control: str) -> dict:
    return {
        "family": h.family,
        "endpoint": h.endpoint,
        "kind": h.kind,
        "arm": h.arm,
        "reference": h.reference,
        "n_arm": h.n_arm,
        "n_reference": h.n_reference,
        "missing_arm": h.missing_arm,
        "missing_reference": h.missing_reference,
        "effect": h.effect.measure,
        "estimate": h.effect.estimate,
        "ci_low": h.effect.low,
        "ci_high": h.effect.high,
        # Simultaneous intervals come from the same draws as the test, and are not computed yet: empty, never guessed.
        "ci_simultaneous_low": math.nan,
        "ci_simultaneous_high": math.nan,
        "statistic": h.statistic,
        "statistic_value": h.statistic_value,
        "p_model": h.p_model,
        "p_unadjusted": h.p_unadjusted,
        "p_single_step": h.p_single_step,
        "p_step_down": h.p_step_down,
        "p_holm": h.p_holm,
        "p_adjusted": h.p_adjusted,
        "p_adjusted_low": h.p_adjusted_low,
        "p_adjusted_high": h.p_adjusted_high,
        "step": h.step,
        "rejected": h.rejected,
        "control": control,
    }


def check_target(folder: Path) -> None:
    """Raise UsageError unless a bundle can be written at `folder`: nothing is there, or a bundle to be replaced."""
    is_bundle = folder.is_dir() and ((folder / MANIFEST).is_file() or not any(folder.iterdir()))
    if not is_bundle and folder.exists():
        raise UsageError(
            f"{folder}: the output must be a new folder or an earlier bundle; got something else of that name. "
            "Choose another with --out, or remove it."
        )

    parent = next(path for path in folder.absolute().parents if path.exists())
    try:
        Path(tempfile.mkdtemp(prefix=".mtest-", dir=parent)).rmdir()
    except OSError as error:
        raise UsageError(_not_writable(folder, error)) from error


def _not_writable(folder: Path, error: OSError) -> str:
    return f"{folder}: the output folder must be writable; got '{error.strerror}'. Choose another with --out."


def write_bundle(result: AnalysisResult, folder: Path, *, plan_text: str, data_folder: str) -> None:
    """Write a bundle at `folder`, replacing an earlier bundle there; nothing is left behind if it fails.

    Parameters
    ----------
    plan_text : str
        The plan as read.
    data_folder : str
        Where the plan's relative paths started, for `mtest replay`.

    Raises
    ------
    UsageError
        If something else stands at `folder`, or it cannot be written.
    """
    folder = Path(folder)
    check_target(folder)
    try:
        folder.parent.mkdir(parents=True, exist_ok=True)
        new = Path(tempfile.mkdtemp(prefix=f".{folder.name}-", dir=folder.parent))
    except OSError as error:
        raise UsageError(_not_writable(folder, error)) from error
    try:
        _write_files(result, new, plan_text=plan_text, data_folder=data_folder)
        new.chmod(0o755)
        if folder.exists():
            old = new.with_name(f"{new.name}-old")
            folder.rename(old)
            new.rename(folder)
            shutil.rmtree(old)
        else:
            new.rename(folder)
    finally:
        shutil.rmtree(new, ignore_errors=True)


def _write_files(result: AnalysisResult, folder: Path, *, plan_text: str, data_folder: str) -> None:
    (folder / "plan.toml").write_text(plan_text, encoding="utf-8", newline="")
    # pandas prints the shortest digits that read back to the same number.
    results_table(result).to_csv(folder / "results.csv", index=False, lineterminator="\n")
    _write_json(folder / "results.json", [to_dict(h) for family in result.families for h in family.hypotheses])
    _write_null(result, folder / "null.npz")
    (folder / "report.html").write_text(render_page(result), encoding="utf-8", newline="\n")
    write_word(result, folder / "tables.docx")
    files = sorted(path for path in folder.iterdir())
    _write_json(folder / MANIFEST, _manifest(result, files, data_folder))


def _manifest(result: AnalysisResult, files: list[Path], data_folder: str) -> dict:
    run = to_dict(result.run)
    return {
        "format": FORMAT,
        **run,
        "versions": dict(run["versions"]),
        "data_sha256": dict(run["data_sha256"]),
        "data_folder": data_folder,
        "families": [
            {
                "name": family.name,
                "exact": family.exact,
                "draws": family.n_draws,
                # As text: JSON readers in other languages would round them.
                "distinct_relabellings": {name: str(count) for name, count in family.n_distinct},
                "warnings": list(family.warnings),
            }
            for family in result.families
        ],
        "warnings": list(result.warnings),
        "files_sha256": {path.name: hashlib.sha256(path.read_bytes()).hexdigest() for path in files},
    }


def _write_null(result: AnalysisResult, path: Path) -> None:
    """Write each family's counts and, where it has one, the histogram of its maximum."""
    arrays: dict[str, np.ndarray] = {"families": np.array([family.name for family in result.families])}
    for k, family in enumerate(result.families):
        arrays |= {f"{k}_count_{name}": counts for name, counts in family.counts}
        if family.null is not None:
            arrays |= {f"{k}_maximum_edges": family.null.edges, f"{k}_maximum_counts": family.null.counts}
    np.savez_compressed(path, **arrays)


def _write_json(path: Path, value) -> None:
    path.write_text(json.dumps(_finite(value), indent=1, ensure_ascii=False, allow_nan=False) + "\n", encoding="utf-8")


def _finite(value):
    """Return the value with NaN as null and infinity as text, which JSON cannot hold as numbers."""
    if isinstance(value, dict):
        return {key: _finite(item) for key, item in value.items()}
    if isinstance(value, list):
        return [_finite(item) for item in value]
    if isinstance(value, float) and not math.isfinite(value):
        return None if math.isnan(value) else ("Infinity" if value > 0 else "-Infinity")
    return value
