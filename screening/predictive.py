"""Predictive distributions behind left-out predictions, and proper scores of them.

A distribution is given by its centre and the half widths of its central intervals, which is all
that a table of predictions holds. Between these levels the standard normal score is interpolated,
beyond the highest it keeps a normal tail of that level's width, as in
`screening.calibration.GroupCalibration`. Proper scores: Gneiting and Raftery, J. Am. Stat. Assoc.
102, 359 (2007). Energies in eV.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any, Self

import numpy as np
import pandas as pd
from scipy.special import ndtr, ndtri

from screening.covariance import FloatArray

__all__ = ["Predictive", "interval_score"]

_SMALLEST_STEP = 1e-9
_FAR = 1e12


def _square(n: FloatArray) -> FloatArray:
    """Return the integral of Phi(t)^2 over t from -inf to n.

    Antiderivative n Phi^2 + 2 Phi phi - Phi(sqrt(2) n) / sqrt(pi), by parts.
    """
    density = np.exp(-0.5 * n**2) / np.sqrt(2.0 * np.pi)
    below = ndtr(n)
    whole = n * below**2 + 2.0 * below * density - ndtr(np.sqrt(2.0) * n) / np.sqrt(np.pi)
    # Far in the lower tail the terms cancel to rounding; the integral itself is nothing there.
    return np.asarray(np.where(n < -30.0, 0.0, whole))


@dataclass(frozen=True)
class Predictive:
    """Symmetric predictive distributions, one a row.

    Parameters
    ----------
    mean : ndarray of shape (n_rows,)
        Centres, eV.
    half : ndarray of shape (n_rows, n_levels)
        Half widths of the central intervals, eV, not falling with the level.
    levels : tuple of float
        Central levels, rising, each between 0 and 1.

    Examples
    --------
    A normal distribution, whose continuous ranked probability score at its centre is 0.2337:

    >>> import numpy as np
    >>> half = np.array([[0.6744898, 1.6448536]])
    >>> normal = Predictive(np.zeros(1), half, (0.5, 0.9))
    >>> round(float(normal.crps(np.zeros(1))[0]), 4)
    0.2337
    """

    mean: FloatArray
    half: FloatArray
    levels: tuple[float, ...]

    @classmethod
    def from_ends(
        cls, frame: pd.DataFrame, levels: Sequence[float], mean: str = "predicted_eV"
    ) -> Self:
        """Read the distributions of a table with columns such as ``low_90_eV``.

        Parameters
        ----------
        frame : pandas.DataFrame
        levels : sequence of float
            Levels whose ends every row has.
        mean : str, default "predicted_eV"
            Column of the centre.
        """
        ends = [f"_{100 * level:.0f}_eV" for level in levels]
        half = [
            (frame[f"high{end}"] - frame[f"low{end}"]).to_numpy(dtype=float) / 2 for end in ends
        ]
        return cls(frame[mean].to_numpy(dtype=float), np.column_stack(half), tuple(levels))

    def take(self, rows: Any) -> "Predictive":
        """Return the distributions of some rows."""
        return Predictive(self.mean[rows], self.half[rows], self.levels)

    def cdf(self, value: Any) -> FloatArray:
        """Return the chance that the truth lies below a value.

        Parameters
        ----------
        value : array-like of shape (n_rows,) or (n_rows, n_values)

        Returns
        -------
        ndarray of the shape of ``value``
        """
        wanted = np.asarray(value, dtype=np.float64)
        scores = self._score(wanted.reshape(len(self.mean), -1))
        return np.asarray(ndtr(scores).reshape(wanted.shape))

    def _score(self, value: FloatArray) -> FloatArray:
        """Return standard normal scores, exact where chances round to one."""
        away = value - self.mean[:, None]
        scores = np.empty_like(value)
        z, normal = self._nodes()
        for i, row in enumerate(away):
            size = np.abs(row)
            tail = size * (normal[-1] / z[i, -1])
            scores[i] = np.sign(row) * np.where(
                size > z[i, -1], tail, np.interp(size, z[i], normal)
            )
        return scores

    def quantile(self, chance: Any) -> FloatArray:
        """Return the value below which the truth lies with a chance; inverse of `cdf`.

        Parameters
        ----------
        chance : array-like of shape (n_rows,) or (n_rows, n_values)
        """
        wanted = np.asarray(chance, dtype=np.float64)
        score = ndtri(wanted.reshape(len(self.mean), -1))
        away = np.empty_like(score)
        z, normal = self._nodes()
        for i, row in enumerate(score):
            size = np.abs(row)
            tail = size * (z[i, -1] / normal[-1])
            away[i] = np.sign(row) * np.where(
                size > normal[-1], tail, np.interp(size, normal, z[i])
            )
        return np.asarray((self.mean[:, None] + away).reshape(wanted.shape))

    def chance_between(self, low: Any, high: Any) -> FloatArray:
        """Return the chance that the truth lies between two values."""
        return np.maximum(self.cdf(high) - self.cdf(low), 0.0)

    def crps(self, observed: Any) -> FloatArray:
        """Return the continuous ranked probability score, eV; lower is better.

        Integral of (F(x) - 1{x >= observed})^2, exact: with x a piecewise linear function of the
        standard normal score n, the integrals of Phi(n)^2 are closed.

        Parameters
        ----------
        observed : array-like of shape (n_rows,) or (n_rows, n_values)

        Returns
        -------
        ndarray of the shape of ``observed``
        """
        z, normal = self._nodes()
        inner = np.diff(z, axis=1) / np.diff(normal)
        tail = z[:, -1:] / normal[-1]
        slope = np.hstack([tail, inner[:, ::-1], inner, tail])
        edges = np.concatenate([[-_FAR], -normal[::-1], normal[1:], [_FAR]])
        truth = np.asarray(observed, dtype=np.float64)
        at = self._score(truth.reshape(len(self.mean), -1))
        split = np.clip(at[..., None], edges[:-1], edges[1:])
        parts = _square(split) - _square(edges[:-1]) + _square(-split) - _square(-edges[1:])
        return np.asarray(np.einsum("is,iks->ik", slope, parts).reshape(truth.shape))

    def _nodes(self) -> tuple[FloatArray, FloatArray]:
        """Return half widths with a leading zero, strictly rising, and their normal scores."""
        z = np.column_stack([np.zeros(len(self.mean)), self.half])
        z = np.maximum.accumulate(z, axis=1) + _SMALLEST_STEP * np.arange(z.shape[1])
        normal = np.array([0.0, *(ndtri(0.5 + level / 2.0) for level in self.levels)])
        return z, normal


def interval_score(observed: Any, low: Any, high: Any, level: float) -> FloatArray:
    """Return the interval score: width plus 2/(1 - level) times what the truth lies outside by.

    Parameters
    ----------
    observed, low, high : array-like of shape (n_rows, ...)
    level : float
        Central level of the interval, between 0 and 1.

    Returns
    -------
    ndarray
        In the unit of the values; lower is better.

    Examples
    --------
    >>> interval_score([0.5, 2.0], [0.0, 0.0], [1.0, 1.0], 0.5).tolist()
    [1.0, 5.0]
    """
    truth, bottom, top = (np.asarray(v, dtype=float) for v in (observed, low, high))
    outside = np.maximum(bottom - truth, 0.0) + np.maximum(truth - top, 0.0)
    return np.asarray(top - bottom + 2.0 / (1.0 - level) * outside)
