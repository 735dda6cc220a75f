"""The README cannot drift from the program."""

import re
import shutil
import tomllib
from pathlib import Path

import pytest
from typer.testing import CliRunner

from mtest.cli import app
from mtest.plan.read import parse_plan

ROOT = Path(__file__).parents[2]
README = (ROOT / "README.md").read_text(encoding="utf-8")


def blocks(language):
    return re.findall(rf"```{language}\n(.*?)```", README, flags=re.DOTALL)


def test_the_first_command_installs_and_runs_the_demo():
    first = blocks("sh")[0].strip()
    assert first.splitlines() == [first]
    assert first.endswith("mtest run configs/neck-pain.toml")
    assert "`out/neck-pain/report.html`" in README


def test_ci_calls_the_readme_s_test_command():
    command = blocks("sh")[1].strip()
    ci = (ROOT / ".ci" / "run").read_text(encoding="utf-8")
    pattern = re.search(r"sed -n '/(.*)/p' README.md", ci)[1].replace(r"\[", "[").replace(r"\]", "]")
    start, end = pattern.lstrip("^").split(".*")
    found = [line for line in README.splitlines() if line.startswith(start) and end in line]
    assert found == [command]


def test_the_plan_shown_is_a_plan_and_runs(tmp_path):
    text = blocks("toml")[0]
    parse_plan(text, "README.md")
    assert "draws" in tomllib.loads(text)
    shutil.copytree(ROOT / "configs" / "neck-pain", tmp_path / "neck-pain")
    (tmp_path / "plan.toml").write_text(text, encoding="utf-8")
    result = CliRunner().invoke(app, ["run", str(tmp_path / "plan.toml"), "--out", str(tmp_path / "out")])
    assert result.exit_code == 0
    assert (tmp_path / "out" / "report.html").is_file()


def test_the_notebook_cell_runs(tmp_path, monkeypatch, capsys):
    (code,) = blocks("python")
    code = code.replace("configs/", f"{ROOT.as_posix()}/configs/").replace("out/from", f"{tmp_path.as_posix()}/from")
    exec(compile(code, "README.md", "exec"), {})
    assert "p_step_down" in capsys.readouterr().out
    assert (tmp_path / "from-a-notebook" / "results.csv").is_file()


@pytest.mark.parametrize("command", re.findall(r"`mtest ([a-z]+) ", README.split("| command |")[1].split("\n\n")[0]))
def test_commands_and_options_listed_are_those_there_are(command):
    row = next(line for line in README.splitlines() if line.startswith(f"| `mtest {command} "))
    shown = set(re.findall(r"--[a-z]+", row))
    registered = next(c for c in app.registered_commands if c.callback.__name__ == command)
    help_text = CliRunner().invoke(app, [command, "--help"], env={"COLUMNS": "200", "TERM": "dumb"}).output
    assert registered is not None
    assert shown == set(re.findall(r"(?<![\w-])--[a-z]+", help_text)) - {"--help"}


def test_every_command_is_listed():
    listed = set(re.findall(r"^\| `mtest ([a-z]+) ", README, flags=re.MULTILINE))
    assert listed == {c.callback.__name__ for c in app.registered_commands}
