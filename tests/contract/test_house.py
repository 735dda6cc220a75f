"""The house rules: imports run one way, files stay small, names are public on purpose."""

import ast
from pathlib import Path

import pytest

import mtest

ROOT = Path(__file__).parents[2]
PACKAGE = ROOT / "mtest"
FILES = sorted(PACKAGE.rglob("*.py"))

# Room -> level. A file imports from rooms of a lower level, or from its own room.
LEVEL = {
    "errors": 0,
    "plan.records": 1,
    "plan.wording": 1,
    "trial.arrays": 1,
    "results": 1,
    "relabel": 2,
    "scores": 2,
    "adjust": 2,
    "estimate": 2,
    "engine": 3,
    "plan": 4,
    "family": 4,
    "trial": 5,
    "machine": 5,
    "analyse": 6,
    "report": 7,
    "bundle": 8,
    "notebook": 9,
    "progress": 9,
    "": 10,  # mtest/__init__.py, the public face
    "cli": 11,
    "__main__": 12,
}
PURE = {"relabel", "scores", "engine", "adjust", "estimate", "family"}
PURE_MAY_IMPORT = {
    "numpy", "scipy", "statsmodels", "joblib", "threadpoolctl",
    "__future__", "abc", "collections", "dataclasses", "functools", "itertools", "math", "typing", "warnings",
}  # fmt: skip
# Exemptions, each with its reason.
SCHEDULE_MAY_IMPORT = {
    "multiprocessing",
    "os",
    "tempfile",
    "time",
    "pathlib",
}  # counts cores, hands the job to workers, sizes tasks
ONLY_IN_SCHEDULE = {"joblib", "threadpoolctl"}
ONLY_IN_ADJUST_AND_ESTIMATE = {"statsmodels"}


def name(path: Path) -> str:
    parts = path.relative_to(PACKAGE).with_suffix("").parts
    return ".".join(part for part in parts if part != "__init__")


def room(module: str) -> str:
    """Return the longest entry of LEVEL that holds a module."""
    parts = module.split(".") if module else [""]
    for end in range(len(parts), 0, -1):
        if ".".join(parts[:end]) in LEVEL:
            return ".".join(parts[:end])
    raise AssertionError(f"mtest.{module} lies in no room of the table")


def imports(path: Path):
    """Yield the module names a file imports, wherever in the file."""
    for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
        if isinstance(node, ast.Import):
            yield from (alias.name for alias in node.names)
        elif isinstance(node, ast.ImportFrom):
            assert node.level == 0, f"{path}: relative import"
            yield node.module


@pytest.mark.parametrize("path", FILES, ids=name)
def test_imports_run_one_way(path):
    here = room(name(path))
    for module in imports(path):
        if module.split(".")[0] != "mtest":
            continue
        there = room(module.partition(".")[2])
        assert there == here or LEVEL[there] < LEVEL[here], f"mtest.{name(path)} may not import {module}"


@pytest.mark.parametrize("path", [p for p in FILES if name(p).split(".")[0] in PURE], ids=name)
def test_pure_rooms_import_neither_pandas_nor_files_nor_the_clock(path):
    outside = {module.split(".")[0] for module in imports(path)} - {"mtest"}
    allowed = PURE_MAY_IMPORT | (SCHEDULE_MAY_IMPORT if name(path) == "engine.schedule" else set())
    assert outside <= allowed
    if name(path) != "engine.schedule":
        assert not outside & ONLY_IN_SCHEDULE
    if name(path).split(".")[0] not in ("adjust", "estimate"):
        assert not outside & ONLY_IN_ADJUST_AND_ESTIMATE


@pytest.mark.parametrize("path", [p for p in FILES if name(p) != "cli"], ids=name)
def test_only_the_command_line_prints_and_exits(path):
    calls = {
        node.func.id
        for node in ast.walk(ast.parse(path.read_text(encoding="utf-8")))
        if isinstance(node, ast.Call) and isinstance(node.func, ast.Name)
    }
    assert not calls & {"print", "exit", "quit"}


@pytest.mark.parametrize("path", FILES, ids=name)
def test_no_file_is_over_400_lines_or_called_a_drawer(path):
    assert len(path.read_text(encoding="utf-8").splitlines()) <= 400
    assert path.stem not in ("utils", "helpers", "common", "misc")


@pytest.mark.parametrize("path", FILES, ids=name)
def test_every_file_and_public_name_is_documented(path):
    tree = ast.parse(path.read_text(encoding="utf-8"))
    assert ast.get_docstring(tree)
    for node in tree.body:
        if isinstance(node, (ast.FunctionDef, ast.ClassDef)) and not node.name.startswith("_"):
            assert ast.get_docstring(node), f"{node.name} has no docstring"


def test_the_public_names_are_these():
    assert set(mtest.__all__) == {
        "joint_test", "JointResult", "read_plan", "PlanFile", "analyse", "Analysis",
        "MtestError", "PlanError", "UsageError", "DataError", "NumericError",
    }  # fmt: skip
    assert all(hasattr(mtest, public) for public in mtest.__all__)


def test_the_top_level_holds_what_the_design_card_lists():
    allowed = {
        "README.md", "DEVELOPERS.md", "pyproject.toml", "LICENSE", ".gitignore",
        "mtest", "tests", "configs", "reports", ".ci",
    }  # fmt: skip
    import subprocess

    listed = subprocess.run(
        ["git", "ls-files"], cwd=ROOT, capture_output=True, text=True, check=False
    ).stdout.splitlines()
    if not listed:
        pytest.skip("not a git checkout: the listed files are unknown")
    assert {line.split("/")[0] for line in listed} <= allowed
