"""Intervals and chances calibrated on residuals of left-out groups, one vote a group.

Rows of one material are not exchangeable with rows of another, groups may be. With K groups each
row of group k carries the weight 1 / ((K + 1) n_k) and the group to come 1 / (K + 1), so an
interval exists only for levels up to K / (K + 1) (hierarchical conformal prediction: Dunn,
Wasserman and Ramdas, J. Am. Stat. Assoc. 118, 2491 (2023); Lee, Barber and Willett,
arXiv 2306.06342). The score is the residual over the model's own standard deviation, so that
intervals widen where the model knows less.
"""

from collections.abc import Mapping, Sequence
from typing import Any, Self

import numpy as np
from scipy.special import ndtr, ndtri

from features.errors import CalibrationError, explain
from screening.covariance import FloatArray

__all__ = ["LEVELS", "GroupCalibration", "group_weights"]

LEVELS = (0.5, 0.8, 0.9)


def group_weights(groups: Any, row_weights: Any = None) -> FloatArray:
    """Return row weights that sum to one in every group.

    Parameters
    ----------
    groups : array-like of shape (n_rows,)
    row_weights : array-like of shape (n_rows,) or None, default None
        Relative weights inside a group; None for equal ones.

    Returns
    -------
    ndarray of shape (n_rows,)

    Examples
    --------
    >>> group_weights(["a", "a", "b"]).tolist()
    [0.5, 0.5, 1.0]
    """
    _, codes = np.unique(np.asarray(groups), return_inverse=True)
    rows = np.ones(len(codes)) if row_weights is None else np.asarray(row_weights, dtype=float)
    return np.asarray(rows / np.bincount(codes, weights=rows)[codes], dtype=np.float64)


def _weighted_quantile(scores: FloatArray, weights: FloatArray, level: float) -> float:
    """Return the smallest score whose cumulated weight reaches the level."""
    order = np.argsort(scores, kind="stable")
    reached = np.cumsum(weights[order]) >= level - 1e-12
    return float(scores[order][int(np.argmax(reached))])


class GroupCalibration:
    """Calibrated intervals and chances from left-out residuals.

    Parameters
    ----------
    levels : sequence of float, default (0.5, 0.8, 0.9)
        Central levels to calibrate, rising.
    state : str, default ""
        What the groups stand for; used in messages.

    Attributes
    ----------
    n_groups_ : int
        Number of groups behind the calibration.
    factors_ : dict of float to float
        Half width of the interval of each level, in standard deviations of the model.
    refused_ : tuple of float
        Levels that this number of groups cannot support.

    Examples
    --------
    >>> import numpy as np
    >>> rng = np.random.default_rng(0)
    >>> calibration = GroupCalibration().fit(rng.normal(size=400), np.ones(400), np.arange(400))
    >>> low, high = calibration.interval(np.zeros(1), np.ones(1), 0.9)
    >>> bool(1.4 < high[0] < 1.9)
    True
    """

    def __init__(self, levels: Sequence[float] = LEVELS, state: str = "") -> None:
        self.levels = levels
        self.state = state

    def fit(self, residual: Any, sd: Any, groups: Any, row_weights: Any = None) -> Self:
        """Learn the half widths from residuals of groups that the model had left out.

        Parameters
        ----------
        residual, sd : array-like of shape (n_rows,)
            Observed minus predicted, and the model's standard deviation, in one unit.
        groups : array-like of shape (n_rows,)
        row_weights : array-like of shape (n_rows,) or None, default None
            Relative weights inside a group.

        Returns
        -------
        self

        Raises
        ------
        CalibrationError
            If not even the lowest level is supported.
        """
        scores = np.abs(np.asarray(residual, dtype=float)) / np.asarray(sd, dtype=float)
        self.n_groups_ = len(np.unique(np.asarray(groups)))
        weights = group_weights(groups, row_weights) / (self.n_groups_ + 1)
        highest = self.n_groups_ / (self.n_groups_ + 1)
        supported = [level for level in self.levels if level <= highest + 1e-12]
        self.refused_ = tuple(level for level in self.levels if level not in supported)
        if not supported:
            raise CalibrationError(self._refusal(min(self.levels)))
        self.factors_ = {level: _weighted_quantile(scores, weights, level) for level in supported}
        self._nodes()
        return self

    @classmethod
    def from_factors(cls, factors: Mapping[float, float], n_groups: int, state: str = "") -> Self:
        """Rebuild a calibration from the half widths that an earlier fit learned."""
        calibration = cls(tuple(sorted(factors)), state)
        calibration.n_groups_, calibration.refused_ = n_groups, ()
        calibration.factors_ = dict(factors)
        calibration._nodes()
        return calibration

    def learned(self) -> dict[str, Any]:
        """Return what was learned, as plain numbers for `restored`."""
        factors = {str(level): value for level, value in self.factors_.items()}
        return {"n_groups": self.n_groups_, "factors": factors}

    @classmethod
    def restored(cls, kept: Mapping[str, Any], state: str = "") -> Self:
        """Rebuild a calibration from what `learned` returned."""
        factors = {float(level): float(value) for level, value in kept["factors"].items()}
        return cls.from_factors(factors, int(kept["n_groups"]), state)

    def _nodes(self) -> None:
        """Lay the map from the model's score to a standard normal score."""
        levels = sorted(self.factors_)
        z = np.array([0.0, *(self.factors_[level] for level in levels)])
        normal = np.array([0.0, *(ndtri(0.5 + level / 2.0) for level in levels)])
        self._z = np.maximum.accumulate(np.maximum(z, 1e-9 * np.arange(len(z))))
        self._normal = normal

    def _refusal(self, level: float) -> str:
        needed = int(np.ceil(level / (1.0 - level) - 1e-9))
        return explain(
            f"no {level:.0%} interval exists",
            where=self.state or "calibration",
            expected=f"at least {needed} left-out groups",
            found=f"{self.n_groups_}",
            do="ask for a lower level or add groups to the table",
        )

    def factor(self, level: float) -> float:
        """Return the half width of a level in standard deviations.

        Raises
        ------
        CalibrationError
            If the number of groups cannot support the level.
        """
        if level not in self.factors_:
            raise CalibrationError(self._refusal(level))
        return self.factors_[level]

    def interval(self, mean: Any, sd: Any, level: float) -> tuple[FloatArray, FloatArray]:
        """Return the lower and upper ends of a central interval.

        Parameters
        ----------
        mean, sd : array-like of shape (n_rows,)
        level : float
            One of ``levels``.

        Returns
        -------
        low, high : ndarray of shape (n_rows,)

        Raises
        ------
        CalibrationError
            If the number of groups cannot support the level.
        """
        half = self.factor(level) * np.asarray(sd, dtype=float)
        return np.asarray(mean) - half, np.asarray(mean) + half

    def normal_score(self, z: Any) -> FloatArray:
        """Map (value - mean) / sd to the standard normal score of the calibrated distribution."""
        size = np.abs(np.asarray(z, dtype=float))
        inside = np.interp(size, self._z, self._normal)
        beyond = size * (self._normal[-1] / self._z[-1])
        return np.asarray(np.sign(z) * np.where(size > self._z[-1], beyond, inside))

    def model_score(self, normal: Any) -> FloatArray:
        """Map a standard normal score to (value - mean) / sd: the inverse of `normal_score`."""
        size = np.abs(np.asarray(normal, dtype=float))
        inside = np.interp(size, self._normal, self._z)
        beyond = size * (self._z[-1] / self._normal[-1])
        return np.asarray(np.sign(normal) * np.where(size > self._normal[-1], beyond, inside))

    def cdf(self, value: Any, mean: Any, sd: Any) -> FloatArray:
        """Return the calibrated chance that the truth lies below a value.

        Agrees with the calibrated intervals at every level; between levels the score is
        interpolated, beyond the highest it keeps a normal tail of that level's width.
        """
        return np.asarray(ndtr(self.normal_score((np.asarray(value) - mean) / sd)))

    def chance_between(self, low: Any, high: Any, mean: Any, sd: Any) -> FloatArray:
        """Return the calibrated chance that the truth lies between two values."""
        return np.maximum(self.cdf(high, mean, sd) - self.cdf(low, mean, sd), 0.0)
