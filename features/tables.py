"""The one door to the cited tables and packaged specifications.

Tables are CSV files described by one ``datapackage.json`` (Frictionless Table Schema).
Energies are in eV and lengths in nm unless a column's name says otherwise.
"""

import json
from functools import cache
from pathlib import Path
from typing import Any

import pandas as pd

from features.errors import TableError, explain

__all__ = ["packaged_path", "read_package", "read_table", "table_names"]


def packaged_path(kind: str, name: str = "") -> Path:
    """Return the path of packaged data, from the installed wheel or from a checkout.

    Parameters
    ----------
    kind : {"datasets", "configs"}
        Which folder.
    name : str, default ""
        File inside the folder; empty for the folder itself.

    Returns
    -------
    Path

    Raises
    ------
    TableError
        If no such file is packaged.
    """
    package = Path(__file__).resolve().parent
    installed = package / "packaged" / kind
    folder = installed if installed.is_dir() else package.parent / kind
    path = folder / name if name else folder
    if not path.exists():
        known = ", ".join(sorted(p.name for p in folder.glob("*.*")))
        raise TableError(
            explain(f"no packaged file {name!r}", where=kind, expected=f"one of {known}")
        )
    return path


@cache
def read_package() -> dict[str, Any]:
    """Return the parsed ``datapackage.json``."""
    text = packaged_path("datasets", "datapackage.json").read_text(encoding="utf-8")
    package: dict[str, Any] = json.loads(text)
    return package


def table_names() -> list[str]:
    """Return the names of all packaged tables in the package's order."""
    return [resource["name"] for resource in read_package()["resources"]]


_DTYPES = {"string": "str", "number": "float64", "integer": "Int64", "boolean": "boolean"}


@cache
def _read_cached(name: str) -> pd.DataFrame:
    resources = {resource["name"]: resource for resource in read_package()["resources"]}
    if name not in resources:
        raise TableError(
            explain(f"no table {name!r}", expected=f"one of {', '.join(sorted(resources))}")
        )
    resource = resources[name]
    dtypes = {
        field["name"]: _DTYPES.get(field["type"], "str") for field in resource["schema"]["fields"]
    }
    return pd.read_csv(
        packaged_path("datasets", resource["path"]),
        dtype=dtypes,
        keep_default_na=False,
        na_values=[""],
    )


def read_table(name: str) -> pd.DataFrame:
    """Read one packaged table with the types of its schema.

    Parameters
    ----------
    name : str
        Resource name in ``datapackage.json``.

    Returns
    -------
    pandas.DataFrame
        A fresh copy; empty cells are missing values.

    Raises
    ------
    TableError
        If the table is not in the package.

    Examples
    --------
    >>> read_table("sources").columns[0]
    'source'
    """
    return _read_cached(name).copy()
