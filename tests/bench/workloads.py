"""Workloads and contenders of the benchmark: the same data, the same question, several ways to answer it."""

from __future__ import annotations

import time
from functools import cache

import numpy as np
from scipy.stats import permutation_test

from mtest.engine.job import Hypotheses, Job, build_job
from mtest.engine.kernel import run_pilot, set_thresholds
from mtest.engine.schedule import run_job
from mtest.engine.tally import Thresholds
from mtest.relabel.keys import KeyStream
from mtest.relabel.sets import key_columns, pair_set
from mtest.relabel.sources import DrawnLabels
from mtest.scores import SCORES

SHAPES = {
    "W1": ((150, 150, 150, 150), 40),
    "W1, unequal arms": ((180, 140, 140, 140), 40),
    "W2": ((50, 50), 10_000),
}


@cache
def data(workload: str) -> tuple[np.ndarray, np.ndarray]:
    """Return (subject,) arms, the reference being 0, and (subject, endpoint) values."""
    sizes, m = SHAPES[workload]
    arm = np.random.default_rng(0).permutation(np.repeat(np.arange(len(sizes)), sizes))
    return arm, np.random.default_rng(1).normal(size=(len(arm), m))


@cache
def engine_job(workload: str) -> tuple[Job, Thresholds]:
    """Return the engine's job: Welch, each arm against the reference, within pair, joint."""
    arm, values = data(workload)
    one = np.zeros(len(arm), dtype=int)
    sets = tuple(pair_set(arm, one, (k, 0), name="pair") for k in range(1, arm.max() + 1))
    index = tuple(k for k in range(len(sets)) for _ in range(values.shape[1]))
    scores = tuple(
        SCORES["welch"](values[s.subjects, j], one[s.subjects]) for s in sets for j in range(values.shape[1])
    )
    hypotheses = Hypotheses(
        scores=scores,
        statistic=("welch",) * len(index),
        set_index=index,
        first=(0,) * len(index),
        second=(1,) * len(index),
    )
    labels = DrawnLabels(seed=417, sets=sets, share=np.ones(len(arm)), column=key_columns(arm), n_draws=2**62)
    job = build_job(hypotheses, labels=labels, strata=tuple(one[s.subjects] for s in sets), two_sided=True)
    return job, set_thresholds(job, run_pilot(job))


def engine(workload: str, draws: int, workers: int) -> float:
    """Return draws per second of `run_job`, counts and all."""
    job, thresholds = engine_job(workload)
    started = time.perf_counter()
    tally = run_job(job, thresholds, at_least=draws, settled=lambda _: True, n_jobs=workers)
    return tally.n / (time.perf_counter() - started)


def floor_words(workload: str, draws: int) -> float:
    """Return draws per second of one core that reads a word per subject, selects once, and makes the products."""
    bits = np.random.PCG64DXSM(417)
    n = len(data(workload)[0])
    return _floor(workload, draws, lambda batch: bits.random_raw(batch * n).reshape(batch, n))


def floor_packed(workload: str, draws: int) -> float:
    """Return the same with the engine's own packed 16-bit keys."""
    stream = KeyStream(417, (0,), len(data(workload)[0]))
    return _floor(workload, draws, stream.read)


def _floor(workload: str, draws: int, read) -> float:
    """Return draws per second of raw bits, one selection over all subjects, and the engine's own products.

    No statistics, no maxima, no counts. The threshold by a partition, the cheapest way to it.
    """
    job, _ = engine_job(workload)
    n = len(data(workload)[0])
    place = n // 2 - 1
    labels = np.empty((job.batch, n))
    rounds = draws // job.batch
    started = time.perf_counter()
    for _ in range(rounds):
        keys = read(job.batch)
        border = np.partition(keys, place, axis=1)[:, place : place + 1]
        np.less_equal(keys, border, out=labels, casting="unsafe")
        _products(job, labels)
    return rounds * job.batch / (time.perf_counter() - started)


def products_only(workload: str, draws: int) -> float:
    """Return draws per second of one core that makes nothing but the matrix products."""
    job, _ = engine_job(workload)
    labels = np.ones((job.batch, len(data(workload)[0])))
    started = time.perf_counter()
    rounds = max(draws // job.batch, 1)
    for _ in range(rounds):
        _products(job, labels)
    return rounds * job.batch / (time.perf_counter() - started)


def _products(job: Job, labels: np.ndarray) -> None:
    for chunk in job.chunks:
        for panel in chunk:
            panel.stack @ labels[:, : panel.stack.shape[1]].T


def loop(workload: str, draws: int) -> float:
    """Return draws per second of a loop as one writes it: shuffle, then all endpoints' means and variances."""
    arm, values = data(workload)
    rng = np.random.default_rng(2)
    pairs = [np.flatnonzero((arm == k) | (arm == 0)) for k in range(1, arm.max() + 1)]
    n_a = [int((arm == k).sum()) for k in range(1, arm.max() + 1)]
    observed = np.concatenate([_welch(values[arm == k], values[arm == 0]) for k in range(1, arm.max() + 1)])
    order = np.argsort(-observed)
    count = np.zeros(len(order), dtype=int)
    started = time.perf_counter()
    for _ in range(draws):
        parts = []
        for inside, n in zip(pairs, n_a):
            shuffled = values[rng.permutation(inside)]
            parts.append(_welch(shuffled[:n], shuffled[n:]))
        statistics = np.concatenate(parts)[order]
        tail = np.maximum.accumulate(statistics[::-1])[::-1]
        count += tail >= observed[order]
    return draws / (time.perf_counter() - started)


def _welch(a: np.ndarray, b: np.ndarray) -> np.ndarray:
    return np.abs(a.mean(axis=0) - b.mean(axis=0)) / np.sqrt(
        a.var(axis=0, ddof=1) / len(a) + b.var(axis=0, ddof=1) / len(b)
    )


def scipy_vectorised(workload: str, draws: int) -> float:
    """Return draws per second of `scipy.stats.permutation_test`, all endpoints in one vectorised call per pair.

    The null distributions it returns are then turned into step-down counts, as a user would. The best batch of a few.
    """
    return max(_scipy(workload, draws, batch) for batch in (16, 64, 256))


def _scipy(workload: str, draws: int, batch: int) -> float:
    arm, values = data(workload)

    def statistic(x, y, axis):
        return np.abs(x.mean(axis=axis) - y.mean(axis=axis)) / np.sqrt(
            x.var(axis=axis, ddof=1) / x.shape[axis] + y.var(axis=axis, ddof=1) / y.shape[axis]
        )

    started = time.perf_counter()
    results = [
        permutation_test(
            (values[arm == k], values[arm == 0]),
            statistic,
            permutation_type="independent",
            vectorized=True,
            n_resamples=draws,
            batch=batch,
            alternative="greater",
            axis=0,
            rng=np.random.default_rng(k),
        )
        for k in range(1, arm.max() + 1)
    ]
    observed = np.concatenate([r.statistic for r in results])
    null = np.concatenate([r.null_distribution for r in results], axis=1)
    order = np.argsort(-observed)
    tail = np.maximum.accumulate(null[:, order[::-1]], axis=1)[:, ::-1]
    (tail >= observed[order]).sum(axis=0)
    return draws / (time.perf_counter() - started)
