"""The block function: block number -> tallies. The only place where draws are turned into counts."""

from __future__ import annotations

import numpy as np

from mtest.engine.job import Job
from mtest.engine.tally import Counter, Tally, Thresholds
from mtest.relabel.keys import BLOCK_DRAWS

TOLERANCE = 1e-9  # share of a statistic's spread within which a draw ties with the observed value
NEAR = 1000  # tolerances within which a draw that falls short is reported as a near tie
_PILOT_VALUES = 4_000_000  # statistics the pilot may keep, 32 MB
_PILOT_BLOCKS = 4
_BINS = 2000


def tally_blocks(job: Job, thresholds: Thresholds, first: int, last: int) -> Tally:
    """Return the tallies of blocks first .. last - 1; a pure function of its arguments."""
    counter = Counter(thresholds)
    reader = job.labels.reader()
    for block in range(first, last):
        for size, chunks in _batches(job, reader, block):
            running = np.full(size, -np.inf)
            for rows, statistics in chunks:
                counter.count_chunk(statistics, running, rows)
            counter.close_batch(running)
    return counter.tally


def run_pilot(job: Job) -> np.ndarray:
    """Return (hypothesis, draw) signed statistics of the first draws, in observed order.

    The first block, and up to three more while they fit in memory; for very many hypotheses a part of the first.
    """
    m = len(job.observed)
    wanted = min(_PILOT_BLOCKS * BLOCK_DRAWS, max(_PILOT_VALUES // m, 64), job.labels.n_draws)
    pilot = np.empty((m, wanted))
    done = 0
    reader = job.labels.reader()
    for block in range(_PILOT_BLOCKS):
        for size, chunks in _batches(job, reader, block, signed=True):
            if done >= wanted:
                return pilot
            width = min(size, wanted - done)
            for rows, statistics in chunks:
                pilot[rows, done : done + width] = statistics[:, :width]
            done += width
    return pilot


def set_thresholds(job: Job, pilot: np.ndarray) -> Thresholds:
    """Return what draws are compared with: the observed statistics less a tolerance that absorbs rounding.

    The tolerance is 1e-9 of the spread of the statistic over the pilot draws, or the rounding bound of the observed
    value where that is larger (two arms that hardly overlap).
    """
    finite = np.isfinite(pilot)
    kept = np.where(finite, pilot, 0.0)
    spread = np.sqrt(np.sum(kept**2, axis=1) / np.maximum(finite.sum(axis=1), 1))
    tolerance = np.maximum(TOLERANCE * spread, job.bound)
    maxima = np.max(np.abs(pilot) if job.two_sided else pilot, axis=0)
    reach = np.concatenate([maxima[np.isfinite(maxima)], job.observed[np.isfinite(job.observed)], [0.0, 1e-12]])
    edges = np.linspace(0.0, 1.25 * reach.max(), _BINS) if job.two_sided else np.linspace(*_span(reach), _BINS)
    return Thresholds(count=job.observed - tolerance, near=job.observed - NEAR * tolerance, edges=edges)


def _span(reach: np.ndarray) -> tuple[float, float]:
    width = reach.max() - reach.min()
    return reach.min() - 0.25 * width, reach.max() + 0.25 * width


def _batches(job: Job, reader, block: int, *, signed: bool = False):
    """Yield batches of draws: how many, and an iterator of (rows, statistics), the smallest observed ones first."""
    draws = min(BLOCK_DRAWS, job.labels.n_draws - block * BLOCK_DRAWS)
    if draws <= 0:
        return
    reader.start(block)
    for start in range(0, draws, job.batch):
        size = min(job.batch, draws - start)
        reader.advance(size)
        yield size, _chunks(job, reader, size, signed=signed)


def _chunks(job: Job, reader, size: int, *, signed: bool):
    # A set's labels are read once a batch; with a single chunk they are used at once, still in cache.
    labels: dict[int, list[np.ndarray]] = {}
    last = sum(job.chunk_rows)
    for panels, n_rows in zip(reversed(job.chunks), reversed(job.chunk_rows)):
        statistics = np.empty((n_rows, size))
        for panel in panels:
            if panel.set_index not in labels:
                labels[panel.set_index] = reader.fill(panel.set_index)
            statistics[panel.rows] = panel.compute(labels[panel.set_index])
        if job.two_sided and not signed:
            np.abs(statistics, out=statistics)
        yield slice(last - n_rows, last), statistics
        last -= n_rows
