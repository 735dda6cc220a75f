"""Blocks over workers: the only place that knows joblib.

Tallies add up, so it does not matter who computes which block, nor when. Whether to go on is decided at round borders,
which depend on the plan alone; so the number of workers cannot change where a run stops.
"""

from __future__ import annotations

import multiprocessing
import os
import tempfile
import time
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from functools import lru_cache
from pathlib import Path

import joblib
from joblib.externals.loky.backend.process import LokyProcess
from threadpoolctl import ThreadpoolController

from mtest.engine.job import Job
from mtest.engine.kernel import tally_blocks
from mtest.engine.tally import Tally, Thresholds, empty_tally
from mtest.relabel.keys import BLOCK_DRAWS
from mtest.relabel.sources import EnumeratedLabels

# Starting processes takes about two seconds; shorter work runs on threads, which share the arrays and start at once.
_PROCESS_SECONDS = 20.0
_TASK_SECONDS = 0.5  # one task's work: often enough for progress and Ctrl-C, long enough to cost nothing
_GROWTH = 1.5  # each further round brings the draws to this multiple


@dataclass(frozen=True, slots=True, kw_only=True)
class Progress:
    """How far a run is: draws done and planned, the tally so far, and whether all relabellings are enumerated."""

    done: int
    planned: int
    exact: bool
    tally: Tally


def run_job(
    job: Job,
    thresholds: Thresholds,
    *,
    at_least: int,
    settled: Callable[[Tally], bool],
    n_jobs: int = 1,
    report: Callable[[Progress], None] | None = None,
) -> Tally:
    """Return the tally of a job.

    Parameters
    ----------
    at_least : int
        Draws before the first look, rounded up to whole blocks; the last is at all the draws the labels have.
    settled : callable
        Given the tally at a round's border: may the run stop?
    n_jobs : int
        Workers; 0 means one per core.
    report : callable
        Called after every finished task.
    """
    rounds = list(_rounds(at_least, job.labels.n_draws))
    exact = isinstance(job.labels, EnumeratedLabels)
    total = empty_tally(thresholds)
    workers = n_jobs or os.cpu_count() or 1
    first = 0
    with _blas_libraries().limit(limits=1, user_api="blas"):
        for draws in rounds:
            last = -(-draws // BLOCK_DRAWS)
            for tally in _run_blocks(job, thresholds, first, last, workers=workers):
                total.add(tally)
                if report is not None:
                    report(Progress(done=total.n, planned=draws, exact=exact, tally=total))
            first = last
            if draws < rounds[-1] and settled(total):
                break
    return total


def _rounds(at_least: int, at_most: int) -> Iterator[int]:
    """Yield the draws after each round: whole blocks, but for the last."""
    draws = _whole_blocks(at_least)
    while draws < at_most:
        yield draws
        draws = _whole_blocks(int(draws * _GROWTH))
    yield at_most


def _whole_blocks(draws: int) -> int:
    return -(-draws // BLOCK_DRAWS) * BLOCK_DRAWS


def _run_blocks(job, thresholds, first: int, last: int, *, workers: int) -> Iterator[Tally]:
    """Yield tallies that together cover the blocks first .. last - 1, in the order they are finished."""
    if first >= last:
        return
    started = time.perf_counter()
    tally = tally_blocks(job, thresholds, first, first + 1)
    seconds = time.perf_counter() - started
    yield tally
    left = last - first - 1
    per_task = max(1, min(round(_TASK_SECONDS / max(seconds, 1e-6)), -(-left // workers)))
    ranges = [(i, min(i + per_task, last)) for i in range(first + 1, last, per_task)]
    if workers == 1 or len(ranges) < 2:
        for begin, end in ranges:
            yield tally_blocks(job, thresholds, begin, end)
        return
    if seconds * left / workers < _PROCESS_SECONDS:
        tasks = (joblib.delayed(tally_blocks)(job, thresholds, begin, end) for begin, end in ranges)
        yield from joblib.Parallel(n_jobs=workers, prefer="threads", return_as="generator_unordered")(tasks)
        return
    with tempfile.TemporaryDirectory(prefix="mtest-") as folder:
        path = Path(folder) / "job.pickle"
        joblib.dump((job, thresholds), path)
        tasks = (joblib.delayed(_tally_from_file)(str(path), begin, end) for begin, end in ranges)
        try:
            yield from joblib.Parallel(
                n_jobs=workers, backend="loky", inner_max_num_threads=1, return_as="generator_unordered"
            )(tasks)
        except BaseException:
            _end_workers()
            raise


def _end_workers() -> None:
    """End the worker processes after Ctrl-C or a failure, and wait for them: none may outlive the run, nor linger."""
    for process in multiprocessing.active_children():
        if isinstance(process, LokyProcess):
            process.kill()
            process.join()


@lru_cache(maxsize=1)
def _blas_libraries() -> ThreadpoolController:
    """Return a handle on the BLAS libraries; finding them takes milliseconds, so once."""
    return ThreadpoolController()


@lru_cache(maxsize=1)
def _load(path: str):
    return joblib.load(path)


def _tally_from_file(path: str, first: int, last: int) -> Tally:
    """Return the tally of some blocks of the job in a file: workers get ranges, the arrays are read once each."""
    with _blas_libraries().limit(limits=1, user_api="blas"):
        return tally_blocks(*_load(path), first, last)
