"""Endpoints as numbers: text by kind into floats, missing values by the plan's rule."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import pandas as pd

from mtest.plan.records import DEFAULT_STATISTIC, Endpoint
from mtest.plan.wording import listed, nearest, shown
from mtest.trial.arrays import EndpointData
from mtest.trial.cells import NUMBER, distinct, equal_to, is_missing, numbers, two_words, wrong
from mtest.trial.sources import MISSING_TOKENS, Table

CORRECT_OR_NAME = "Write 0 and 1, or one word for the event, named in the plan, and one for no event."
LIST_LEVELS = "Correct the cell, leave it empty, NA or '.' if the value is missing, or list its levels in the plan."


def as_numbers(cells: pd.Series, endpoint: Endpoint, table: Table, faults: list[str], *, where: str) -> np.ndarray:
    """Return (row,) float64 of an endpoint's cells, NaN where missing or wrong.

    Ordinal levels become 0, 1, 2, ... from lowest to highest; a binary event becomes 1 and anything else 0.
    """
    return CONVERTERS[endpoint.kind](cells, endpoint, table, faults, where)


def filled(values: np.ndarray, endpoint: Endpoint) -> np.ndarray:
    """Return (subject,) float64 in which missing values are given what the endpoint's missing-data rule says.

    "worst-score": of a ranked endpoint one below the worst observed value (one above, where lower is better), so that
    all who are missing share the worst rank; of a binary endpoint the worse of 0 and 1.
    """
    if endpoint.missing == "available" or np.isnan(values).all():
        return values
    if endpoint.kind == "binary":
        worst = 0.0 if endpoint.better == "higher" else 1.0
    else:
        worst = np.nanmin(values) - 1 if endpoint.better == "higher" else np.nanmax(values) + 1
    return np.where(np.isnan(values), worst, values)


def endpoint_data(endpoint: Endpoint, observed: np.ndarray, arm: np.ndarray, n_arms: int) -> EndpointData:
    """Return an endpoint as the engine takes it; `observed` and `arm` are per subject."""
    values = filled(observed, endpoint)
    n_filled = np.bincount(arm[np.isnan(observed) & ~np.isnan(values)], minlength=n_arms)
    for array in (values, n_filled):
        array.setflags(write=False)
    return EndpointData(
        name=endpoint.name,
        kind=endpoint.kind,
        statistic=endpoint.statistic or DEFAULT_STATISTIC[endpoint.kind],
        better=endpoint.better,
        missing=endpoint.missing,
        unit=endpoint.unit,
        group=endpoint.group,
        values=values,
        n_filled=n_filled,
    )


def _continuous(cells: pd.Series, endpoint: Endpoint, table: Table, faults: list[str], where: str) -> np.ndarray:
    return numbers(cells, table, faults, purpose=where)


def _ordinal(cells: pd.Series, endpoint: Endpoint, table: Table, faults: list[str], where: str) -> np.ndarray:
    if not endpoint.levels:
        return numbers(cells, table, faults, purpose=where, for_words=LIST_LEVELS)
    for level in set(endpoint.levels) & set(MISSING_TOKENS):
        faults.append(
            f"{table.name}: a level must not be a sign for a missing value ({where}); got level {shown(level)}. "
            "Rename the level in the plan and in the data."
        )
    rank = {level: float(place) for place, level in enumerate(endpoint.levels)}
    values = np.array([rank.get(cell, np.nan) for cell in cells])
    unknown = np.isnan(values) & ~is_missing(cells)
    for label in distinct(cells[unknown]):
        rows = table.rows(cells.index[cells == label])
        hint = nearest(label, endpoint.levels) or " Correct the cell, or add the level."
        faults.append(
            f"{table.name}, {rows}: column {shown(cells.name)} must hold one of the levels {listed(endpoint.levels)} "
            f"({where}); got {shown(label)}.{hint}"
        )
    return values


def _binary(cells: pd.Series, endpoint: Endpoint, table: Table, faults: list[str], where: str) -> np.ndarray:
    missing = is_missing(cells)
    words = two_words(cells)
    do = f"In the plan name {listed(words)} as event." if words else CORRECT_OR_NAME
    if endpoint.event is None:
        values = numbers(cells, table, faults, purpose=where, for_words=do)
        odd = ~np.isnan(values) & (values != 0) & (values != 1)
        if odd.any():
            faults.append(
                f"{table.name}, {table.rows(cells.index[odd])}: column {shown(cells.name)} must hold "
                f"0 or 1 ({where}); got {wrong(cells[odd])}. Correct the cell, or name the event in the plan."
            )
        return values
    event = equal_to(cells, endpoint.event, table, faults, purpose=where, for_words=do)
    others = distinct(cells[~missing & ~event])
    if len(_different(others, endpoint.event)) > 1:
        correct = f" {do}" if words else " Write one word for no event, or correct the event in the plan."
        hint = nearest(endpoint.event, others) or correct
        faults.append(
            f"{table.name}: column {shown(cells.name)} must hold the event {shown(endpoint.event)} and at most one "
            "other "
            f"value ({where}); got {listed(others, last='and', most=5)} beside it.{hint}"
        )
    return np.where(missing, np.nan, event.astype(float))


def _different(others: list[str], event: str | int | float | bool) -> set[str] | set[float]:
    """Return the different values among cells that are not the event, told apart as the event is recognised."""
    if isinstance(event, bool):
        return {cell.lower() for cell in others}
    if isinstance(event, str):
        return set(others)
    return {float(cell) for cell in others if NUMBER.fullmatch(cell)}  # what is no number has a fault of its own


Converter = Callable[[pd.Series, Endpoint, Table, list[str], str], np.ndarray]
CONVERTERS: dict[str, Converter] = {"continuous": _continuous, "ordinal": _ordinal, "binary": _binary}
