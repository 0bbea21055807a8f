"""Tables that a user hands over: read strictly, all faults of all rows reported at once."""

import csv
import io
from collections.abc import Sequence
from pathlib import Path

import numpy as np
import pandas as pd

from features.errors import TableError, explain

__all__ = ["collect_faults", "numeric_column", "read_header", "read_user_table"]

_LARGEST_BYTES = 200_000_000
_MOST_FAULTS = 20


def read_user_table(
    path: Path, required: Sequence[str], optional: Sequence[str] = ()
) -> pd.DataFrame:
    """Read a CSV file as text columns and check its header and shape.

    Parameters
    ----------
    path : pathlib.Path
        Comma-separated, UTF-8 (a byte-order mark is allowed), header in the first line.
    required, optional : sequence of str
        Column names; others are refused.

    Returns
    -------
    pandas.DataFrame
        All cells as stripped text, empty cells as missing; indexed by row from 0.

    Raises
    ------
    TableError
        If the file or its header does not fit.
    """
    text = _read_text(path)
    try:
        rows = list(csv.reader(io.StringIO(text, newline=""), strict=True)) if text.strip() else []
    except csv.Error as error:
        raise TableError(explain("not a CSV table", where=path.name, found=str(error))) from None
    if not rows:
        raise TableError(explain("empty table", where=path.name, expected=", ".join(required)))
    header = [name.strip() for name in rows[0]]
    _check_header(path, header, required, optional)
    body = [row for row in rows[1:] if any(cell.strip() for cell in row)]
    ragged = [
        f"row {number}: expected {len(header)} cells, found {len(row)}"
        for number, row in enumerate(body, start=2)
        if len(row) != len(header)
    ]
    collect_faults(path.name, ragged)
    if not body:
        raise TableError(explain("no rows below the header", where=path.name))
    frame = pd.DataFrame(body, columns=header).map(str.strip)
    return frame.replace("", None)


def read_header(path: Path) -> list[str]:
    """Return the column names of a CSV file, without checking the rest.

    Raises
    ------
    TableError
        If the file is not readable text.
    """
    first = _read_text(path).split("\n", 1)[0]
    return [name.strip() for name in next(csv.reader([first.strip()]), [])]


def _read_text(path: Path) -> str:
    try:
        if path.stat().st_size > _LARGEST_BYTES:
            raise TableError(explain("table too large", where=path.name, expected="at most 200 MB"))
        raw = path.read_bytes()
    except OSError as error:
        raise TableError(
            explain("cannot read the table", where=str(path), found=error.strerror or "")
        ) from None
    if b"\x00" in raw:
        raise TableError(explain("not a text table", where=path.name, found="binary content"))
    try:
        return raw.decode("utf-8-sig")
    except UnicodeDecodeError:
        raise TableError(
            explain("the table is not UTF-8 text", where=path.name, do="save it as CSV UTF-8")
        ) from None


def _check_header(
    path: Path, header: list[str], required: Sequence[str], optional: Sequence[str]
) -> None:
    known = [*required, *optional]
    expected = f"columns {', '.join(required)}"
    if optional:
        expected += f" and optionally {', '.join(optional)}"
    if len(header) == 1 and any(mark in header[0] for mark in ";\t|"):
        raise TableError(
            explain(
                "wrong delimiter",
                where=f"{path.name}, row 1",
                expected="commas",
                found=header[0][:60],
            )
        )
    twice = sorted({name for name in header if header.count(name) > 1})
    missing = [name for name in required if name not in header]
    unknown = [name for name in header if name not in known]
    for what, names in (("repeated", twice), ("missing", missing), ("unknown", unknown)):
        if names:
            raise TableError(
                explain(
                    f"{what} column {', '.join(repr(n[:40]) for n in names[:5])}",
                    where=f"{path.name}, row 1",
                    expected=expected,
                )
            )


def collect_faults(where: str, faults: Sequence[str]) -> None:
    """Raise one error that lists the faults, if there are any.

    Raises
    ------
    TableError
        If ``faults`` is not empty.
    """
    if faults:
        shown = "\n".join(f"  {fault}" for fault in faults[:_MOST_FAULTS])
        more = len(faults) - _MOST_FAULTS
        rest = f"\n  and {more} more" if more > 0 else ""
        raise TableError(f"{where}: {len(faults)} faulty rows\n{shown}{rest}")


def numeric_column(
    frame: pd.DataFrame, name: str, low: float, high: float, unit: str
) -> tuple[pd.Series, list[str]]:
    """Parse a text column as numbers in a range.

    Returns
    -------
    values : pandas.Series
        Numbers, NaN where faulty.
    faults : list of str
        One line a fault, with the row number of the file.
    """
    values = pd.to_numeric(frame[name], errors="coerce").astype(float)
    bad = ~(np.isfinite(values) & values.between(low, high))
    faults = [
        f"row {index + 2}: {name} expected {low:g} to {high:g} {unit}, found {frame[name][index]!r}"
        for index in frame.index[bad]
    ]
    return values, faults
