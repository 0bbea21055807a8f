"""Optical gap of a semiconductor particle from material and diameter, with honest intervals.

The physics mean is the effective-mass gap with finite barriers; what it misses is learned per
1/diameter (in eV nm) by a Gaussian process and boosted trees. A prediction is in one of two
states: *on record* (the material has size data; residuals of left-out size ranges count) and
*new* (residuals of left-out materials count). For *new* the Gaussian process also reads the
computed crystallites of materials with published tight-binding parameters, a second fidelity with
a discrepancy of its own (M. C. Kennedy and A. O'Hagan, Biometrika 87, 1 (2000)).
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any, Self

import numpy as np
import pandas as pd

from features.size_gap import size_band
from screening.blending import BlendedRegressor, LeftOut, blend
from screening.calibration import GroupCalibration
from screening.computed_rows import computed_rows
from screening.covariance import CovarianceTerm, FloatArray
from screening.dot_design import (
    FIRST_FEATURE,
    N_SMOOTH,
    DotDesign,
    constants_spread_eV,
    scale_of,
)

__all__ = ["NEW", "ON_RECORD", "SizeGapModel", "State", "range_groups"]

ON_RECORD = "on record"
NEW = "new"

_TERMS = (
    CovarianceTerm("level", amplitude=0.3),
    CovarianceTerm("bulk constants", (0, 1, 2), amplitude=0.2, length_scale=2, length_spread=0.7),
    CovarianceTerm("constants and size", (0, 1, 2, 3), amplitude=0.1, length_scale=2),
    CovarianceTerm("size", (3,), amplitude=0.1, length_scale=2),
    CovarianceTerm("family", labels=(4,), amplitude=0.1),
    CovarianceTerm("material", labels=(5,), amplitude=0.1),
    CovarianceTerm("material and size", (3,), labels=(5,), amplitude=0.05),
    CovarianceTerm("source", labels=(6,), amplitude=0.07, amplitude_spread=0.5),
    CovarianceTerm("source and size", (3,), labels=(6,), amplitude=0.03),
    CovarianceTerm("shape", labels=(7,), scale=8, amplitude=0.2),
)
_COMPUTED = CovarianceTerm("computed", labels=(9,), amplitude=0.2)
_SOURCE = N_SMOOTH + 2
_FEWEST_ROWS = 3


@dataclass(frozen=True)
class State:
    """What one state of knowledge learned: weight of the Gaussian process and calibration."""

    gaussian_weight: float
    calibration: GroupCalibration


def range_groups(rows: pd.DataFrame) -> pd.Series:
    """Label each row by material and size range; empty where a range cannot be left out.

    A material needs three rows in two size ranges before leaving one of them out says anything.
    """
    band = pd.Series(size_band(rows["diameter_nm"]), index=rows.index)
    by_material = rows["material"]
    enough = (band.groupby(by_material).transform("nunique") >= 2) & (
        band.groupby(by_material).transform("size") >= _FEWEST_ROWS
    )
    return (by_material + " " + band.astype(str)).where(enough, "")


class SizeGapModel:
    """The trained and calibrated emission-track model.

    Parameters
    ----------
    seed : int, default 0
        Seed of the trees.
    n_folds : int, default 10
        Folds of materials for the trees' left-out predictions.
    computed : bool, default True
        Whether *new* reads the computed crystallites.

    Attributes
    ----------
    states_ : dict of str to State
        Learned weight and calibration of both states, after `calibrate`.
    """

    def __init__(self, seed: int = 0, n_folds: int = 10, *, computed: bool = True) -> None:
        self.seed = seed
        self.n_folds = n_folds
        self.computed = computed

    def fit(self, rows: pd.DataFrame, theta: Mapping[str, Sequence[float]] | None = None) -> Self:
        """Take the training rows; regressors are fitted when they are first needed.

        Parameters
        ----------
        rows : pandas.DataFrame
            As from ``features.size_gap.training_rows``.
        theta : mapping of str to sequence of float or None, default None
            Log parameters of each state's Gaussian process to keep; None learns them.

        Returns
        -------
        self
        """
        self.rows_ = rows.reset_index(drop=True)
        self._theta = dict(theta or {})
        self._regressors: dict[str, BlendedRegressor] = {}
        self._base: SizeGapModel | None = None
        self._design = DotDesign(self.rows_)
        _, mean, scale = self._design.columns(self.rows_, training=True)
        self._target = (self.rows_["optical_gap_eV"].to_numpy() - mean) / scale
        self._noise = self.rows_["noise_eV"].to_numpy() / scale
        self._scale = scale
        return self

    def regressor(self, state: str) -> BlendedRegressor:
        """Return the fitted regressor of a state: *new* reads the computed rows too.

        Returns
        -------
        BlendedRegressor
        """
        if state not in self._regressors:
            self._regressors[state] = self._fit_regressor(state)
        return self._regressors[state]

    def _state_rows(self, state: str) -> pd.DataFrame:
        """Return the rows that a state's regressor reads, measured ones first."""
        if state == NEW and self.computed:
            return pd.concat([self.rows_, computed_rows()], ignore_index=True)
        return self.rows_

    def _fit_regressor(self, state: str) -> BlendedRegressor:
        rows = self._state_rows(state)
        X, mean, scale = self._design.columns(rows, training=True)
        target = (rows["optical_gap_eV"].to_numpy() - mean) / scale
        noise = rows["noise_eV"].to_numpy() / scale
        if self._base is not None:
            return self._base.regressor(state).conditioned(X, target, noise)
        measured = np.arange(len(rows)) < len(self.rows_)
        theta = self._theta.get(state)
        votes = rows["vote"] / rows["vote"].where(measured).groupby(rows["material"]).transform(
            "sum"
        )
        terms = [*_TERMS, _COMPUTED] if state == NEW and self.computed else list(_TERMS)
        return BlendedRegressor(
            terms=terms,
            tree_columns=range(FIRST_FEATURE, X.shape[1]),
            noise=0.02,
            tree_options={"max_bins": 48},
            n_folds=self.n_folds,
            seed=self.seed,
        ).fit(
            X,
            target,
            noise_sd=noise,
            tree_weight=votes.to_numpy(),
            start=theta,
            max_iter=200 if theta is None else 0,
            tree_rows=measured,
        )

    def calibrate(self, states: Sequence[str] = (NEW, ON_RECORD)) -> Self:
        """Learn weight and calibration of states from left-out groups.

        Parameters
        ----------
        states : sequence of str, default both
        """
        materials = self.rows_["material"].to_numpy()
        ranges = range_groups(self.rows_).to_numpy()
        left = {NEW: materials, ON_RECORD: np.where(ranges == "", materials, ranges)}
        counted = {NEW: materials, ON_RECORD: ranges}
        self.left_out_ = {name: self._leave_out(name, left[name]) for name in states}
        self.states_ = {name: self._learn_state(name, counted[name]) for name in states}
        return self

    def conditioned(self, more: pd.DataFrame) -> "SizeGapModel":
        """Return the model with more rows, parameters, trees and calibration kept.

        Parameters
        ----------
        more : pandas.DataFrame
            As from ``screening.measurements.measured_rows``.

        Returns
        -------
        SizeGapModel
            Materials that come with the rows are *on record*, where the Gaussian process has the
            weight that left-out size ranges gave it.
        """
        model = SizeGapModel(self.seed, self.n_folds, computed=self.computed)
        model.fit(pd.concat([self.rows_, more], ignore_index=True))
        model._base, model.states_ = self, self.states_
        return model

    def _leave_out(self, state: str, labels: Any) -> LeftOut:
        """Leave measured groups out; computed rows stay in, a group of their own."""
        regressor = self.regressor(state)
        n = len(labels)
        n_computed = len(regressor.gaussian_.y_) - n
        left = regressor.left_out(np.concatenate([labels, np.full(n_computed, "computed rows")]))
        return LeftOut(left.gaussian[:n], left.trees[:n], left.sd[:n])

    def _learn_state(self, state: str, labels: Any) -> State:
        """Weigh and calibrate on the labelled rows, one vote a left-out group."""
        use = labels != ""
        left = self.left_out_[state]
        part = LeftOut(left.gaussian[use], left.trees[use], left.sd[use])
        groups, votes = labels[use], self.rows_["vote"].to_numpy()[use]
        weight = BlendedRegressor.weigh_rows(self._target[use], part, groups, votes)
        mean, sd = part.blend(weight)
        total = np.hypot(sd, self._noise[use])
        calibration = GroupCalibration(state=f"state {state!r}").fit(
            self._target[use] - mean, total, groups, votes
        )
        return State(weight, calibration)

    def left_out_frame(self, state: str) -> pd.DataFrame:
        """Return the training rows with their left-out prediction in a state.

        Returns
        -------
        pandas.DataFrame
            The rows plus ``predicted_gap_eV`` and ``predicted_sd_eV`` (with row noise); for *on
            record* only the rows that belong to a size range that can be left out.
        """
        mean, sd = self.left_out_[state].blend(self.states_[state].gaussian_weight)
        frame = self.rows_.copy()
        observed = frame["optical_gap_eV"].to_numpy()
        frame["predicted_gap_eV"] = observed + (mean - self._target) * self._scale
        frame["predicted_sd_eV"] = np.hypot(sd, self._noise) * self._scale
        if state == ON_RECORD:
            frame = frame[range_groups(self.rows_) != ""]
        return frame

    def record_state(self, materials: pd.Series) -> pd.Series:
        """Return *on record* or *new* for each material."""
        known = set(self.rows_["material"])
        return materials.map(lambda m: ON_RECORD if m in known else NEW)

    def predict(self, candidates: pd.DataFrame) -> pd.DataFrame:
        """Predict the optical gap of candidates.

        Parameters
        ----------
        candidates : pandas.DataFrame
            Columns material, family, shape, diameter_nm and the bulk constants.

        Returns
        -------
        pandas.DataFrame
            Columns optical_gap_eV, model_sd_eV (uncalibrated, of the next measured sample) and
            record_state, with the caller's index.
        """
        X, mean, scale = self._design.columns(candidates, training=False)
        record_state = self.record_state(candidates["material"])
        learned, spread = np.empty(len(candidates)), np.empty(len(candidates))
        for name, asked in self._rows_by_state(candidates):
            regressor = self.regressor(name)
            gaussian, trees, sd = regressor.parts(X[asked])
            learned[asked], sd = blend(gaussian, trees, sd, self.states_[name].gaussian_weight)
            spread[asked] = np.hypot(sd, regressor.gaussian_.noise_)
        total = np.hypot(spread, constants_spread_eV(candidates) / scale) * scale
        return pd.DataFrame(
            {
                "optical_gap_eV": mean + learned * scale,
                "model_sd_eV": total,
                "record_state": record_state,
            },
            index=candidates.index,
        )

    def design(self, candidates: pd.DataFrame) -> FloatArray:
        """Return the regressors' columns of candidates, as of samples from no known source."""
        return self._design.columns(candidates, training=False)[0]

    def scatter_sd_eV(self, candidates: pd.DataFrame) -> FloatArray:
        """Return the scatter between sources and samples of one pair, which no model narrows."""
        scatter = np.empty(len(candidates))
        for name, rows in self._rows_by_state(candidates):
            gaussian = self.regressor(name).gaussian_
            fitted = gaussian.term_parameters()
            between = sum(fitted[t.name].amplitude ** 2 for t in _TERMS if _SOURCE in t.labels)
            scatter[rows] = np.sqrt(between + gaussian.noise_**2)
        return scatter * scale_of(candidates)

    def joint_covariance(self, candidates: pd.DataFrame) -> FloatArray:
        """Return how the errors of candidates vary together, uncalibrated, in eV squared.

        Parameters
        ----------
        candidates : pandas.DataFrame
            As for `predict`.

        Returns
        -------
        ndarray of shape (n_candidates, n_candidates)
            Covariance of the Gaussian processes; candidates of one material that has no records
            share its unknown offset. Candidates of different states count as independent.
        """
        X, _, scale = self._design.columns(candidates, training=False)
        labels = {
            N_SMOOTH: candidates["family"],
            N_SMOOTH + 1: candidates["material"],
            N_SMOOTH + 3: candidates["shape"] + " " + candidates["material"],
        }
        for column, names in labels.items():
            unseen = X[:, column] < 0.0
            # any numbers will do that no training row carries
            X[unseen, column] = 10_000.0 + pd.factorize(names)[0][unseen]
        covariance = np.zeros((len(X), len(X)))
        for name, rows in self._rows_by_state(candidates):
            block = self.regressor(name).gaussian_.posterior_covariance(X[rows])
            covariance[np.ix_(rows, rows)] = block
        return np.asarray(covariance * np.outer(scale, scale), dtype=np.float64)

    def measurement_noise_eV(self, candidates: pd.DataFrame) -> FloatArray:
        """Return the standard deviation of a sample about the smooth law, eV.

        Returns
        -------
        ndarray of shape (n_candidates,)
        """
        noise = np.empty(len(candidates))
        for name, rows in self._rows_by_state(candidates):
            noise[rows] = self.regressor(name).gaussian_.noise_
        return noise * scale_of(candidates)

    def _rows_by_state(self, candidates: pd.DataFrame) -> list[tuple[str, Any]]:
        """Return the positions of the candidates of each state that occurs."""
        state = self.record_state(candidates["material"]).to_numpy()
        found = [(name, np.flatnonzero(state == name)) for name in self.states_]
        return [(name, rows) for name, rows in found if len(rows)]

    def interval(
        self, predicted: pd.DataFrame, level: float = 0.9
    ) -> tuple[FloatArray, FloatArray]:
        """Return calibrated interval ends of predictions as from `predict`."""
        low, high = np.empty(len(predicted)), np.empty(len(predicted))
        for name, state in self.states_.items():
            rows = predicted["record_state"].to_numpy() == name
            if not rows.any():
                continue
            mean = predicted["optical_gap_eV"].to_numpy()[rows]
            sd = predicted["model_sd_eV"].to_numpy()[rows]
            low[rows], high[rows] = state.calibration.interval(mean, sd, level)
        return low, high

    def training_design(self) -> tuple[FloatArray, FloatArray, FloatArray]:
        """Return columns, physics mean (eV) and scale (eV) of the training rows."""
        return self._design.columns(self.rows_, training=True)

    def physics_of(self, candidates: pd.DataFrame) -> tuple[FloatArray, FloatArray]:
        """Return the physics mean and what the bulk constants leave open, eV."""
        return self._design.columns(candidates, training=False)[1], constants_spread_eV(candidates)
