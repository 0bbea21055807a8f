"""Adsorption energies on binary alloys: a Gaussian process and trees, blended on left-out groups.

The covariance parameters are fitted on either half of the compositions; each half is judged by the
parameters of the other, with its composition left out, which gives the blend's weight and the
calibration. Predictions come from parameters refined on all rows. Rows that no physics explains (a
minimum over too few sites) keep a larger noise of their own, after the Student-t idea of down-
weighting. Energies in eV.
"""

import zlib
from collections.abc import Mapping
from typing import Any, Self

import numpy as np
import pandas as pd
from numpy.typing import NDArray
from scipy.linalg import cho_factor, cho_solve
from sklearn.ensemble import HistGradientBoostingRegressor
from sklearn.model_selection import GroupKFold
from threadpoolctl import threadpool_limits

from screening.adsorption_design import SurfaceDesign, covariance_terms, tree_matrix
from screening.adsorption_pure import PureSurfaceModel
from screening.blending import blend, blend_weight, boosted_trees
from screening.calibration import GroupCalibration, group_weights
from screening.covariance import FloatArray, term_covariance
from screening.gaussian import GroupedGaussianProcess

__all__ = ["AlloySurfaceModel", "robust_gaussian"]

_OUTLIER = 2.0
_TREE_OPTIONS = {"max_iter": 120}
_FOLDS = 5
_REFINEMENT = 12
_NOISE = 0.15
_COMPOSITIONS, _ELEMENTS = "compositions left out", "elements left out"


def robust_gaussian(
    terms: Any,
    X: FloatArray,
    z: FloatArray,
    noise: FloatArray,
    *,
    start: FloatArray | None = None,
    max_iter: int = 30,
) -> tuple[GroupedGaussianProcess, FloatArray]:
    """Fit, then enlarge the noise of rows that the other rows contradict, and fit again.

    Parameters
    ----------
    terms : sequence of CovarianceTerm
    X : ndarray of shape (n_rows, n_columns)
    z, noise : ndarray of shape (n_rows,)
    start : ndarray or None, default None
    max_iter : int, default 30
        0 keeps the parameters of `start`.

    Returns
    -------
    model : GroupedGaussianProcess
    noise : ndarray of shape (n_rows,)
        The enlarged noise of the rows.
    """
    first = GroupedGaussianProcess(
        terms=terms,
        noise=_NOISE,
        start=None if start is None else start.tolist(),
        max_iter=max_iter,
    )
    first.fit(X, z, noise_sd=noise)
    mean, sd = first.leave_group_out(np.arange(len(z)))
    expected = np.sqrt(sd**2 + first.noise_**2 + noise**2)
    excess = np.maximum((z - mean) ** 2 - (_OUTLIER * expected) ** 2, 0.0)
    again = GroupedGaussianProcess(
        terms=terms, noise=_NOISE, start=first.theta_.tolist(), max_iter=max_iter // 3
    )
    enlarged = np.sqrt(noise**2 + excess)
    return again.fit(X, z, noise_sd=enlarged), enlarged


class AlloySurfaceModel:
    """One family of adsorbates on binary alloys.

    Parameters
    ----------
    adsorbates : tuple of str
    """

    def __init__(self, adsorbates: tuple[str, ...]) -> None:
        self.adsorbates = adsorbates

    def fit(self, rows: pd.DataFrame, pure: PureSurfaceModel, *, compositions: bool = True) -> Self:
        """Fit on rows as from `alloy_rows`.

        Parameters
        ----------
        rows : pandas.DataFrame
        pure : PureSurfaceModel
            Fitted on pure metals, none of which is to be left out here.
        compositions : bool, default True
            Fit the trees and calibrate new compositions; False serves new elements only.

        Returns
        -------
        self
        """
        self._prepare(rows, pure)
        self._fit_gaussians()
        if compositions:
            self.trees_ = self._fit_trees(np.arange(len(self._z)))
            self._calibrate_compositions()
        return self

    def _prepare(self, rows: pd.DataFrame, pure: PureSurfaceModel) -> None:
        """Lay out rows, design and scaled energies."""
        self.rows_ = rows[rows["adsorbate"].isin(self.adsorbates)].reset_index(drop=True)
        self.pure_ = pure
        grouped = self.rows_.groupby("adsorbate")["energy_eV"]
        self.scale_ = pd.DataFrame({"mean": grouped.mean(), "sd": grouped.std(ddof=0)})
        self.design_ = SurfaceDesign(pure, self.scale_, self.adsorbates)
        self._X = self.design_.matrix(self.rows_)
        self._unit = self._deviation(self.rows_)
        self._z = (self.rows_["energy_eV"].to_numpy() - self._centre(self.rows_)) / self._unit
        self._noise = self.rows_["noise_sd_eV"].to_numpy() / self._unit
        self._half = np.array([zlib.crc32(c.encode()) % 2 for c in self.rows_["composition"]])

    def learned(self) -> dict[str, Any]:
        """Return what the fit and the calibrations learned, as plain numbers."""
        return {
            "theta": self.gaussian_.theta_.tolist(),
            "enlarged": self._enlarged.tolist(),
            "halves": [theta.tolist() for theta in self._half_thetas],
            "weight": self.weight_,
            "calibration": self.calibration_.learned(),
            "element_sd": self.element_sd_,
            "element_calibration": self.element_calibration_.learned(),
        }

    def restore(self, rows: pd.DataFrame, pure: PureSurfaceModel, kept: Mapping[str, Any]) -> Self:
        """Rebuild a fitted model from the same rows and what `learned` returned.

        Raises
        ------
        KeyError, TypeError, ValueError
            If the numbers are not those of such a model.
        """
        self._prepare(rows, pure)
        self._enlarged = np.array(kept["enlarged"], dtype=np.float64)
        self._half_thetas = [np.array(theta, dtype=np.float64) for theta in kept["halves"]]
        self.gaussian_ = GroupedGaussianProcess(
            terms=covariance_terms(len(self.adsorbates)),
            noise=_NOISE,
            start=[float(value) for value in kept["theta"]],
            max_iter=0,
        ).fit(self._X, self._z, noise_sd=self._enlarged)
        self.trees_ = self._fit_trees(np.arange(len(self._z)))
        self.weight_, self.element_sd_ = float(kept["weight"]), float(kept["element_sd"])
        self.calibration_ = GroupCalibration.restored(kept["calibration"], _COMPOSITIONS)
        self.element_calibration_ = GroupCalibration.restored(
            kept["element_calibration"], _ELEMENTS
        )
        return self

    def predict(self, frame: pd.DataFrame) -> tuple[FloatArray, FloatArray]:
        """Predict surfaces of `first`, `second`, `share`, `hollow` and `adsorbate`.

        Returns
        -------
        mean_eV, sd_eV : ndarray
            Standard deviation of the blend with the noise of a well-sampled row.
        """
        X = self.design_.matrix(frame)
        gaussian, sd = self._gaussian(X)
        mean, spread = blend(gaussian, _tree_values(self.trees_, X), sd, self.weight_)
        unit = self._deviation(frame)
        return self._centre(frame) + unit * mean, unit * spread

    def _gaussian(self, X: FloatArray) -> tuple[FloatArray, FloatArray]:
        mean, sd = self.gaussian_.predict(X, return_std=True)
        return mean, np.hypot(sd, self.gaussian_.noise_)

    def _fit_gaussians(self) -> None:
        terms = covariance_terms(len(self.adsorbates))
        self._half_thetas = []
        for half in (0, 1):
            rows = self._half == half
            tuned, _ = robust_gaussian(terms, self._X[rows], self._z[rows], self._noise[rows])
            self._half_thetas.append(tuned.theta_)
        middle = np.mean(self._half_thetas, axis=0)
        self.gaussian_, self._enlarged = self._on_all_rows(middle, _REFINEMENT)

    def _on_all_rows(
        self, start: FloatArray, max_iter: int
    ) -> tuple[GroupedGaussianProcess, FloatArray]:
        terms = covariance_terms(len(self.adsorbates))
        return robust_gaussian(terms, self._X, self._z, self._noise, start=start, max_iter=max_iter)

    def _fit_trees(self, rows: NDArray[np.intp]) -> HistGradientBoostingRegressor:
        weight = 1.0 / (self._noise[rows] ** 2 + 0.09)
        with threadpool_limits(1, user_api="openmp"):
            return boosted_trees(**_TREE_OPTIONS).fit(
                tree_matrix(self._X[rows]), self._z[rows], sample_weight=weight
            )

    def left_out_compositions(self) -> pd.DataFrame:
        """Predict every row with its composition left out and parameters of the other half.

        Returns
        -------
        pandas.DataFrame
            `rows_` with predicted_eV, sd_eV, gaussian_eV and trees_eV.
        """
        groups = self.rows_["composition"].to_numpy()
        mean, sd = np.empty(len(groups)), np.empty(len(groups))
        for half, theta in enumerate(self._half_thetas):
            model = self._on_all_rows(theta, 0)[0]
            rows = self._half != half
            part = model.leave_group_out(groups)
            mean[rows] = part[0][rows]
            sd[rows] = np.hypot(part[1], model.noise_)[rows]
        return self._report(mean, self._left_out_trees(groups), sd, self.weight_)

    def _report(
        self, gaussian: FloatArray, trees: FloatArray, sd: FloatArray, weight: float
    ) -> pd.DataFrame:
        mean, spread = blend(gaussian, trees, sd, weight)
        centre, unit = self._centre(self.rows_), self._unit
        return self.rows_.assign(
            predicted_eV=centre + unit * mean,
            sd_eV=unit * spread,
            gaussian_eV=centre + unit * gaussian,
            trees_eV=centre + unit * trees,
        )

    def _left_out_trees(self, groups: FloatArray) -> FloatArray:
        trees = np.empty(len(groups))
        for train, test in GroupKFold(_FOLDS).split(self._X, self._z, groups):
            trees[test] = _tree_values(self._fit_trees(train), self._X[test])
        return trees

    def _calibrate_compositions(self) -> None:
        self.weight_ = 1.0
        left = self.left_out_compositions()
        groups = left["composition"].to_numpy()
        gaussian = (left["gaussian_eV"].to_numpy() - self._centre(left)) / self._unit
        trees = (left["trees_eV"].to_numpy() - self._centre(left)) / self._unit
        votes = group_weights(groups) / (1.0 + (self._noise / 0.3) ** 2)
        self.weight_ = blend_weight(self._z, gaussian, trees, votes)
        mean, spread = blend(gaussian, trees, left["sd_eV"].to_numpy() / self._unit, self.weight_)
        self.calibration_ = GroupCalibration(state=_COMPOSITIONS).fit(
            self._z - mean, spread, groups
        )

    def left_out_elements(self, pure_without: Mapping[str, PureSurfaceModel]) -> pd.DataFrame:
        """Predict every row once for either of its elements, with all that is known of it left out.

        The Gaussian process keeps its covariance parameters; the trees take no part.

        Parameters
        ----------
        pure_without : mapping of str to PureSurfaceModel
            Models of pure metals, each without the element that is its key.

        Returns
        -------
        pandas.DataFrame
            Rows with left_out (the element), predicted_eV and sd_eV.
        """
        covariance = _covariance(self.gaussian_, self._X, self._X)
        covariance[np.diag_indices_from(covariance)] += self._enlarged**2 + self.gaussian_.noise_**2
        parts = []
        for element, pure in pure_without.items():
            held = (self.rows_[["first", "second"]] == element).any(axis=1).to_numpy(dtype=np.bool_)
            if held.any():
                parts.append(self._without(covariance, held, pure).assign(left_out=element))
        return pd.concat(parts, ignore_index=True)

    def _without(
        self, covariance: FloatArray, held: NDArray[np.bool_], pure: PureSurfaceModel
    ) -> pd.DataFrame:
        frame = self.rows_[held]
        X = SurfaceDesign(pure, self.scale_, self.adsorbates).matrix(frame)
        factor = cho_factor(covariance[np.ix_(~held, ~held)], lower=True)
        cross = _covariance(self.gaussian_, X, self._X[~held])
        mean = cross @ cho_solve(factor, self._z[~held])
        prior = sum(p.amplitude**2 for p in self.gaussian_.term_parameters().values())
        variance = prior - np.einsum("ij,ji->i", cross, cho_solve(factor, cross.T))
        sd = np.sqrt(np.maximum(variance, 0.0) + self.gaussian_.noise_**2)
        unit = self._deviation(frame)
        return frame.assign(predicted_eV=self._centre(frame) + unit * mean, sd_eV=unit * sd)

    def calibrate_elements(self, pure_without: Mapping[str, PureSurfaceModel]) -> Self:
        """Learn the intervals of alloys with an element that no training alloy holds.

        An element's own shift is added to the process's deviation: the robust scatter of the
        left-out residuals, in the unit of the adsorbate.
        """
        left = self.left_out_elements(pure_without)
        residual = (left["energy_eV"] - left["predicted_eV"]).to_numpy(dtype=np.float64)
        unit = self._deviation(left)
        self.element_sd_ = float(np.median(np.abs(residual) / unit) / 0.6745)
        self.element_calibration_ = GroupCalibration(state=_ELEMENTS).fit(
            residual, np.hypot(left["sd_eV"], self.element_sd_ * unit), left["left_out"]
        )
        return self

    def predict_new_element(self, frame: pd.DataFrame) -> tuple[FloatArray, FloatArray]:
        """Predict surfaces with an element new to the alloys: the Gaussian process alone."""
        mean, sd = self._gaussian(self.design_.matrix(frame))
        unit = self._deviation(frame)
        return self._centre(frame) + unit * mean, unit * np.hypot(sd, self.element_sd_)

    def _centre(self, frame: pd.DataFrame) -> FloatArray:
        return self.scale_["mean"].reindex(frame["adsorbate"]).to_numpy(dtype=np.float64)

    def _deviation(self, frame: pd.DataFrame) -> FloatArray:
        return self.scale_["sd"].reindex(frame["adsorbate"]).to_numpy(dtype=np.float64)


def _tree_values(trees: HistGradientBoostingRegressor, X: FloatArray) -> FloatArray:
    with threadpool_limits(1, user_api="openmp"):
        return np.asarray(trees.predict(tree_matrix(X)), dtype=np.float64)


def _covariance(model: GroupedGaussianProcess, left: FloatArray, right: FloatArray) -> FloatArray:
    """Return the fitted covariance between two sets of rows, without noise."""
    parameters = model.term_parameters()
    parts = [term_covariance(term, parameters[term.name], left, right)[0] for term in model.terms_]
    return np.asarray(np.sum(parts, axis=0), dtype=np.float64)
