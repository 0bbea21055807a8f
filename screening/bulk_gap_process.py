"""Average of Gaussian processes whose parameters were learned on different samples of groups.

Learning parameters on a sample costs a fraction of the cube of all rows, and the average over
samples smooths what a single sample leaves to chance. Each process then holds all rows. Rows that
contradict their neighbours lose weight as under a Student-t likelihood: one step of
expectation-maximisation on left-out residuals (Lange, Little and Taylor, J. Am. Stat. Assoc. 84,
881 (1989)), because compilations hold misprints and defect absorption.
"""

from collections.abc import Sequence
from typing import Any, Self

import numpy as np
from numpy.typing import NDArray

from screening.covariance import CovarianceTerm, FloatArray
from screening.gaussian import GroupedGaussianProcess

__all__ = ["ProcessAverage"]

_DEGREES_OF_FREEDOM = 4.0
_SAMPLE_ROWS = 600
_MAX_ITER = 18


def _at(
    learned: GroupedGaussianProcess, X: FloatArray, y: FloatArray, noise_sd: FloatArray
) -> GroupedGaussianProcess:
    """Return a process on all rows with the parameters that another one learned."""
    kept = GroupedGaussianProcess(learned.terms_, max_iter=0, start=learned.theta_.tolist())
    fitted: GroupedGaussianProcess = kept.fit(X, y, noise_sd=noise_sd)
    return fitted


def _pooled(means: FloatArray, sds: FloatArray, votes: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Return mean and standard deviation of a mixture, one row a process."""
    shares = votes / votes.sum(axis=0)
    mean = np.sum(shares * means, axis=0)
    variance = np.sum(shares * (sds**2 + (means - mean) ** 2), axis=0)
    return mean, np.sqrt(variance)


def _sampled(groups: NDArray[Any], seed: Sequence[int]) -> NDArray[np.bool_]:
    """Return which rows belong to a random choice of whole groups of about the wanted size."""
    names, sizes = np.unique(groups, return_counts=True)
    order = np.random.default_rng(seed).permutation(len(names))
    last = int(np.searchsorted(np.cumsum(sizes[order]), min(_SAMPLE_ROWS, len(groups))))
    return np.isin(groups, names[order[: last + 1]])


def _outlier_noise(residual: FloatArray, variance: FloatArray, noise: FloatArray) -> FloatArray:
    """Return the noise, as a standard deviation, that a Student-t likelihood grants each row."""
    excess = (_DEGREES_OF_FREEDOM + residual**2 / variance) / (_DEGREES_OF_FREEDOM + 1.0) - 1.0
    return np.sqrt(np.maximum(excess, 0.0)) * noise


class ProcessAverage:
    """Average of Gaussian processes on all rows.

    Parameters
    ----------
    terms : sequence of CovarianceTerm
    n_processes : int, default 4
    seed : int, default 0
        Of the samples of groups.

    Attributes
    ----------
    left_mean_, left_sd_ : ndarray of shape (n_rows,)
        Predictions of every row from the rows of other groups, by the processes that did not
        learn their parameters from the row's group (by all, if every process did), taken before
        outliers lose weight. Otherwise they would look better than a new group's.
    noise_ : float
        Standard deviation of a row about the noise-free value.
    """

    def __init__(
        self, terms: Sequence[CovarianceTerm], n_processes: int = 4, seed: int = 0
    ) -> None:
        self.terms = terms
        self.n_processes = n_processes
        self.seed = seed

    def fit(self, X: FloatArray, y: FloatArray, groups: Any, noise_sd: FloatArray) -> Self:
        """Fit the processes.

        Parameters
        ----------
        X : ndarray of shape (n_rows, n_columns)
        y : ndarray of shape (n_rows,)
        groups : array-like of shape (n_rows,)
        noise_sd : ndarray of shape (n_rows,)
            Each row's own noise, in the unit of y.

        Returns
        -------
        self
        """
        labels = np.asarray(groups)
        samples = [_sampled(labels, [self.seed, at]) for at in range(self.n_processes)]
        fits = [self._fit_one(sample, X, y, labels, noise_sd) for sample in samples]
        self.processes_ = [process for process, _, _ in fits]
        votes = (~np.array(samples)).astype(np.float64)
        votes[:, votes.sum(axis=0) == 0.0] = 1.0
        self.left_mean_, self.left_sd_ = _pooled(
            np.array([mean for _, mean, _ in fits]), np.array([sd for _, _, sd in fits]), votes
        )
        self.noise_ = float(np.mean([process.noise_ for process in self.processes_]))
        return self

    def predict(self, X: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Return the mean and the standard deviation, without noise, for new rows."""
        pairs = [process.predict(X, return_std=True) for process in self.processes_]
        means, sds = np.array([mean for mean, _ in pairs]), np.array([sd for _, sd in pairs])
        return _pooled(means, sds, np.ones_like(means))

    def _fit_one(
        self,
        sample: NDArray[np.bool_],
        X: FloatArray,
        y: FloatArray,
        groups: Any,
        noise_sd: FloatArray,
    ) -> tuple[GroupedGaussianProcess, FloatArray, FloatArray]:
        learned = GroupedGaussianProcess(self.terms, max_iter=_MAX_ITER).fit(
            X[sample], y[sample], noise_sd=noise_sd[sample]
        )
        first = _at(learned, X, y, noise_sd)
        mean, sd = first.leave_group_out(groups)
        variance = sd**2 + first.noise_**2 + noise_sd**2
        added = _outlier_noise(y - mean, variance, np.sqrt(first.noise_**2 + 0.5 * sd**2))
        return _at(learned, X, y, np.hypot(noise_sd, added)), mean, sd
