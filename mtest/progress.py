"""How a run shows that it is alive: a bar on a terminal, plain lines in a log, nothing when asked to be quiet."""

from __future__ import annotations

import time
from contextlib import AbstractContextManager

import numpy as np
from rich.console import Console
from rich.progress import BarColumn, Progress, TextColumn, TimeRemainingColumn

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
        self._tasks: dict[str, tuple[int, float]] = {}

    def __enter__(self) -> Bar:
        self._bar.start()
        return self

    def __exit__(self, *failure) -> None:
        self._bar.stop()

    def __call__(self, family: str, step: Step) -> None:
        """Draw the family's bar."""
        if family not in self._tasks:
            task = self._bar.add_task(family, total=step.planned, rate="", width="")
            self._tasks[family] = (task, time.perf_counter())
        task, started = self._tasks[family]
        rate = step.done / max(time.perf_counter() - started, 1e-9)
        self._bar.update(
            task,
            completed=step.done,
            total=step.planned,
            rate=f"{rate:,.0f}/s",
            width=f"p ± {half_width(step):.4f}",
        )


class Lines(Quiet):
    """A line when a family starts, every ten seconds, and when it ends."""

    def __init__(self, console: Console) -> None:
        self._console = console
        self._seen: dict[str, tuple[float, float]] = {}

    def __call__(self, family: str, step: Step) -> None:
        """Print a line if one is due."""
        now = time.perf_counter()
        started, last = self._seen.get(family, (now, -np.inf))
        if now - last < _LINE_SECONDS and step.done < step.planned:
            return
        self._seen[family] = (started, now)
        rate = step.done / max(now - started, 1e-9)
        left = (step.planned - step.done) / rate if now > started else np.nan
        pace = f", {rate:,.0f}/s, {left:.0f} s left" if now > started else ""
        self._console.print(
            f"{family}: {step.done:,} of {step.planned:,} draws{pace}, p ± {half_width(step):.4f}", highlight=False
        )


def half_width(step: Step) -> float:
    """Return the largest half-width of the confidence sequences of the step-down p-values so far."""
    low, high = confidence_sequence(step.tally.step, step.tally.n)
    return float(np.max(high - low) / 2)
