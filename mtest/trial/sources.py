"""Read data files as text, so that identifiers like 007 survive and every fault can name its rows."""

from __future__ import annotations

import codecs
import csv
import hashlib
import io
import re
from collections.abc import Callable, Iterable
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pandas as pd

from mtest.errors import DataError
from mtest.plan.wording import nearest, shown

MISSING_TOKENS = ("", "NA", ".")  # a value cell that holds one of these, after stripping white space, is missing
SEPARATORS = {";": "semicolons", "\t": "tabs", "|": "vertical bars"}  # beside the comma
WORKBOOKS = (b"PK\x03\x04", b"\xd0\xcf\x11\xe0")  # the first bytes of .xlsx (a zip archive) and of .xls
ROWS_SHOWN = 5  # rows named in a fault before "and N more"


@dataclass(frozen=True, slots=True, kw_only=True)
class Table:
    """A data file as text.

    name : the file as the plan names it
    frame : (row, column) of stripped text; its index is the row's number in the file
    unit : "line" (the header is line 1) or "row" (of a file that has no lines)
    sha256 : hash of the file's bytes
    n_stripped : column -> cells that had white space around them
    """

    name: str
    frame: pd.DataFrame
    unit: str
    sha256: str
    n_stripped: dict[str, int]

    def rows(self, numbers: Iterable[int]) -> str:
        """Return where rows stand, given their numbers from the index: "lines 3, 9 and 12"."""
        return row_list(sorted(numbers), unit=self.unit)

    def column(self, name: str, faults: list[str], *, purpose: str) -> pd.Series | None:
        """Return a column, or None after adding the fault that it is absent."""
        if name in self.frame.columns:
            return self.frame[name]
        hint = nearest(name, self.frame.columns) or f" The file has {', '.join(map(str, self.frame.columns[:12]))}."
        faults.append(f"{self.name}: column {shown(name)} must exist ({purpose}); got no such column.{hint}")
        return None


def row_list(numbers: list[int], *, unit: str) -> str:
    """Return numbers as "line 3", "lines 3 and 9" or "lines 3, 9, 12, 15, 20 and 7 more".

    >>> row_list([3, 9], unit="line")
    'lines 3 and 9'
    """
    if len(numbers) == 1:
        return f"{unit} {numbers[0]}"
    head, rest = [str(number) for number in numbers[:ROWS_SHOWN]], len(numbers) - ROWS_SHOWN
    if rest > 0:
        return f"{unit}s {', '.join(head)} and {rest} more"
    return f"{unit}s {', '.join(head[:-1])} and {head[-1]}"


def read_table(path: Path, name: str) -> Table:
    """Return the data file at `path`, which the plan calls `name`, as text.

    White space around cells is stripped; blank lines of a CSV file are passed over.

    Raises
    ------
    DataError
        If the file cannot be read, is neither CSV nor Parquet, has no rows, two columns of one name, or ragged rows.
    """
    if path.is_dir():
        raise DataError(f"{name}: a data file must be a file; got a folder. Name the file in it.")
    reader = READERS.get(path.suffix.lower())
    if reader is None:
        raise DataError(
            f"{name}: a data file must be {' or '.join(READERS)}; got {shown(path.suffix)}. Save it in one of these "
            "forms."
        )
    raw = _bytes(path, name)
    header, rows, numbers, unit = reader(raw, name)
    _check_header(header, name)
    if not rows:
        raise DataError(f"{name}: a data file must have at least one row below its header; got none. Check the export.")
    stripped = [[cell.strip() for cell in row] for row in rows]
    n_stripped = {
        column: sum(row[place] != clean[place] for row, clean in zip(rows, stripped))
        for place, column in enumerate(header)
    }
    frame = pd.DataFrame(stripped, columns=header, index=numbers, dtype=object)
    return Table(name=name, frame=frame, unit=unit, sha256=hashlib.sha256(raw).hexdigest(), n_stripped=n_stripped)


Rows = tuple[list[str], list[list[str]], list[int], str]


def _bytes(path: Path, name: str) -> bytes:
    try:
        raw = path.read_bytes()
    except FileNotFoundError as error:
        beside = [other.name for other in path.parent.iterdir()] if path.parent.is_dir() else []
        hint = nearest(path.name, beside) or " Check data in the plan; paths are relative to the plan's folder."
        raise DataError(f"{name}: a data file must exist; got none at {path}.{hint}") from error
    except OSError as error:
        reason = (error.strerror or "no reason given").lower()
        raise DataError(f"{name}: a data file must be readable; got '{reason}' at {path}. Check it.") from error
    if not raw.removeprefix(codecs.BOM_UTF8).strip():
        raise DataError(f"{name}: a data file must not be empty; got no content. Check the export.")
    return raw


def _csv(raw: bytes, name: str) -> Rows:
    # The csv module, not pandas: it knows the line of each row, and tells a ragged row from a row of missing values.
    if raw.startswith(WORKBOOKS):
        raise DataError(f"{name}: a CSV file must be text; this is an Excel workbook; export it as CSV.")
    if raw.startswith((codecs.BOM_UTF16_LE, codecs.BOM_UTF16_BE)):
        raise DataError(
            f"{name}: a CSV file must be UTF-8 text; got UTF-16. Save the file as UTF-8, in Excel: CSV UTF-8."
        )
    try:
        text = raw.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = raw[: error.start].count(b"\n") + 1
        raise DataError(
            f"{name}, line {line}: a CSV file must be UTF-8 text; got a byte that is not. Save the file as UTF-8, "
            "in Excel: CSV UTF-8."
        ) from error
    _check_separator(text, name)
    reader = csv.reader(io.StringIO(text, newline=""), strict=True)
    rows, numbers, first_line = [], [], 1
    try:
        for row in reader:
            if row:
                rows.append(row)
                numbers.append(first_line)
            first_line = reader.line_num + 1
    except csv.Error as error:
        raise DataError(
            f"{name}, line {first_line}: a CSV row must be well formed; got a row that is not ({error}). "
            "Check its quotation marks."
        ) from error
    header = [cell.strip() for cell in rows[0]]
    ragged = [number for row, number in zip(rows, numbers) if len(row) != len(header)]
    if ragged:
        widths = sorted({len(row) for row in rows if len(row) != len(header)})
        raise DataError(
            f"{name}, {row_list(ragged, unit='line')}: a row must have as many cells as the "
            f"header, {len(header)}; got {' or '.join(map(str, widths[:3]))}. Check commas, and quotation marks "
            "around them."
        )
    return header, rows[1:], numbers[1:], "line"


def _check_separator(text: str, name: str) -> None:
    """Raise if the header is one cell that holds another separator."""
    # Before the rows are looked at: decimal commas would make them ragged, quotation marks malformed.
    blank, header = re.match(r"([\r\n]*)([^\r\n]*)", text).groups()
    try:
        if len(next(csv.reader([header]))) > 1:
            return
    except csv.Error:
        return  # the reader of all rows meets it again, and tells it
    for mark, word in SEPARATORS.items():
        if mark in header:
            line = blank.count("\n") + 1
            raise DataError(
                f"{name}, line {line}: cells must be separated by commas; got {word}. Export with commas and "
                "decimal points."
            )


def _parquet(raw: bytes, name: str) -> Rows:
    try:
        frame = pd.read_parquet(io.BytesIO(raw))
    except ImportError as error:
        raise DataError(
            f"{name}: reading Parquet must have the package pyarrow; got none installed. Install it, or save as CSV."
        ) from error
    except Exception as error:  # each Parquet reader has errors of its own; whatever it says goes into the sentence
        raise DataError(
            f"{name}: a .parquet file must be readable as Parquet; got '{str(error).splitlines()[0]}'. Check the "
            "export."
        ) from error
    columns = [[_text(value) for value in frame.iloc[:, place]] for place in range(frame.shape[1])]
    rows = [list(row) for row in zip(*columns)]
    return [str(column) for column in frame.columns], rows, list(range(1, len(rows) + 1)), "row"


def _text(value: object) -> str:
    """Return a cell as text that reads back as the same value; missing is empty."""
    if pd.api.types.is_scalar(value) and pd.isna(value):
        return ""
    if isinstance(value, (bool, np.bool_)):
        return "true" if value else "false"
    if isinstance(value, (float, np.floating)):
        # A whole-number column with gaps is stored as floats: 7.0 must read as the identifier 7.
        return str(int(value)) if float(value).is_integer() else repr(float(value))
    return str(value)


def _check_header(header: list[str], name: str) -> None:
    twice = list(dict.fromkeys(column for column in header if header.count(column) > 1))
    if twice:
        raise DataError(
            f"{name}: the columns of a data file must have different names; got "
            f"{', '.join(f'{shown(column)} {header.count(column)} times' for column in twice)}. Rename or remove them."
        )


READERS: dict[str, Callable[[bytes, str], Rows]] = {".csv": _csv, ".parquet": _parquet}
