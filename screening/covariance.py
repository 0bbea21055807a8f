"""Covariance terms of the Gaussian process: what two rows share.

A covariance is a sum of terms. A term multiplies a stationary function of numeric columns (with
one length scale a column), equality of label columns (material, source ...) and, if wanted, a
scale column that makes the term grow where an effect grows. Formulas: Rasmussen and Williams,
Gaussian Processes for Machine Learning (2006), chapters 4 and 5.
"""

from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray
from scipy.spatial.distance import cdist

__all__ = ["CovarianceTerm", "FloatArray", "TermParameters", "term_covariance", "term_gradient"]

FloatArray = NDArray[np.float64]
Smoothness = Literal["smooth", "matern 5/2", "matern 3/2", "linear"]


@dataclass(frozen=True)
class CovarianceTerm:
    """One additive term of a covariance.

    Parameters
    ----------
    name : str
        What the term stands for; used in reports.
    columns : tuple of int, default ()
        Numeric columns of X, one length scale each. Empty: the term is constant.
    labels : tuple of int, default ()
        Columns whose values must be equal for two rows to share the term. A negative label is
        unknown and equals nothing but itself in the same row.
    scale : int or None, default None
        Column that multiplies the term's standard deviation.
    smoothness : {"smooth", "matern 5/2", "matern 3/2", "linear"}, default "smooth"
        Squared exponential, Matern, or linear in the columns (no length scale).
    shared_length : bool, default False
        Use one length scale for all columns.
    amplitude, length_scale : float, default 1.0
        Centres of the priors of the standard deviation and of the length scales.
    amplitude_spread, length_spread : float, default 1.0
        Standard deviations of the priors of their logarithms; ``inf`` for none.
    """

    name: str
    columns: tuple[int, ...] = ()
    labels: tuple[int, ...] = ()
    scale: int | None = None
    smoothness: Smoothness = "smooth"
    shared_length: bool = False
    amplitude: float = 1.0
    length_scale: float = 1.0
    amplitude_spread: float = 1.0
    length_spread: float = 1.0

    @property
    def n_lengths(self) -> int:
        """Number of length scales."""
        if self.smoothness == "linear" or not self.columns:
            return 0
        return 1 if self.shared_length else len(self.columns)


@dataclass(frozen=True)
class TermParameters:
    """Values of a term: standard deviation and length scales."""

    amplitude: float
    lengths: FloatArray

    def per_column(self, term: CovarianceTerm) -> FloatArray:
        """Return one length scale a column."""
        return np.broadcast_to(self.lengths, (len(term.columns),)).astype(np.float64)


def _stationary(smoothness: Smoothness, squared: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Return the correlation and -2 times its derivative to the squared scaled distance."""
    if smoothness == "smooth":
        value = np.exp(-0.5 * squared)
        return value, value
    distance = np.sqrt(squared)
    if smoothness == "matern 5/2":
        decay = np.exp(-np.sqrt(5.0) * distance)
        linear = 1.0 + np.sqrt(5.0) * distance
        return (linear + 5.0 / 3.0 * squared) * decay, 5.0 / 3.0 * linear * decay
    decay = np.exp(-np.sqrt(3.0) * distance)
    return (1.0 + np.sqrt(3.0) * distance) * decay, 3.0 * decay


def _mask(
    term: CovarianceTerm, left: FloatArray, right: FloatArray, *, same_rows: bool
) -> FloatArray | None:
    """Return label agreement times the scale columns, or None where the term has neither."""
    mask: FloatArray | None = None
    if term.labels:
        a, b = left[:, term.labels], right[:, term.labels]
        known = np.all(a >= 0, axis=1, keepdims=True)
        mask = ((a[:, None, :] == b[None, :, :]).all(axis=2) & known).astype(np.float64)
        if same_rows:
            np.fill_diagonal(mask, 1.0)
    if term.scale is not None:
        outer = np.outer(left[:, term.scale], right[:, term.scale])
        mask = outer if mask is None else mask * outer
    return mask


def term_covariance(
    term: CovarianceTerm,
    parameters: TermParameters,
    left: FloatArray,
    right: FloatArray,
    *,
    same_rows: bool = False,
) -> tuple[FloatArray, FloatArray]:
    """Return a term's covariance and its derivative weight.

    Parameters
    ----------
    term : CovarianceTerm
    parameters : TermParameters
    left : ndarray of shape (n, n_columns)
    right : ndarray of shape (m, n_columns)
    same_rows : bool, default False
        Whether both arrays are the same rows in the same order.

    Returns
    -------
    covariance : ndarray of shape (n, m)
    weight : ndarray of shape (n, m)
        -2 times the derivative of the covariance to the squared scaled distance.
    """
    variance = parameters.amplitude**2
    mask = _mask(term, left, right, same_rows=same_rows)
    if not term.columns:
        value = weight = np.ones((len(left), len(right)))
    elif term.smoothness == "linear":
        value = left[:, term.columns] @ right[:, term.columns].T
        weight = value
    else:
        lengths = parameters.per_column(term)
        squared = cdist(
            left[:, term.columns] / lengths, right[:, term.columns] / lengths, "sqeuclidean"
        )
        value, weight = _stationary(term.smoothness, squared)
    factor: FloatArray | float = variance if mask is None else variance * mask
    return value * factor, weight * factor


def term_gradient(
    term: CovarianceTerm,
    parameters: TermParameters,
    X: FloatArray,
    covariance: FloatArray,
    weight: FloatArray,
    sensitivity: FloatArray,
) -> FloatArray:
    """Return the gradient of a term's log parameters, given the sensitivity of the covariance.

    The sum over pairs of w(a, b) (x_a - x_b)^2 needs no matrix of differences: for symmetric w it
    is 2 (sum of x^2 times the row sums of w, minus x' w x), one product for all columns.

    Parameters
    ----------
    term, parameters, X, covariance, weight
        As given to and returned by `term_covariance` on the training rows.
    sensitivity : ndarray of shape (n, n)
        Derivative of the objective to the covariance matrix, symmetric.

    Returns
    -------
    ndarray of shape (1 + n_lengths,)
        Derivatives to the log amplitude and the log length scales.
    """
    by_amplitude = 2.0 * float(np.sum(sensitivity * covariance))
    if term.n_lengths == 0:
        return np.array([by_amplitude])
    scaled = X[:, term.columns] / parameters.per_column(term)
    scaled = scaled - scaled.mean(axis=0)
    pair = sensitivity * weight
    by_column = 2.0 * (pair.sum(axis=1) @ scaled**2 - np.sum(scaled * (pair @ scaled), axis=0))
    by_length = np.array([by_column.sum()]) if term.shared_length else by_column
    return np.concatenate(([by_amplitude], by_length))
