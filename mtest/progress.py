"""How a run shows that it is alive: a bar on a terminal, plain lines in a log, nothing when asked to be quiet."""

from __future__ import annotations

import time
from contextlib import AbstractContextManager
from datetime import timedelta

import numpy as np
from rich.console import Console
from rich.progress import BarColumn, Progress, TaskID, TextColumn, TimeRemainingColumn

from mtest.adjust.montecarlo import confidence_sequence
from mtest.engine.schedule import Progress as Step

_LINE_SECONDS = 10.0  # between lines of a log


class Quiet(AbstractContextManager):
    """Show nothing."""

    def __call__(self, family: str, step: Step) -> None:
        """Take note of a step."""

    def __exit__(self, *failure) -> None:
        """Leave."""


class Bar(Quiet):
    """A bar per family: draws, rate, time left, the largest half-width of a Monte Carlo interval."""

    def __init__(self, console: Console) -> None:
        self._bar = Progress(
            TextColumn("{task.description}"),
            BarColumn(bar_width=30),
            TextColumn("{task.completed:,}/{task.total:,} draws"),
            TextColumn("{task.fields[rate]}"),
            TimeRemainingColumn(),
            TextColumn("{task.fields[width]}"),
            console=console,
            transient=True,
        )
        self._tasks: dict[str, tuple[TaskID, float, int]] = {}

    def __enter__(self) -> Bar:
        self._bar.start()
        return self

    def __exit__(self, *failure) -> None:
        self._bar.stop()

    def __call__(self, family: str, step: Step) -> None:
        """Draw the family's bar."""
        now = time.perf_counter()
        if family not in self._tasks:
            # The rate counts from the first report: before it lie the pilot and the start of workers.
            self._tasks[family] = (self._bar.add_task(family, total=step.planned, rate="", width=""), now, step.done)
        task, started, first = self._tasks[family]
        rate = f"{(step.done - first) / (now - started):,.0f}/s" if step.done > first else ""
        self._bar.update(task, completed=step.done, total=step.planned, rate=rate, width=show_width(step))


class Lines(Quiet):
    """A line when a family starts, every ten seconds, and when it ends."""

    def __init__(self, console: Console) -> None:
        self._console = console
        self._seen: dict[str, tuple[float, int, float]] = {}

    def __call__(self, family: str, step: Step) -> None:
        """Print a line if one is due."""
        now = time.perf_counter()
        started, first, last = self._seen.get(family, (now, step.done, -np.inf))
        if now - last < _LINE_SECONDS and step.done < step.planned:
            return
        self._seen[family] = (started, first, now)
        pace = ""
        if first < step.done < step.planned:
            rate = (step.done - first) / (now - started)
            pace = f", {rate:,.0f}/s, {timedelta(seconds=round((step.planned - step.done) / rate))} left"
        self._console.print(
            f"{family}: {step.done:,} of {step.planned:,} draws{pace}, {show_width(step)}", highlight=False
        )


def show_width(step: Step) -> str:
    """Return the largest half-width of the confidence sequences of the step-down p-values so far, in words."""
    if step.exact:
        return "enumerated"
    low, high = confidence_sequence(step.tally.step, step.tally.n)
    return f"widest p ± {np.max(high - low) / 2:.3f}"
