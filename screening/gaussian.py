"""Gaussian process with per-row noise, group effects and exact left-out predictions.

Follows Rasmussen and Williams (2006): algorithm 2.1 for prediction, section 5.4 for the
likelihood and its gradient, and the block form of section 5.4.2 for left-out groups. Log-normal
priors on the parameters keep small tables from running onto a bound.
"""

from collections.abc import Sequence
from typing import Any, Self

import numpy as np
from scipy.linalg import cho_factor, cho_solve, solve_triangular
from scipy.optimize import minimize
from sklearn.base import BaseEstimator, RegressorMixin
from sklearn.utils.validation import check_is_fitted, validate_data
from threadpoolctl import threadpool_limits

from screening.covariance import (
    CovarianceTerm,
    FloatArray,
    TermParameters,
    term_covariance,
    term_gradient,
)

__all__ = ["GroupedGaussianProcess"]

_JITTER = 1e-10
_ROWS_PER_THREAD = 600


def _threads(n_rows: int) -> int | None:
    """Return the number of BLAS threads worth their cost; None for all."""
    return 1 if n_rows < _ROWS_PER_THREAD else None


class GroupedGaussianProcess(RegressorMixin, BaseEstimator):
    """Exact Gaussian process regression on a sum of covariance terms.

    Parameters
    ----------
    terms : sequence of CovarianceTerm or None, default None
        Terms over the columns of X; None uses a constant and one smooth term on all columns.
    noise : float, default 0.1
        Centre of the prior of the residual noise (standard deviation, unit of y), which is added
        to the rows' own noise.
    noise_spread : float, default 1.0
        Standard deviation of the prior of its logarithm.
    max_iter : int, default 200
        Iterations of the optimiser; 0 keeps the centres of the priors.
    start : sequence of float or None, default None
        Log parameters to start from instead of the centres of the priors, as in ``theta_``.

    Attributes
    ----------
    theta_ : ndarray
        Log parameters: for each term its amplitude and length scales, then the noise.
    n_iter_ : int
        Iterations that the optimiser took.
    log_posterior_ : float
        Log marginal likelihood plus log prior at ``theta_``.

    Examples
    --------
    >>> import numpy as np
    >>> X = np.linspace(0.0, 3.0, 8)[:, None]
    >>> model = GroupedGaussianProcess(noise=0.01).fit(X, np.sin(X[:, 0]))
    >>> bool(abs(model.predict(np.array([[1.5]]))[0] - np.sin(1.5)) < 0.02)
    True
    """

    def __init__(
        self,
        terms: Sequence[CovarianceTerm] | None = None,
        noise: float = 0.1,
        noise_spread: float = 1.0,
        max_iter: int = 200,
        start: Sequence[float] | None = None,
    ) -> None:
        self.terms = terms
        self.noise = noise
        self.noise_spread = noise_spread
        self.max_iter = max_iter
        self.start = start

    def fit(self, X: Any, y: Any, noise_sd: Any = None) -> Self:
        """Fit the parameters by their maximum a posteriori and factorise the covariance.

        Parameters
        ----------
        X : array-like of shape (n_rows, n_columns)
        y : array-like of shape (n_rows,)
        noise_sd : array-like of shape (n_rows,) or None, default None
            Standard deviation of each row's own noise, in the unit of y.

        Returns
        -------
        self
        """
        X, y = validate_data(self, X, y, y_numeric=True, dtype=np.float64)
        noise = np.zeros(len(y)) if noise_sd is None else np.asarray(noise_sd, dtype=np.float64)
        self.terms_ = self._default_terms() if self.terms is None else tuple(self.terms)
        self.X_, self.y_, self._row_variance = X, np.asarray(y, dtype=np.float64), noise**2
        centre, spread = self._prior()
        begin = centre if self.start is None else np.asarray(self.start, dtype=np.float64)
        theta, self.n_iter_ = begin, 1
        if self.max_iter > 0:
            # On the table sizes at hand more threads cost more than they bring.
            with threadpool_limits(_threads(len(y)), user_api="blas"):
                result = minimize(
                    self._objective,
                    begin,
                    args=(centre, spread),
                    jac=True,
                    method="L-BFGS-B",
                    options={"maxiter": self.max_iter},
                )
            theta, self.n_iter_ = result.x, max(1, int(result.nit))
        self.theta_ = theta
        self._factorise()
        self.log_posterior_ = self._log_posterior((theta - centre) / spread)
        return self

    def predict(self, X: Any, return_std: bool = False) -> Any:
        """Predict the noise-free value.

        Parameters
        ----------
        X : array-like of shape (n_rows, n_columns)
        return_std : bool, default False
            Also return the standard deviation (without noise).

        Returns
        -------
        mean : ndarray of shape (n_rows,)
        sd : ndarray of shape (n_rows,), only if ``return_std``
        """
        check_is_fitted(self)
        X = validate_data(self, X, dtype=np.float64, reset=False)
        cross = self._cross(X)
        mean = cross @ self._alpha
        if not return_std:
            return mean
        half = solve_triangular(self._cholesky[0], cross.T, lower=True, check_finite=False)
        variance = self._prior_variance(X) - np.einsum("ij,ij->j", half, half)
        return mean, np.sqrt(np.maximum(variance, 0.0))

    def posterior_covariance(self, X: Any) -> FloatArray:
        """Return the covariance of the noise-free values of rows, given the training rows.

        Parameters
        ----------
        X : array-like of shape (n_rows, n_columns)
            Rows whose labels agree vary together, also where no training row has the label.

        Returns
        -------
        ndarray of shape (n_rows, n_rows)
        """
        check_is_fitted(self)
        X = validate_data(self, X, dtype=np.float64, reset=False)
        cross = self._cross(X)
        half = solve_triangular(self._cholesky[0], cross.T, lower=True, check_finite=False)
        return self._covariance(X, X, same_rows=True) - half.T @ half

    def leave_group_out(self, groups: Any) -> tuple[FloatArray, FloatArray]:
        """Predict every training row from the rows of all other groups, parameters kept.

        Parameters
        ----------
        groups : array-like of shape (n_rows,)

        Returns
        -------
        mean, sd : ndarray of shape (n_rows,)
            Noise-free predictions, exact for the fitted parameters.
        """
        check_is_fitted(self)
        labels = np.asarray(groups)
        inverse = cho_solve(self._cholesky, np.eye(len(self.y_)))
        weighted = inverse @ self.y_
        mean, variance = np.empty(len(self.y_)), np.empty(len(self.y_))
        noise = self._noise_variance()
        for label in np.unique(labels):
            rows = np.flatnonzero(labels == label)
            block = np.linalg.inv(inverse[np.ix_(rows, rows)])
            mean[rows] = self.y_[rows] - block @ weighted[rows]
            variance[rows] = np.diag(block) - noise[rows]
        return mean, np.sqrt(np.maximum(variance, 0.0))

    def factorised(self) -> tuple[FloatArray, FloatArray, FloatArray]:
        """Return training rows, their weights in the mean, and the lower Cholesky factor.

        Returns
        -------
        rows : ndarray of shape (n_rows, n_columns)
        weights : ndarray of shape (n_rows,)
        factor : ndarray of shape (n_rows, n_rows)
            Of the covariance with noise; only the lower triangle counts.
        """
        check_is_fitted(self)
        return self.X_, self._alpha, self._cholesky[0]

    def correlation(self, X: Any) -> FloatArray:
        """Return the prior correlation of new rows with every training row.

        Parameters
        ----------
        X : array-like of shape (n_rows, n_columns)

        Returns
        -------
        ndarray of shape (n_rows, n_training_rows)
        """
        check_is_fitted(self)
        X = validate_data(self, X, dtype=np.float64, reset=False)
        spread = np.outer(self._prior_variance(X), self._prior_variance(self.X_))
        return np.asarray(self._cross(X) / np.sqrt(spread))

    @property
    def noise_(self) -> float:
        """Fitted residual noise (standard deviation, unit of y)."""
        return float(np.exp(self.theta_[-1]))

    def term_parameters(self) -> dict[str, TermParameters]:
        """Return the fitted parameters by name of the term."""
        pairs = zip(self.terms_, self._unpack(self.theta_), strict=True)
        return {term.name: parameters for term, parameters in pairs}

    def _default_terms(self) -> tuple[CovarianceTerm, ...]:
        columns = tuple(range(self.n_features_in_))
        return (CovarianceTerm("level"), CovarianceTerm("columns", columns))

    def _prior(self) -> tuple[FloatArray, FloatArray]:
        centre: list[float] = []
        spread: list[float] = []
        for term in self.terms_:
            centre += [np.log(term.amplitude)] + [np.log(term.length_scale)] * term.n_lengths
            spread += [term.amplitude_spread] + [term.length_spread] * term.n_lengths
        return np.array([*centre, np.log(self.noise)]), np.array([*spread, self.noise_spread])

    def _unpack(self, theta: FloatArray) -> list[TermParameters]:
        values, at = np.exp(theta), 0
        unpacked = []
        for term in self.terms_:
            end = at + 1 + term.n_lengths
            unpacked.append(TermParameters(float(values[at]), values[at + 1 : end]))
            at = end
        return unpacked

    def _noise_variance(self, theta: FloatArray | None = None) -> FloatArray:
        log_noise = (self.theta_ if theta is None else theta)[-1]
        return np.asarray(self._row_variance + np.exp(2.0 * log_noise) + _JITTER)

    def _objective(
        self, theta: FloatArray, centre: FloatArray, spread: FloatArray
    ) -> tuple[float, FloatArray]:
        """Return the negative log posterior and its gradient."""
        parameters = self._unpack(theta)
        parts = [
            term_covariance(term, p, self.X_, self.X_, same_rows=True)
            for term, p in zip(self.terms_, parameters, strict=True)
        ]
        noise = self._noise_variance(theta)
        total = np.sum([value for value, _ in parts], axis=0)
        total[np.diag_indices_from(total)] += noise
        try:
            factor = cho_factor(total, lower=True, check_finite=False)
        except np.linalg.LinAlgError:
            return 1e25, np.zeros_like(theta)
        alpha = cho_solve(factor, self.y_, check_finite=False)
        inverse = cho_solve(factor, np.eye(len(alpha)), check_finite=False)
        sensitivity = 0.5 * (inverse - np.outer(alpha, alpha))
        gradient = [
            term_gradient(term, p, self.X_, value, weight, sensitivity)
            for (term, p), (value, weight) in zip(
                zip(self.terms_, parameters, strict=True), parts, strict=True
            )
        ]
        by_noise = 2.0 * np.exp(2.0 * theta[-1]) * np.trace(sensitivity)
        standard = (theta - centre) / spread
        value = (
            0.5 * self.y_ @ alpha
            + np.log(np.diag(factor[0])).sum()
            + 0.5 * len(alpha) * np.log(2.0 * np.pi)
            + 0.5 * standard @ standard
        )
        return float(value), np.concatenate([*gradient, [by_noise]]) + standard / spread

    def _log_posterior(self, standard: FloatArray) -> float:
        """Return the log posterior of the factorised parameters, standardised by their prior."""
        n_rows = len(self.y_)
        fit = 0.5 * self.y_ @ self._alpha + np.log(np.diag(self._cholesky[0])).sum()
        prior = 0.5 * standard @ standard
        return -float(fit + 0.5 * n_rows * np.log(2.0 * np.pi) + prior)

    def _factorise(self) -> None:
        total = self._covariance(self.X_, self.X_, same_rows=True)
        total[np.diag_indices_from(total)] += self._noise_variance()
        self._cholesky = cho_factor(total, lower=True, check_finite=False)
        self._alpha = cho_solve(self._cholesky, self.y_, check_finite=False)

    def _covariance(
        self, left: FloatArray, right: FloatArray, *, same_rows: bool = False
    ) -> FloatArray:
        parts = [
            term_covariance(term, p, left, right, same_rows=same_rows)[0]
            for term, p in zip(self.terms_, self._unpack(self.theta_), strict=True)
        ]
        total: FloatArray = np.sum(parts, axis=0)
        return total

    def _cross(self, X: FloatArray) -> FloatArray:
        return self._covariance(X, self.X_)

    def _prior_variance(self, X: FloatArray) -> FloatArray:
        total = np.zeros(len(X))
        for term, p in zip(self.terms_, self._unpack(self.theta_), strict=True):
            part = np.full(len(X), p.amplitude**2)
            if term.smoothness == "linear":
                part *= np.sum(X[:, term.columns] ** 2, axis=1)
            if term.scale is not None:
                part *= X[:, term.scale] ** 2
            total += part
        return np.asarray(total)
