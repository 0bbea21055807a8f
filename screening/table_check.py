"""What a table of the user's own is, and whether it can be used: read as the commands would."""

from collections.abc import Callable
from pathlib import Path
from typing import NamedTuple

import pandas as pd

from features.errors import TableError, explain
from screening.fingerprint import file_hash
from screening.user_tables import read_header

__all__ = ["check_text"]


class _Kind(NamedTuple):
    name: str
    columns: frozenset[str]
    use: str
    read: Callable[[Path], pd.DataFrame]


def _results(path: Path) -> pd.DataFrame:
    from screening.measurements import read_measurements  # noqa: PLC0415 - loads models' libraries

    return read_measurements(path)


def _records(path: Path) -> pd.DataFrame:
    from screening.own_table import read_own_records  # noqa: PLC0415 - as above

    return read_own_records(path)


def _pairs(path: Path) -> pd.DataFrame:
    from screening.predicting import read_pairs  # noqa: PLC0415 - as above

    return read_pairs(path)


def _surfaces(path: Path) -> pd.DataFrame:
    from screening.surface_answers import answer_surfaces  # noqa: PLC0415 - as above

    return answer_surfaces(path)


def _sizes(path: Path) -> pd.DataFrame:
    from screening.specification import read_sizes  # noqa: PLC0415 - as above

    return pd.DataFrame(read_sizes(path))


def _materials(path: Path) -> pd.DataFrame:
    from screening.bulk_answers import read_materials  # noqa: PLC0415 - as above

    return read_materials(path)


def _kinds() -> tuple[_Kind, ...]:
    """Return the kinds of table, those with the most telling columns first."""
    return (
        _Kind(
            "results of a laboratory",
            frozenset({"material", "diameter_nm", "property", "value"}),
            "fewnm rank SPEC --results FILE, fewnm plan SPEC --results FILE",
            _results,
        ),
        _Kind(
            "records of size and energy",
            frozenset({"material", "diameter_nm", "energy_eV", "energy_kind"}),
            "fewnm audit --table FILE",
            _records,
        ),
        _Kind(
            "questions on metal surfaces",
            frozenset({"material", "adsorbate"}),
            "fewnm predict --table FILE",
            _surfaces,
        ),
        _Kind(
            "questions on quantum dots",
            frozenset({"material", "diameter_nm"}),
            "fewnm predict --table FILE",
            _pairs,
        ),
        _Kind(
            "questions on bulk gaps",
            frozenset({"material"}),
            "fewnm predict --table FILE",
            _materials,
        ),
        _Kind(
            "size distribution",
            frozenset({"diameter_nm"}),
            "[laboratory] sizes in a specification",
            _sizes,
        ),
    )


def check_text(path: Path) -> str:
    """Read a table as the command that takes it would, and say what it is.

    Parameters
    ----------
    path : pathlib.Path
        CSV file; never altered.

    Returns
    -------
    str
        Kind, rows, use and SHA-256, a line each.

    Raises
    ------
    TableError
        If no command takes such columns, or with all faulty rows at once.
    """
    header = set(read_header(path))
    kind = next((kind for kind in _kinds() if kind.columns <= header), None)
    if kind is None:
        wanted = "; ".join(", ".join(sorted(kind.columns)) for kind in _kinds())
        raise TableError(
            explain(
                "no command takes a table with these columns",
                where=f"{path.name}, row 1",
                expected=wanted,
                found=", ".join(sorted(header))[:80],
            )
        )
    kind.read(path)
    rows = sum(1 for line in path.read_text(encoding="utf-8-sig").splitlines()[1:] if line.strip())
    return (
        f"{path.name}: {kind.name}, {rows} rows, no faults\n"
        f"use: {kind.use}\n"
        f"sha256: {file_hash(path)}\n"
    )
