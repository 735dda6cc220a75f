"""Long tables: one row per subject, parameter and visit, from which an endpoint takes at most one row per subject."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pandas as pd

from mtest.plan.records import Endpoint, LongTable
from mtest.plan.wording import nearest, shown
from mtest.trial.sources import ROWS_SHOWN, Table


@dataclass(frozen=True, slots=True, kw_only=True)
class LongData:
    """A long table whose key columns have been found.

    who : (row,) text, the subject's identifier
    position : (row,) intp, the subject's place among the randomised, -1 where unknown
    rows_at : (parameter, visit) -> places of its rows in the table, so that many endpoints need one search
    """

    table: Table
    who: pd.Series
    position: np.ndarray
    parameter: pd.Series
    visit: pd.Series
    rows_at: dict[tuple[str, str], np.ndarray]


def keyed(table: Table, spec: LongTable, *, subject: str, ids: tuple[str, ...], faults: list[str]) -> LongData | None:
    """Return a long table with its rows assigned to subjects; None where a key column is absent."""
    subject = spec.subject or subject
    who = table.column(subject, faults, purpose="the subject's identifier")
    parameter = table.column(spec.parameter, faults, purpose="the parameter of each row")
    visit = table.column(spec.visit, faults, purpose="the visit of each row")
    if who is None or parameter is None or visit is None:
        return None
    place = {identifier: index for index, identifier in enumerate(ids)}
    position = np.array([place.get(identifier, -1) for identifier in who], dtype=np.intp)
    empty = (who == "").to_numpy()
    if empty.any():
        faults.append(
            f"{table.name}, {table.rows(who.index[empty])}: column {shown(subject)} must hold each row's subject; got "
            "an empty cell. "
            "Fill it in, or remove the row."
        )
    unknown = (position < 0) & ~empty
    if unknown.any():
        names = list(dict.fromkeys(who[unknown]))
        more = f" and {len(names) - ROWS_SHOWN} more" if len(names) > ROWS_SHOWN else ""
        hint = nearest(names[0], ids, cutoff=0.8) if len(names) == 1 else ""
        faults.append(
            f"{table.name}, {table.rows(who.index[unknown])}: every subject must be one of the randomised in the "
            "subject table; got "
            f"{', '.join(shown(name) for name in names[:ROWS_SHOWN])}{more}."
            f"{hint or ' Add them to the subject table, or remove their rows.'}"
        )
    rows_at = pd.DataFrame({"parameter": parameter, "visit": visit}).groupby(["parameter", "visit"], sort=False).indices
    return LongData(table=table, who=who, position=position, parameter=parameter, visit=visit, rows_at=rows_at)


def chosen_rows(
    endpoint: Endpoint, tables: tuple[LongData, ...], faults: list[str], *, where: str, all_read: bool
) -> tuple[LongData, np.ndarray] | None:
    """Return the long table that holds an endpoint, and the places of its rows; None where that is not one table.

    Parameters
    ----------
    where : str
        The endpoint, as faults name it.
    all_read : bool
        Whether every long table could be read; if not, an absent parameter is no fault yet.
    """
    parameter, visit = endpoint.value.parameter, endpoint.value.visit
    found = [(data, data.rows_at[parameter, visit]) for data in tables if (parameter, visit) in data.rows_at]
    if len(found) > 1:
        names = " and ".join(data.table.name for data, _ in found)
        faults.append(
            f"{names}: parameter {shown(parameter)} at visit {shown(visit)} must stand in one long table ({where}); "
            f"got it in {len(found)}. Take it out of the others, or rename it there."
        )
        return None
    if not found:
        if all_read:
            faults.append(_never_present(parameter, visit, tables, where))
        return None
    data, rows = found[0]
    _check_one_each(data, rows, parameter, visit, faults)
    return data, rows


def _never_present(parameter: str, visit: str, tables: tuple[LongData, ...], where: str) -> str:
    names = " and ".join(data.table.name for data in tables)
    at_parameter = [data.visit[data.parameter == parameter] for data in tables]
    visits = list(dict.fromkeys(text for part in at_parameter for text in part))
    if not visits:
        known = list(dict.fromkeys(text for data in tables for text in data.parameter))
        hint = nearest(parameter, known) or f" The table has {', '.join(shown(name) for name in known[:12])}."
        return f"{names}: parameter {shown(parameter)} must have rows ({where}); got none.{hint}"
    hint = nearest(visit, visits) or f" The table has {', '.join(shown(name) for name in visits[:12])}."
    return f"{names}: visit {shown(visit)} must have rows for parameter {shown(parameter)} ({where}); got none.{hint}"


def _check_one_each(data: LongData, rows: np.ndarray, parameter: str, visit: str, faults: list[str]) -> None:
    position = pd.Series(data.position[rows], index=data.table.frame.index[rows])
    twice = position[position.duplicated(keep=False) & (position >= 0)]
    if twice.empty:
        return
    by_subject = {code: list(lines.index) for code, lines in twice.groupby(twice)}
    told = [
        f"subject {shown(data.who[lines[0]])} on {data.table.rows(lines)}"
        for lines in list(by_subject.values())[:ROWS_SHOWN]
    ]
    more = f"; and {len(by_subject) - ROWS_SHOWN} more subjects" if len(by_subject) > ROWS_SHOWN else ""
    faults.append(
        f"{data.table.name}: a subject must have at most one row for parameter {shown(parameter)} at visit "
        f"{shown(visit)}; got {'; '.join(told)}{more}. Keep the row that the plan means."
    )
