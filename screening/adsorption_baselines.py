"""What a user would do about adsorption energies without this program, on the same left-out rows.

Every baseline sees the training rows only. Energies in eV.
"""

import warnings
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd
from sklearn.ensemble import HistGradientBoostingRegressor
from sklearn.exceptions import ConvergenceWarning
from sklearn.preprocessing import StandardScaler
from threadpoolctl import threadpool_limits

from features.adsorption_descriptors import metal_descriptors
from features.tables import read_table
from screening.adsorption_design import SurfaceDesign, tree_matrix
from screening.covariance import FloatArray
from screening.dot_baselines import plain_gaussian

if TYPE_CHECKING:
    from screening.adsorption_alloys import AlloySurfaceModel

__all__ = [
    "ALLOY_LADDER",
    "METAL_BASELINES",
    "PLAIN_LEARNERS",
    "composition_averages",
    "ladder_of_alloys",
    "metal_baselines",
    "mixing_rule",
    "plain_learners",
]

METAL_BASELINES = ("mean", "linear in the d-band centre", "nearest group neighbour")
"""Baselines on pure metals, as columns of the evaluation."""

PLAIN_LEARNERS = ("nearest record", "plain boosted trees", "plain Gaussian process")
"""Library learners on the averages of the metals' descriptors, one model an adsorbate."""

ALLOY_LADDER = ("trees with physics features", "Gaussian process alone")
"""Steps of the ladder between trees on composition averages and the blended model."""


def composition_averages(rows: pd.DataFrame) -> FloatArray:
    """Return the metals' descriptors, averaged over the composition.

    Parameters
    ----------
    rows : pandas.DataFrame
        Columns first, second and share for alloys, or metal.

    Returns
    -------
    ndarray of shape (n_rows, n_descriptors)
    """
    descriptors = metal_descriptors()
    if "first" not in rows:
        return descriptors.loc[rows["metal"]].to_numpy(dtype=np.float64)
    share = rows["share"].to_numpy(dtype=np.float64)[:, None]
    first, second = (descriptors.loc[rows[c]].to_numpy() for c in ("first", "second"))
    return np.asarray(share * first + (1.0 - share) * second, dtype=np.float64)


def metal_baselines(train: pd.DataFrame, test: pd.DataFrame, metal: str) -> dict[str, FloatArray]:
    """Predict one metal by the mean, a line in the d-band centre and the nearest in the table.

    Parameters
    ----------
    train, test : pandas.DataFrame
        Columns metal, adsorbate and energy_eV (of ``train``).
    metal : str
        The metal of all rows of ``test``.

    Returns
    -------
    dict of str to ndarray
        Keys `METAL_BASELINES`, eV.
    """
    descriptors = metal_descriptors()
    numbers = read_table("metals").set_index("element")[["group", "atomic_number"]].astype(float)
    away = (numbers - numbers.loc[metal]).abs()
    distance = away["group"] + away["atomic_number"] / 1000.0
    out = np.empty((len(test), len(METAL_BASELINES)))
    for position, adsorbate in enumerate(test["adsorbate"]):
        known = train[train["adsorbate"] == adsorbate].set_index("metal")["energy_eV"]
        line = np.column_stack([np.ones(len(descriptors)), descriptors["d_band_centre_eV"]])
        line = np.column_stack([line, descriptors["sp_character"]])
        design = pd.DataFrame(line, index=descriptors.index)
        slopes, *_ = np.linalg.lstsq(design.loc[known.index].to_numpy(), known.to_numpy())
        nearest = known[distance[known.index].idxmin()]
        out[position] = known.mean(), design.loc[metal].to_numpy() @ slopes, nearest
    return dict(zip(METAL_BASELINES, out.T, strict=True))


def plain_learners(train: pd.DataFrame, test: pd.DataFrame) -> pd.DataFrame:
    """Predict rows by the nearest record, plain boosted trees and a plain Gaussian process.

    Parameters
    ----------
    train, test : pandas.DataFrame
        Columns adsorbate, energy_eV (of ``train``) and those of `composition_averages`.

    Returns
    -------
    pandas.DataFrame
        Columns `PLAIN_LEARNERS`, with the index of ``test``; missing where fewer than two
        training rows hold the adsorbate.
    """
    found = pd.DataFrame(np.nan, index=test.index, columns=list(PLAIN_LEARNERS))
    for adsorbate, part in test.groupby("adsorbate"):
        known = train[train["adsorbate"] == adsorbate]
        if len(known) > 1:
            found.loc[part.index] = _three(
                composition_averages(known),
                known["energy_eV"].to_numpy(dtype=np.float64),
                composition_averages(part),
            )
    return found


def _three(X: FloatArray, y: FloatArray, wanted: FloatArray) -> FloatArray:
    scaler = StandardScaler().fit(X)
    away = scaler.transform(wanted)[:, None, :] - scaler.transform(X)[None, :, :]
    nearest = y[np.linalg.norm(away, axis=2).argmin(axis=1)]
    with threadpool_limits(1, user_api="openmp"), warnings.catch_warnings():
        # A length scale on its bound is part of what the plain tool gives.
        warnings.simplefilter("ignore", ConvergenceWarning)
        trees = HistGradientBoostingRegressor(random_state=0, max_iter=60, min_samples_leaf=5).fit(
            X, y
        )
        process = plain_gaussian().fit(X, y)
        return np.column_stack([nearest, trees.predict(wanted), process.predict(wanted)])


def mixing_rule(design: SurfaceDesign, rows: pd.DataFrame) -> FloatArray:
    """Return the energies (eV) of the pure surfaces mixed by the share in the best hollow.

    Parameters
    ----------
    design : SurfaceDesign
        Of pure metals none of which is to be left out here.
    rows : pandas.DataFrame
        Columns first, second, share, hollow and adsorbate.
    """
    mixed = tree_matrix(design.matrix(rows))[:, -2]
    scale = design.scale.loc[rows["adsorbate"]].to_numpy(dtype=np.float64)
    return np.asarray(scale[:, 0] + scale[:, 1] * mixed)


def ladder_of_alloys(model: "AlloySurfaceModel", rows: pd.DataFrame) -> pd.DataFrame:
    """Return what either half of the blend predicts alone, eV.

    Parameters
    ----------
    model : AlloySurfaceModel
        Fitted without the rows.
    rows : pandas.DataFrame

    Returns
    -------
    pandas.DataFrame
        Columns `ALLOY_LADDER`, with the index of the rows.
    """
    X = model.design_.matrix(rows)
    scale = model.scale_.loc[rows["adsorbate"]].to_numpy(dtype=np.float64)
    with threadpool_limits(1, user_api="openmp"):
        trees = model.trees_.predict(tree_matrix(X))
    halves = np.column_stack([trees, model.gaussian_.predict(X)])
    energies = scale[:, :1] + scale[:, 1:] * halves
    return pd.DataFrame(energies, index=rows.index, columns=list(ALLOY_LADDER))
