"""One family on arrays: labels, scores, engine and adjustment meet here, for the plan and for the notebook alike."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from typing import Any

import numpy as np

from mtest.adjust.control import WhatWasRun, control_statement, has_common_reference
from mtest.adjust.maxt import across_pairs_single_step, across_pairs_step_down, step_down
from mtest.adjust.montecarlo import confidence_sequence, p_from_counts
from mtest.adjust.pvalues import adjust_from_p
from mtest.engine.job import Hypotheses, Job, build_job
from mtest.engine.kernel import run_pilot, set_thresholds
from mtest.engine.schedule import Progress, run_job
from mtest.engine.tally import Tally, Thresholds
from mtest.relabel.mixing import mixing_shares
from mtest.relabel.sets import ReferenceSet, count_relabellings, key_columns, pair_set, whole_set
from mtest.relabel.sources import DrawnLabels, EnumeratedLabels
from mtest.results import NullDistribution
from mtest.scores import SCORES

_CORRELATION_ROWS = 400  # above this many hypotheses the correlation matrix is not kept


@dataclass(frozen=True, slots=True, kw_only=True)
class Design:
    """Who was randomised to what, and how.

    arm, cell, stratum : (subject,) int; every cell lies in one stratum
    arms : names
    """

    arm: np.ndarray
    cell: np.ndarray
    stratum: np.ndarray
    arms: tuple[str, ...]


@dataclass(frozen=True, slots=True, kw_only=True)
class FamilySpec:
    """What is asked of a family.

    values : (subject, endpoint) float64, NaN where missing
    statistic : per endpoint
    sign : per endpoint, 1 where larger is better, -1 where smaller is; only used one-sided
    pairs : (tested, reference) arm indices
    """

    values: np.ndarray
    statistic: tuple[str, ...]
    sign: tuple[int, ...]
    pairs: tuple[tuple[int, int], ...]
    two_sided: bool
    exchange: str
    across_pairs: str
    procedure: str
    alpha: float
    at_least: int
    at_most: int
    seed: int
    exact_limit: int


@dataclass(frozen=True, slots=True, kw_only=True)
class FamilyTest:
    """What came out, per hypothesis in the order endpoint by endpoint, pair by pair.

    counts : draws at or above the observed statistic: of the hypothesis ("unadjusted"), of the family's maximum
        ("single_step"), of the maximum over the hypothesis and all below it ("step_down"); per pair under "boole"
    low, high : (hypothesis,) confidence sequence of `p_adjusted`; equal to it when enumerated
    p_near : (hypothesis,) adjusted p with near ties counted: where it falls across alpha, the decision hangs on them
    """

    statistic: np.ndarray
    p_unadjusted: np.ndarray
    p_single_step: np.ndarray
    p_step_down: np.ndarray
    p_adjusted: np.ndarray
    low: np.ndarray
    high: np.ndarray
    p_near: np.ndarray
    near_ties: np.ndarray
    step: np.ndarray
    counts: dict[str, np.ndarray]
    exact: bool
    n_draws: int
    n_distinct: tuple[tuple[str, int], ...]
    smallest_p: float
    null: NullDistribution | None
    correlation: np.ndarray | None
    local_alpha: float
    equivalent_endpoints: float


@dataclass(frozen=True, slots=True, kw_only=True)
class _Run:
    """One job run: where its hypotheses stand in the family, and its counts, in observed order."""

    place: np.ndarray
    job: Job
    thresholds: Thresholds
    tally: Tally
    pilot: np.ndarray
    exact: bool

    def p(self, counts: np.ndarray) -> np.ndarray:
        return p_from_counts(counts, self.tally.n, exact=self.exact)

    def bounds(self, counts: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        if self.exact:
            return self.p(counts), self.p(counts)
        low, high = confidence_sequence(counts, self.tally.n)
        p = self.p(counts)
        return np.minimum(low, p), np.maximum(high, p)


def default_across_pairs(*, two_sided: bool, pairs: tuple[tuple[int, int], ...]) -> str:
    """Return how pairs are joined unless the user says so: one-sided tests without a common reference take Boole."""
    return "joint" if two_sided or has_common_reference(pairs) else "boole"


def state_control(design: Design, spec: FamilySpec, test: FamilyTest) -> str:
    """Return the control statement of a family that was judged."""
    return control_statement(
        WhatWasRun(
            procedure=spec.procedure,
            exchange=spec.exchange,
            across_pairs=spec.across_pairs,
            pairs=spec.pairs,
            n_arms=len(design.arms),
            two_sided=spec.two_sided,
            exact=test.exact,
            stratified=len(np.unique(design.stratum)) > 1,
            statistics=spec.statistic,
        )
    )


def judge_family(
    design: Design, spec: FamilySpec, *, n_jobs: int = 1, report: Callable[[Progress], None] | None = None
) -> FamilyTest:
    """Return the p-values of a family, adjusted by its procedure.

    Notes
    -----
    One job serves the family; under "boole" each pair of arms has its own, and Boole's inequality joins them.
    Enumerates instead of drawing where a job has one reference set with at most `exact_limit` relabellings.
    """
    sets = _reference_sets(design, spec)
    if spec.across_pairs == "boole" and not _is_whole(design, spec):
        groups = [((k,), (s,)) for k, s in enumerate(sets)]
    else:
        groups = [(tuple(range(len(spec.pairs))), sets)]
    runs = [_run(design, spec, pairs, own, n_jobs=n_jobs, report=report) for pairs, own in groups]
    columns = _adjust(spec, runs)
    lone = runs[0] if len(runs) == 1 else None
    null = None if lone is None else _null(lone, spec.alpha)
    local, equivalent = (np.nan, np.nan) if lone is None else _saving(lone, spec)
    exact = all(run.exact for run in runs)
    n_draws = max(run.tally.n for run in runs)
    return FamilyTest(
        **columns,
        exact=exact,
        n_draws=n_draws,
        n_distinct=tuple((s.name, count_relabellings(s.sizes)) for s in sets),
        smallest_p=min(1 / run.tally.n if run.exact else 1 / (1 + run.tally.n) for run in runs),
        null=null,
        correlation=None if lone is None else _correlation(lone),
        local_alpha=local,
        equivalent_endpoints=equivalent,
    )


def _is_whole(design: Design, spec: FamilySpec) -> bool:
    """Return whether all arms are relabelled together; with two arms they are a pair in any case."""
    return spec.exchange == "all-arms" and len(design.arms) > 2


def _reference_sets(design: Design, spec: FamilySpec) -> tuple[ReferenceSet, ...]:
    if _is_whole(design, spec):
        return (whole_set(design.arm, design.cell, n_arms=len(design.arms), name="all arms"),)
    return tuple(
        pair_set(design.arm, design.cell, pair, name=f"{design.arms[pair[0]]} vs {design.arms[pair[1]]}")
        for pair in spec.pairs
    )


def _run(design: Design, spec: FamilySpec, pairs, sets, *, n_jobs, report) -> _Run:
    """Run one job: all pairs of a joint family, or one pair of a family joined by Boole."""
    place = np.array([j * len(spec.pairs) + k for j in range(len(spec.statistic)) for k in pairs])
    exact = len(sets) == 1 and count_relabellings(sets[0].sizes) <= spec.exact_limit
    if exact:
        labels = EnumeratedLabels(sets=sets)
    else:
        labels = DrawnLabels(
            seed=spec.seed,
            sets=sets,
            share=_shares(design, spec, pairs),
            column=key_columns(design.arm),
            n_draws=spec.at_most,
        )
    strata = tuple(design.stratum[s.subjects] for s in sets)
    job = build_job(
        _hypotheses(design, spec, pairs, sets, strata), labels=labels, strata=strata, two_sided=spec.two_sided
    )
    pilot = run_pilot(job)
    thresholds = set_thresholds(job, pilot)

    alone = replace(spec, pairs=tuple(spec.pairs[k] for k in pairs))

    def settled(tally: Tally) -> bool:
        own = np.arange(len(place))
        run = _Run(place=own, job=job, thresholds=thresholds, tally=tally, pilot=pilot, exact=exact)
        return _is_settled(alone, run, most_pairs=1 + len(spec.pairs) - len(pairs))

    tally = run_job(
        job,
        thresholds,
        at_least=labels.n_draws if exact else spec.at_least,
        settled=settled,
        n_jobs=n_jobs,
        report=report,
    )
    return _Run(place=place, job=job, thresholds=thresholds, tally=tally, pilot=pilot, exact=exact)


def _shares(design: Design, spec: FamilySpec, pairs) -> np.ndarray:
    """Return each subject's mixing share; 1 where all arms are relabelled together or one pair is alone."""
    if _is_whole(design, spec) or len(pairs) == 1:
        return np.ones(len(design.arm))
    _, cell = np.unique(design.cell, return_inverse=True)
    sizes = np.zeros((cell.max() + 1, len(design.arms)), dtype=int)
    np.add.at(sizes, (cell, design.arm), 1)
    return mixing_shares(sizes, tuple(spec.pairs[k] for k in pairs))[cell, design.arm]


def _hypotheses(design: Design, spec: FamilySpec, pairs, sets, strata) -> Hypotheses:
    """Return the hypotheses endpoint by endpoint, pair by pair; scores are made among the subjects of their set."""
    all_arms = _is_whole(design, spec)
    set_index = tuple(0 if all_arms else k for k in range(len(pairs)))
    scores = []
    for j, name in enumerate(spec.statistic):
        sign = 1 if spec.two_sided else spec.sign[j]
        per_set = [sign * SCORES[name](spec.values[s.subjects, j], strata[i]) for i, s in enumerate(sets)]
        if name != "unscaled difference":
            per_set = [_rescale(x) for x in per_set]
        scores += [per_set[i] for i in set_index]
    repeat = len(spec.statistic)
    return Hypotheses(
        scores=tuple(scores),
        statistic=tuple(name for name in spec.statistic for _ in pairs),
        set_index=set_index * repeat,
        first=tuple(spec.pairs[k][0] if all_arms else 0 for k in pairs) * repeat,
        second=tuple(spec.pairs[k][1] if all_arms else 1 for k in pairs) * repeat,
    )


def _rescale(scores: np.ndarray) -> np.ndarray:
    """Return scores over a power of two near their largest size: exact, and squares neither vanish nor overflow."""
    largest = np.nanmax(np.abs(scores), initial=0.0)
    return np.ldexp(scores, -np.frexp(largest)[1]) if largest > 0 else scores


def _adjust(spec: FamilySpec, runs: list[_Run]) -> dict[str, Any]:
    """Return the per-hypothesis columns of `FamilyTest`, in the family's order."""
    m = sum(len(run.place) for run in runs)

    def gather(parts: list[np.ndarray]) -> np.ndarray:
        column = np.empty(m, dtype=parts[0].dtype)
        for run, part in zip(runs, parts, strict=True):
            column[run.place[run.job.order]] = part
        return column

    join = across_pairs_single_step  # with one job the number of jobs is 1 and nothing changes
    sign = 1 if spec.two_sided else np.repeat(spec.sign, len(spec.pairs))
    raw = gather([run.p(run.tally.raw) for run in runs])
    singles = [run.p(run.tally.single_step(run.thresholds)) for run in runs]
    single = gather(join(singles))
    tails, steps = _step_down([run.p(run.tally.step) for run in runs])
    columns = {
        "statistic": sign * gather([run.job.signed for run in runs]),
        "p_unadjusted": raw,
        "p_single_step": single,
        "p_step_down": gather(tails),
        "near_ties": gather([run.tally.raw_near - run.tally.raw for run in runs]),
        "step": gather(steps),
        "counts": {
            "unadjusted": gather([run.tally.raw for run in runs]),
            "single_step": gather([run.tally.single_step(run.thresholds) for run in runs]),
            "step_down": gather([run.tally.step for run in runs]),
        },
    }
    if spec.procedure == "step-down max-T":
        bounds = [run.bounds(run.tally.step) for run in runs]
        low, high = (gather(_step_down([pair[i] for pair in bounds])[0]) for i in (0, 1))
        adjusted, near = columns["p_step_down"], gather(_step_down([run.p(run.tally.step_near) for run in runs])[0])
    elif spec.procedure == "single-step max-T":
        bounds = [run.bounds(run.tally.single_step(run.thresholds)) for run in runs]
        low, high = (gather(join([pair[i] for pair in bounds])) for i in (0, 1))
        adjusted = single
        nears = [run.p(run.tally.single_step_near(run.thresholds)) for run in runs]
        near = gather(join(nears))
    else:
        bounds = [run.bounds(run.tally.raw) for run in runs]
        low, high = (adjust_from_p(gather([pair[i] for pair in bounds]), procedure=spec.procedure) for i in (0, 1))
        adjusted = adjust_from_p(raw, procedure=spec.procedure)
        near = adjust_from_p(gather([run.p(run.tally.raw_near) for run in runs]), procedure=spec.procedure)
        columns["step"] = np.argsort(np.argsort(raw, kind="stable"), kind="stable") + 1
    return columns | {"p_adjusted": adjusted, "low": low, "high": high, "p_near": near}


def _step_down(tails: list[np.ndarray]) -> tuple[list[np.ndarray], list[np.ndarray]]:
    """Return step-down adjusted p and steps of each run, joined by Boole's inequality if there are several."""
    if len(tails) == 1:
        return [step_down(tails[0])], [np.arange(1, len(tails[0]) + 1)]
    return across_pairs_step_down(tails)


def _is_settled(spec: FamilySpec, run: _Run, *, most_pairs: int) -> bool:
    """Return whether every decision of a job lies on one side of alpha.

    Under "boole" a pair does not know how many pairs are left when its turn comes, so every multiple counts.
    """
    columns = _adjust(spec, [run])
    levels = spec.alpha / np.arange(1, most_pairs + 1)
    return all(bool(np.all((columns["low"] > level) | (columns["high"] <= level))) for level in levels)


def _null(run: _Run, alpha: float) -> NullDistribution:
    counts = run.tally.maximum[1:].copy()
    counts[0] += run.tally.maximum[0]  # below the lowest edge: one-sided only, far from any decision
    edges = np.append(run.thresholds.edges, np.inf)
    tail = np.cumsum(counts[::-1])[::-1] / run.tally.n
    fits = np.flatnonzero(tail <= alpha)
    return NullDistribution(edges=edges, counts=counts, critical=float(edges[fits[0]]) if len(fits) else np.inf)


def _saving(run: _Run, spec: FamilySpec) -> tuple[float, float]:
    """Return the level per hypothesis that the family's critical value amounts to, and how many independent
    endpoints would need the same: log(1 - alpha) / log(1 - local alpha).

    Both levels are taken from the same pilot draws at the same critical value, so their errors mostly cancel; the
    logarithm is averaged over hypotheses, so that independent ones with unlike tails still count as their number.
    """
    if "unscaled difference" in spec.statistic:
        return np.nan, np.nan
    values = np.abs(run.pilot) if spec.two_sided else run.pilot
    maxima = values.max(axis=0)
    critical = np.quantile(maxima, 1 - spec.alpha, method="higher")
    level, local = np.mean(maxima >= critical), np.mean(values >= critical, axis=1)
    if not 0 < level < 1:
        return np.nan, np.nan
    return float(local.mean()), float(np.log1p(-level) / np.mean(np.log1p(-local)))


def _correlation(run: _Run) -> np.ndarray | None:
    """Return the correlation of the signed null statistics over the pilot draws, in the family's order."""
    if len(run.place) > _CORRELATION_ROWS:
        return None
    kept = run.pilot[:, np.isfinite(run.pilot).all(axis=0)]
    if kept.shape[1] < 2:
        return None
    centred = kept - kept.mean(axis=1, keepdims=True)
    norm = np.sqrt(np.sum(centred**2, axis=1))
    safe = np.where(norm > 0, norm, 1.0)
    matrix = np.empty((len(norm), len(norm)))
    matrix[np.ix_(run.job.order, run.job.order)] = np.clip(centred @ centred.T / np.outer(safe, safe), -1, 1)
    np.fill_diagonal(matrix, 1.0)
    return matrix
