"""What a user would do without this program: predictions to beat, on the same left-out rows.

Every baseline sees the training rows only. Energies in eV, lengths in nm.
"""

from collections.abc import Callable

import numpy as np
import pandas as pd
from sklearn.ensemble import HistGradientBoostingRegressor
from sklearn.linear_model import LinearRegression
from threadpoolctl import threadpool_limits

from features.confinement import brus_gap_eV, reduced_mass, two_band_gap_eV
from features.finite_barrier import finite_barrier_gap_eV
from screening.covariance import FloatArray

__all__ = ["BASELINES"]

_CONSTANTS = ("gap_eV", "electron_mass_m0", "hole_mass_m0", "dielectric")


def _columns(rows: pd.DataFrame) -> list[FloatArray]:
    return [rows[name].to_numpy(dtype=float) for name in ("diameter_nm", *_CONSTANTS)]


def _brus(train: pd.DataFrame, test: pd.DataFrame) -> FloatArray:  # noqa: ARG001 - one signature
    return brus_gap_eV(*_columns(test))


def _two_band(train: pd.DataFrame, test: pd.DataFrame) -> FloatArray:  # noqa: ARG001 - one signature
    diameter, gap, electron, hole, _ = _columns(test)
    return two_band_gap_eV(diameter, gap, reduced_mass(electron, hole))


def _finite_barrier(train: pd.DataFrame, test: pd.DataFrame) -> FloatArray:  # noqa: ARG001 - one signature
    return finite_barrier_gap_eV(*_columns(test))


def _mean_shift(train: pd.DataFrame, test: pd.DataFrame) -> FloatArray:
    """Bulk gap plus the mean shift of the training rows."""
    shift = np.average(train["optical_gap_eV"] - train["gap_eV"], weights=train["vote"])
    return test["gap_eV"].to_numpy(dtype=float) + float(shift)


def _nearest_curve(train: pd.DataFrame, test: pd.DataFrame) -> FloatArray:
    """Bulk gap plus the shift of the material with the nearest constants, interpolated in size."""
    keys = np.log(train[["electron_mass_m0", "dielectric"]].to_numpy(dtype=float))
    keys = np.column_stack([keys, train["gap_eV"]])
    wanted = np.log(test[["electron_mass_m0", "dielectric"]].to_numpy(dtype=float))
    wanted = np.column_stack([wanted, test["gap_eV"]])
    shift = (train["optical_gap_eV"] - train["gap_eV"]).to_numpy()
    predicted = np.empty(len(test))
    for i, key in enumerate(wanted):
        nearest = train["material"].iloc[int(np.argmin(np.linalg.norm(keys - key, axis=1)))]
        rows = train["material"].eq(nearest).to_numpy()
        order = np.argsort(train["diameter_nm"].to_numpy()[rows], kind="stable")
        sizes = np.log(train["diameter_nm"].to_numpy()[rows][order])
        predicted[i] = np.interp(np.log(test["diameter_nm"].iloc[i]), sizes, shift[rows][order])
    return test["gap_eV"].to_numpy(dtype=float) + predicted


def _linear_design(rows: pd.DataFrame) -> FloatArray:
    diameter, _, electron, hole, dielectric = _columns(rows)
    mass = reduced_mass(electron, hole)
    terms = [1 / diameter, 1 / diameter**2, 1 / (mass * diameter**2), 1 / (dielectric * diameter)]
    return np.column_stack(terms)


def _linear(train: pd.DataFrame, test: pd.DataFrame) -> FloatArray:
    """Least squares of the shift on 1/d, 1/d^2, 1/(mu d^2) and 1/(epsilon d)."""
    shift = train["optical_gap_eV"] - train["gap_eV"]
    model = LinearRegression().fit(_linear_design(train), shift, sample_weight=train["vote"])
    return np.asarray(test["gap_eV"].to_numpy(dtype=float) + model.predict(_linear_design(test)))


def _plain_trees(train: pd.DataFrame, test: pd.DataFrame) -> FloatArray:
    """Boosted trees with library defaults on diameter and bulk constants."""
    with threadpool_limits(1, user_api="openmp"):
        model = HistGradientBoostingRegressor(random_state=0, max_bins=48)
        model.fit(np.column_stack(_columns(train)), train["optical_gap_eV"])
        return np.asarray(model.predict(np.column_stack(_columns(test))))


BASELINES: dict[str, Callable[[pd.DataFrame, pd.DataFrame], FloatArray]] = {
    "bulk gap plus mean shift": _mean_shift,
    "Brus 1984": _brus,
    "two-band": _two_band,
    "finite barrier": _finite_barrier,
    "nearest material's curve": _nearest_curve,
    "linear size law": _linear,
    "plain boosted trees": _plain_trees,
}
"""Name of each baseline and its function of training and test rows."""
