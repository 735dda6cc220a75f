"""Warnings: what is allowed in the data, but changes what the analysis can show."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from mtest.plan.records import Endpoint, Plan
from mtest.plan.wording import shown
from mtest.trial.sources import ROWS_SHOWN, Table
from mtest.trial.subjects import Cells

FEW_EVENTS = 5  # below this a binary endpoint can hardly reach a small p, whatever the arms do
MUCH_MISSING = 0.20  # share of subjects; a common threshold for concern about missing data
MISSING_APART = 0.10  # difference between arms in the share missing that may itself be an effect


def stripped_cells(table: Table, columns: tuple[str, ...]) -> Iterator[str]:
    """Yield a warning for each key column in which white space was stripped."""
    for column in columns:
        if count := table.n_stripped.get(column, 0):
            yield (
                f"{table.name}: white space around {_count(count, 'cell')} of column {shown(column)} was stripped "
                "before comparing labels."
            )


def lone_arms(cells: Cells, arm: np.ndarray, plan: Plan) -> Iterator[str]:
    """Yield warnings for cells in which nobody can be relabelled, because they hold one arm only."""
    scheme = plan.randomisation.scheme
    word = {"stratified": "stratum", "blocks": "block", "matched sets": "set"}.get(scheme)
    if word is None:
        return
    size = np.bincount(cells.cell)
    lone = [
        code
        for code in range(len(cells.cell_names))
        if (scheme != "matched sets" or size[code] >= 2) and len(np.unique(arm[cells.cell == code])) == 1
    ]
    told = [
        f"{shown(cells.cell_names[code])} ({_count(int(size[code]), 'subject')}, all "
        f"{shown(plan.randomisation.arms[arm[cells.cell == code][0]])})"
        for code in lone
    ]
    if told:
        yield f"{_sentence_list(word, told)} one arm only and {_verb(told)} nothing to the comparisons."
    small = [shown(cells.cell_names[code]) for code in range(len(size)) if scheme == "matched sets" and size[code] < 2]
    if small:
        yield f"{_sentence_list('set', small)} fewer than 2 subjects and {_verb(small)} nothing to the comparisons."


def about_endpoint(endpoint: Endpoint, observed: np.ndarray, arm: np.ndarray, plan: Plan) -> Iterator[str]:
    """Yield warnings about one endpoint; `observed` is (subject,) float64 before missing values were filled."""
    where = f'Endpoint "{endpoint.name}"'
    seen = observed[~np.isnan(observed)]
    if len(seen) and (seen == seen[0]).all() and endpoint.kind != "binary":
        yield f"{where} is constant: every observed value is the same, so its p-values will be 1."
    if endpoint.kind == "binary" and len(seen):
        events = int(seen.sum())
        if events == 0 and endpoint.event is not None:
            yield (
                f"{where}: the event {shown(endpoint.event)} never occurs in the data, so its p-values will be 1; "
                "check its spelling."
            )
        elif events in (0, len(seen)):
            yield (
                f"{where} is constant: {'nobody' if events == 0 else 'everybody'} had the event, so its "
                "p-values will be 1."
            )
        elif events < FEW_EVENTS:
            yield (
                f"{where} has {_count(events, 'event')} in all; with fewer than {FEW_EVENTS} a small p-value is "
                "hardly possible."
            )
    yield from _missingness(where, observed, arm, plan.randomisation.arms)


def _missingness(where: str, observed: np.ndarray, arm: np.ndarray, arms: tuple[str, ...]) -> Iterator[str]:
    missing = np.isnan(observed)
    if missing.mean() > MUCH_MISSING:
        yield f"{where} is missing for {missing.mean():.0%} of all subjects ({int(missing.sum())} of {len(missing)})."
    share = np.array([missing[arm == place].mean() for place in range(len(arms))])
    if share.max() - share.min() > MISSING_APART:
        low, high = int(share.argmin()), int(share.argmax())
        yield (
            f"{where} is missing more often in arm {shown(arms[high])} ({share[high]:.0%}) than in arm "
            f"{shown(arms[low])} ({share[low]:.0%}); the missingness may depend on the arm."
        )


def _sentence_list(word: str, told: list[str]) -> str:
    """Return "Stratum 'A' (3 subjects, ...) holds" or "2 strata hold ...", with at most `ROWS_SHOWN` of them."""
    if len(told) == 1:
        return f"{word.capitalize()} {told[0]} holds"
    plural = {"stratum": "strata"}.get(word, f"{word}s")
    more = f" and {len(told) - ROWS_SHOWN} more" if len(told) > ROWS_SHOWN else ""
    return f"{len(told)} {plural}, {', '.join(told[:ROWS_SHOWN])}{more}, hold"


def _verb(told: list[str]) -> str:
    return "contributes" if len(told) == 1 else "contribute"


def _count(count: int, word: str) -> str:
    return f"{count} {word}{'' if count == 1 else 's'}"
