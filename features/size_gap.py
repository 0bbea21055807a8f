"""Training rows of the emission track: cited records as optical gaps with their own noise.

Records below 1.5 nm and magic-size clusters (some hundred atoms and fewer, where band models
have no meaning) stay in the table but do not train. Emission records become optical gaps by the
Stokes shift of their material, whose uncertainty joins the row's noise. A curve's sampled points
share one vote.
"""

import numpy as np
import pandas as pd

from features.emission import stokes_shifts
from features.finite_barrier import finite_barrier_gap_eV
from features.semiconductors import bulk_constants
from features.tables import read_table

__all__ = [
    "LARGEST_DIAMETER_nm",
    "SIZE_BANDS_nm",
    "SMALLEST_DIAMETER_nm",
    "size_band",
    "size_gap_rows",
    "training_rows",
]

SMALLEST_DIAMETER_nm = 1.5
LARGEST_DIAMETER_nm = 20.0
SIZE_BANDS_nm = (2.0, 3.0, 4.0, 6.0, 9.0)
"""Edges of the size ranges that are left out together."""
_SLOPE_STEP = 0.01


def size_band(diameter_nm: object) -> np.ndarray:
    """Return the number of the size range of each diameter.

    Parameters
    ----------
    diameter_nm : array-like
        Diameters, nm.

    Returns
    -------
    ndarray of int

    Examples
    --------
    >>> size_band([1.8, 3.5, 12.0]).tolist()
    [0, 2, 5]
    """
    return np.asarray(np.digitize(np.asarray(diameter_nm, dtype=float), SIZE_BANDS_nm))


def size_gap_rows(records: pd.DataFrame, bulk: pd.DataFrame | None = None) -> pd.DataFrame:
    """Join records with bulk constants and turn them into optical gaps with noise and votes.

    Parameters
    ----------
    records : pandas.DataFrame
        Columns of the table ``size_gap_records``.
    bulk : pandas.DataFrame or None, default None
        Bulk constants of each record, with its index; None for those on record.

    Returns
    -------
    pandas.DataFrame
        The records plus bulk constants, ``optical_gap_eV``, ``noise_eV`` (energy, Stokes shift
        and size uncertainty in quadrature) and ``vote`` (1 for a point, 1/n for each of the n
        samples of a curve), with the caller's index.
    """
    if bulk is None:
        bulk = bulk_constants(records["material"].tolist()).set_index(records.index)
    rows = records.join(bulk.drop(columns=["material", "structure", "source"]))
    stokes = stokes_shifts(rows["material"].tolist(), rows["family"].tolist())
    stokes = stokes.set_index(rows.index)
    emits = rows["energy_kind"].eq("emission")
    rows["optical_gap_eV"] = rows["energy_eV"] + np.where(emits, stokes["stokes_shift_eV"], 0.0)
    by_size = _slope_eV_per_nm(rows) * rows["diameter_uncertainty_nm"]
    by_stokes = np.where(emits, stokes["stokes_sd_eV"], 0.0)
    rows["noise_eV"] = np.sqrt(rows["energy_sd_eV"] ** 2 + by_size**2 + by_stokes**2)
    curve = rows["curve"].fillna("")
    shared = curve.map(curve.value_counts())
    rows["vote"] = np.where(curve.eq(""), 1.0, 1.0 / shared)
    return rows


def _slope_eV_per_nm(rows: pd.DataFrame) -> pd.Series:
    """Return the size of the finite-barrier model's slope with diameter."""
    constants = [rows[c] for c in ("gap_eV", "electron_mass_m0", "hole_mass_m0", "dielectric")]
    diameter = rows["diameter_nm"]
    above = finite_barrier_gap_eV(diameter * (1.0 + _SLOPE_STEP), *constants)
    below = finite_barrier_gap_eV(diameter * (1.0 - _SLOPE_STEP), *constants)
    return pd.Series(np.abs(above - below), index=rows.index) / (2.0 * _SLOPE_STEP * diameter)


def training_rows() -> pd.DataFrame:
    """Return the packaged records inside the model's size range, ready to train on.

    Returns
    -------
    pandas.DataFrame
        As `size_gap_rows`, indexed by position.

    Examples
    --------
    >>> rows = training_rows()
    >>> bool((rows["diameter_nm"] >= SMALLEST_DIAMETER_nm).all())
    True
    """
    records = read_table("size_gap_records")
    inside = records["diameter_nm"].between(SMALLEST_DIAMETER_nm, LARGEST_DIAMETER_nm)
    inside &= records["record_kind"].ne("magic-size cluster")
    return size_gap_rows(records[inside].reset_index(drop=True))
