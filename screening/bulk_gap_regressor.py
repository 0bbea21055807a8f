"""Gaussian process and randomised trees that learn the square root of the bulk gap.

The square root makes errors of narrow and wide gaps comparable; its median maps back to the
median of the gap. Rows that contradict their neighbours lose weight as under a Student-t
likelihood: one step of expectation-maximisation on left-out residuals (Lange, Little and Taylor,
J. Am. Stat. Assoc. 84, 881 (1989)), because compilations hold misprints and defect absorption.
"""

from collections.abc import Sequence
from typing import Any, Self

import numpy as np
import pandas as pd
from sklearn.ensemble import ExtraTreesRegressor
from sklearn.model_selection import GroupKFold

from screening.blending import blend, blend_weight
from screening.bulk_gap_design import GapDesign, tree_matrix
from screening.calibration import GroupCalibration, group_weights
from screening.covariance import FloatArray
from screening.gaussian import GroupedGaussianProcess

__all__ = ["GapRegressor", "squared_moments"]

_DOUBTFUL_NOISE = 0.5
_DOUBTFUL_VOTE = 0.2
_DEGREES_OF_FREEDOM = 4.0
_SAMPLE_ROWS = 600
_MAX_ITER = 18
_N_TREES = 80
_N_FOLDS = 5


def squared_moments(root: FloatArray, root_sd: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Return median and standard deviation of the square of a normal variable.

    Parameters
    ----------
    root, root_sd : ndarray of shape (n_rows,)
        Mean and standard deviation of the variable; a mean below 0 counts as 0.

    Returns
    -------
    median, sd : ndarray of shape (n_rows,)
        The standard deviation is exact: its square is 4 m^2 s^2 + 2 s^4.

    Examples
    --------
    >>> squared_moments(np.array([2.0]), np.array([0.0]))[0].tolist()
    [4.0]
    """
    middle = np.maximum(root, 0.0)
    variance = 4.0 * middle**2 * root_sd**2 + 2.0 * root_sd**4
    return middle**2, np.sqrt(variance)


def _at(
    learned: GroupedGaussianProcess, X: FloatArray, y: FloatArray, noise_sd: FloatArray
) -> GroupedGaussianProcess:
    """Return a process on all rows with the parameters that another one learned."""
    kept = GroupedGaussianProcess(learned.terms_, max_iter=0, start=learned.theta_.tolist())
    fitted: GroupedGaussianProcess = kept.fit(X, y, noise_sd=noise_sd)
    return fitted


class GapRegressor:
    """The square root of the gap by composition, with calibrated intervals.

    Parameters
    ----------
    seed : int, default 0

    Attributes
    ----------
    gaussian_weight_ : float
        Weight of the Gaussian process, by skill on left-out chemical systems.
    calibration_ : GroupCalibration
        From left-out chemical systems.
    """

    def __init__(self, seed: int = 0) -> None:
        self.seed = seed

    def fit(self, rows: pd.DataFrame) -> Self:
        """Learn from rows with a gap; a gap below 0 counts as 0.

        Parameters
        ----------
        rows : pandas.DataFrame
            Columns material, chemical_system, gap_eV and doubtful as from
            ``screening.bulk_gap_rows.gap_rows``.

        Returns
        -------
        self
        """
        formulas, groups = rows["material"].tolist(), rows["chemical_system"].to_numpy()
        doubtful = rows["doubtful"].to_numpy(dtype=bool)
        root = np.sqrt(np.maximum(rows["gap_eV"].to_numpy(dtype=np.float64), 0.0))
        self.level_ = float(root.mean())
        self.design_ = GapDesign().fit(formulas)
        self._fit_gaussian(self.design_.transform(formulas), root - self.level_, groups, doubtful)
        votes = np.where(doubtful, _DOUBTFUL_VOTE, 1.0)
        self._fit_trees(tree_matrix(formulas), root - self.level_, groups, votes)
        self._calibrate(root - self.level_, groups, votes)
        return self

    def predict_root(self, formulas: Sequence[str]) -> tuple[FloatArray, FloatArray]:
        """Return mean and uncalibrated standard deviation of the square root of the gap."""
        mean, sd = self.gaussian_.predict(self.design_.transform(formulas), return_std=True)
        trees = self.trees_.predict(tree_matrix(formulas))
        mixed, spread = blend(mean, trees, sd, self.gaussian_weight_)
        return mixed + self.level_, np.hypot(spread, self.gaussian_.noise_)

    def _fit_gaussian(
        self, X: FloatArray, y: FloatArray, groups: Any, doubtful: FloatArray
    ) -> None:
        """Fit parameters on a sample of rows, then factorise all rows, outliers weighed down.

        Blend and calibration use the left-out predictions before the outliers lose weight: the
        weights know all rows, so later ones would look better than a new system's.
        """
        own = np.where(doubtful, _DOUBTFUL_NOISE, 0.0)
        terms = self.design_.terms()
        sample = np.random.default_rng(self.seed).permutation(len(y))[:_SAMPLE_ROWS]
        learned = GroupedGaussianProcess(terms, max_iter=_MAX_ITER).fit(
            X[sample], y[sample], noise_sd=own[sample]
        )
        first = _at(learned, X, y, own)
        mean, sd = first.leave_group_out(groups)
        self._left_mean, self._left_sd = mean, sd
        standard = (y - mean) ** 2 / (sd**2 + first.noise_**2 + own**2)
        excess = (_DEGREES_OF_FREEDOM + standard) / (_DEGREES_OF_FREEDOM + 1.0) - 1.0
        robust = own**2 + np.maximum(excess, 0.0) * (first.noise_**2 + 0.5 * sd**2)
        self.gaussian_ = _at(learned, X, y, np.sqrt(robust))

    def _fit_trees(self, X: FloatArray, y: FloatArray, groups: Any, votes: FloatArray) -> None:
        """Fit the trees, and predict every chemical system from the others."""
        left = np.empty(len(y))
        for train, test in GroupKFold(_N_FOLDS).split(X, y, groups):
            left[test] = self._new_trees().fit(X[train], y[train], votes[train]).predict(X[test])
        self.trees_ = self._new_trees().fit(X, y, votes)
        self._left_trees = left

    def _new_trees(self) -> ExtraTreesRegressor:
        return ExtraTreesRegressor(_N_TREES, max_features=0.4, random_state=self.seed)

    def _calibrate(self, y: FloatArray, groups: Any, votes: FloatArray) -> None:
        weights = group_weights(groups, votes)
        self.gaussian_weight_ = blend_weight(y, self._left_mean, self._left_trees, weights)
        mean, spread = blend(
            self._left_mean, self._left_trees, self._left_sd, self.gaussian_weight_
        )
        sd = np.hypot(spread, self.gaussian_.noise_)
        self.calibration_ = GroupCalibration(state="new composition").fit(
            y - mean, sd, groups, votes
        )
