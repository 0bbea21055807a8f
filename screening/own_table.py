"""A user's own table of measured sizes, checked against the schema of the packaged records.

Columns, units, allowed values and ranges are those of the packaged table ``size_gap_records``;
what a user may leave out is filled as stated in `OPTIONAL`. All faults of all rows are reported at
once.
"""

from pathlib import Path
from typing import Any

import pandas as pd

from features.errors import UnknownMaterialError
from features.semiconductors import bulk_constants, match_material
from features.size_gap import LARGEST_DIAMETER_nm, SMALLEST_DIAMETER_nm
from features.tables import read_package
from screening.user_tables import collect_faults, numeric_column, read_user_table

__all__ = ["OPTIONAL", "REQUIRED", "read_own_records"]

REQUIRED = ("material", "diameter_nm", "energy_eV", "energy_kind")
"""Columns that a table must have; diameter in nm, energy in eV."""

OPTIONAL: dict[str, Any] = {
    "record": None,
    "structure": None,
    "shape": "sphere",
    "diameter_uncertainty_nm": None,
    "energy_sd_eV": 0.06,
    "source": "own table",
}
"""Columns that may be left out, with what stands in for them: the record is numbered, the
structure is the bulk table's, the diameter's uncertainty is 7 % of it (common practice for
electron microscopy)."""

_RELATIVE_SIZE_UNCERTAINTY = 0.07
_LARGEST_UNCERTAINTY_nm = 20.0


def read_own_records(path: Path) -> pd.DataFrame:
    """Read a user's records as rows of the packaged table.

    Parameters
    ----------
    path : pathlib.Path
        CSV with the columns `REQUIRED` and any of `OPTIONAL`.

    Returns
    -------
    pandas.DataFrame
        Columns of the table ``size_gap_records``.

    Raises
    ------
    TableError
        If the file, its header or any row does not fit; one message names all faulty rows.
    """
    text = read_user_table(path, REQUIRED, tuple(OPTIONAL))
    fields = {field["name"]: field for field in _schema()["fields"]}
    faults: list[str] = []
    frame = pd.DataFrame(index=text.index)
    frame["material"] = _materials(text, faults)
    for name in ("diameter_nm", "energy_eV", "diameter_uncertainty_nm", "energy_sd_eV"):
        if name in text:
            frame[name] = _numbers(text, name, fields[name], faults)
    for name in ("shape", "energy_kind"):
        if name in text:
            frame[name] = _choices(text, name, fields[name]["constraints"]["enum"], faults)
    collect_faults(path.name, sorted(faults, key=_row_of))
    return _filled(frame, text)[list(fields)]


def _schema() -> dict[str, Any]:
    resources = {resource["name"]: resource for resource in read_package()["resources"]}
    schema: dict[str, Any] = resources["size_gap_records"]["schema"]
    return schema


def _row_of(fault: str) -> int:
    return int(fault.split(":", 1)[0].removeprefix("row "))


def _materials(text: pd.DataFrame, faults: list[str]) -> pd.Series:
    """Return the packaged names of the materials; unknown ones become faults."""
    names = {}
    for index, material in text["material"].items():
        try:
            names[index] = match_material(str(material or ""))
        except (UnknownMaterialError, ValueError):
            faults.append(
                f"row {int(str(index)) + 2}: material expected one of the table "
                f"bulk_semiconductors, found {material!r}"
            )
    return pd.Series(names, dtype=object).reindex(text.index)


def _numbers(text: pd.DataFrame, name: str, field: dict[str, Any], faults: list[str]) -> pd.Series:
    limits = field.get("constraints", {})
    low, high = limits.get("minimum", 0.0), limits.get("maximum", _LARGEST_UNCERTAINTY_nm)
    if name == "diameter_nm":
        # What the model may not learn from is not audited either.
        low, high = SMALLEST_DIAMETER_nm, LARGEST_DIAMETER_nm
    values, found = numeric_column(text, name, low, high, "eV" if name.endswith("eV") else "nm")
    faults += found
    return values


def _choices(text: pd.DataFrame, name: str, allowed: list[str], faults: list[str]) -> pd.Series:
    bad = ~text[name].isin(allowed)
    faults += [
        f"row {index + 2}: {name} expected one of {', '.join(allowed)}, found {text[name][index]!r}"
        for index in text.index[bad]
    ]
    return text[name]


def _filled(frame: pd.DataFrame, text: pd.DataFrame) -> pd.DataFrame:
    """Fill what a user may leave out."""
    numbers = pd.Series([f"own{at + 1:04d}" for at in range(len(frame))], index=frame.index)
    frame["record"] = text["record"].fillna(numbers) if "record" in text else numbers
    bulk = bulk_constants(frame["material"].tolist()).set_index(frame.index)["structure"]
    frame["structure"] = text["structure"].fillna(bulk) if "structure" in text else bulk
    if "diameter_uncertainty_nm" not in frame:
        frame["diameter_uncertainty_nm"] = _RELATIVE_SIZE_UNCERTAINTY * frame["diameter_nm"]
    for name in ("shape", "energy_sd_eV"):
        if name not in frame:
            frame[name] = OPTIONAL[name]
    source = text["source"].fillna(OPTIONAL["source"]) if "source" in text else OPTIONAL["source"]
    return frame.assign(
        source=source,
        diameter_sd_nm=float("nan"),
        size_kind="as stated by the user",
        record_kind="measured point",
        curve=None,
        from_memory=False,
        confidence="medium",
    )
