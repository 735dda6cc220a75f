"""The subject table: who was randomised, to which arm, in which cell, and who belongs to which analysis set."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
import pandas as pd

from mtest.plan.records import Plan, Randomisation
from mtest.plan.wording import item, listed, nearest_word, shown
from mtest.trial.cells import CORRECT, distinct, equal_to, two_words
from mtest.trial.sources import Table

MIN_PER_ARM = 2  # a spread within an arm cannot be seen in one subject


@dataclass(frozen=True, slots=True, kw_only=True)
class Cells:
    """Strata and exchange cells: indices per subject, and what each index is called."""

    stratum: np.ndarray
    stratum_names: tuple[str, ...]
    cell: np.ndarray
    cell_names: tuple[str, ...]


def by_identifier(table: Table, column: str, faults: list[str]) -> Table | None:
    """Return the table with its rows in the order of the identifiers as plain text, or None without that column."""
    ids = table.column(column, faults, purpose="the subject's identifier")
    if ids is None:
        return None
    empty = (ids == "").to_numpy()
    if empty.any():
        faults.append(
            f"{table.name}, {table.rows(ids.index[empty])}: column {shown(column)} must hold each subject's "
            "identifier; got an empty "
            "cell. Fill it in, or remove the row."
        )
    twice = (ids.duplicated(keep=False) & (ids != "")).to_numpy()
    for subject in distinct(ids[twice]):
        faults.append(
            f"{table.name}, {table.rows(ids.index[ids == subject])}: each subject must have one row; got subject "
            f"{shown(subject)} {int((ids == subject).sum())} times. Remove the others, or put visits into a "
            "[[data.long]]."
        )
    return replace(table, frame=table.frame.sort_values(column, kind="stable"))


def arm_index(subjects: Table, randomisation: Randomisation, faults: list[str]) -> np.ndarray | None:
    """Return (subject,) intp, the arm's place in the plan, -1 where it is unknown; None without the column."""
    column, arms = randomisation.arm, randomisation.arms
    cells = subjects.column(column, faults, purpose="the arm each subject was randomised to")
    if cells is None:
        return None
    index = pd.Index(arms).get_indexer(pd.Index(cells))
    meant = set()
    for label in distinct(cells[index < 0]):
        where = subjects.rows(cells.index[cells == label])
        near = nearest_word(label, arms)
        meant.add(near)
        hint = f" Did you mean '{near}'?" if near else " Correct the cell, or add the arm to randomisation.arms."
        faults.append(
            f"{subjects.name}, {where}: column {shown(column)} must hold one of randomisation.arms, {listed(arms)}; "
            f"got {shown(label)}.{hint}"
        )
    for place, arm in enumerate(arms):
        count = int((index == place).sum())
        if count < MIN_PER_ARM and arm not in meant:  # the subjects of an arm that is misspelt may be there
            rule = "at least one subject" if count == 0 else f"at least {MIN_PER_ARM} subjects"
            faults.append(
                f"{subjects.name}: arm {shown(arm)} must have {rule}; got {count or 'none'} in column {shown(column)}. "
                "Correct the data, or take the arm out of the plan."
            )
    return index.astype(np.intp)


def exchange_cells(subjects: Table, randomisation: Randomisation, faults: list[str]) -> Cells | None:
    """Return the strata and exchange cells of the scheme; None where one of its columns is absent."""
    strata = _labels(subjects, randomisation.strata, faults, role="stratum")
    inner = randomisation.block or randomisation.set
    inside = _labels(subjects, (inner,) if inner else (), faults, role="block" if randomisation.block else "set")
    if strata is None or inside is None:
        return None
    if randomisation.scheme == "matched sets":
        stratum, stratum_names = _coded(inside)
        return Cells(stratum=stratum, stratum_names=stratum_names, cell=stratum, cell_names=stratum_names)
    stratum, stratum_names = _coded(strata)
    # Block numbers may start again in each stratum, so a block is known by both.
    cell, cell_names = _coded([outer + inner for outer, inner in zip(strata, inside)])
    return Cells(stratum=stratum, stratum_names=stratum_names, cell=cell, cell_names=cell_names)


def analysis_sets(subjects: Table, plan: Plan, faults: list[str]) -> dict[str, np.ndarray]:
    """Return analysis set -> (subject,) bool, those whose columns hold the values stated in the plan."""
    sets = {}
    for index, record in enumerate(plan.analysis_set):
        purpose = item("analysis_set", index, record.name)
        inside = np.ones(len(subjects.frame), bool)
        absent = False
        for column, stated in record.where.items():
            cells = subjects.column(column, faults, purpose=purpose)
            if cells is None:
                absent = True
                continue
            n_before = len(faults)
            words = two_words(cells)
            do = f"In the plan name {listed(words)}." if words else CORRECT
            chosen = equal_to(cells, stated, subjects, faults, purpose=purpose, for_words=do)
            if len(faults) > n_before:
                absent = True
            elif not chosen.any():
                held = listed(sorted(set(cells)), last="and", most=5)
                faults.append(
                    f"{subjects.name}: column {shown(column)} must hold {shown(stated)} for at least one subject "
                    f"({purpose}); "
                    f"got {held}. Correct where in the plan."
                )
                absent = True
            inside &= chosen
        if not inside.any() and not absent:
            faults.append(
                f"{subjects.name}: {purpose} must hold at least one subject; got none that meets all of "
                f"{', '.join(f'{column} = {shown(stated)}' for column, stated in record.where.items())}. Correct where."
            )
        sets[record.name] = inside
    return sets


def _labels(subjects: Table, columns: tuple[str, ...], faults: list[str], *, role: str) -> list[tuple[str, ...]] | None:
    """Return (subject,) tuples of the columns' text, empty tuples for no columns; None where a column is absent."""
    found = []
    for column in columns:
        cells = subjects.column(column, faults, purpose=f"the {role} each subject was randomised in")
        if cells is None:
            continue
        empty = (cells == "").to_numpy()
        if empty.any():
            faults.append(
                f"{subjects.name}, {subjects.rows(cells.index[empty])}: column {shown(column)} must hold the {role} "
                "each subject was "
                f"randomised in; got an empty cell. Fill in the {role} as randomised."
            )
        found.append(list(cells))
    if len(found) < len(columns):
        return None
    return list(zip(*found)) if found else [()] * len(subjects.frame)


def _coded(labels: list[tuple[str, ...]]) -> tuple[np.ndarray, tuple[str, ...]]:
    """Return (subject,) intp codes in the sorted order of the labels, and each label's name."""
    distinct = sorted(set(labels))
    place = {label: code for code, label in enumerate(distinct)}
    codes = np.array([place[label] for label in labels], dtype=np.intp)
    return codes, tuple(" / ".join(label) or "all subjects" for label in distinct)
