"""Approximate colour of an emission line on a screen.

A Gaussian line of the predicted width is weighed with the CIE 1931 colour-matching functions in
the analytic form of Wyman, Sloan and Shirley, J. Comput. Graph. Tech. 2, 1 (2013), and mixed with
white until it fits into sRGB (IEC 61966-2-1): no spectral colour fits as it is.
"""

import numpy as np
from numpy.typing import ArrayLike, NDArray

from features.emission import FWHM_PER_SD, HC_eV_nm

__all__ = ["chromaticity", "colour_matching", "emission_colour"]

FloatArray = NDArray[np.float64]

_LOBES = (
    ((1.056, 599.8, 37.9, 31.0), (0.362, 442.0, 16.0, 26.7), (-0.065, 501.1, 20.4, 26.2)),
    ((0.821, 568.8, 46.9, 40.5), (0.286, 530.9, 16.3, 31.1)),
    ((1.217, 437.0, 11.8, 36.0), (0.681, 459.0, 26.0, 13.8)),
)
_TO_SRGB = np.array(
    [[3.2406, -1.5372, -0.4986], [-0.9689, 1.8758, 0.0415], [0.0557, -0.2040, 1.0570]]
)
_VISIBLE_nm = (380.0, 780.0)


def colour_matching(wavelength_nm: ArrayLike) -> FloatArray:
    """Return the CIE 1931 colour-matching functions.

    Parameters
    ----------
    wavelength_nm : array-like of shape (n,)
        Wavelengths, nm.

    Returns
    -------
    ndarray of shape (n, 3)
        x, y and z, within about 0.02 of the tabulated functions.

    Examples
    --------
    >>> bool(abs(colour_matching([555.0])[0, 1] - 1.0) < 0.02)
    True
    """
    wave = np.asarray(wavelength_nm, dtype=np.float64)
    columns = []
    for lobes in _LOBES:
        total = np.zeros_like(wave)
        for height, centre, left, right in lobes:
            width = np.where(wave < centre, left, right)
            total = total + height * np.exp(-0.5 * ((wave - centre) / width) ** 2)
        columns.append(total)
    return np.stack(columns, axis=-1)


def chromaticity(wavelength_nm: float) -> tuple[float, float]:
    """Return the CIE x and y of one wavelength."""
    xyz = colour_matching([wavelength_nm])[0]
    return float(xyz[0] / xyz.sum()), float(xyz[1] / xyz.sum())


def emission_colour(energy_eV: float, fwhm_eV: float) -> str:
    """Return the approximate screen colour of an emission line.

    Parameters
    ----------
    energy_eV, fwhm_eV : float
        Centre and full width at half maximum, eV.

    Returns
    -------
    str
        ``#rrggbb``, or empty where the line lies outside 380 to 780 nm.

    Examples
    --------
    >>> emission_colour(0.9, 0.1)
    ''
    """
    if energy_eV <= 0.0 or not _VISIBLE_nm[0] <= HC_eV_nm / energy_eV <= _VISIBLE_nm[1]:
        return ""
    wave = np.linspace(*_VISIBLE_nm, 401)
    sd = max(fwhm_eV, 0.005) / FWHM_PER_SD
    line = np.exp(-0.5 * ((HC_eV_nm / wave - energy_eV) / sd) ** 2)
    linear = _TO_SRGB @ (line @ colour_matching(wave))
    linear = linear - min(float(linear.min()), 0.0)
    linear = linear / linear.max()
    coded = np.where(linear <= 0.0031308, 12.92 * linear, 1.055 * linear ** (1 / 2.4) - 0.055)
    red, green, blue = np.round(255 * np.clip(coded, 0.0, 1.0)).astype(int)
    return f"#{red:02x}{green:02x}{blue:02x}"
