"""From the optical gap to the emission: Stokes shift, slope with size, linewidth.

The Stokes shift is absorption minus emission. The linewidth of an ensemble joins the width of
one particle and the spread of sizes: in quadrature for small spreads, by integration over the
size distribution in general. Energies in eV, lengths in nm.
"""

from collections.abc import Callable, Sequence
from functools import cache

import numpy as np
import pandas as pd
from numpy.typing import ArrayLike, NDArray

from features.tables import read_table

__all__ = [
    "FWHM_PER_SD",
    "HC_eV_nm",
    "ensemble_fwhm_eV",
    "integrated_fwhm_eV",
    "stokes_shifts",
    "wavelength_nm",
]

FloatArray = NDArray[np.float64]

FWHM_PER_SD = float(2.0 * np.sqrt(2.0 * np.log(2.0)))
"""Full width at half maximum of a normal distribution over its standard deviation."""
HC_eV_nm = 1239.8419843320026
"""h c, eV nm (exact in the SI of 2019)."""


def wavelength_nm(energy_eV: ArrayLike) -> FloatArray:
    """Return the vacuum wavelength of a photon energy.

    Parameters
    ----------
    energy_eV : array-like
        Energy, eV, > 0; other values give NaN.

    Returns
    -------
    ndarray
        Wavelength, nm.

    Examples
    --------
    >>> round(float(wavelength_nm(2.0)), 1)
    619.9
    """
    energy = np.asarray(energy_eV, dtype=np.float64)
    with np.errstate(divide="ignore"):
        return np.asarray(
            np.where(energy > 0.0, HC_eV_nm / np.where(energy > 0.0, energy, 1.0), np.nan)
        )


@cache
def _by_name() -> pd.DataFrame:
    return read_table("stokes_shifts").set_index("name")


def stokes_shifts(materials: Sequence[str], families: Sequence[str]) -> pd.DataFrame:
    """Return Stokes shift and single-particle linewidth, the family's where a material has none.

    Parameters
    ----------
    materials, families : sequence of str of one length

    Returns
    -------
    pandas.DataFrame
        Columns stokes_shift_eV, stokes_sd_eV, single_dot_fwhm_eV, stokes_scope, stokes_source.

    Examples
    --------
    >>> float(stokes_shifts(["CdSe"], ["II-VI"])["stokes_shift_eV"].iloc[0])
    0.045
    """
    table = _by_name()
    keys = [m if m in table.index else f for m, f in zip(materials, families, strict=True)]
    rows = table.loc[keys].reset_index(drop=True)
    return pd.DataFrame(
        {
            "stokes_shift_eV": rows["stokes_shift_meV"] / 1000.0,
            "stokes_sd_eV": rows["stokes_sd_meV"] / 1000.0,
            "single_dot_fwhm_eV": rows["single_dot_fwhm_meV"] / 1000.0,
            "stokes_scope": rows["scope"],
            "stokes_source": rows["source"],
        }
    )


def ensemble_fwhm_eV(
    single_dot_fwhm_eV: ArrayLike, slope_eV_per_nm: ArrayLike, diameter_sd_nm: ArrayLike
) -> FloatArray:
    """Return the linewidth of an ensemble by adding both widths in quadrature.

    Exact for normal line shapes and an energy that is linear in the diameter over the spread.

    Parameters
    ----------
    single_dot_fwhm_eV : array-like
        Linewidth of one particle, eV, >= 0.
    slope_eV_per_nm : array-like
        Derivative of the energy to the diameter.
    diameter_sd_nm : array-like
        Standard deviation of the diameters, nm, >= 0.

    Returns
    -------
    ndarray
        Full width at half maximum, eV.

    Examples
    --------
    >>> round(float(ensemble_fwhm_eV(0.06, -0.3, 0.25)), 3)
    0.187
    """
    spread = FWHM_PER_SD * np.abs(slope_eV_per_nm) * np.asarray(diameter_sd_nm)
    return np.asarray(np.hypot(np.asarray(single_dot_fwhm_eV, dtype=np.float64), spread))


def integrated_fwhm_eV(
    energy_eV: Callable[[FloatArray], FloatArray],
    diameter_nm: float,
    diameter_sd_nm: float,
    single_dot_fwhm_eV: float,
) -> float:
    """Return the linewidth of an ensemble by integration over normally distributed diameters.

    Parameters
    ----------
    energy_eV : callable
        Emission energy of diameters, both arrays.
    diameter_nm, diameter_sd_nm : float
        Mean and standard deviation of the diameters, nm.
    single_dot_fwhm_eV : float
        Linewidth of one particle, eV, > 0.

    Returns
    -------
    float
        Full width at half maximum of the summed spectrum, eV.

    Examples
    --------
    >>> width = integrated_fwhm_eV(lambda d: 3.0 - 0.3 * d, 4.0, 0.25, 0.06)
    >>> round(width, 3)
    0.187
    """
    offsets = np.linspace(-5.0, 5.0, 801)
    diameters = np.maximum(diameter_nm + offsets * diameter_sd_nm, 0.1)
    centres = np.asarray(energy_eV(diameters))
    weights = np.exp(-0.5 * offsets**2)
    sd = single_dot_fwhm_eV / FWHM_PER_SD
    grid = np.linspace(centres.min() - 4.0 * sd, centres.max() + 4.0 * sd, 4001)
    spectrum = np.exp(-0.5 * ((grid[:, None] - centres) / sd) ** 2) @ weights
    half, top = 0.5 * spectrum.max(), int(spectrum.argmax())
    rise = np.interp(half, spectrum[: top + 1], grid[: top + 1])
    fall = np.interp(half, spectrum[top:][::-1], grid[top:][::-1])
    return float(fall - rise)
