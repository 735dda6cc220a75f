"""The command line: the only place that prints and exits."""

from __future__ import annotations

import os
import signal
import sys
import tempfile
import traceback
from pathlib import Path
from typing import Annotated

import typer
from rich.console import Console

import mtest
from mtest.analyse import run_plan
from mtest.bundle.replay import replay_bundle
from mtest.bundle.write import check_target, write_bundle
from mtest.errors import MtestError
from mtest.plan.read import read_plan
from mtest.progress import Bar, Lines, Quiet
from mtest.report.formats import format_p
from mtest.results import AnalysisResult, FamilyResult

app = typer.Typer(
    add_completion=False, no_args_is_help=True, pretty_exceptions_enable=False, help="Which differences are real."
)
_err = Console(stderr=True, soft_wrap=True)
_out = Console(soft_wrap=True)

INTERRUPTED, TERMINATED = 130, 143  # the shell's conventions for Ctrl-C and SIGTERM


class _Terminated(BaseException):
    """SIGTERM arrived."""


def _terminate(*_) -> None:
    raise _Terminated


@app.callback(invoke_without_command=True)
def _root(version: Annotated[bool, typer.Option("--version", help="Print the version and leave.")] = False) -> None:
    """Adjusted p-values, estimates and tables for randomised studies with many endpoints and several arms."""
    if version:
        _out.print(f"mtest {mtest.__version__}", highlight=False)
        raise typer.Exit()


Jobs = Annotated[
    int, typer.Option("--jobs", min=0, metavar="N", help="Workers; 0 means one per core. Changes no digit.")
]
Silent = Annotated[bool, typer.Option("--quiet", help="Show no progress and no summary.")]


@app.command()
def run(
    plan: Annotated[Path, typer.Argument(help="The analysis plan, a TOML file.", metavar="PLAN")],
    out: Annotated[
        Path | None,
        typer.Option("--out", metavar="DIR", help="The folder to write; default: out/ and the plan's name."),
    ] = None,
    jobs: Jobs = 0,
    quiet: Silent = False,
) -> None:
    """Carry out a plan and leave a bundle: results, report, tables, manifest."""
    plan_file = read_plan(plan)
    folder = out or Path("out") / plan_file.path.stem
    check_target(folder)
    with _shown(quiet) as show:
        result = run_plan(plan_file, n_jobs=jobs, report=show)
    write_bundle(result, folder, plan_text=plan_file.text, data_folder=plan_file.path.parent.as_posix())
    if not quiet:
        _summarise(result, folder)


@app.command()
def replay(
    bundle: Annotated[Path, typer.Argument(help="A folder that `mtest run` wrote.", metavar="BUNDLE")],
    data: Annotated[
        Path | None,
        typer.Option(
            "--data", metavar="DIR", help="The folder the plan's data paths start from; default: as recorded."
        ),
    ] = None,
    jobs: Jobs = 0,
    quiet: Silent = False,
) -> None:
    """Run a bundle's plan again and compare every count with the bundle's."""
    with _shown(quiet) as show:
        compared = replay_bundle(bundle, data=data, n_jobs=jobs, report=show)
    if not quiet:
        _out.print(f"The same: {compared:,} counts agree with {bundle}.", highlight=False)


def _shown(quiet: bool) -> Quiet:
    if quiet:
        return Quiet()
    return Bar(_err) if _err.is_terminal else Lines(_err)


def _summarise(result: AnalysisResult, folder: Path) -> None:
    """Print the answer in a few lines, and where the report is."""
    for family in result.families:
        _out.print(_verdict(family), highlight=False)
        for h in family.hypotheses:
            if h.rejected:
                p = format_p(h.p_adjusted, alpha=family.alpha)
                _out.print(f"  {h.endpoint}: {h.arm} vs {h.reference}, adjusted p {p}", highlight=False)
        for warning in family.warnings:
            _err.print(f"Warning: {warning}", highlight=False)
    for warning in result.warnings:
        _err.print(f"Warning: {warning}", highlight=False)
    _out.print(f"Report: {folder / 'report.html'}", highlight=False)


def _verdict(family: FamilyResult) -> str:
    rejected = sum(h.rejected for h in family.hypotheses)
    how = "enumerated" if family.exact else "drawn"
    settled = "every decision settled" if all(h.settled for h in family.hypotheses) else "NOT every decision settled"
    return (
        f"{family.name}: {rejected} of {len(family.hypotheses)} hypotheses rejected at {family.alpha:g} "
        f"({family.procedure}; {family.n_draws:,} relabellings {how}; {settled})."
    )


def main() -> None:
    """Run the command line; every failure ends in one sentence a fault and its exit code."""
    # A scheduler ends a run by SIGTERM: as Ctrl-C, so that no worker is left behind.
    signal.signal(signal.SIGTERM, _terminate)
    try:
        code = app(standalone_mode=False)
    except _Terminated:
        code = TERMINATED
    except MtestError as error:
        _say(error.faults)
        code = error.exit_code
    except (KeyboardInterrupt, typer.Abort):
        code = INTERRUPTED
    except Exception as error:
        code = _usage(error)
    if code in (INTERRUPTED, TERMINATED):
        _say(["Interrupted; nothing was written."])
        sys.stderr.flush()
        os._exit(code)  # threads in the middle of a block would be waited for
    sys.exit(code)


def _usage(error: Exception) -> int:
    """Return the exit code of a faulty command line, or of a bug of ours, after saying so."""
    message = getattr(error, "format_message", None)
    if message is not None:
        said = message().strip()
        # Without arguments the help was printed and says it all.
        if said:
            _say([f"mtest: {said if said.endswith(('?', ')')) else said.rstrip('.') + '.'} Try 'mtest --help'."])
        return 2
    with tempfile.NamedTemporaryFile("w", prefix="mtest-bug-", suffix=".txt", delete=False) as file:
        file.write(traceback.format_exc())
    _say(
        [
            f"mtest: this is a fault of the program, not of your plan or data ({type(error).__name__}); nothing was "
            f"written. Please report it with {file.name}."
        ]
    )
    return 1


def _say(sentences) -> None:
    for sentence in sentences:
        _err.print(sentence, markup=False, highlight=False)


if __name__ == "__main__":
    main()
