"""Published linear relations between adsorption energies, and with generalised coordination.

Energies in eV against the common references of `features.adsorption`; relations come from the table
``scaling_relations``.
"""

from typing import Any

import numpy as np
from numpy.typing import NDArray

from features.errors import SpecificationError, explain
from features.tables import read_table

__all__ = ["coordination_slope", "scaled_energy_eV"]

FloatArray = NDArray[np.float64]


def scaled_energy_eV(
    descriptor_eV: Any, adsorbate: str, descriptor: str, kind: str = "adsorbate scaling"
) -> tuple[FloatArray, float]:
    """Estimate one adsorbate's energy from another's by a tabulated linear relation.

    Parameters
    ----------
    descriptor_eV : float or array-like
    adsorbate, descriptor : str
        Such as ``"OH"`` from ``"O"``, or ``"OOH"`` from ``"OH"``.
    kind : {"adsorbate scaling", "free-energy scaling"}, default "adsorbate scaling"

    Returns
    -------
    energy_eV : ndarray
    residual_sd_eV : float
        Scatter about the line; NaN where the source gives none.

    Raises
    ------
    SpecificationError
        If no such relation is tabulated.

    Examples
    --------
    >>> energy, sd = scaled_energy_eV(0.86, "OOH", "OH", kind="free-energy scaling")
    >>> round(float(energy), 2)
    4.06
    """
    table = read_table("scaling_relations")
    rows = table[
        (table["kind"] == kind)
        & (table["adsorbate"] == adsorbate)
        & (table["descriptor"] == descriptor)
    ]
    if rows.empty:
        raise SpecificationError(
            explain("no linear relation", where=kind, found=f"{adsorbate} from {descriptor}")
        )
    row = rows.iloc[0]
    line = float(row["slope"]) * np.asarray(descriptor_eV, dtype=np.float64)
    return line + float(row["intercept_eV"]), float(row["residual_sd_eV"])


def coordination_slope(metal: str, adsorbate: str) -> tuple[float, float] | None:
    """Return a published slope of the adsorption energy with generalised coordination.

    Parameters
    ----------
    metal, adsorbate : str

    Returns
    -------
    (slope, residual_sd_eV) or None
        eV per unit and eV, the mean over sources; None if nothing is published in the table.

    Examples
    --------
    >>> round(coordination_slope("Pt", "OH")[0], 2)
    0.19
    """
    table = read_table("scaling_relations")
    rows = table[
        (table["kind"] == "generalised coordination")
        & (table["metal"] == metal)
        & (table["adsorbate"] == adsorbate)
    ]
    if rows.empty:
        return None
    return float(rows["slope"].mean()), float(rows["residual_sd_eV"].mean())
