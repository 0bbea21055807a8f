"""Single answers and tables of them: material and diameter in, calibrated gap and emission out."""

from pathlib import Path

import pandas as pd

from features.errors import FewnmError
from features.size_gap import LARGEST_DIAMETER_nm, SMALLEST_DIAMETER_nm
from screening.candidates import constants_of, pair_frame
from screening.dots import SizeGapModel
from screening.ranking import caution_column, nearest_records
from screening.scores import describe
from screening.user_tables import collect_faults, numeric_column, read_user_table

__all__ = ["PAIR_COLUMNS", "predict_pairs", "read_pairs"]

PAIR_COLUMNS = (
    "material",
    "structure",
    "shape",
    "diameter_nm",
    "optical_gap_eV",
    "optical_gap_low_eV",
    "optical_gap_high_eV",
    "emission_eV",
    "emission_low_eV",
    "emission_high_eV",
    "emission_nm",
    "fwhm_meV",
    "record_state",
    "nearest_source",
    "validity",
    "cautions",
)
"""Columns of an answer, in order."""

_SMALLEST_nm = 0.5
_LARGEST_nm = 200.0


def read_pairs(path: Path) -> pd.DataFrame:
    """Read and check a table of material-diameter pairs.

    Parameters
    ----------
    path : pathlib.Path
        CSV with columns material, diameter_nm and optionally structure, shape.

    Returns
    -------
    pandas.DataFrame

    Raises
    ------
    TableError
        With all faulty rows at once.
    """
    frame = read_user_table(path, ("material", "diameter_nm"), ("structure", "shape"))
    diameters, faults = numeric_column(frame, "diameter_nm", _SMALLEST_nm, _LARGEST_nm, "nm")
    faults += _material_faults(frame["material"])
    collect_faults(path.name, sorted(faults, key=lambda fault: int(fault.split()[1].rstrip(":"))))
    return frame.assign(diameter_nm=diameters)


def _material_faults(materials: pd.Series) -> list[str]:
    wrong: dict[str, str] = {}
    for text in materials.fillna("").unique():
        try:
            constants_of([text])
        except FewnmError as error:
            wrong[text] = str(error)
    return [
        f"row {number}: {wrong[text]}"
        for number, text in enumerate(materials.fillna(""), start=2)
        if text in wrong
    ]


def predict_pairs(
    pairs: pd.DataFrame, model: SizeGapModel, size_spread: float = 0.07
) -> pd.DataFrame:
    """Answer material-diameter pairs.

    Parameters
    ----------
    pairs : pandas.DataFrame
        Columns material, diameter_nm and optionally structure, shape; or as from ``pair_frame``.
    model : SizeGapModel
    size_spread : float, default 0.07
        Standard deviation of the diameter over its mean; sets the linewidth.

    Returns
    -------
    pandas.DataFrame
        Columns `PAIR_COLUMNS`, one row a pair, in the order and with the index given.

    Raises
    ------
    UnknownMaterialError, FormulaError
        If a material is unknown or not a formula.
    """
    ready = pairs if "gap_eV" in pairs else pair_frame(pairs)
    frame = describe(model, ready, size_spread)
    frame["nearest_source"] = nearest_records(frame, model)
    frame["validity"] = _validity(frame, model)
    frame["cautions"] = caution_column(frame["material"])
    return frame[list(PAIR_COLUMNS)]


def _validity(frame: pd.DataFrame, model: SizeGapModel) -> pd.Series:
    """Say where a pair lies outside what the model was checked on."""
    below = frame["diameter_nm"] < SMALLEST_DIAMETER_nm
    above = frame["diameter_nm"] > LARGEST_DIAMETER_nm
    odd = frame["shape"].ne("sphere") & ~frame["shape"].isin(model.rows_["shape"].unique())
    notes = pd.Series("inside the checked range", index=frame.index)
    notes[odd] = "shape without records: taken as a particle of unknown shape effect"
    notes[below] = f"below {SMALLEST_DIAMETER_nm:g} nm, where the model was not checked"
    notes[above] = f"above {LARGEST_DIAMETER_nm:g} nm, where the model was not checked"
    return notes
