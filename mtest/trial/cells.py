"""Text cells as numbers, and cells compared with the values a plan states."""

from __future__ import annotations

import re

import numpy as np
import pandas as pd

from mtest.plan.wording import listed, shown
from mtest.trial.sources import MISSING_TOKENS, Table

NUMBER = re.compile(r"[+-]?(\d+\.?\d*|\.\d+)([eE][+-]?\d+)?")
INFINITE = re.compile(r"[+-]?inf(inity)?", re.IGNORECASE)
DECIMAL_COMMA = re.compile(r"[+-]?\d+,\d+")
DATE = re.compile(
    r"(\d{4}([-/.])\d{1,2}\2\d{1,2}|\d{1,2}([-/.])\d{1,2}\3\d{2,4}|\d{1,2}[- ]?[a-z]{3}[- ]?\d{2,4})([ t]\d.*)?",
    re.IGNORECASE,
)
CORRECT = "Correct the cell, or leave it empty, NA or '.' if the value is missing."
WRONG_SHOWN = 3  # distinct wrong values that are shown


def is_missing(cells: pd.Series) -> np.ndarray:
    """Return (row,) bool: which cells hold one of `MISSING_TOKENS`."""
    return cells.isin(MISSING_TOKENS).to_numpy()


def numbers(cells: pd.Series, table: Table, faults: list[str], *, purpose: str, for_words: str = CORRECT) -> np.ndarray:
    """Return (row,) float64, NaN where missing; text and infinite numbers are added to the faults.

    `for_words` says what to do where the text is neither decimal commas nor dates.
    """
    values = np.full(len(cells), np.nan)
    is_text, is_infinite = np.zeros(len(cells), bool), np.zeros(len(cells), bool)
    for row, cell in enumerate(cells):
        if cell in MISSING_TOKENS:
            continue
        if NUMBER.fullmatch(cell):
            values[row] = float(cell)
            is_infinite[row] = np.isinf(values[row])  # 1e999
        elif INFINITE.fullmatch(cell):
            is_infinite[row] = True
        else:
            is_text[row] = True
    for chosen, rule, do in (
        (is_text, "must be a number", _for_text(cells[is_text], for_words)),
        (is_infinite, "must be a finite number", CORRECT),
    ):
        if chosen.any():
            faults.append(
                f"{table.name}, {table.rows(cells.index[chosen])}: column {shown(cells.name)} {rule} ({purpose}); got "
                f"{wrong(cells[chosen])}. {do}"
            )
    values[is_infinite] = np.nan
    return values


def equal_to(
    cells: pd.Series,
    stated: str | int | float | bool,
    table: Table,
    faults: list[str],
    *,
    purpose: str,
    for_words: str = CORRECT,
) -> np.ndarray:
    """Return (row,) bool: which cells equal a value stated in the plan: text as text, numbers as numbers."""
    if isinstance(stated, bool):
        return (cells.str.lower() == ("true" if stated else "false")).to_numpy()
    if isinstance(stated, str):
        return (cells == stated).to_numpy()
    return numbers(cells, table, faults, purpose=purpose, for_words=for_words) == stated


def two_words(cells: pd.Series) -> list[str]:
    """Return the one or two words that a column holds beside missing values, nothing where it holds anything else."""
    held = distinct(cells[~is_missing(cells)])
    return held if len(held) <= 2 and not any(NUMBER.fullmatch(cell) for cell in held) else []


def _for_text(cells: pd.Series, for_words: str) -> str:
    """Return what to do about cells that are no numbers."""
    for pattern, do in (
        (DECIMAL_COMMA, "Export with decimal points."),
        (DATE, "Name another column, or derive a number (days)."),
    ):
        if 2 * sum(bool(pattern.fullmatch(cell)) for cell in cells) > len(cells):
            return do
    return for_words


def wrong(cells: pd.Series) -> str:
    """Return the distinct values of wrong cells, in the order of the file, as a sentence shows them."""
    return listed(distinct(cells), last="and", most=WRONG_SHOWN)


def distinct(cells: pd.Series) -> list[str]:
    """Return the different values of cells, in the order of the file."""
    return list(dict.fromkeys(cells.sort_index()))
