"""The Python face: arrays in, one labelled table out."""

from __future__ import annotations

import difflib
from collections.abc import Sequence
from dataclasses import dataclass, field
from itertools import combinations
from pathlib import Path

import numpy as np
import pandas as pd

from mtest.analyse import run_plan
from mtest.bundle.write import results_table, write_bundle
from mtest.errors import DataError, UsageError
from mtest.estimate.effects import estimate_effects
from mtest.family import Design, FamilySpec, FamilyTest, default_across_pairs, judge_family, state_control
from mtest.plan.read import PlanFile
from mtest.results import AnalysisResult
from mtest.scores import SCORES

_ALTERNATIVES = {"two-sided": (True, 1), "greater": (False, 1), "less": (False, -1)}


@dataclass(frozen=True, slots=True, kw_only=True)
class JointResult:
    """What `joint_test` found.

    table : one row per hypothesis: endpoint, arm, reference, n_arm, n_reference, estimate, statistic, p_unadjusted,
        p_single_step, p_step_down
    exact : every distinct relabelling was enumerated
    n_draws : relabellings enumerated or drawn
    n_distinct : (reference set, number of distinct relabellings) pairs
    control : which error rate the step-down p-values control, and under which assumption

    Examples
    --------
    >>> import mtest
    >>> result = mtest.joint_test([1.0, 2.0, 8.0, 9.0], ["a", "a", "b", "b"])
    >>> result.n_distinct
    (('b vs a', 6),)
    >>> result.control[:60]
    'Familywise error rate, strong control across endpoints, exac'
    """

    table: pd.DataFrame = field(repr=False)
    exact: bool
    n_draws: int
    n_distinct: tuple[tuple[str, int], ...]
    control: str


def joint_test(
    outcomes,
    arm,
    *,
    reference=None,
    strata=None,
    statistic: str | Sequence[str] = "welch",
    alternative: str = "two-sided",
    exchange: str = "within-pair",
    across_pairs: str | None = None,
    draws: int = 10_000,
    seed: int = 1,
    exact_limit: int = 200_000,
    n_jobs: int = 1,
) -> JointResult:
    """Return p-values for every endpoint and pair of arms from one relabelling, adjusted jointly by max-T.

    Parameters
    ----------
    outcomes : (subject, endpoint) array of float or DataFrame
        NaN where missing; a missing value travels with its subject. A DataFrame keeps its column names. (subject,) is
        taken as one endpoint. Where `arm` or `strata` are pandas objects too, their index must be the same.
    arm : (subject,) array of labels
        Planned arms. The order of arms is that of the categories of a pandas Categorical, else sorted.
    reference : label, optional
        Each other arm is compared with it. None: all pairs, the later arm against the earlier.
    strata : (subject,) array of labels, optional
        Strata as randomised (or blocks, or matched sets): labels are exchanged, and scores centred or ranked, within.
    statistic : str or one per endpoint
        "welch", "pooled", "difference" (over its relabelling standard deviation), "unscaled difference" (in the data's
        unit), "rank" (midranks; van Elteren weights over strata) or "score" (0/1 data).
    alternative : "two-sided", "greater" or "less"
        "greater": the arm's values are larger than the reference's.
    exchange : "within-pair" or "all-arms"
        Who is relabelled for a pair: its own subjects, or everybody.
    across_pairs : "joint" or "boole", optional
        None: "boole" for one-sided tests of pairs without a common reference, else "joint".
    draws : int
        Relabellings drawn; unused where enumerated.
    seed : int
        Same seed, same digits, for any `n_jobs`.
    exact_limit : int
        Up to this many distinct relabellings are enumerated (where one reference set serves the family, or pairs are
        joined by "boole").
    n_jobs : int
        Workers; 0 means one per core.

    Returns
    -------
    JointResult

    Raises
    ------
    UsageError
        If an argument breaks a rule above.
    DataError
        If an arm has fewer than two subjects, an endpoint has no data in an arm, or values are infinite.

    Notes
    -----
    Assumes that subjects were randomised to `arm` as the arguments say. Each statistic's p-value is exact for the
    hypothesis that the arm has no effect on the outcome's distribution, missingness included; see `control`.

    References
    ----------
    Westfall & Young (1993), Resampling-Based Multiple Testing; Phipson & Smyth (2010), SAGMB 9:39; Troendle & Westfall
    (2011), Journal of Statistical Planning and Inference 141:2021.

    Examples
    --------
    >>> import numpy as np, mtest
    >>> outcomes = np.array([[5, 2, 9], [7, 1, 4], [9, 4, 8], [1, 3, 7], [2, 2, 1], [4, 1, 2]])
    >>> result = mtest.joint_test(outcomes, ["gel", "gel", "gel", "vehicle", "vehicle", "vehicle"], reference="vehicle")
    >>> result.exact, result.n_draws
    (True, 20)
    >>> [round(float(p) * 20) for p in result.table["p_step_down"]]
    [4, 20, 6]
    """
    names, values = _read_outcomes(outcomes)
    _check_order(outcomes, arm, "arm")
    _check_order(outcomes, strata, "strata")
    arms, codes = _read_labels(arm, "arm", len(values))
    two_sided, sign = _ALTERNATIVES[_choose("alternative", alternative, _ALTERNATIVES)]
    statistics = _read_statistics(statistic, len(names))
    stratum = np.zeros(len(values), dtype=np.intp) if strata is None else _read_labels(strata, "strata", len(values))[1]
    pairs = _read_pairs(arms, reference)
    _choose("exchange", exchange, ("within-pair", "all-arms"))
    if across_pairs is not None:
        _choose("across_pairs", across_pairs, ("joint", "boole"))
    for name, number, least in (
        ("draws", draws, 99),
        ("seed", seed, 0),
        ("exact_limit", exact_limit, 0),
        ("n_jobs", n_jobs, 0),
    ):
        if not isinstance(number, (int, np.integer)) or isinstance(number, bool) or number < least:
            raise UsageError(f"{name} must be a whole number of at least {least}; got {number!r}.")
    _check_data(values, names, codes, arms, statistics)
    across = across_pairs or default_across_pairs(two_sided=two_sided, pairs=pairs)
    spec = FamilySpec(
        values=values,
        statistic=statistics,
        sign=(sign,) * len(names),
        pairs=pairs,
        two_sided=two_sided,
        exchange=exchange,
        across_pairs=across,
        procedure="step-down max-T",
        alpha=0.05,
        at_least=int(draws),
        at_most=int(draws),
        seed=int(seed),
        exact_limit=int(exact_limit),
    )
    design = Design(arm=codes, cell=stratum, stratum=stratum, arms=tuple(str(a) for a in arms))
    test = judge_family(design, spec, n_jobs=n_jobs)
    return JointResult(
        table=_table(names, arms, design, spec, test),
        exact=test.exact,
        n_draws=test.n_draws,
        n_distinct=test.n_distinct,
        control=state_control(design, spec, test),
    )


def _table(names, arms, design: Design, spec: FamilySpec, test: FamilyTest) -> pd.DataFrame:
    rows = []
    for j, name in enumerate(names):
        for a, b in spec.pairs:
            inside = np.isin(design.arm, (a, b))
            x, in_arm = spec.values[inside, j], design.arm[inside] == a
            present = np.isfinite(x)
            kind = "binary" if spec.statistic[j] == "score" else "continuous"
            effects = estimate_effects(
                kind, spec.statistic[j], values=x, in_arm=in_arm, stratum=design.stratum[inside], better="higher"
            )
            counts = int((present & in_arm).sum()), int((present & ~in_arm).sum())
            rows.append((name, arms[a], arms[b], *counts, effects[0].estimate))
    table = pd.DataFrame(rows, columns=["endpoint", "arm", "reference", "n_arm", "n_reference", "estimate"])
    return table.assign(
        statistic=test.statistic,
        p_unadjusted=test.p_unadjusted,
        p_single_step=test.p_single_step,
        p_step_down=test.p_step_down,
    )


def _choose(name: str, got, allowed) -> str:
    """Return the value if it is one of the allowed words; else one sentence with the nearest."""
    if got in allowed:
        return got
    near = difflib.get_close_matches(str(got), list(allowed), n=1, cutoff=0.4)
    hint = f" Did you mean {near[0]!r}?" if near else ""
    raise UsageError(f"{name} must be one of {', '.join(repr(a) for a in allowed)}; got {got!r}.{hint}")


def _read_outcomes(outcomes) -> tuple[list, np.ndarray]:
    """Return the endpoints' names and (subject, endpoint) float64 values."""
    try:
        # numpy refuses ragged rows, which pandas would pad.
        frame = pd.DataFrame(outcomes if isinstance(outcomes, (pd.DataFrame, pd.Series)) else np.asarray(outcomes))
    except ValueError as error:
        raise UsageError(f"outcomes must be a (subject, endpoint) table of numbers; {_got(outcomes)}.") from error
    if frame.size == 0:
        raise UsageError(f"outcomes must have at least one subject and one endpoint; {_got(outcomes)}.")
    names = list(frame.columns)
    if len(set(names)) < len(names):
        raise UsageError(f"outcomes must have distinct column names; got {names}.")
    values = np.column_stack([_read_numbers(frame.iloc[:, j], name) for j, name in enumerate(names)])
    if np.isinf(values).any():
        row, column = np.argwhere(np.isinf(values))[0]
        raise DataError(
            f"outcomes column {names[column]!r} must be finite, or NaN where missing; got {values[row, column]} at "
            f"subject {row} (counted from 0)."
        )
    return names, values


def _read_numbers(column: pd.Series, name) -> np.ndarray:
    """Return a column as float64, missing as NaN; dates, text and complex numbers are not numbers."""
    is_number = pd.api.types.is_numeric_dtype(column) and not pd.api.types.is_complex_dtype(column)
    if not is_number:
        odd = [x for x in column if not (pd.isna(x) or isinstance(x, (int, float, np.number, np.bool_)))]
        if odd or column.dtype != object:
            shown = repr(odd[0]) if odd else f"a column of {column.dtype}"
            raise UsageError(
                f"outcomes column {name!r} must hold numbers, NaN where missing; got {shown}. Convert it first."
            )
    return column.to_numpy(dtype=float, na_value=np.nan)


def _got(thing) -> str:
    """Return what was got, in a few words."""
    if thing is None or np.isscalar(thing):
        return f"got {thing!r}"
    shape = getattr(thing, "shape", None)
    return f"got {type(thing).__name__}" + (f" of shape {shape}" if shape is not None else "")


def _check_order(outcomes, labels, name: str) -> None:
    """Raise UsageError where two pandas objects stand in different orders: aligning silently could hide a mistake."""
    indexed = (pd.DataFrame, pd.Series)
    if isinstance(outcomes, indexed) and isinstance(labels, indexed) and not outcomes.index.equals(labels.index):
        raise UsageError(
            f"{name} must have the same index as outcomes, in the same order; got another. Use "
            f"{name}.loc[outcomes.index], or {name}.to_numpy() to go by position."
        )


def _read_labels(labels, name: str, n: int) -> tuple[list, np.ndarray]:
    """Return the distinct labels in order and the code of each subject."""
    series = None
    if not isinstance(labels, (pd.DataFrame, set, dict, str)) and np.ndim(labels) == 1:
        series = pd.Series(labels).reset_index(drop=True)
    if series is None:
        raise UsageError(f"{name} must be one label per subject; {_got(labels)}. Pass one column.")
    if len(series) != n:
        raise UsageError(f"{name} must have one label per subject ({n}); got {len(series)}. Are outcomes transposed?")
    if series.isna().any():
        first = int(np.flatnonzero(series.isna())[0])
        raise DataError(f"{name}[{first}] must not be empty; got a missing label. Every randomised subject needs one.")
    if isinstance(series.dtype, pd.CategoricalDtype):
        series = series.cat.remove_unused_categories()
        return list(series.cat.categories), series.cat.codes.to_numpy(dtype=np.intp)
    codes, order = pd.factorize(series, sort=True)
    return list(order), codes.astype(np.intp)


def _read_statistics(statistic, n_endpoints: int) -> tuple[str, ...]:
    names = (statistic,) * n_endpoints if isinstance(statistic, str) else tuple(statistic)
    if len(names) != n_endpoints:
        raise UsageError(f"statistic must be one name or one per endpoint ({n_endpoints}); got {len(names)}.")
    return tuple(_choose("statistic", name, SCORES) for name in names)


def _read_pairs(arms: list, reference) -> tuple[tuple[int, int], ...]:
    if len(arms) < 2:
        raise DataError(f"arm must hold at least two arms; got only {arms}.")
    if reference is None:
        return tuple((b, a) for a, b in combinations(range(len(arms)), 2))
    if reference not in arms:
        near = difflib.get_close_matches(str(reference), [str(a) for a in arms], n=1, cutoff=0.4)
        hint = f" Did you mean {near[0]!r}?" if near else ""
        raise UsageError(f"reference must be one of the arms {arms}; got {reference!r}.{hint}")
    place = arms.index(reference)
    return tuple((k, place) for k in range(len(arms)) if k != place)


def _check_data(values, names, codes, arms, statistics) -> None:
    faults = []
    for k, label in enumerate(arms):
        count = int((codes == k).sum())
        if count < 2:
            faults.append(f"arm {label!r} must have at least two subjects; got {count}.")
    for j, name in enumerate(names):
        for k, label in enumerate(arms):
            if not np.isfinite(values[codes == k, j]).any():
                faults.append(f"endpoint {name!r} must have data in every arm; got none in arm {label!r}.")
        present = values[np.isfinite(values[:, j]), j]
        if statistics[j] == "score" and not np.isin(present, (0, 1)).all():
            odd = present[~np.isin(present, (0, 1))][0]
            faults.append(f"endpoint {name!r} must hold 0 and 1 for statistic 'score'; got {odd:g}.")
    if faults:
        raise DataError(faults)


@dataclass(frozen=True, slots=True, kw_only=True)
class Analysis:
    """A plan carried out.

    result : everything that came out, as records

    Examples
    --------
    >>> import mtest, tempfile, pathlib
    >>> analysis = mtest.analyse(mtest.read_plan("configs/matched-sites.toml"), n_jobs=1)
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     analysis.write(pathlib.Path(folder) / "bundle")
    ...     sorted(path.name for path in (pathlib.Path(folder) / "bundle").iterdir())[:2]
    ['manifest.json', 'null.npz']
    """

    result: AnalysisResult = field(repr=False)
    plan_file: PlanFile = field(repr=False)

    @property
    def table(self) -> pd.DataFrame:
        """One row per hypothesis, with the columns of results.csv."""
        return results_table(self.result)

    def write(self, folder: str | Path) -> None:
        """Write the bundle: results, manifest, report page and Word tables, whole or not at all."""
        write_bundle(
            self.result,
            Path(folder),
            plan_text=self.plan_file.text,
            data_folder=self.plan_file.path.parent.as_posix(),
        )


def analyse(plan: PlanFile, *, n_jobs: int = 0) -> Analysis:
    """Return the analysis that a plan asks for.

    Parameters
    ----------
    plan : PlanFile
        From `mtest.read_plan`.
    n_jobs : int
        Workers; 0 means one per core. Changes no digit.

    Raises
    ------
    UsageError
        If `plan` is not from `read_plan`.
    DataError
        If the data break a rule; all faults at once.

    Examples
    --------
    >>> import mtest
    >>> analysis = mtest.analyse(mtest.read_plan("configs/matched-sites.toml"), n_jobs=1)
    >>> analysis.result.families[0].n_draws
    1024
    >>> [round(1024 * p) for p in analysis.table["p_unadjusted"][:2]]
    [4, 4]
    """
    if not isinstance(plan, PlanFile):
        raise UsageError(f"plan must come from mtest.read_plan(path); got {type(plan).__name__}.")
    return Analysis(result=run_plan(plan, n_jobs=n_jobs), plan_file=plan)
