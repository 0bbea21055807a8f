"""What uncertain bulk constants do to the gap of a particle: closed form and sampling.

The bulk gap has a standard deviation in eV, the masses and the dielectric constant have one of
their logarithm. Constants are taken as independent, which overstates the spread somewhat: a wider
gap goes with a heavier electron.
"""

from collections.abc import Callable

import numpy as np
import pandas as pd

from features.finite_barrier import finite_barrier_gap_eV
from screening.bulk_estimate import QUANTITIES
from screening.covariance import FloatArray

__all__ = ["particle_gap_spread_eV", "sampled_particle_gap_eV"]

GapFunction = Callable[..., FloatArray]
_STEP = 0.05


def _gap(frame: pd.DataFrame, function: GapFunction, factors: dict[str, FloatArray]) -> FloatArray:
    constants = [frame[q].to_numpy(dtype=np.float64) * factors.get(q, 1.0) for q in QUANTITIES]
    size, gap = (frame[c].to_numpy(dtype=np.float64) for c in ("diameter_nm", "gap_eV"))
    return function(size, gap, *constants)


def particle_gap_spread_eV(
    frame: pd.DataFrame, function: GapFunction = finite_barrier_gap_eV
) -> FloatArray:
    """Return the standard deviation of the particle's gap that the bulk constants leave.

    Parameters
    ----------
    frame : pandas.DataFrame
        Columns diameter_nm, gap_eV, gap_sd_eV, and each of `QUANTITIES` with its ``_log_sd``.
    function : callable, default finite_barrier_gap_eV
        Gap of diameter, bulk gap, electron mass, hole mass and dielectric constant.

    Returns
    -------
    ndarray of shape (n_rows,)
        To first order in the logarithms; good while these spread by less than about 0.5.

    Examples
    --------
    >>> frame = pd.DataFrame({"diameter_nm": [3.0, 8.0], "gap_eV": 1.7, "gap_sd_eV": 0.0})
    >>> for name, value in zip(QUANTITIES, (0.13, 0.45, 6.2)):
    ...     frame[name], frame[f"{name}_log_sd"] = value, 0.1
    >>> wide, narrow = particle_gap_spread_eV(frame)
    >>> bool(wide > narrow > 0.0)
    True
    """
    variance = frame["gap_sd_eV"].to_numpy(dtype=np.float64) ** 2
    for quantity in QUANTITIES:
        up, down = (
            _gap(frame, function, {quantity: np.exp(np.full(len(frame), step))})
            for step in (_STEP, -_STEP)
        )
        slope = (up - down) / (2.0 * _STEP)
        variance = variance + (slope * frame[f"{quantity}_log_sd"].to_numpy()) ** 2
    return np.asarray(np.sqrt(variance), dtype=np.float64)


def sampled_particle_gap_eV(
    frame: pd.DataFrame,
    n_samples: int = 2000,
    seed: int = 0,
    function: GapFunction = finite_barrier_gap_eV,
) -> FloatArray:
    """Return particle gaps for bulk constants drawn from their distributions.

    Parameters
    ----------
    frame : pandas.DataFrame
        As for `particle_gap_spread_eV`.
    n_samples : int, default 2000
    seed : int, default 0
    function : callable, default finite_barrier_gap_eV

    Returns
    -------
    ndarray of shape (n_samples, n_rows)
        Normal draws of the bulk gap, log-normal ones of the other constants.
    """
    rng = np.random.default_rng(seed)
    shape = (n_samples, len(frame))
    tiled = pd.concat([frame] * n_samples, ignore_index=True)
    factors = {
        quantity: np.exp(frame[f"{quantity}_log_sd"].to_numpy() * rng.normal(size=shape)).ravel()
        for quantity in QUANTITIES
    }
    shift = frame["gap_sd_eV"].to_numpy() * rng.normal(size=shape)
    return np.asarray(_gap(tiled, function, factors).reshape(shape) + shift, dtype=np.float64)
