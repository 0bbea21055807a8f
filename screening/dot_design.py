"""Columns that the emission-track regressors read: constants, size, labels, physics outputs."""

import numpy as np
import pandas as pd

from features.confinement_features import ConfinementFeatures
from features.size_gap import SMALLEST_DIAMETER_nm
from screening.bulk_spread import particle_gap_spread_eV
from screening.computed_rows import COMPUTED, computed_rows
from screening.covariance import FloatArray

__all__ = [
    "FIRST_FEATURE",
    "N_SMOOTH",
    "DotDesign",
    "constants_spread_eV",
    "coordinates",
    "scale_of",
    "size_coordinate",
]

_CONSTANTS = ["diameter_nm", "gap_eV", "electron_mass_m0", "hole_mass_m0", "dielectric"]
_CENTRES = {
    "log_reduced_mass": (np.log(0.1), 0.6),
    "log_gap_size": (np.log(1.5), 0.8),
    "log_dielectric": (np.log(7.0), 0.4),
    "log_diameter": (np.log(3.5), 0.5),
}
N_SMOOTH = len(_CENTRES)
"""Columns in which the covariance measures distance; the labels follow."""
FIRST_FEATURE = 10
"""First of the columns that the trees read."""


def coordinates(frame: pd.DataFrame) -> FloatArray:
    """Return the scaled constants and size in which the covariance measures distance.

    Returns
    -------
    ndarray of shape (n_rows, 4)
    """
    return _smooth(ConfinementFeatures().fit_transform(frame[_CONSTANTS]))


def _smooth(features: pd.DataFrame) -> FloatArray:
    columns = [(features[name] - centre) / width for name, (centre, width) in _CENTRES.items()]
    return np.column_stack(columns).astype(np.float64)


def size_coordinate(diameter_nm: FloatArray) -> FloatArray:
    """Return sizes in the scaled logarithm that the covariance reads."""
    centre, width = _CENTRES["log_diameter"]
    return np.asarray((np.log(diameter_nm) - centre) / width)


def scale_of(frame: pd.DataFrame) -> FloatArray:
    """Return the energy (eV) that one unit of the learned quantity stands for.

    Returns
    -------
    ndarray of shape (n_rows,)
    """
    diameter = frame["diameter_nm"].to_numpy(dtype=np.float64)
    return np.asarray(1.0 / np.maximum(diameter, SMALLEST_DIAMETER_nm))


def constants_spread_eV(candidates: pd.DataFrame) -> FloatArray:
    """Return what the bulk constants' uncertainty leaves: all of them where they are estimated."""
    gap_sd = candidates["gap_sd_eV"].to_numpy(dtype=np.float64)
    if "basis" not in candidates:
        return gap_sd
    spread = particle_gap_spread_eV(candidates)
    return np.where(candidates["basis"].eq("record"), gap_sd, spread)


class DotDesign:
    """Columns of rows and candidates, with label codes of the training rows.

    Parameters
    ----------
    rows : pandas.DataFrame
        Training rows.
    """

    def __init__(self, rows: pd.DataFrame) -> None:
        materials = pd.concat([rows["material"], computed_rows()["material"]])
        self._codes = {
            "family": _codes(rows["family"]),
            "material": _codes(materials),
            "source": _codes(rows["source"] + " " + rows["material"]),
            "shape": _codes(rows["shape"] + " " + rows["material"]),
        }

    def columns(
        self, frame: pd.DataFrame, *, training: bool
    ) -> tuple[FloatArray, FloatArray, FloatArray]:
        """Return regressor columns, physics mean (eV) and scale (eV) of rows.

        Parameters
        ----------
        frame : pandas.DataFrame
            Columns material, family, shape, diameter_nm and bulk constants; source for training.
        training : bool
            Whether the rows come from a source that is known; candidates come from none.

        Returns
        -------
        columns : ndarray of shape (n_rows, n_columns)
        mean, scale : ndarray of shape (n_rows,)
        """
        features = ConfinementFeatures().fit_transform(frame[_CONSTANTS])
        source = frame["source"] + " " + frame["material"] if training else None
        no_label = pd.Series(-1.0, index=frame.index)
        labels: list[pd.Series] = [
            frame["family"].map(self._codes["family"]),
            frame["material"].map(self._codes["material"]),
            no_label if source is None else source.map(self._codes["source"]),
            (frame["shape"] + " " + frame["material"]).map(self._codes["shape"]),
            frame["shape"].ne("sphere").astype(float),
            frame["source"].map({COMPUTED: 0.0}) if training else no_label,
        ]
        named = [label.fillna(-1) for label in labels]
        block = np.column_stack([_smooth(features), *named, features])
        mean = frame["gap_eV"].to_numpy() + features["finite_barrier_shift_eV"].to_numpy()
        return block.astype(np.float64), mean, scale_of(frame)


def _codes(values: pd.Series) -> dict[str, int]:
    return {name: code for code, name in enumerate(sorted(values.unique()))}
