"""What a user would do without this program: predictions to beat, on the same left-out rows.

Every baseline sees the training rows only. Energies in eV, lengths in nm.
"""

import warnings
from collections.abc import Callable

import numpy as np
import pandas as pd
from sklearn.ensemble import HistGradientBoostingRegressor
from sklearn.exceptions import ConvergenceWarning
from sklearn.gaussian_process import GaussianProcessRegressor
from sklearn.gaussian_process.kernels import RBF, ConstantKernel, WhiteKernel
from sklearn.linear_model import LinearRegression
from sklearn.pipeline import Pipeline, make_pipeline
from sklearn.preprocessing import StandardScaler
from threadpoolctl import threadpool_limits

from features.composition import composition_descriptors
from features.confinement import brus_gap_eV, reduced_mass, two_band_gap_eV
from features.confinement_features import ConfinementFeatures
from features.finite_barrier import finite_barrier_gap_eV
from features.size_gap import SMALLEST_DIAMETER_nm
from screening.blending import boosted_trees
from screening.calibration import group_weights
from screening.covariance import FloatArray

__all__ = ["ABLATIONS", "BASELINES", "plain_gaussian"]

Baseline = Callable[[pd.DataFrame, pd.DataFrame], FloatArray]

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


def _mean(train: pd.DataFrame, test: pd.DataFrame) -> FloatArray:
    """Mean gap of the training materials, one vote a material."""
    votes = group_weights(train["material"], train["vote"])
    return np.full(len(test), float(np.average(train["optical_gap_eV"], weights=votes)))


def _nearest_record(train: pd.DataFrame, test: pd.DataFrame) -> FloatArray:
    """Gap of the record nearest in log diameter, bulk gap, log mass and log dielectric constant."""
    known, wanted = _scaled(train), _scaled(test)
    distance = np.linalg.norm(wanted[:, None, :] - known[None, :, :], axis=2)
    gaps = train["optical_gap_eV"].to_numpy(dtype=np.float64)
    return np.asarray(gaps[distance.argmin(axis=1)], dtype=np.float64)


def _scaled(rows: pd.DataFrame) -> FloatArray:
    diameter, gap, electron, hole, dielectric = _columns(rows)
    mass = reduced_mass(electron, hole)
    return np.column_stack([np.log(diameter), gap, np.log(mass), np.log(dielectric)])


def plain_gaussian() -> Pipeline:
    """Return scikit-learn's Gaussian process as a user would set it up: one length, one noise.

    Returns
    -------
    sklearn.pipeline.Pipeline
        Standardised columns, squared exponential and white noise, scaled target.
    """
    kernel = ConstantKernel(1.0) * RBF(2.0, (0.05, 50.0)) + WhiteKernel(0.1, (1e-4, 10.0))
    process = GaussianProcessRegressor(kernel, normalize_y=True, alpha=1e-8, random_state=0)
    return make_pipeline(StandardScaler(), process)


def _plain_gaussian(train: pd.DataFrame, test: pd.DataFrame) -> FloatArray:
    """Plain Gaussian process on log diameter and bulk constants."""
    with warnings.catch_warnings():
        # A length scale on its bound is part of what the plain tool gives.
        warnings.simplefilter("ignore", ConvergenceWarning)
        model = plain_gaussian().fit(_scaled(train), train["optical_gap_eV"])
    return np.asarray(model.predict(_scaled(test)), dtype=np.float64)


def _elemental(rows: pd.DataFrame) -> FloatArray:
    """Return the diameter and the averages of elemental descriptors over the composition."""
    frame = composition_descriptors(rows["material"].tolist())
    chosen = [name for name in map(str, frame.columns) if name.startswith("all_mean_")]
    return np.column_stack([rows["diameter_nm"], frame[chosen]]).astype(np.float64)


def _elemental_trees(train: pd.DataFrame, test: pd.DataFrame) -> FloatArray:
    """Boosted trees with library defaults on diameter and elemental averages."""
    with threadpool_limits(1, user_api="openmp"):
        model = HistGradientBoostingRegressor(random_state=0, max_bins=48)
        model.fit(_elemental(train), train["optical_gap_eV"])
        return np.asarray(model.predict(_elemental(test)))


def _physics(rows: pd.DataFrame) -> pd.DataFrame:
    features: pd.DataFrame = ConfinementFeatures().fit_transform(rows[["diameter_nm", *_CONSTANTS]])
    return features


def _both(rows: pd.DataFrame) -> FloatArray:
    return np.column_stack([_elemental(rows), _physics(rows)]).astype(np.float64)


def _own_trees(X: FloatArray, y: FloatArray, rows: pd.DataFrame, wanted: FloatArray) -> FloatArray:
    """Fit the program's own trees, one vote a material, and predict."""
    weight = group_weights(rows["material"], rows["vote"])
    with threadpool_limits(1, user_api="openmp"):
        model = boosted_trees(max_bins=48).fit(X, y, sample_weight=weight)
        return np.asarray(model.predict(wanted), dtype=np.float64)


def _descriptors_only(train: pd.DataFrame, test: pd.DataFrame) -> FloatArray:
    target = train["optical_gap_eV"].to_numpy(dtype=float)
    return _own_trees(_elemental(train), target, train, _elemental(test))


def _with_physics_features(train: pd.DataFrame, test: pd.DataFrame) -> FloatArray:
    target = train["optical_gap_eV"].to_numpy(dtype=float)
    return _own_trees(_both(train), target, train, _both(test))


def _with_physics_mean(train: pd.DataFrame, test: pd.DataFrame) -> FloatArray:
    """Learn what the finite-barrier model misses, per 1/diameter, as the program does."""
    target = (train["optical_gap_eV"] - _finite_barrier(train, train)) / _per_size(train)
    learned = _own_trees(_both(train), target.to_numpy(dtype=float), train, _both(test))
    return np.asarray(_finite_barrier(test, test) + learned * _per_size(test))


def _per_size(rows: pd.DataFrame) -> FloatArray:
    diameter = rows["diameter_nm"].to_numpy(dtype=np.float64)
    return np.asarray(1.0 / np.maximum(diameter, SMALLEST_DIAMETER_nm))


BASELINES: dict[str, Baseline] = {
    "mean": _mean,
    "nearest record": _nearest_record,
    "bulk gap plus mean shift": _mean_shift,
    "Brus 1984": _brus,
    "two-band": _two_band,
    "finite barrier": _finite_barrier,
    "nearest material's curve": _nearest_curve,
    "linear size law": _linear,
    "plain boosted trees": _plain_trees,
    "plain boosted trees on elemental averages": _elemental_trees,
    "plain Gaussian process": _plain_gaussian,
}
"""Name of each baseline and its function of training and test rows."""

ABLATIONS: dict[str, Baseline] = {
    "elemental descriptors only": _descriptors_only,
    "plus physics features": _with_physics_features,
    "plus physics mean": _with_physics_mean,
}
"""Steps of the ladder below the blended model, each with the program's own trees."""
