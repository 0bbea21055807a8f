"""Three different questions about a candidate, all answered.

The chance that the batch's mean lands in the window (model uncertainty), the fraction of
particles expected in it (model uncertainty and size spread), and how far the diameter may drift
before the batch leaves it. Energies in eV, lengths in nm.
"""

from dataclasses import dataclass

import numpy as np
import pandas as pd
from scipy.special import ndtr, ndtri

from features.emission import ensemble_fwhm_eV, stokes_shifts, wavelength_nm
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


def describe(model: SizeGapModel, candidates: pd.DataFrame, size_spread: float) -> pd.DataFrame:
    """Predict gap, emission and linewidth of candidates.

    Parameters
    ----------
    model : SizeGapModel
        Fitted and calibrated.
    candidates : pandas.DataFrame
        As from `screening.candidates.pair_frame`.
    size_spread : float
        Standard deviation of the diameter over its mean.

    Returns
    -------
    pandas.DataFrame
        The candidates plus optical_gap_eV and emission_eV with their 90 % ends (the emission's hold
        the Stokes shift's uncertainty too, as its chance does), emission_nm, fwhm_meV,
        slope_eV_per_nm, size_sd_eV, model_sd_eV, stokes_sd_eV, record_state.
    """
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
    frame["size_sd_eV"] = frame["slope_eV_per_nm"].abs() * size_spread * frame["diameter_nm"]
    frame["fwhm_meV"] = 1000.0 * ensemble_fwhm_eV(
        stokes["single_dot_fwhm_eV"], frame["slope_eV_per_nm"], size_spread * frame["diameter_nm"]
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


def score(model: SizeGapModel, described: pd.DataFrame, window: Window) -> pd.DataFrame:
    """Add chance_in_window, fraction_in_window and size_tolerance_nm.

    Parameters
    ----------
    model : SizeGapModel
    described : pandas.DataFrame
        As from `describe`.
    window : Window

    Returns
    -------
    pandas.DataFrame
        A copy with three columns more.
    """
    frame = described.copy()
    emits = window.quantity == "emission"
    centre = frame["emission_eV" if emits else "optical_gap_eV"].to_numpy()
    stokes_sd = frame["stokes_sd_eV"].to_numpy() if emits else np.zeros(len(frame))
    sd = np.hypot(frame["model_sd_eV"].to_numpy(), stokes_sd)
    size_sd = frame["size_sd_eV"].to_numpy()
    chance, fraction = np.empty(len(frame)), np.empty(len(frame))
    for name, state in model.states_.items():
        rows = frame["record_state"].to_numpy() == name
        calibration = state.calibration
        chance[rows] = calibration.chance_between(
            window.low_eV, window.high_eV, centre[rows], sd[rows]
        )
        fraction[rows] = _fraction(calibration, window, centre[rows], sd[rows], size_sd[rows])
    frame["chance_in_window"], frame["fraction_in_window"] = chance, fraction
    room = np.minimum(centre - window.low_eV, window.high_eV - centre)
    slope = np.maximum(frame["slope_eV_per_nm"].abs().to_numpy(), 1e-6)
    frame["size_tolerance_nm"] = np.maximum(room, 0.0) / slope
    return frame


def _fraction(
    calibration: GroupCalibration,
    window: Window,
    centre: FloatArray,
    sd: FloatArray,
    size_sd: FloatArray,
) -> FloatArray:
    """Return the expected share of particles inside, calibrated spread and size in quadrature."""
    level = max(calibration.factors_)
    widened = sd * calibration.factor(level) / ndtri(0.5 + level / 2.0)
    total = np.hypot(widened, size_sd)
    inside = ndtr((window.high_eV - centre) / total) - ndtr((window.low_eV - centre) / total)
    return np.asarray(inside)
