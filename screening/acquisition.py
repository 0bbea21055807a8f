"""What making a sample is worth, before it is made: closed forms on means and covariances.

For a window from a to b and a normal belief with mean m and standard deviation s, with
z = (m - t) / s and ramp(t) = E[(Y - t)+] = s (phi(z) + z Phi(z)).
"""

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.special import ndtr

from screening.covariance import FloatArray

__all__ = [
    "BoolArray",
    "condition",
    "coverage_gain",
    "expected_approach_eV",
    "expected_calm_eV2",
    "straddle_eV",
]

BoolArray = NDArray[np.bool_]


def _ramp(mean: FloatArray, sd: FloatArray, start: FloatArray | float) -> FloatArray:
    z = (mean - start) / sd
    density = np.exp(-0.5 * z**2) / np.sqrt(2.0 * np.pi)
    return np.asarray(sd * (density + z * ndtr(z)))


def expected_approach_eV(
    mean_eV: ArrayLike, sd_eV: ArrayLike, window_eV: tuple[float, float], best_eV: float
) -> FloatArray:
    """Return by how much a sample is expected to come nearer to the window than the best so far.

    E[(D - distance(Y))+] with the distance 0 inside the window: four ramps, at a - D, a, b and
    b + D (integration by parts).

    Parameters
    ----------
    mean_eV, sd_eV : array-like of shape (n,)
        Belief about each candidate, eV; the standard deviation > 0.
    window_eV : tuple of float
        Ends a and b, eV.
    best_eV : float
        Distance D of the best sample so far from the window, eV, >= 0.

    Returns
    -------
    ndarray of shape (n,)
        eV, 0 to D.

    Examples
    --------
    >>> float(expected_approach_eV([2.0], [1e-9], (1.9, 2.1), 0.3).round(6)[0])
    0.3
    """
    mean = np.asarray(mean_eV, dtype=np.float64)
    sd = np.maximum(np.asarray(sd_eV, dtype=np.float64), 1e-12)
    low, high = window_eV
    rise = _ramp(mean, sd, low - best_eV) - _ramp(mean, sd, low)
    fall = _ramp(mean, sd, high) - _ramp(mean, sd, high + best_eV)
    return np.asarray(np.clip(rise - fall, 0.0, best_eV))


def straddle_eV(mean_eV: ArrayLike, sd_eV: ArrayLike, window_eV: tuple[float, float]) -> FloatArray:
    """Return how much a candidate straddles an edge of the window.

    1.96 s - min(|m - a|, |m - b|): Bryan et al., Adv. Neural Inf. Process. Syst. 18 (2005), from
    memory, for the nearer edge.

    Parameters
    ----------
    mean_eV, sd_eV : array-like of shape (n,)
    window_eV : tuple of float

    Returns
    -------
    ndarray of shape (n,)
        eV; above 0 where the 95 % belief holds an edge.

    Examples
    --------
    >>> float(straddle_eV([1.9], [0.1], (1.9, 2.1)).round(3)[0])
    0.196
    """
    mean = np.asarray(mean_eV, dtype=np.float64)
    nearest = np.minimum(np.abs(mean - window_eV[0]), np.abs(mean - window_eV[1]))
    return np.asarray(1.96 * np.asarray(sd_eV, dtype=np.float64) - nearest)


def condition(covariance: FloatArray, at: int, noise_variance: float) -> FloatArray:
    """Return the covariance after one candidate has been measured, whatever the result.

    Parameters
    ----------
    covariance : ndarray of shape (n, n)
    at : int
        The candidate.
    noise_variance : float
        Of the measurement, > 0.

    Returns
    -------
    ndarray of shape (n, n)

    Examples
    --------
    >>> condition(np.array([[1.0, 0.5], [0.5, 1.0]]), 0, 1.0).diagonal().tolist()
    [0.5, 0.875]
    """
    column = covariance[:, at]
    lowered = np.outer(column, column) / (covariance[at, at] + noise_variance)
    return np.asarray(covariance - lowered, dtype=np.float64)


def expected_calm_eV2(
    covariance: FloatArray, noise_variance: FloatArray, watched: FloatArray
) -> FloatArray:
    """Return by how much measuring each candidate lowers the variance of what is watched.

    Sum over i of w_i C_ij^2 / (C_jj + noise_j): the exact expected reduction for a Gaussian process
    with known parameters, which does not depend on the result.

    Parameters
    ----------
    covariance : ndarray of shape (n, n)
    noise_variance : ndarray of shape (n,)
        Of the measurement of each candidate, > 0.
    watched : ndarray of shape (n,)
        Weight of each candidate's variance, >= 0.

    Returns
    -------
    ndarray of shape (n,)

    Examples
    --------
    >>> expected_calm_eV2(np.eye(2), np.ones(2), np.array([1.0, 0.0])).tolist()
    [0.5, 0.0]
    """
    lowered = watched @ covariance**2
    return np.asarray(lowered / (np.diag(covariance) + noise_variance))


def coverage_gain(hits: BoolArray, landed: BoolArray) -> FloatArray:
    """Return the share of joint draws in which each candidate lands and nothing did before.

    Taking the largest gain again and again is greedy maximum coverage: within 1 - 1/e of the
    batch that is most likely to land at least once (Nemhauser, Wolsey and Fisher, Math. Program.
    14, 265 (1978), from memory).

    Parameters
    ----------
    hits : ndarray of bool, shape (n_draws, n)
        Whether each candidate lands in each joint draw.
    landed : ndarray of bool, shape (n_draws,)
        Whether a sample chosen before has landed.

    Returns
    -------
    ndarray of shape (n,)

    Examples
    --------
    >>> draws = np.array([[1, 0], [1, 0], [0, 1], [0, 0]], dtype=bool)
    >>> coverage_gain(draws, draws[:, 0]).tolist()
    [0.0, 0.25]
    """
    return np.asarray(hits[~landed].sum(axis=0) / len(hits), dtype=np.float64)
