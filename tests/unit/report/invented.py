"""Invented results to draw reports from: no trial, no patient; numbers made by a seeded generator.

Used by the unit and the browser tests, which load it by its path (the test folders are not packages).
"""

import math
from dataclasses import replace

import numpy as np
from scipy import stats

from mtest.results import (
    AnalysisResult,
    ArmCount,
    Effect,
    FamilyResult,
    HypothesisResult,
    NullDistribution,
    RunFacts,
    StudyFacts,
)

ARMS = ("vehicle", "1 %", "2 %", "4 %")
SIZES = (62, 60, 61, 60)
N_DRAWS = 20_000

# name, kind, group, unit, better, standard deviation, effect of each dose in standard errors (signed in the outcome)
ENDPOINTS = (
    ("Pain at rest, change to week 12", "continuous", "Pain", "mm", "lower", 21.0, (-1.2, -2.9, -4.4)),
    ("Pain on movement, change to week 12", "continuous", "Pain", "mm", "lower", 23.0, (-0.9, -2.6, -4.1)),
    ("Worst pain in the past week", "continuous", "Pain", "points", "lower", 2.4, (-0.6, -2.2, -3.4)),
    ("Pressure pain threshold", "continuous", "Pain", "kPa", "higher", 92.0, (0.4, 1.6, 2.7)),
    ("Half of the pain gone", "binary", "Pain", "", "higher", 0.45, (0.8, 2.0, 3.3)),
    ("Neck disability score", "continuous", "Function", "points", "lower", 7.6, (-0.5, -2.4, -3.6)),
    ("Neck rotation, range", "continuous", "Function", "degrees", "higher", 18.0, (0.2, 1.5, 2.3)),
    ("Days off work", "ordinal", "Function", "days", "lower", 0.28, (-0.3, -1.0, -1.9)),
    ("Back at usual activity", "binary", "Function", "", "higher", 0.49, (0.6, 1.7, 3.1)),
    ("Physical summary score", "continuous", "Quality of life", "points", "higher", 9.1, (0.3, 1.9, 2.8)),
    ("Mental summary score", "continuous", "Quality of life", "points", "higher", 10.3, (-0.4, 0.5, 1.1)),
    ("Patient's global impression", "ordinal", "Quality of life", "", "higher", 0.28, (0.9, 2.7, 4.3)),
    ("Skin reaction at the site", "binary", "Tolerability", "", "lower", 0.35, (0.7, 1.4, 3.5)),
    ("Sleepiness score", "continuous", "Tolerability", "points", "lower", 4.2, (0.1, 0.4, 0.9)),
)
MEASURE = {"continuous": "mean difference", "ordinal": "P(better)", "binary": "risk difference"}
METHOD = {"continuous": "Welch t", "ordinal": "Mann-Whitney U, normal", "binary": "score"}
MODEL = {"continuous": "Welch t test", "ordinal": "van Elteren test", "binary": "chi-squared test, no correction"}
STATISTIC = {"continuous": "welch", "ordinal": "rank", "binary": "score"}


def _correlation() -> np.ndarray:
    """(hypothesis, hypothesis): 0.55 within a group, 0.25 across, times 1/2 where only the reference is shared."""
    groups = [row[2] for row in ENDPOINTS]
    signs = np.array([-1.0 if row[4] == "lower" else 1.0 for row in ENDPOINTS])
    between = np.array([[0.55 if one == two else 0.25 for one in groups] for two in groups])
    np.fill_diagonal(between, 1.0)
    doses = np.full((3, 3), 0.5) + 0.5 * np.eye(3)
    return np.kron(between * np.outer(signs, signs), doses)


def _effects(kind: str, better: str, z: float, sd: float, se: float) -> tuple[Effect, tuple[Effect, ...]]:
    estimate = z * se
    if kind == "ordinal":  # the probability speaks of "better", so its sign follows the direction
        estimate = 0.5 + (estimate if better == "higher" else -estimate)
    null = 0.5 if kind == "ordinal" else 0.0
    main = Effect(
        measure=MEASURE[kind],
        method=METHOD[kind],
        estimate=estimate,
        se=se,
        low=estimate - 1.97 * se,
        high=estimate + 1.97 * se,
        null=null,
        level=0.95,
    )
    if kind == "ordinal":
        return main, ()
    if kind == "continuous":
        g, s = estimate / sd, se / sd
        other = replace(main, method="Hedges g, normal", estimate=g, se=s, low=g - 1.97 * s, high=g + 1.97 * s)
        return main, (replace(other, measure="standardised difference"),)
    ratio = (0.3 + estimate) / 0.3
    others = tuple(
        Effect(measure=m, method="score", estimate=r, se=math.nan, low=r * 0.6, high=r / 0.6, null=1.0, level=0.95)
        for m, r in (("risk ratio", ratio), ("odds ratio", ratio * 0.7 / (0.7 - estimate)))
    )
    return main, others


def four_arm_family(name: str = "secondary") -> tuple[FamilyResult, tuple[ArmCount, ...]]:
    """A family of 14 endpoints x 3 comparisons whose p-values really come from the draws it shows."""
    rng = np.random.Generator(np.random.PCG64DXSM(417))
    correlation = _correlation()
    m = len(correlation)
    root = np.linalg.cholesky(correlation)
    z = root @ rng.standard_normal(m) * 0.35 + 1.25 * np.array([shift for row in ENDPOINTS for shift in row[6]])
    draws = np.abs(rng.standard_normal((N_DRAWS, m)) @ root.T)
    observed = np.abs(z)
    order = np.argsort(-observed, kind="stable")
    tail = np.maximum.accumulate(draws[:, order[::-1]], axis=1)[:, ::-1]
    single, down = np.empty(m), np.empty(m)
    unadjusted = (1 + (draws >= observed).sum(0)) / (1 + N_DRAWS)
    for place, h in enumerate(order):
        single[h] = (1 + (tail[:, 0] >= observed[h]).sum()) / (1 + N_DRAWS)
        down[h] = (1 + (tail[:, place] >= observed[h]).sum()) / (1 + N_DRAWS)
    down[order] = np.maximum.accumulate(down[order])
    holm = np.empty(m)
    by_p = np.argsort(unadjusted, kind="stable")
    holm[by_p] = np.minimum(1, np.maximum.accumulate(unadjusted[by_p] * (m - np.arange(m))))
    step = np.empty(m, dtype=int)
    step[order] = np.arange(1, m + 1)
    missing = rng.integers(0, 4, size=(len(ENDPOINTS), len(ARMS)))
    filled = np.where(np.array([row[1] for row in ENDPOINTS])[:, None] == "ordinal", missing, 0)
    missing = missing - filled
    hypotheses = []
    for e, (endpoint, kind, group, unit, better, sd, _) in enumerate(ENDPOINTS):
        for a in (1, 2, 3):
            h = 3 * e + a - 1
            n_arm, n_reference = (SIZES[i] - int(missing[e, i]) for i in (a, 0))
            se = sd * math.sqrt(1 / n_arm + 1 / n_reference)
            effect, others = _effects(kind, better, z[h], sd, se)
            base = 0.3 if kind == "binary" else 0.5 if kind == "ordinal" else 2 * sd
            half = 2.4 * math.sqrt(max(down[h] * (1 - down[h]), 1e-6) / N_DRAWS) * 2
            low, high = max(down[h] - half, 0.0), min(down[h] + half, 1.0)
            hypotheses.append(
                HypothesisResult(
                    family=name,
                    endpoint=endpoint,
                    kind=kind,
                    group=group,
                    unit=unit,
                    better=better,
                    arm=ARMS[a],
                    reference=ARMS[0],
                    n_arm=n_arm,
                    n_reference=n_reference,
                    missing_arm=int(missing[e, a]),
                    missing_reference=int(missing[e, 0]),
                    mean_arm=base + z[h] * se,
                    mean_reference=base,
                    sd_arm=math.nan if kind == "binary" else sd,
                    sd_reference=math.nan if kind == "binary" else sd * 1.06,
                    effect=effect,
                    other_effects=others,
                    statistic=STATISTIC[kind],
                    statistic_value=float(z[h]),
                    p_model=float(2 * stats.norm.sf(observed[h])),
                    model=MODEL[kind],
                    p_unadjusted=float(unadjusted[h]),
                    p_single_step=float(single[h]),
                    p_step_down=float(down[h]),
                    p_holm=float(holm[h]),
                    p_adjusted=float(down[h]),
                    p_adjusted_low=float(low),
                    p_adjusted_high=float(high),
                    step=int(step[h]),
                    rejected=bool(down[h] <= 0.05),
                    settled=not low <= 0.05 < high,
                    near_ties=0,
                )
            )
    maxima = tail[:, 0]
    edges = np.append(np.linspace(0, 6, 121), np.inf)
    critical = float(np.quantile(maxima, 0.95))
    local = float(2 * stats.norm.sf(critical))
    family = FamilyResult(
        name=name,
        alpha=0.05,
        alternative="two-sided",
        procedure="step-down max-T",
        comparisons="each arm against vehicle",
        analysis_set="",
        exchange="within-pair",
        across_pairs="joint",
        exact=False,
        n_draws=N_DRAWS,
        n_distinct=tuple((f"{arm}, vehicle", math.comb(122, 60) ** 2) for arm in ARMS[1:]),
        smallest_p=1 / (1 + N_DRAWS),
        control="Strong control of the familywise error rate at 0.05: exact across endpoints within each comparison, "
        "under no effect on the joint outcome of the two arms compared; asymptotic across comparisons.",
        hypotheses=tuple(hypotheses),
        counts=(("unadjusted", np.round(unadjusted * (1 + N_DRAWS) - 1).astype(int)),),
        null=NullDistribution(edges=edges, counts=np.histogram(maxima, edges)[0], critical=critical),
        correlation=correlation,
        equivalent_endpoints=math.log(0.95) / math.log1p(-local),
        local_alpha=local,
        warnings=(),
    )
    accounting = tuple(
        ArmCount(
            endpoint=row[0],
            arm=arm,
            n_randomised=SIZES[i],
            n_analysed=SIZES[i] - int(missing[e, i]),
            n_missing=int(missing[e, i]),
            n_filled=int(filled[e, i]),
            rule="worst-score" if row[1] == "ordinal" else "available",
        )
        for e, row in enumerate(ENDPOINTS)
        for i, arm in enumerate(ARMS)
    )
    return family, accounting


def run_facts() -> RunFacts:
    return RunFacts(
        mtest_version="0.1.0",
        versions=(("python", "3.11.0"), ("numpy", "2.4.6"), ("scipy", "1.17.1"), ("statsmodels", "0.15.0")),
        platform="Linux, x86_64",
        cpu="two cores",
        blas="OpenBLAS 0.3.30, one thread a worker",
        seed=417,
        generator="PCG64DXSM",
        block_draws=256,
        draws_at_least=20_000,
        draws_at_most=200_000,
        exact_limit=200_000,
        plan_file="plan.toml",
        plan_sha256="3f" * 32,
        data_sha256=(("neck-pain/subjects.csv", "a1" * 32), ("neck-pain/visits.csv", "0c" * 32)),
        finished_utc="2026-02-03T04:05:06Z",
    )


def study_facts() -> StudyFacts:
    return StudyFacts(
        title="Four-arm dose-finding study in chronic neck pain (invented data)",
        protocol="DEMO-41",
        alpha=0.05,
        arms=ARMS,
        reference="vehicle",
        n_by_arm=SIZES,
        scheme="stratified",
        strata=("site", "severity"),
        n_cells=8,
    )


def four_arms() -> AnalysisResult:
    """One family, 42 hypotheses, sampled."""
    family, accounting = four_arm_family()
    return AnalysisResult(study=study_facts(), families=(family,), accounting=accounting, warnings=(), run=run_facts())


def crowded() -> AnalysisResult:
    """One comparison of 14 endpoints without groups, adjusted for strata, with long names; one ratio without an end."""
    family, accounting = four_arm_family("all")
    hypotheses = [
        replace(
            h,
            group="",
            unit="points of 100 on the long scale" if h.unit else "",
            arm="neck gel 4 %, three times daily",
            effect=replace(h.effect, method="Mantel-Haenszel, Sato variance"),
            other_effects=tuple(replace(e, method="Mantel-Haenszel, SE of log") for e in h.other_effects),
        )
        for h in family.hypotheses[2::3]
    ]
    bare = replace(hypotheses[4].other_effects[0], estimate=0.0, low=math.nan, high=math.nan)
    hypotheses[4] = replace(hypotheses[4], other_effects=(bare,))
    family = replace(
        family,
        hypotheses=tuple(hypotheses),
        across_pairs="",
        n_distinct=family.n_distinct[2:],
        correlation=family.correlation[2::3, 2::3],
        equivalent_endpoints=math.nan,
        local_alpha=math.nan,
    )
    return AnalysisResult(study=study_facts(), families=(family,), accounting=accounting, warnings=(), run=run_facts())


def two_families() -> AnalysisResult:
    """The awkward one: an enumerated family without null, correlation or estimates, and one that is not settled."""
    family, accounting = four_arm_family("main <b>& first</b>")
    nothing = replace(
        family.hypotheses[0].effect, estimate=math.nan, se=math.nan, low=math.nan, high=math.nan, null=0.0
    )
    rare = replace(
        family.hypotheses[12],
        family="rare events",
        endpoint='Fracture <script>alert("x")</script>',
        statistic_value=-math.inf,
        effect=replace(nothing, measure="risk difference", low=-math.inf, high=0.25),
        sd_arm=math.nan,
        p_model=math.nan,
        p_unadjusted=1 / 70,
        p_adjusted=0.05,
        p_adjusted_low=0.05,
        p_adjusted_high=0.05,
        rejected=True,
        settled=True,
        step=1,
    )
    none = replace(
        rare,
        endpoint="Nobody measured",
        n_arm=0,
        missing_arm=60,
        statistic_value=math.nan,
        p_unadjusted=1.0,
        p_adjusted=1.0,
        p_adjusted_low=1.0,
        p_adjusted_high=1.0,
        mean_arm=math.nan,
        other_effects=(),
        rejected=False,
        step=2,
        effect=nothing,
        group="",
    )
    exact = replace(
        family,
        name="rare events",
        procedure="Holm",
        across_pairs="boole",
        alternative="better",
        alpha=0.05,
        exact=True,
        n_draws=70,
        n_distinct=(("1 %, vehicle", 70),),
        smallest_p=1 / 70,
        analysis_set="safety",
        hypotheses=(rare, none),
        null=None,
        correlation=None,
        equivalent_endpoints=math.nan,
        local_alpha=math.nan,
        warnings=("The smallest attainable p is 0.014: no more than 3 hypotheses could have been rejected.",),
    )
    hanging = replace(
        family.hypotheses[4],
        family=family.name,
        p_adjusted=0.0495,
        p_adjusted_low=0.047,
        p_adjusted_high=0.0532,
        rejected=True,
        settled=False,
        near_ties=7,
    )
    first = replace(
        family,
        hypotheses=tuple(hanging if h is family.hypotheses[4] else h for h in family.hypotheses),
        warnings=("Endpoint 'Sleepiness score': 31 % of the draws are tied.",),
    )
    return AnalysisResult(
        study=study_facts(),
        families=(first, exact),
        accounting=accounting,
        warnings=("The actual arm differs from the planned one for 2 subjects; the planned arm was used.",),
        run=run_facts(),
    )
