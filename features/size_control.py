"""What a spread of sizes does to a batch: share in a window, linewidth, and the spread needed.

A batch is described by its mean diameter and by the shape of its size distribution, kept as
diameters over their mean with weights. Lengths in nm, energies in eV. Every figure has a closed
form for normal sizes and an energy that is linear in the diameter over the spread; the integrals
over the distribution hold for any shape.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.special import ndtr, ndtri

from features.emission import FWHM_PER_SD
from features.errors import PhysicsRangeError, explain

__all__ = [
    "SizeShape",
    "fraction_inside",
    "fraction_inside_integrated",
    "measured_sizes",
    "needed_size_spread",
    "normal_sizes",
    "room_for_share",
    "spread_for_share",
]

FloatArray = NDArray[np.float64]

_NODES = np.linspace(-6.0, 6.0, 241)
_BISECTIONS = 60
_MOST_SIZES = 400


@dataclass(frozen=True)
class SizeShape:
    """Shape of a size distribution, free of its mean.

    Parameters
    ----------
    ratio : ndarray of shape (n_sizes,)
        Diameter over the mean diameter, > 0.
    weight : ndarray of shape (n_sizes,)
        Share of particles; sums to 1.
    """

    ratio: FloatArray
    weight: FloatArray

    @property
    def spread(self) -> float:
        """Standard deviation of the diameter over its mean."""
        return float(np.sqrt(self.weight @ (self.ratio - 1.0) ** 2))


def normal_sizes(spread: float) -> SizeShape:
    """Return normally distributed sizes on a fine, even grid.

    Parameters
    ----------
    spread : float
        Standard deviation over the mean, > 0 and at most 0.5. Nodes are kept at 1 % of the mean
        or above.

    Returns
    -------
    SizeShape

    Raises
    ------
    PhysicsRangeError
        If the spread is out of range.

    Examples
    --------
    >>> round(normal_sizes(0.06).spread, 6)
    0.06
    """
    if not 0.0 < spread <= 0.5:
        raise PhysicsRangeError(
            explain("size spread out of range", expected="above 0, at most 0.5", found=f"{spread}")
        )
    weights = np.exp(-0.5 * _NODES**2)
    return SizeShape(np.maximum(1.0 + spread * _NODES, 0.01), weights / weights.sum())


def measured_sizes(diameter_nm: ArrayLike, count: ArrayLike | None = None) -> SizeShape:
    """Return the shape of a measured size distribution.

    Parameters
    ----------
    diameter_nm : array-like of shape (n_sizes,)
        Diameters, nm, > 0.
    count : array-like of shape (n_sizes,), optional
        Particles of each size, >= 0; one each without it.

    Returns
    -------
    SizeShape
        More than 400 sizes are gathered into 400 bins.

    Raises
    ------
    PhysicsRangeError
        If a diameter is not positive, a count is negative, or fewer than two sizes occur.

    Examples
    --------
    >>> shape = measured_sizes([3.8, 4.0, 4.2], [1, 2, 1])
    >>> shape.ratio.tolist(), round(shape.spread, 4)
    ([0.95, 1.0, 1.05], 0.0354)
    """
    diameter = np.asarray(diameter_nm, dtype=np.float64)
    weight = np.ones_like(diameter) if count is None else np.asarray(count, dtype=np.float64)
    sound = np.isfinite(diameter).all() and np.isfinite(weight).all()
    if not sound or (diameter <= 0.0).any() or (weight < 0.0).any():
        raise PhysicsRangeError(
            explain("sizes out of range", expected="finite diameters > 0 and counts >= 0")
        )
    used = weight > 0.0
    if len(np.unique(diameter[used])) < 2:
        raise PhysicsRangeError(
            explain("too few sizes", expected="at least two different diameters with a count")
        )
    weight = weight[used] / weight[used].sum()
    ratio = diameter[used] / (weight @ diameter[used])
    return SizeShape(ratio, weight) if len(ratio) <= _MOST_SIZES else _binned(ratio, weight)


def _binned(ratio: FloatArray, weight: FloatArray) -> SizeShape:
    """Gather many sizes into narrow bins, each at its own mean."""
    edges = np.linspace(ratio.min(), ratio.max(), _MOST_SIZES + 1)
    place = np.clip(np.searchsorted(edges, ratio, side="right") - 1, 0, _MOST_SIZES - 1)
    share = np.bincount(place, weight, minlength=_MOST_SIZES)
    filled = share > 0.0
    mean = np.bincount(place, weight * ratio, minlength=_MOST_SIZES)[filled] / share[filled]
    return SizeShape(mean, share[filled].astype(np.float64))


def fraction_inside(
    low_eV: ArrayLike, high_eV: ArrayLike, centre_eV: ArrayLike, sd_eV: ArrayLike
) -> FloatArray:
    """Return the share of a normal distribution between two energies.

    Parameters
    ----------
    low_eV, high_eV : array-like
        Window, eV.
    centre_eV, sd_eV : array-like
        Mean and standard deviation, eV; a standard deviation of 0 is a step.

    Returns
    -------
    ndarray
        Share, 0 to 1.

    Examples
    --------
    >>> round(float(fraction_inside(-1.0, 1.0, 0.0, 1.0)), 3)
    0.683
    """
    sd = np.maximum(np.asarray(sd_eV, dtype=np.float64), 1e-12)
    centre = np.asarray(centre_eV, dtype=np.float64)
    upper = ndtr((np.asarray(high_eV, dtype=np.float64) - centre) / sd)
    lower = ndtr((np.asarray(low_eV, dtype=np.float64) - centre) / sd)
    return np.asarray(upper - lower)


def fraction_inside_integrated(
    window_eV: tuple[float, float],
    centre_eV: ArrayLike,
    sd_eV: ArrayLike,
    slope_eV: ArrayLike,
    sizes: SizeShape,
) -> FloatArray:
    """Return the expected share of particles in a window by integration over the sizes.

    Parameters
    ----------
    window_eV : tuple of float
        Window, eV.
    centre_eV, sd_eV : array-like of shape (n,)
        Energy at the mean diameter and its standard deviation from all other causes, eV.
    slope_eV : array-like of shape (n,)
        Diameter times the derivative of the energy to the diameter, eV.
    sizes : SizeShape

    Returns
    -------
    ndarray of shape (n,)

    Examples
    --------
    >>> share = fraction_inside_integrated((1.9, 2.1), [2.0], [0.03], [-0.6], normal_sizes(0.06))
    >>> bool(abs(share[0] - fraction_inside(1.9, 2.1, 2.0, np.hypot(0.03, 0.036))) < 1e-6)
    True
    """
    centre = np.atleast_1d(np.asarray(centre_eV, dtype=np.float64))[:, None]
    slope = np.atleast_1d(np.asarray(slope_eV, dtype=np.float64))[:, None]
    sd = np.atleast_1d(np.asarray(sd_eV, dtype=np.float64))[:, None]
    shifted = centre + slope * (sizes.ratio - 1.0)
    return np.asarray(fraction_inside(*window_eV, shifted, sd) @ sizes.weight)


def room_for_share(half_window_eV: ArrayLike, size_sd_eV: ArrayLike, share: float) -> FloatArray:
    """Return how far a batch's mean may lie from the window's centre for a share to be inside.

    Solves Phi((h - x) / s) - Phi((-h - x) / s) = share for x >= 0 by bisection.

    Parameters
    ----------
    half_window_eV : array-like
        Half the width of the window, h, eV, > 0.
    size_sd_eV : array-like
        Standard deviation of the energies of the particles, s, eV, >= 0.
    share : float
        Share of particles wanted inside, above 0, below 1.

    Returns
    -------
    ndarray
        Largest distance, eV; NaN where even a centred batch holds a smaller share.

    Raises
    ------
    PhysicsRangeError
        If the share is out of range.

    Examples
    --------
    >>> float(room_for_share(0.05, 0.0, 0.5).round(6)), float(room_for_share(0.05, 0.5, 0.5))
    (0.05, nan)
    """
    if not 0.0 < share < 1.0:
        raise PhysicsRangeError(
            explain("share out of range", expected="above 0, below 1", found=f"{share}")
        )
    half, sd = np.broadcast_arrays(
        np.asarray(half_window_eV, dtype=np.float64),
        np.maximum(np.asarray(size_sd_eV, dtype=np.float64), 1e-12),
    )
    near, far = np.zeros(half.shape), half + np.maximum(-ndtri(share), 0.0) * sd + 1e-9
    for _ in range(_BISECTIONS):
        middle = 0.5 * (near + far)
        enough = fraction_inside(-half, half, middle, sd) >= share
        near, far = np.where(enough, middle, near), np.where(enough, far, middle)
    return np.where(fraction_inside(-half, half, 0.0, sd) >= share, near, np.nan)


def needed_size_spread(
    fwhm_eV: ArrayLike, single_dot_fwhm_eV: ArrayLike, slope_eV: ArrayLike
) -> FloatArray:
    """Return the size spread at which an ensemble just meets a linewidth.

    Inverse of ``features.emission.ensemble_fwhm_eV``.

    Parameters
    ----------
    fwhm_eV : array-like
        Linewidth wanted, eV, > 0.
    single_dot_fwhm_eV : array-like
        Linewidth of one particle, eV, >= 0.
    slope_eV : array-like
        Diameter times the derivative of the energy to the diameter, eV.

    Returns
    -------
    ndarray
        Standard deviation of the diameter over its mean; NaN where one particle is already wider,
        infinite where the energy does not depend on the size.

    Examples
    --------
    >>> round(float(needed_size_spread(0.1, 0.06, -0.8)), 4)
    0.0425
    """
    wanted = np.asarray(fwhm_eV, dtype=np.float64)
    left = wanted**2 - np.asarray(single_dot_fwhm_eV, dtype=np.float64) ** 2
    per_spread = FWHM_PER_SD * np.abs(np.asarray(slope_eV, dtype=np.float64))
    with np.errstate(invalid="ignore", divide="ignore"):
        return np.asarray(np.where(left >= 0.0, np.sqrt(left) / per_spread, np.nan))


def spread_for_share(half_window_eV: ArrayLike, slope_eV: ArrayLike, share: float) -> FloatArray:
    """Return the largest size spread at which a centred batch holds a share inside.

    Solves 2 Phi(h / s) - 1 = share for the standard deviation of the energies.

    Parameters
    ----------
    half_window_eV : array-like
        Half the width of the window, eV, > 0.
    slope_eV : array-like
        Diameter times the derivative of the energy to the diameter, eV.
    share : float
        Share of particles wanted inside, above 0, below 1.

    Returns
    -------
    ndarray
        Standard deviation of the diameter over its mean; infinite where the energy does not depend
        on the size.

    Raises
    ------
    PhysicsRangeError
        If the share is out of range.

    Examples
    --------
    >>> round(float(spread_for_share(0.05, -0.8, 0.5)), 4)
    0.0927
    """
    if not 0.0 < share < 1.0:
        raise PhysicsRangeError(
            explain("share out of range", expected="above 0, below 1", found=f"{share}")
        )
    sd = np.asarray(half_window_eV, dtype=np.float64) / ndtri(0.5 * (1.0 + share))
    with np.errstate(divide="ignore"):
        return np.asarray(sd / np.abs(np.asarray(slope_eV, dtype=np.float64)))
