"""Three different questions about a candidate, all answered.

The chance that the batch's mean lands in the window (model uncertainty), the fraction of
particles expected in it (model uncertainty and size spread), and how far the diameter may drift
before the batch leaves it. Energies in eV, lengths in nm.
"""

from dataclasses import dataclass

import numpy as np
import pandas as pd
from scipy.special import ndtri

from features.emission import ensemble_fwhm_eV, stokes_shifts, wavelength_nm
from features.size_control import (
    SizeShape,
    fraction_inside,
    fraction_inside_integrated,
    room_for_share,
)
from screening.calibration import GroupCalibration
from screening.covariance import FloatArray
from screening.dots import SizeGapModel

__all__ = ["Window", "describe", "score"]

_SLOPE_STEP = 0.01
_LEVEL = 0.9


@dataclass(frozen=True)
class Window:
    """Target window: quantity, and ends in eV."""

    quantity: str
    low_eV: float
    high_eV: float


def describe(
    model: SizeGapModel, candidates: pd.DataFrame, sizes: SizeShape | float
) -> pd.DataFrame:
    """Predict gap, emission and linewidth of candidates.

    Parameters
    ----------
    model : SizeGapModel
        Fitted and calibrated.
    candidates : pandas.DataFrame
        As from `screening.candidates.pair_frame`.
    sizes : SizeShape or float
        Shape of the size distribution, or the standard deviation of a normal one over its mean.

    Returns
    -------
    pandas.DataFrame
        The candidates plus optical_gap_eV and emission_eV with their 90 % ends (the emission's hold
        the Stokes shift's uncertainty too, as its chance does), emission_nm, fwhm_meV,
        single_dot_fwhm_eV, slope_eV_per_nm, size_sd_eV, model_sd_eV, stokes_sd_eV, record_state.
    """
    spread = sizes if isinstance(sizes, float) else sizes.spread
    frame = candidates.join(model.predict(candidates))
    low, high = model.interval(frame, _LEVEL)
    frame["optical_gap_low_eV"], frame["optical_gap_high_eV"] = low, high
    stokes = stokes_shifts(frame["material"].tolist(), frame["family"].tolist())
    stokes.index = frame.index
    frame["emission_eV"] = frame["optical_gap_eV"] - stokes["stokes_shift_eV"]
    frame["emission_nm"] = wavelength_nm(frame["emission_eV"])
    frame["stokes_sd_eV"] = stokes["stokes_sd_eV"]
    emitting = frame.assign(
        optical_gap_eV=frame["emission_eV"],
        model_sd_eV=np.hypot(frame["model_sd_eV"], frame["stokes_sd_eV"]),
    )
    frame["emission_low_eV"], frame["emission_high_eV"] = model.interval(emitting, _LEVEL)
    frame["slope_eV_per_nm"] = _slope(model, candidates)
    frame["size_sd_eV"] = frame["slope_eV_per_nm"].abs() * spread * frame["diameter_nm"]
    frame["single_dot_fwhm_eV"] = stokes["single_dot_fwhm_eV"]
    frame["fwhm_meV"] = 1000.0 * ensemble_fwhm_eV(
        stokes["single_dot_fwhm_eV"], frame["slope_eV_per_nm"], spread * frame["diameter_nm"]
    )
    return frame


def _slope(model: SizeGapModel, candidates: pd.DataFrame) -> pd.Series:
    """Return the derivative of the predicted gap to the diameter by central differences."""
    diameter = candidates["diameter_nm"]
    step = diameter * _SLOPE_STEP
    ends = [
        model.predict(candidates.assign(diameter_nm=diameter + sign * step))["optical_gap_eV"]
        for sign in (1.0, -1.0)
    ]
    return (ends[0] - ends[1]) / (2.0 * step)


def score(
    model: SizeGapModel,
    described: pd.DataFrame,
    window: Window,
    sizes: SizeShape | float | None = None,
    least_fraction: float = 0.5,
) -> pd.DataFrame:
    """Add chance_in_window, fraction_in_window, size_tolerance_nm and batch_yield.

    Parameters
    ----------
    model : SizeGapModel
    described : pandas.DataFrame
        As from `describe`.
    window : Window
    sizes : SizeShape, float or None, default None
        A measured shape is integrated over; otherwise sizes are normal with the described spread.
    least_fraction : float, default 0.5
        Share of particles inside the window from which a batch counts as good.

    Returns
    -------
    pandas.DataFrame
        A copy with four columns more; batch_yield is the chance that a batch is good, for normal
        sizes of the described spread.
    """
    frame = described.copy()
    emits = window.quantity == "emission"
    centre = frame["emission_eV" if emits else "optical_gap_eV"].to_numpy()
    stokes_sd = frame["stokes_sd_eV"].to_numpy() if emits else np.zeros(len(frame))
    sd = np.hypot(frame["model_sd_eV"].to_numpy(), stokes_sd)
    size_sd = frame["size_sd_eV"].to_numpy()
    slope_eV = (frame["slope_eV_per_nm"] * frame["diameter_nm"]).to_numpy()
    middle, half = 0.5 * (window.low_eV + window.high_eV), 0.5 * (window.high_eV - window.low_eV)
    reach = room_for_share(half, size_sd, least_fraction)
    chance, fraction, good = np.empty((3, len(frame)))
    for name, state in model.states_.items():
        rows = frame["record_state"].to_numpy() == name
        between = state.calibration.chance_between
        chance[rows] = between(window.low_eV, window.high_eV, centre[rows], sd[rows])
        near, far = middle - reach[rows], middle + reach[rows]
        good[rows] = np.nan_to_num(between(near, far, centre[rows], sd[rows]))
        widened = _widened(state.calibration, sd[rows])
        if isinstance(sizes, SizeShape):
            fraction[rows] = fraction_inside_integrated(
                (window.low_eV, window.high_eV), centre[rows], widened, slope_eV[rows], sizes
            )
        else:
            fraction[rows] = fraction_inside(
                window.low_eV, window.high_eV, centre[rows], np.hypot(widened, size_sd[rows])
            )
    frame["chance_in_window"], frame["fraction_in_window"] = chance, fraction
    frame["batch_yield"] = good
    room = np.minimum(centre - window.low_eV, window.high_eV - centre)
    slope = np.maximum(frame["slope_eV_per_nm"].abs().to_numpy(), 1e-6)
    frame["size_tolerance_nm"] = np.maximum(room, 0.0) / slope
    return frame


def _widened(calibration: GroupCalibration, sd: FloatArray) -> FloatArray:
    """Return the standard deviation of the normal distribution with the calibrated interval."""
    level = max(calibration.factors_)
    return np.asarray(sd * calibration.factor(level) / ndtri(0.5 + level / 2.0))
