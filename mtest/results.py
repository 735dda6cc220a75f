"""What came out: records of results, without behaviour, shared by the bundle, the report and the Python face."""

from __future__ import annotations

from dataclasses import asdict, dataclass

import numpy as np


@dataclass(frozen=True, slots=True, kw_only=True)
class Effect:
    """An effect with its standard error and textbook interval; NaN where it cannot be estimated.

    measure : what is estimated, e.g. "mean difference", "P(better)", "risk difference"
    method : how the interval was made, e.g. "Welch t", "linear model with strata, t"
    null : the value under no effect (0, 0.5 or 1)
    """

    measure: str
    method: str
    estimate: float
    se: float
    low: float
    high: float
    null: float
    level: float


@dataclass(frozen=True, slots=True, kw_only=True)
class HypothesisResult:
    """One hypothesis (endpoint x comparison), with every p-value side by side and the decision."""

    family: str
    endpoint: str
    kind: str
    group: str
    unit: str
    better: str  # "higher" | "lower"
    arm: str
    reference: str
    n_arm: int  # analysed
    n_reference: int
    missing_arm: int  # not analysed, of those randomised to the arm (and in the analysis set)
    missing_reference: int
    mean_arm: float  # mean, mean midrank score or proportion in the arm, for display
    mean_reference: float
    sd_arm: float  # NaN for binary
    sd_reference: float
    effect: Effect  # the main effect measure of the kind
    other_effects: tuple[Effect, ...]  # e.g. risk ratio and odds ratio
    statistic: str
    statistic_value: float
    p_model: float
    model: str  # the textbook test behind p_model
    p_unadjusted: float
    p_single_step: float
    p_step_down: float
    p_holm: float
    p_adjusted: float  # by the family's procedure: decides
    p_adjusted_low: float  # Monte Carlo confidence sequence of p_adjusted; equal to it when enumerated
    p_adjusted_high: float
    step: int  # 1 = first hypothesis considered by the procedure
    rejected: bool
    settled: bool  # the Monte Carlo interval lies on one side of alpha
    near_ties: int  # draws that fall short of the observed value by more than 1 and less than 1000 tolerances


@dataclass(frozen=True, slots=True, kw_only=True)
class NullDistribution:
    """The distribution of the family's maximum over the draws: a histogram, exact in its tail counts.

    edges : (bin + 1,) float, last edge may be inf ; counts : (bin,) int
    critical : the smallest value c with P(max >= c) <= alpha, to the width of a bin
    """

    edges: np.ndarray
    counts: np.ndarray
    critical: float


@dataclass(frozen=True, slots=True, kw_only=True)
class FamilyResult:
    """A family judged: its hypotheses in the plan's order and what was really run."""

    name: str
    alpha: float
    alternative: str  # "two-sided" | "better"
    procedure: str
    comparisons: str  # in words
    analysis_set: str  # "" = all randomised
    exchange: str
    across_pairs: str
    exact: bool  # every distinct relabelling enumerated
    n_draws: int  # draws, or relabellings enumerated
    n_distinct: tuple[tuple[str, int], ...]  # reference set -> number of distinct relabellings
    smallest_p: float
    control: str  # the control statement
    hypotheses: tuple[HypothesisResult, ...]
    counts: tuple[tuple[str, np.ndarray], ...]  # name -> (hypothesis,) draws at or above the observed statistic
    null: NullDistribution | None  # None under "boole", where each pair has its own
    correlation: np.ndarray | None  # (hypothesis, hypothesis) of the null statistics over the pilot draws
    equivalent_endpoints: float  # log(1 - alpha) / log(1 - local alpha); NaN where not offered
    local_alpha: float
    warnings: tuple[str, ...]


@dataclass(frozen=True, slots=True, kw_only=True)
class ArmCount:
    """Accounting of one endpoint in one arm."""

    endpoint: str
    arm: str
    n_randomised: int
    n_analysed: int
    n_missing: int
    n_filled: int  # of those analysed, filled by the missing-data rule
    rule: str


@dataclass(frozen=True, slots=True, kw_only=True)
class RunFacts:
    """What a second person needs to get the same digits. `finished_utc` is the only dated field."""

    mtest_version: str
    versions: tuple[tuple[str, str], ...]
    platform: str
    cpu: str
    blas: str
    seed: int
    generator: str
    block_draws: int
    draws_at_least: int
    draws_at_most: int
    exact_limit: int
    plan_file: str
    plan_sha256: str
    data_sha256: tuple[tuple[str, str], ...]
    finished_utc: str


@dataclass(frozen=True, slots=True, kw_only=True)
class StudyFacts:
    """The study as the report's head states it."""

    title: str
    protocol: str
    alpha: float
    arms: tuple[str, ...]
    reference: str
    n_by_arm: tuple[int, ...]
    scheme: str
    strata: tuple[str, ...]  # names of the stratification factors
    n_cells: int


@dataclass(frozen=True, slots=True, kw_only=True)
class AnalysisResult:
    """Everything the bundle and the report are made from."""

    study: StudyFacts
    families: tuple[FamilyResult, ...]
    accounting: tuple[ArmCount, ...]
    warnings: tuple[str, ...]
    run: RunFacts


def to_dict(record: object) -> dict:
    """Return a record as plain dicts, lists, numbers and text, safe for JSON but for NaN and infinity.

    Examples
    --------
    >>> edges, counts = np.array([0.0, 1.0, np.inf]), np.array([95, 5])
    >>> to_dict(NullDistribution(edges=edges, counts=counts, critical=1.0))
    {'edges': [0.0, 1.0, inf], 'counts': [95, 5], 'critical': 1.0}
    """
    return _plain(asdict(record))  # type: ignore[call-overload]


def _plain(value):
    if isinstance(value, dict):
        return {key: _plain(item) for key, item in value.items()}
    if isinstance(value, (list, tuple)):
        return [_plain(item) for item in value]
    if isinstance(value, np.ndarray):
        return _plain(value.tolist())
    if isinstance(value, np.generic):
        return value.item()
    return value
