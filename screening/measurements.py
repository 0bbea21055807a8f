"""Results of a laboratory: read strictly, slips caught, turned into rows to train on.

The table is the record and is never altered. Columns: material, diameter_nm, property, value, and
optionally diameter_sd_nm, value_sd, method, date, sample, structure, shape. Properties:
``optical_gap_eV``, ``emission_eV``, ``emission_nm``.
"""

from collections.abc import Iterator
from datetime import date
from pathlib import Path

import numpy as np
import pandas as pd

from features.emission import HC_eV_nm
from features.errors import FewnmError
from features.size_gap import LARGEST_DIAMETER_nm, SMALLEST_DIAMETER_nm, size_gap_rows
from screening.candidates import constants_of
from screening.user_tables import collect_faults, numeric_column, read_user_table

__all__ = ["OPTIONAL", "PROPERTIES", "REQUIRED", "measured_rows", "read_measurements"]

REQUIRED = ("material", "diameter_nm", "property", "value")
OPTIONAL = ("diameter_sd_nm", "value_sd", "method", "date", "sample", "structure", "shape")
PROPERTIES = ("optical_gap_eV", "emission_eV", "emission_nm")

_RELATIVE_SIZE_SD = 0.05
_ENERGY_SD_EV = 0.02
_CONTRADICTION_SIGMAS = 5.0
_ENERGIES_EV = (0.05, 8.0)
_WAVELENGTHS_nm = (150.0, 20_000.0)


def read_measurements(path: Path) -> pd.DataFrame:
    """Read and check a table of results.

    Parameters
    ----------
    path : pathlib.Path
        CSV, see the module's text.

    Returns
    -------
    pandas.DataFrame
        Columns of the file with numbers parsed, plus energy_eV and energy_sd_eV, energy_kind
        (``emission`` or ``absorption``) and diameter_uncertainty_nm. A size without an uncertainty
        is taken as known to 5 %, an energy to 0.02 eV (common practice).

    Raises
    ------
    TableError
        With all faulty rows at once: values out of range, units that look swapped, duplicates,
        contradictions.
    """
    frame = read_user_table(path, REQUIRED, OPTIONAL)
    diameter, faults = numeric_column(
        frame, "diameter_nm", SMALLEST_DIAMETER_nm, LARGEST_DIAMETER_nm, "nm"
    )
    faults = [_hint_angstrom(fault, frame) for fault in faults]
    value, wrong = numeric_column(frame, "value", 1e-3, 1e6, "")
    faults += wrong
    spreads: dict[str, pd.Series] = {}
    for name, high in (("diameter_sd_nm", 10.0), ("value_sd", 1e4)):
        spreads[name], wrong = _optional_numbers(frame, name, high)
        faults += wrong
    faults += [*_property_faults(frame, value), *_material_faults(frame), *_date_faults(frame)]
    checked = frame.assign(diameter_nm=diameter, value=value, **spreads)
    if not faults:
        checked = _with_energy(checked)
        faults += [*_duplicates(checked), *_contradictions(checked)]
    collect_faults(path.name, sorted(faults, key=_row_number))
    return checked


def _row_number(fault: str) -> int:
    return int(fault.split()[1].rstrip(":"))


def _hint_angstrom(fault: str, frame: pd.DataFrame) -> str:
    """Ask about the unit where a diameter would make sense in angstroms."""
    text = frame["diameter_nm"][_row_number(fault) - 2]
    try:
        tenth = float(text) / 10.0
    except (TypeError, ValueError):
        return fault
    fits = SMALLEST_DIAMETER_nm <= tenth <= LARGEST_DIAMETER_nm
    return f"{fault}; is this in angstroms? then write {tenth:g}" if fits else fault


def _optional_numbers(frame: pd.DataFrame, name: str, high: float) -> tuple[pd.Series, list[str]]:
    """Parse an optional column of uncertainties; empty cells stay missing."""
    empty = pd.Series(np.nan, index=frame.index)
    if name not in frame:
        return empty, []
    given = frame[frame[name].notna()]
    values, faults = numeric_column(given, name, 1e-6, high, "")
    return empty.where(frame[name].isna(), values.reindex(frame.index)), faults


def _property_faults(frame: pd.DataFrame, value: pd.Series) -> Iterator[str]:
    for at, (name, number) in enumerate(zip(frame["property"], value, strict=True), start=2):
        if name not in PROPERTIES:
            yield f"row {at}: property expected one of {', '.join(PROPERTIES)}, found {name!r}"
            continue
        low, high = _WAVELENGTHS_nm if name == "emission_nm" else _ENERGIES_EV
        if np.isfinite(number) and not low <= number <= high:
            unit = name.rsplit("_", 1)[1]
            other = "eV" if unit == "nm" else "nm"
            yield (
                f"row {at}: value expected {low:g} to {high:g} {unit}, found {number:g}; is this "
                f"in {other}?"
            )


def _material_faults(frame: pd.DataFrame) -> Iterator[str]:
    known: dict[str, str] = {}
    for at, text in enumerate(frame["material"].fillna(""), start=2):
        if text not in known:
            try:
                constants_of([text])
                known[text] = ""
            except FewnmError as error:
                known[text] = str(error)
        if known[text]:
            yield f"row {at}: {known[text]}"


def _date_faults(frame: pd.DataFrame) -> Iterator[str]:
    for at, text in enumerate(frame.get("date", pd.Series(dtype=object)), start=2):
        if text is None or pd.isna(text):
            continue
        try:
            date.fromisoformat(str(text))
        except ValueError:
            yield f"row {at}: date expected as 2026-01-31, found {str(text)[:20]!r}"


def _with_energy(frame: pd.DataFrame) -> pd.DataFrame:
    """Add energies in eV with their uncertainty, whatever the property was."""
    in_nm = frame["property"].eq("emission_nm")
    energy = frame["value"].where(~in_nm, HC_eV_nm / frame["value"])
    sd = frame["value_sd"].where(~in_nm, energy * frame["value_sd"] / frame["value"])
    absorbs = frame["property"].eq("optical_gap_eV")
    size_sd = frame["diameter_sd_nm"].fillna(_RELATIVE_SIZE_SD * frame["diameter_nm"])
    return frame.assign(
        energy_eV=energy,
        energy_sd_eV=sd.fillna(_ENERGY_SD_EV),
        energy_kind=np.where(absorbs, "absorption", "emission"),
        diameter_uncertainty_nm=size_sd,
    )


def _duplicates(frame: pd.DataFrame) -> Iterator[str]:
    columns = ["material", "diameter_nm", "property", "value"]
    columns += [name for name in ("sample", "date", "method") if name in frame]
    first: dict[tuple[object, ...], int] = {}
    for at, row in enumerate(frame[columns].itertuples(index=False, name=None), start=2):
        if row in first:
            yield f"row {at}: repeats row {first[row]}; keep one of them"
        first.setdefault(row, at)


def _contradictions(frame: pd.DataFrame) -> Iterator[str]:
    """Yield rows of one sample and property that differ by more than their errors allow."""
    if "sample" not in frame:
        return
    named = frame[frame["sample"].notna()]
    for (sample, name), rows in named.groupby(["sample", "property"], sort=True):
        if len(rows[["material", "diameter_nm"]].drop_duplicates()) > 1:
            at = int(rows.index[1]) + 2
            yield f"row {at}: sample {sample!r} has two materials or diameters"
            continue
        middle = rows["energy_eV"].median()
        off = (rows["energy_eV"] - middle).abs() / (np.sqrt(2.0) * rows["energy_sd_eV"])
        for index in rows.index[off > _CONTRADICTION_SIGMAS]:
            yield (
                f"row {int(index) + 2}: {name} of sample {sample!r} contradicts its other rows "
                f"({rows['energy_eV'][index]:.3f} against {middle:.3f} eV)"
            )


def measured_rows(frame: pd.DataFrame, source: str = "own results") -> pd.DataFrame:
    """Turn checked results into rows that the emission-track model can learn from.

    Parameters
    ----------
    frame : pandas.DataFrame
        As from `read_measurements`.
    source : str, default "own results"
        Name of the laboratory's series; rows of one source share an offset.

    Returns
    -------
    pandas.DataFrame
        Columns as of ``features.size_gap.training_rows``, in the order given.
    """
    bulk = constants_of(frame["material"].tolist()).set_index(frame.index)
    plain = frame["shape"] if "shape" in frame else pd.Series(index=frame.index, dtype=object)
    records = pd.DataFrame(
        {
            "record": [f"{source} {at}" for at in range(1, len(frame) + 1)],
            "material": bulk["material"],
            "structure": bulk["structure"],
            "shape": plain.fillna("sphere"),
            "diameter_nm": frame["diameter_nm"],
            "diameter_uncertainty_nm": frame["diameter_uncertainty_nm"],
            "energy_eV": frame["energy_eV"],
            "energy_kind": frame["energy_kind"],
            "energy_sd_eV": frame["energy_sd_eV"],
            "record_kind": "measured point",
            "curve": None,
            "source": source,
            "from_memory": False,
            "confidence": "high",
        }
    )
    return size_gap_rows(records, bulk)
