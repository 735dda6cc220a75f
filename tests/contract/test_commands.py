"""Commands as a user meets them: one sentence a fault, the right exit code, nothing half-written."""

import json
import os
import shutil
import signal
import subprocess
import sys
import time
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[2]
SMALL = """
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
at_least = {draws}
at_most = {draws}
seed = 1
exact_limit = 0
[[endpoint]]
name = "Pain"
kind = "continuous"
value = "pain"
better = "lower"
[[family]]
name = "All"
endpoints = "all"
comparisons = "each vs reference"
"""


def mtest(*arguments, cwd=None, **options):
    return subprocess.run(
        [sys.executable, "-W", "error", "-m", "mtest.cli", *map(str, arguments)],
        capture_output=True,
        text=True,
        cwd=cwd,
        timeout=120,
        check=False,
        **options,
    )


@pytest.fixture
def study(tmp_path):
    rows = [f"s{i:02},{'gel' if i % 2 else 'vehicle'},{(i * 7) % 11}" for i in range(24)]
    (tmp_path / "subjects.csv").write_text("id,arm,pain\n" + "\n".join(rows) + "\n", encoding="utf-8")
    (tmp_path / "plan.toml").write_text(SMALL.format(draws=2048), encoding="utf-8")
    return tmp_path


def test_run_says_what_was_found_and_where_the_report_is(study):
    done = mtest("run", "plan.toml", cwd=study)
    assert done.returncode == 0, done.stderr
    assert (
        "All: 0 of 1 hypotheses rejected at 0.05 (step-down max-T; 2,048 relabellings drawn; every decision settled)."
        in done.stdout
    )
    assert f"Report: {Path('out') / 'plan' / 'report.html'}" in done.stdout
    assert (study / "out" / "plan" / "report.html").is_file()


def test_progress_is_plain_lines_in_a_log(study):
    done = mtest("run", "plan.toml", cwd=study)
    assert "All: 2,048 of 2,048 draws" in done.stderr
    assert "\x1b" not in done.stderr


def test_quiet_says_nothing(study):
    done = mtest("run", "plan.toml", "--quiet", cwd=study)
    assert (done.returncode, done.stdout, done.stderr) == (0, "", "")


def test_run_replaces_an_earlier_bundle(study):
    for _ in range(2):
        assert mtest("run", "plan.toml", "--out", "b", cwd=study).returncode == 0
    assert [path.name for path in study.iterdir() if path.is_dir()] == ["b"]


def test_a_folder_that_is_no_bundle_is_left_alone(study):
    (study / "b").mkdir()
    (study / "b" / "thesis.txt").write_text("mine")
    done = mtest("run", "plan.toml", "--out", "b", cwd=study)
    assert done.returncode == 2
    assert done.stderr == (
        "b: the output must be a new folder or an earlier bundle; got something else of that name. "
        "Choose another with --out, or remove it.\n"
    )
    assert [path.name for path in (study / "b").iterdir()] == ["thesis.txt"]


def test_an_output_that_cannot_be_made_is_one_sentence(study):
    done = mtest("run", "plan.toml", "--out", "plan.toml/b", cwd=study)
    assert done.returncode == 2
    assert "the output folder must be writable" in done.stderr
    assert "Traceback" not in done.stderr


def test_an_output_that_cannot_be_made_is_found_before_drawing(study):
    done = mtest("run", "plan.toml", "--out", "/proc/x", cwd=study)
    assert done.returncode == 2
    assert done.stderr.count("\n") == 1
    assert "draws" not in done.stderr


def test_without_a_command_the_help_is_all_that_is_said(study):
    done = mtest(cwd=study)
    assert "Usage" in done.stdout
    assert done.stderr == ""


def test_python_m_mtest_is_the_command_line(study):
    done = subprocess.run([sys.executable, "-m", "mtest", "--version"], capture_output=True, text=True, check=False)
    assert done.stdout.startswith("mtest ")


def test_a_missing_plan_is_one_sentence(study):
    done = mtest("run", "plon.toml", cwd=study)
    assert done.returncode == 2
    assert done.stderr.startswith("plon.toml: a plan file must exist")
    assert done.stderr.count("\n") == 1


def test_all_faults_of_a_plan_are_named_at_once(study):
    text = (study / "plan.toml").read_text().replace('"lower"', '"down"').replace("seed = 1", 'seed = "x"')
    (study / "plan.toml").write_text(text)
    done = mtest("run", "plan.toml", cwd=study)
    assert done.returncode == 2
    assert done.stderr.count("\n") == 2
    assert "better must be" in done.stderr
    assert "seed must be" in done.stderr
    assert not (study / "out").exists()


def test_faulty_data_exit_with_3_and_write_nothing(study):
    (study / "subjects.csv").write_text("id,arm,pain\n1,gel,x\n1,gel,2\n3,vehicle,1\n4,vehicle,2\n")
    done = mtest("run", "plan.toml", cwd=study)
    assert done.returncode == 3
    assert "Traceback" not in done.stderr
    assert not (study / "out").exists()


@pytest.mark.parametrize(
    ("arguments", "sentence"),
    [
        (["run"], "Missing argument"),
        (["run", "plan.toml", "--job", "2"], "No such option"),
        (["run", "plan.toml", "--jobs", "-1"], "Invalid value for '--jobs'"),
        (["walk", "plan.toml"], "No such command 'walk'"),
    ],
)
def test_a_faulty_command_line_is_one_sentence(study, arguments, sentence):
    done = mtest(*arguments, cwd=study)
    assert done.returncode == 2
    assert sentence in done.stderr
    assert done.stderr.count("\n") == 1
    assert "Traceback" not in done.stderr


def test_a_fault_of_ours_shows_no_traceback_and_exits_with_1(study):
    code = (
        "import sys, mtest.cli as c\n"
        "def broken(*a, **k): raise ZeroDivisionError('x')\n"
        "c.run_plan = broken\n"
        "sys.argv = ['mtest', 'run', 'plan.toml']\n"
        "c.main()\n"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, cwd=study, check=False)
    assert done.returncode == 1
    assert "a fault of the program, not of your plan or data (ZeroDivisionError)" in done.stderr
    assert "Traceback" not in done.stderr
    Path(done.stderr.rsplit(" ", 1)[1].strip().rstrip(".") + "").unlink(missing_ok=True)


@pytest.fixture
def bundle(study):
    assert mtest("run", "plan.toml", "--out", "b", "--quiet", cwd=study).returncode == 0
    return study / "b"


def test_replay_agrees(bundle):
    done = mtest("replay", "b", cwd=bundle.parent)
    assert done.returncode == 0, done.stderr
    assert "The same: 3 counts agree with b." in done.stdout


def test_replay_names_a_changed_file(bundle):
    with (bundle / "results.csv").open("a") as file:
        file.write("\n")
    done = mtest("replay", "b", cwd=bundle.parent)
    assert done.returncode == 2
    assert "a bundle's files must be as written; got a changed file" in done.stderr


def test_replay_names_changed_data(bundle):
    path = bundle.parent / "subjects.csv"
    path.write_text(path.read_text().replace("s23,gel,7", "s23,gel,8"))
    done = mtest("replay", "b", cwd=bundle.parent)
    assert done.returncode == 3
    assert "the data must be those of the bundle" in done.stderr


def test_replay_names_the_first_count_that_differs(bundle):
    import numpy as np

    with np.load(bundle / "null.npz") as stored:
        arrays = dict(stored)
    arrays["0_count_step_down"] = arrays["0_count_step_down"] + 1
    np.savez_compressed(bundle / "null.npz", **arrays)
    manifest = json.loads((bundle / "manifest.json").read_text())
    import hashlib

    manifest["files_sha256"]["null.npz"] = hashlib.sha256((bundle / "null.npz").read_bytes()).hexdigest()
    (bundle / "manifest.json").write_text(json.dumps(manifest))
    done = mtest("replay", "b", "--quiet", cwd=bundle.parent)
    assert done.returncode == 4
    assert "All, Pain, gel vs vehicle: the step-down count must be" in done.stderr


def test_replay_of_no_bundle_is_one_sentence(study):
    done = mtest("replay", "nowhere", cwd=study)
    assert done.returncode == 2
    assert "a bundle must be a folder with a readable manifest.json" in done.stderr


def _state(pid):
    """Return a process' state letter and parent, or None where there is no such process."""
    try:
        fields = Path(f"/proc/{pid}/stat").read_text().rsplit(")", 1)[1].split()
    except OSError:
        return None
    return fields[0], int(fields[1])


def _children(pid):
    everyone = [int(path.name) for path in Path("/proc").glob("[0-9]*")]
    return [p for p in everyone if (state := _state(p)) is not None and state[1] == pid]


@pytest.mark.skipif(not Path("/proc/self/stat").exists(), reason="looks for children in /proc")
@pytest.mark.parametrize(
    ("workers", "sent", "code"),
    [("threads", signal.SIGINT, 130), ("processes", signal.SIGINT, 130), ("processes", signal.SIGTERM, 143)],
)
def test_ctrl_c_and_sigterm_end_at_once_without_children_or_a_bundle(study, workers, sent, code):
    (study / "plan.toml").write_text(SMALL.format(draws=2_000_000_000), encoding="utf-8")
    seconds = "0" if workers == "processes" else "1e9"
    program = (
        "import sys, mtest.engine.schedule as s, mtest.cli as c\n"
        f"s._PROCESS_SECONDS = {seconds}\n"
        "sys.argv = ['mtest', 'run', 'plan.toml', '--jobs', '2', '--out', 'b']\n"
        "c.main()\n"
    )
    started = subprocess.Popen(
        [sys.executable, "-c", program], cwd=study, stderr=subprocess.PIPE, text=True, start_new_session=True
    )
    wanted = {"threads": 0, "processes": 3}[workers]  # two workers and a tracker at least
    deadline = time.monotonic() + 60
    started.stderr.readline()  # the first progress line: drawing has begun
    while len(_children(started.pid)) < wanted and time.monotonic() < deadline:
        time.sleep(0.2)
    time.sleep(1)
    children = _children(started.pid)
    assert len(children) >= wanted
    # The trackers of Python and joblib end by themselves once their parent has; who reaps them is the system's affair.
    workers_only = [pid for pid in children if "LokyProcess" in Path(f"/proc/{pid}/cmdline").read_text()]
    # A terminal sends Ctrl-C to the whole group, a scheduler sends SIGTERM to the parent alone.
    (os.killpg if sent is signal.SIGINT else os.kill)(started.pid, sent)
    _, said = started.communicate(timeout=10)
    assert started.returncode == code
    assert "Interrupted; nothing was written." in said
    assert not [pid for pid in workers_only if _state(pid) is not None]
    time.sleep(1)
    assert not [pid for pid in children if (state := _state(pid)) is not None and state[0] != "Z"]
    assert sorted(path.name for path in study.iterdir()) == ["plan.toml", "subjects.csv"]


def test_the_module_and_the_script_are_the_same_program():
    assert shutil.which("mtest", path=str(Path(sys.executable).parent))
    assert mtest("--version").stdout.startswith("mtest ")
