"""scikit-learn transformer: diameter and bulk constants to the outputs of the physics models."""

from collections.abc import Sequence
from typing import Any, Self

import numpy as np
import pandas as pd
from numpy.typing import NDArray
from sklearn.base import BaseEstimator, TransformerMixin
from sklearn.utils.validation import check_is_fitted, validate_data

from features.confinement import (
    brus_gap_eV,
    coulomb_energy_eV,
    exciton_bohr_radius_nm,
    reduced_mass,
    sphere_confinement_eV,
    surface_fraction,
    two_band_gap_eV,
)
from features.finite_barrier import finite_barrier_gap_eV

__all__ = ["ConfinementFeatures", "_LAYER_nm", "_SMALLEST_GAP_eV"]

_INPUTS = ("diameter_nm", "gap_eV", "electron_mass_m0", "hole_mass_m0", "dielectric")
_DEFAULTS = (4.0, 1.5, 0.15, 0.5, 7.0)
_FLOORS = (0.2, -np.inf, 0.005, 0.005, 1.0)
_OUTPUTS = (
    "log_reduced_mass",
    "log_gap_size",
    "log_dielectric",
    "log_mass_ratio",
    "log_diameter",
    "sphere_confinement_eV",
    "brus_shift_eV",
    "two_band_shift_eV",
    "finite_barrier_shift_eV",
    "coulomb_energy_eV",
    "bohr_radius_over_radius",
    "surface_fraction",
)
_LAYER_nm = 0.3
_SMALLEST_GAP_eV = 0.2


class ConfinementFeatures(TransformerMixin, BaseEstimator):
    """Turn diameter and bulk constants into physics-model outputs.

    Input columns, in this order: diameter_nm, gap_eV, electron_mass_m0, hole_mass_m0, dielectric.
    Columns missing at the end take middle-of-the-range values (4 nm, 1.5 eV, 0.15, 0.5, 7);
    further columns pass through. Values below what a crystal can have (0.2 nm, mass 0.005,
    dielectric constant 1) are raised to it, so that any number is a valid input.

    Attributes
    ----------
    n_features_in_ : int
        Number of input columns.

    Examples
    --------
    >>> frame = ConfinementFeatures().fit_transform([[3.0, 1.74, 0.13, 0.45, 6.2]])
    >>> round(float(frame["sphere_confinement_eV"].iloc[0]), 2)
    1.66
    """

    def fit(self, X: Any, y: Any = None) -> Self:  # noqa: ARG002 - scikit-learn's signature
        """Remember the number of columns.

        Parameters
        ----------
        X : array-like of shape (n_rows, n_columns)
        y : ignored

        Returns
        -------
        self
        """
        validate_data(self, X, dtype=np.float64)
        return self

    def transform(self, X: Any) -> pd.DataFrame:
        """Return the features, one named column each, with the caller's index.

        Parameters
        ----------
        X : array-like of shape (n_rows, n_columns)

        Returns
        -------
        pandas.DataFrame of shape (n_rows, 12 + passed-through columns)
        """
        check_is_fitted(self)
        index = X.index if isinstance(X, pd.DataFrame) else None
        values = validate_data(self, X, dtype=np.float64, reset=False)
        inputs = [
            np.maximum(values[:, i], floor)
            if i < values.shape[1]
            else np.full(len(values), default)
            for i, (default, floor) in enumerate(zip(_DEFAULTS, _FLOORS, strict=True))
        ]
        columns = [*physics_columns(*inputs), *values[:, len(_INPUTS) :].T]
        return pd.DataFrame(
            np.column_stack(columns), columns=self.get_feature_names_out(), index=index
        )

    def get_feature_names_out(self, input_features: Sequence[str] | None = None) -> NDArray[Any]:
        """Return the names of the output columns."""
        check_is_fitted(self)
        given = getattr(self, "feature_names_in_", input_features)
        names = [f"x{i}" for i in range(self.n_features_in_)] if given is None else list(given)
        return np.array([*_OUTPUTS, *names[len(_INPUTS) :]], dtype=object)

    def __sklearn_tags__(self) -> Any:
        tags = super().__sklearn_tags__()
        tags.transformer_tags.preserves_dtype = []
        return tags


def physics_columns(
    diameter: NDArray[np.float64],
    gap: NDArray[np.float64],
    electron: NDArray[np.float64],
    hole: NDArray[np.float64],
    dielectric: NDArray[np.float64],
    barrier_shift: NDArray[np.float64] | None = None,
) -> list[NDArray[np.float64]]:
    """Return the physics outputs in the order of their names, broadcast over the inputs.

    Parameters
    ----------
    diameter, gap, electron, hole, dielectric : ndarray
        nm, eV, free electron masses, and one.
    barrier_shift : ndarray or None, default None
        Shift of the finite-barrier gap (eV) where it is known already; it costs the most.

    Returns
    -------
    list of ndarray
    """
    mass = reduced_mass(electron, hole)
    if barrier_shift is None:
        barrier_shift = finite_barrier_gap_eV(diameter, gap, electron, hole, dielectric) - gap
    return [
        np.log(mass),
        np.log(np.maximum(np.abs(gap), _SMALLEST_GAP_eV)),
        np.log(dielectric),
        np.log(hole / electron),
        np.log(diameter),
        sphere_confinement_eV(diameter, mass),
        brus_gap_eV(diameter, gap, electron, hole, dielectric) - gap,
        two_band_gap_eV(diameter, gap, mass) - gap,
        barrier_shift,
        coulomb_energy_eV(diameter, dielectric),
        exciton_bohr_radius_nm(dielectric, mass) / (diameter / 2.0),
        surface_fraction(diameter, _LAYER_nm),
    ]
