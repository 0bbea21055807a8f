"""Gaussian processes and randomised trees that learn the square root of the bulk gap.

The square root makes errors of narrow and wide gaps comparable; its median maps back to the
median of the gap. The trees see the processes' left-out prediction as one more column, so that
they learn where it errs.
"""

from collections.abc import Sequence
from typing import Any, Self

import numpy as np
import pandas as pd
from sklearn.ensemble import ExtraTreesRegressor
from sklearn.model_selection import GroupKFold

from screening.blending import blend, blend_weight
from screening.bulk_gap_design import GapDesign, tree_matrix
from screening.bulk_gap_process import ProcessAverage
from screening.calibration import GroupCalibration, group_weights
from screening.covariance import FloatArray

__all__ = ["GapRegressor", "squared_moments"]

_DOUBTFUL_NOISE = 0.5
_DOUBTFUL_VOTE = 0.2
_N_TREES = 80
_N_FOLDS = 10
_N_TREES_LEFT_OUT = 40


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


def _with_column(matrix: FloatArray, column: FloatArray) -> FloatArray:
    return np.hstack([matrix, column[:, None]])


class GapRegressor:
    """The square root of the gap by composition, with calibrated intervals.

    Parameters
    ----------
    seed : int, default 0

    Attributes
    ----------
    gaussian_weight_ : float
        Weight of the Gaussian processes: half-way between equal weights and the weight that
        left-out chemical systems give, because estimated weights overshoot (Smith and Wallis,
        Oxf. Bull. Econ. Stat. 71, 331 (2009)).
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
        self.gaussian_ = ProcessAverage(self.design_.terms(), seed=self.seed).fit(
            self.design_.transform(formulas),
            root - self.level_,
            groups,
            np.where(doubtful, _DOUBTFUL_NOISE, 0.0),
        )
        votes = np.where(doubtful, _DOUBTFUL_VOTE, 1.0)
        X = _with_column(tree_matrix(formulas), self.gaussian_.left_mean_)
        self.trees_ = self._new_trees().fit(X, root - self.level_, votes)
        self._calibrate(X, root - self.level_, groups, votes)
        return self

    def predict_root(self, formulas: Sequence[str]) -> tuple[FloatArray, FloatArray]:
        """Return mean and uncalibrated standard deviation of the square root of the gap.

        Parameters
        ----------
        formulas : sequence of str

        Returns
        -------
        mean, sd : ndarray of shape (n_formulas,)
            In the square root of eV.
        """
        mean, sd = self.gaussian_.predict(self.design_.transform(formulas))
        trees = self.trees_.predict(_with_column(tree_matrix(formulas), mean))
        mixed, spread = blend(mean, trees, sd, self.gaussian_weight_)
        return mixed + self.level_, np.hypot(spread, self.gaussian_.noise_)

    def _new_trees(self, n_trees: int = _N_TREES) -> ExtraTreesRegressor:
        return ExtraTreesRegressor(n_trees, max_features=0.4, random_state=self.seed)

    def _left_out_trees(
        self, X: FloatArray, y: FloatArray, groups: Any, votes: FloatArray
    ) -> FloatArray:
        """Predict every chemical system by trees that were grown on the others."""
        left = np.empty(len(y))
        for train, test in GroupKFold(_N_FOLDS).split(X, y, groups):
            trees = self._new_trees(_N_TREES_LEFT_OUT).fit(X[train], y[train], votes[train])
            left[test] = trees.predict(X[test])
        return left

    def _calibrate(self, X: FloatArray, y: FloatArray, groups: Any, votes: FloatArray) -> None:
        """Weigh both learners and calibrate by their left-out predictions."""
        mean, sd = self.gaussian_.left_mean_, self.gaussian_.left_sd_
        trees = self._left_out_trees(X, y, groups, votes)
        skill = blend_weight(y, mean, trees, group_weights(groups, votes))
        self.gaussian_weight_ = 0.5 * (skill + 0.5)
        mixed, spread = blend(mean, trees, sd, self.gaussian_weight_)
        self.calibration_ = GroupCalibration(state="new composition").fit(
            y - mixed, np.hypot(spread, self.gaussian_.noise_), groups, votes
        )
