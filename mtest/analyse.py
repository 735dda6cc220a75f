"""The one place where the parts meet: a plan and its data in, an `AnalysisResult` out."""

from __future__ import annotations

from collections.abc import Callable
from itertools import combinations

import numpy as np

from mtest.adjust.pvalues import adjust_from_p
from mtest.engine.schedule import Progress
from mtest.estimate.describe import describe
from mtest.estimate.effects import estimate_effects
from mtest.estimate.model_test import model_p
from mtest.family import Design, FamilySpec, FamilyTest, default_across_pairs, judge_family, state_control
from mtest.machine import run_facts
from mtest.plan.read import PlanFile
from mtest.plan.records import Family, Plan
from mtest.results import AnalysisResult, ArmCount, FamilyResult, HypothesisResult, StudyFacts
from mtest.trial.arrays import EndpointData, Trial
from mtest.trial.assemble import assemble

_ONE_SIDED = {"higher": "greater", "lower": "less"}


def run_plan(
    plan_file: PlanFile, *, n_jobs: int = 0, report: Callable[[str, Progress], None] | None = None
) -> AnalysisResult:
    """Return the analysis that a plan asks for.

    Parameters
    ----------
    plan_file : PlanFile
        From `mtest.read_plan`; data files are sought beside it.
    n_jobs : int
        Workers; 0 means one per core. Changes no digit.
    report : callable
        Called with the family's name and its progress while draws are made.

    Raises
    ------
    DataError
        If the data break a rule; all faults at once.
    """
    plan = plan_file.plan
    trial, hashes = assemble(plan, plan_file.path.parent)
    families = tuple(_run_family(plan, trial, family, n_jobs=n_jobs, report=report) for family in plan.family)
    return AnalysisResult(
        study=_study_facts(plan, trial),
        families=families,
        accounting=_account(trial),
        warnings=trial.warnings,
        run=run_facts(plan_file, hashes),
    )


def _study_facts(plan: Plan, trial: Trial) -> StudyFacts:
    return StudyFacts(
        title=plan.study.title,
        protocol=plan.study.protocol,
        alpha=plan.study.alpha,
        arms=trial.arms,
        reference=plan.randomisation.reference,
        n_by_arm=tuple(int(n) for n in np.bincount(trial.arm, minlength=len(trial.arms))),
        scheme=plan.randomisation.scheme,
        strata=plan.randomisation.strata,
        n_cells=len(np.unique(trial.cell)),
    )


def _account(trial: Trial) -> tuple[ArmCount, ...]:
    """Return who was analysed and who was missing, per endpoint and arm, among all randomised."""
    return tuple(
        ArmCount(
            endpoint=endpoint.name,
            arm=name,
            n_randomised=int((trial.arm == k).sum()),
            n_analysed=int(np.isfinite(endpoint.values[trial.arm == k]).sum()),
            n_missing=int(np.isnan(endpoint.values[trial.arm == k]).sum()),
            n_filled=int(endpoint.n_filled[k]),
            rule=endpoint.missing,
        )
        for endpoint in trial.endpoints
        for k, name in enumerate(trial.arms)
    )


def _run_family(plan: Plan, trial: Trial, family: Family, *, n_jobs: int, report) -> FamilyResult:
    endpoints = _members(trial, family)
    in_set = trial.sets[family.analysis_set] if family.analysis_set else np.ones(len(trial.arm), dtype=bool)
    spec = _family_spec(plan, trial, family, endpoints, in_set)
    design = Design(arm=trial.arm, cell=trial.cell, stratum=trial.stratum, arms=trial.arms)
    test = judge_family(
        design, spec, n_jobs=n_jobs, report=None if report is None else lambda progress: report(family.name, progress)
    )
    holm = adjust_from_p(test.p_unadjusted, procedure="Holm")
    keys = [(j, pair) for j in range(len(endpoints)) for pair in spec.pairs]
    hypotheses = tuple(
        _hypothesis(
            trial, family, spec=spec, test=test, p_holm=holm[h], h=h, endpoint=endpoints[j], pair=pair, in_set=in_set
        )
        for h, (j, pair) in enumerate(keys)
    )
    return FamilyResult(
        name=family.name,
        alpha=spec.alpha,
        alternative=family.alternative,
        procedure=family.procedure,
        comparisons=_comparisons_in_words(plan, family),
        analysis_set=family.analysis_set,
        exchange=spec.exchange,
        across_pairs=spec.across_pairs if len(spec.pairs) > 1 and spec.exchange == "within-pair" else "",
        exact=test.exact,
        n_draws=test.n_draws,
        n_distinct=test.n_distinct,
        smallest_p=test.smallest_p,
        control=state_control(design, spec, test),
        hypotheses=hypotheses,
        counts=tuple(test.counts.items()),
        null=test.null,
        correlation=test.correlation,
        equivalent_endpoints=test.equivalent_endpoints,
        local_alpha=test.local_alpha,
        warnings=_family_warnings(hypotheses, test, spec.alpha),
    )


def _members(trial: Trial, family: Family) -> list[EndpointData]:
    by_name = {endpoint.name: endpoint for endpoint in trial.endpoints}
    names = list(by_name) if family.endpoints == "all" else family.endpoints
    return [by_name[name] for name in names]


def _family_spec(plan: Plan, trial: Trial, family: Family, endpoints, in_set: np.ndarray) -> FamilySpec:
    # A subject outside the analysis set stays in the relabelling and counts as missing.
    values = np.stack([np.where(in_set, endpoint.values, np.nan) for endpoint in endpoints], axis=1)
    pairs = _pairs(trial.arms, plan.randomisation.reference, family)
    two_sided = family.alternative == "two-sided"
    return FamilySpec(
        values=values,
        statistic=tuple(endpoint.statistic for endpoint in endpoints),
        sign=tuple(1 if endpoint.better == "higher" else -1 for endpoint in endpoints),
        pairs=pairs,
        two_sided=two_sided,
        exchange=family.exchange,
        across_pairs=family.across_pairs or default_across_pairs(two_sided=two_sided, pairs=pairs),
        procedure=family.procedure,
        alpha=family.alpha or plan.study.alpha,
        at_least=plan.draws.at_least,
        at_most=plan.draws.at_most,
        seed=plan.draws.seed,
        exact_limit=plan.draws.exact_limit,
    )


def _pairs(arms: tuple[str, ...], reference: str, family: Family) -> tuple[tuple[int, int], ...]:
    """Return (tested, reference) arm indices; in all pairs the later arm of the plan is tested against the earlier."""
    if family.comparisons == "each vs reference":
        return tuple((k, arms.index(reference)) for k, arm in enumerate(arms) if arm != reference)
    if family.comparisons == "all pairs":
        return tuple((b, a) for a, b in combinations(range(len(arms)), 2))
    return tuple((arms.index(a), arms.index(b)) for a, b in family.comparisons)


def _comparisons_in_words(plan: Plan, family: Family) -> str:
    if family.comparisons == "each vs reference":
        return f"each arm vs {plan.randomisation.reference}"
    if family.comparisons == "all pairs":
        return "all pairs of arms"
    return ", ".join(f"{a} vs {b}" for a, b in family.comparisons)


def _hypothesis(
    trial: Trial,
    family: Family,
    *,
    spec: FamilySpec,
    test: FamilyTest,
    p_holm: float,
    h: int,
    endpoint: EndpointData,
    pair: tuple[int, int],
    in_set: np.ndarray,
) -> HypothesisResult:
    """Return hypothesis number h: its p-values from the family's test, its effects from the pair's own data."""
    inside = np.isin(trial.arm, pair) & in_set
    x, in_arm, stratum = endpoint.values[inside], trial.arm[inside] == pair[0], trial.stratum[inside]
    seen = describe(x, in_arm)
    effects = estimate_effects(
        endpoint.kind, endpoint.statistic, values=x, in_arm=in_arm, stratum=stratum, better=endpoint.better
    )
    alternative = "two-sided" if spec.two_sided else _ONE_SIDED[endpoint.better]
    p_model, model = model_p(
        endpoint.kind, endpoint.statistic, values=x, in_arm=in_arm, stratum=stratum, alternative=alternative
    )
    return HypothesisResult(
        family=family.name,
        endpoint=endpoint.name,
        kind=endpoint.kind,
        group=endpoint.group,
        unit=endpoint.unit,
        better=endpoint.better,
        arm=trial.arms[pair[0]],
        reference=trial.arms[pair[1]],
        n_arm=seen.n_arm,
        n_reference=seen.n_reference,
        missing_arm=seen.missing_arm,
        missing_reference=seen.missing_reference,
        mean_arm=seen.mean_arm,
        mean_reference=seen.mean_reference,
        sd_arm=np.nan if endpoint.kind == "binary" else seen.sd_arm,
        sd_reference=np.nan if endpoint.kind == "binary" else seen.sd_reference,
        effect=effects[0],
        other_effects=effects[1:],
        statistic=endpoint.statistic,
        statistic_value=float(test.statistic[h]),
        p_model=float(p_model),
        model=model,
        p_unadjusted=float(test.p_unadjusted[h]),
        p_single_step=float(test.p_single_step[h]),
        p_step_down=float(test.p_step_down[h]),
        p_holm=float(p_holm),
        p_adjusted=float(test.p_adjusted[h]),
        p_adjusted_low=float(test.low[h]),
        p_adjusted_high=float(test.high[h]),
        step=int(test.step[h]),
        rejected=bool(test.p_adjusted[h] <= spec.alpha),
        settled=bool(test.low[h] > spec.alpha or test.high[h] <= spec.alpha),
        near_ties=int(test.near_ties[h]),
    )


def _family_warnings(hypotheses: tuple[HypothesisResult, ...], test: FamilyTest, alpha: float) -> tuple[str, ...]:
    found = []
    open_ones = [f"{h.endpoint}, {h.arm} vs {h.reference}" for h in hypotheses if not h.settled]
    if open_ones:
        found.append(
            f"Not settled: the Monte Carlo interval of the adjusted p-value still covers alpha for {len(open_ones)} "
            f"of {len(hypotheses)} hypotheses ({'; '.join(open_ones)}). The decision shown may change with more draws."
        )
    hanging = [
        f"{h.endpoint}, {h.arm} vs {h.reference}"
        for h, near in zip(hypotheses, test.p_near, strict=True)
        if h.rejected != (near <= alpha)
    ]
    if hanging:
        found.append(
            "A decision depends on draws that fall short of the observed statistic by less than a thousand rounding "
            f"tolerances: {'; '.join(hanging)}. Check the precision of the data."
        )
    idle = [f"{h.endpoint}, {h.arm} vs {h.reference}" for h in hypotheses if np.isnan(h.effect.estimate)]
    if idle:
        found.append(
            f"Nothing is compared, since no stratum has data in both arms: {'; '.join(idle)}. Such a p-value is 1."
        )
    if test.smallest_p > alpha:
        found.append(
            f"No hypothesis can be rejected: the smallest attainable p-value is {test.smallest_p:.3g}, above alpha."
        )
    return tuple(found)
