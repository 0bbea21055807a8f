"""Gaussian process and gradient-boosted trees blended by their skill on left-out groups.

One mechanism for every property of the program: the caller hands over a scaled residual to a
physics mean, this module learns it twice, predicts every group from the others, and weighs the
two by the error that they make there.
"""

from collections.abc import Sequence
from copy import copy
from dataclasses import dataclass
from typing import Any, Self

import numpy as np
from sklearn.base import BaseEstimator, RegressorMixin
from sklearn.ensemble import HistGradientBoostingRegressor
from sklearn.model_selection import GroupKFold
from sklearn.utils.validation import check_is_fitted, validate_data
from threadpoolctl import threadpool_limits

from screening.calibration import group_weights
from screening.covariance import CovarianceTerm, FloatArray
from screening.gaussian import GroupedGaussianProcess

__all__ = ["BlendedRegressor", "LeftOut", "blend", "blend_weight", "boosted_trees"]


@dataclass(frozen=True)
class LeftOut:
    """Predictions of every row from the rows of other groups (unit of y).

    Parameters
    ----------
    gaussian, trees : ndarray of shape (n_rows,)
        Means of the two regressors.
    sd : ndarray of shape (n_rows,)
        Standard deviation of the Gaussian process, without row noise.
    """

    gaussian: FloatArray
    trees: FloatArray
    sd: FloatArray

    def blend(self, weight: float) -> tuple[FloatArray, FloatArray]:
        """Return mean and standard deviation for a weight of the Gaussian process."""
        return blend(self.gaussian, self.trees, self.sd, weight)


def blend(
    gaussian: FloatArray, trees: FloatArray, sd: FloatArray, weight: float | FloatArray
) -> tuple[FloatArray, FloatArray]:
    """Return the mixture's mean and standard deviation: own spread plus disagreement."""
    mean = weight * gaussian + (1.0 - weight) * trees
    variance = sd**2 + weight * (1.0 - weight) * (gaussian - trees) ** 2
    return mean, np.sqrt(variance)


def blend_weight(
    y: FloatArray, gaussian: FloatArray, trees: FloatArray, weights: FloatArray
) -> float:
    """Return the weight of the Gaussian process that least squares give on left-out rows.

    Parameters
    ----------
    y, gaussian, trees, weights : ndarray of shape (n_rows,)

    Returns
    -------
    float
        Between 0 and 1.

    Examples
    --------
    >>> import numpy as np
    >>> y = np.array([0.0, 1.0, 2.0])
    >>> blend_weight(y, y, y + 1.0, np.ones(3))
    1.0
    """
    difference = gaussian - trees
    spread = float(weights @ difference**2)
    if spread <= 0.0:
        return 0.5
    return float(np.clip(weights @ ((y - trees) * difference) / spread, 0.0, 1.0))


def boosted_trees(seed: int = 0, **options: Any) -> HistGradientBoostingRegressor:
    """Return the program's gradient-boosted trees: shallow, slow-learning, small leaves."""
    settings: dict[str, Any] = {
        "max_iter": 150,
        "learning_rate": 0.06,
        "max_leaf_nodes": 8,
        "min_samples_leaf": 5,
        "l2_regularization": 1.0,
        "early_stopping": False,
        "random_state": seed,
    }
    return HistGradientBoostingRegressor(**(settings | options))


class BlendedRegressor(RegressorMixin, BaseEstimator):
    """A Gaussian process and boosted trees on one scaled residual.

    Parameters
    ----------
    terms : sequence of CovarianceTerm or None, default None
        Covariance over the columns of X, as for `GroupedGaussianProcess`.
    tree_columns : sequence of int or None, default None
        Columns that the trees see; None for all.
    noise : float, default 0.1
        Prior centre of the residual noise of the Gaussian process.
    n_folds : int, default 12
        Folds of groups in which the trees are refitted for left-out predictions.
    tree_options : dict or None, default None
        Settings of the trees that differ from `boosted_trees`.
    gaussian_weight : float, default 0.5
        Weight of the Gaussian process in `predict`; the caller sets what `weigh` gave.
    seed : int, default 0
    """

    def __init__(
        self,
        terms: Sequence[CovarianceTerm] | None = None,
        tree_columns: Sequence[int] | None = None,
        noise: float = 0.1,
        n_folds: int = 12,
        tree_options: dict[str, Any] | None = None,
        gaussian_weight: float = 0.5,
        seed: int = 0,
    ) -> None:
        self.terms = terms
        self.tree_columns = tree_columns
        self.noise = noise
        self.n_folds = n_folds
        self.tree_options = tree_options
        self.gaussian_weight = gaussian_weight
        self.seed = seed

    def fit(
        self,
        X: Any,
        y: Any,
        noise_sd: Any = None,
        tree_weight: Any = None,
        start: Sequence[float] | None = None,
        max_iter: int = 200,
        tree_rows: Any = None,
    ) -> Self:
        """Fit both regressors on all rows.

        Parameters
        ----------
        X : array-like of shape (n_rows, n_columns)
        y : array-like of shape (n_rows,)
        noise_sd, tree_weight : array-like of shape (n_rows,) or None, default None
            Rows' own noise for the Gaussian process; weights for the trees.
        start, max_iter
            Passed on to `GroupedGaussianProcess`.
        tree_rows : array-like of bool or None, default None
            Rows that the trees learn from; None for all.

        Returns
        -------
        self
        """
        X, y = validate_data(self, X, y, y_numeric=True, dtype=np.float64)
        self.gaussian_ = GroupedGaussianProcess(
            terms=self.terms, noise=self.noise, start=start, max_iter=max_iter
        ).fit(X, y, noise_sd=noise_sd)
        columns = range(X.shape[1]) if self.tree_columns is None else self.tree_columns
        self._columns = list(columns)
        self._X, self._y = X, np.asarray(y, dtype=np.float64)
        self._weight = None if tree_weight is None else np.asarray(tree_weight, dtype=float)
        self._tree_rows = np.ones(len(y), bool) if tree_rows is None else np.asarray(tree_rows)
        self.trees_ = self._fit_trees(np.arange(len(self._y)))
        return self

    def conditioned(self, X: Any, y: Any, noise_sd: Any = None) -> "BlendedRegressor":
        """Return a copy whose Gaussian process holds other rows; parameters and trees are kept.

        Parameters
        ----------
        X : array-like of shape (n_rows, n_columns)
        y : array-like of shape (n_rows,)
        noise_sd : array-like of shape (n_rows,) or None, default None

        Returns
        -------
        BlendedRegressor
            For predictions; it cannot leave groups out.
        """
        check_is_fitted(self)
        other = copy(self)
        other.gaussian_ = GroupedGaussianProcess(
            terms=self.terms, noise=self.noise, start=self.gaussian_.theta_.tolist(), max_iter=0
        ).fit(X, y, noise_sd=noise_sd)
        return other

    def predict(self, X: Any, return_std: bool = False) -> Any:
        """Predict the blended mean and, if wanted, its standard deviation without row noise."""
        check_is_fitted(self)
        gaussian, trees, sd = self.parts(X)
        mean, spread = blend(gaussian, trees, sd, self.gaussian_weight)
        return (mean, spread) if return_std else mean

    def parts(self, X: Any) -> tuple[FloatArray, FloatArray, FloatArray]:
        """Return the two means and the Gaussian standard deviation for new rows."""
        X = validate_data(self, X, dtype=np.float64, reset=False)
        mean, sd = self.gaussian_.predict(X, return_std=True)
        with threadpool_limits(1, user_api="openmp"):
            trees = self.trees_.predict(X[:, self._columns])
        return mean, trees, sd

    def left_out(self, groups: Any) -> LeftOut:
        """Predict every training row from the rows of other groups.

        The Gaussian process keeps its parameters and leaves each group out exactly; the trees are
        refitted in folds of whole groups.

        Parameters
        ----------
        groups : array-like of shape (n_rows,)

        Returns
        -------
        LeftOut
        """
        labels = np.asarray(groups)
        mean, sd = self.gaussian_.leave_group_out(labels)
        trees = np.empty(len(labels))
        folds = min(self.n_folds, len(np.unique(labels)))
        for train, test in GroupKFold(folds).split(self._X, self._y, labels):
            model = self._fit_trees(train)
            with threadpool_limits(1, user_api="openmp"):
                trees[test] = model.predict(self._X[np.ix_(test, self._columns)])
        return LeftOut(mean, trees, sd)

    @staticmethod
    def weigh_rows(y: Any, left: LeftOut, groups: Any, row_weights: Any = None) -> float:
        """Return the weight of the Gaussian process by left-out skill, one vote a group."""
        weights = group_weights(groups, row_weights)
        return blend_weight(np.asarray(y, dtype=float), left.gaussian, left.trees, weights)

    def weigh(self, left: LeftOut, groups: Any, row_weights: Any = None) -> float:
        """Return `weigh_rows` over all training rows."""
        return self.weigh_rows(self._y, left, groups, row_weights)

    def _fit_trees(self, rows: Any) -> HistGradientBoostingRegressor:
        rows = rows[self._tree_rows[rows]]
        weight = None if self._weight is None else self._weight[rows]
        with threadpool_limits(1, user_api="openmp"):
            return boosted_trees(self.seed, **(self.tree_options or {})).fit(
                self._X[np.ix_(rows, self._columns)], self._y[rows], sample_weight=weight
            )
