"""Adsorption energies for tables of surfaces, and of particles by site class."""

from pathlib import Path

import pandas as pd

from features.errors import FewnmError, TableError, explain
from features.particle import site_table
from features.particle_metal import metal_lattice
from screening.adsorption import AdsorptionModel, adsorption_model
from screening.catalyst_candidates import USUAL_SHAPES
from screening.user_tables import collect_faults, numeric_column, read_user_table

__all__ = ["answer_surfaces"]

_SMALLEST_nm = 0.5
_LARGEST_nm = 20.0


def answer_surfaces(path: Path) -> pd.DataFrame:
    """Answer a table of adsorption questions, in the order given.

    Parameters
    ----------
    path : pathlib.Path
        CSV with columns material, adsorbate and optionally structure, facet (an extended surface,
        its most stable site), or diameter_nm and shape (a particle, one row a site class).

    Returns
    -------
    pandas.DataFrame
        The questions with adsorption_energy_eV, its 90 % ends, standard deviation, record_state
        and nearest_source.

    Raises
    ------
    TableError
        With all faulty rows at once.
    """
    optional = ("structure", "facet", "diameter_nm", "shape")
    frame = read_user_table(path, ("material", "adsorbate"), optional)
    frame[["material", "adsorbate"]] = frame[["material", "adsorbate"]].fillna("")
    model = adsorption_model()
    if "diameter_nm" not in frame:
        return _surfaces(path.name, model, frame)
    return _particles(path.name, model, frame)


def _surfaces(where: str, model: AdsorptionModel, frame: pd.DataFrame) -> pd.DataFrame:
    try:
        answer = model.predict_surfaces(frame)
    except FewnmError:
        collect_faults(where, _row_faults(model, frame))
        raise
    return frame.join(answer)


def _row_faults(model: AdsorptionModel, frame: pd.DataFrame) -> list[str]:
    """Ask each row alone, to name every faulty one."""
    faults = []
    for position in range(len(frame)):
        try:
            model.predict_surfaces(frame.iloc[[position]])
        except FewnmError as error:
            # asked alone every row is the first; its place in the table is what helps
            faults.append(f"row {position + 2}: {str(error).replace(' at row 1', '', 1)}")
    return faults


def _particles(where: str, model: AdsorptionModel, frame: pd.DataFrame) -> pd.DataFrame:
    if "shape" not in frame:
        frame["shape"] = None
    frame["diameter_nm"], faults = numeric_column(
        frame, "diameter_nm", _SMALLEST_nm, _LARGEST_nm, "nm"
    )
    collect_faults(where, faults)
    answers = []
    for number, row in enumerate(frame.to_dict("records"), start=2):
        try:
            answers.append(_sites(model, {str(name): value for name, value in row.items()}))
        except FewnmError as error:
            faults.append(f"row {number}: {error}")
    collect_faults(where, faults)
    return pd.concat(answers, ignore_index=True)


def _sites(model: AdsorptionModel, row: dict[str, object]) -> pd.DataFrame:
    """Return one row a site class of one particle."""
    material, own = str(row["material"]), metal_lattice(str(row["material"])).structure
    _check_structure(material, row.get("structure"), own)
    shape = USUAL_SHAPES[own] if _is_empty(row["shape"]) else str(row["shape"])
    sites = site_table(material, shape, float(str(row["diameter_nm"])))
    energies = model.predict_sites(material, str(row["adsorbate"]), sites)
    asked = {"material": material, "shape": shape, "diameter_nm": row["diameter_nm"]}
    head = pd.DataFrame([asked | {"adsorbate": row["adsorbate"]}] * len(sites))
    return pd.concat([head, sites, energies], axis=1)


def _is_empty(cell: object) -> bool:
    return cell is None or cell == "" or cell != cell  # noqa: PLR0124 - a missing cell is no number


def _check_structure(material: str, structure: object, own: str) -> None:
    """Refuse a particle of another structure than the metal's."""
    if not _is_empty(structure) and structure != own:
        raise TableError(
            explain(
                f"structure does not fit {material}",
                expected=f"{own}, or empty",
                found=repr(structure),
            )
        )
