"""Optical gap of a semiconductor particle from material and diameter, with honest intervals.

The physics mean is the effective-mass gap with finite barriers; what it misses is learned per
1/diameter (in eV nm) by a Gaussian process and boosted trees. A prediction is in one of two
states: *on record* (the material has size data; residuals of left-out size ranges count) and
*new* (residuals of left-out materials count).
"""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any, Self

import numpy as np
import pandas as pd

from features.confinement_features import ConfinementFeatures
from features.size_gap import SMALLEST_DIAMETER_nm, size_band
from screening.blending import BlendedRegressor, LeftOut, blend
from screening.bulk_spread import particle_gap_spread_eV
from screening.calibration import GroupCalibration
from screening.covariance import CovarianceTerm, FloatArray

__all__ = ["NEW", "ON_RECORD", "SizeGapModel", "State", "range_groups"]

ON_RECORD = "on record"
NEW = "new"

_CONSTANTS = ["diameter_nm", "gap_eV", "electron_mass_m0", "hole_mass_m0", "dielectric"]
_CENTRES = {
    "log_reduced_mass": (np.log(0.1), 0.6),
    "log_gap_size": (np.log(1.5), 0.8),
    "log_dielectric": (np.log(7.0), 0.4),
    "log_diameter": (np.log(3.5), 0.5),
}
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
_N_GAUSSIAN = 9
_SOURCE = 6
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

    Attributes
    ----------
    states_ : dict of str to State
        Learned weight and calibration of both states, after `calibrate`.
    """

    def __init__(self, seed: int = 0, n_folds: int = 10) -> None:
        self.seed = seed
        self.n_folds = n_folds

    def fit(self, rows: pd.DataFrame, theta: Sequence[float] | None = None) -> Self:
        """Fit both regressors.

        Parameters
        ----------
        rows : pandas.DataFrame
            As from ``features.size_gap.training_rows``.
        theta : sequence of float or None, default None
            Log parameters of the Gaussian process to keep; None learns them.

        Returns
        -------
        self
        """
        self.rows_ = rows.reset_index(drop=True)
        self._label_codes()
        X, mean, scale = self._columns(self.rows_, training=True)
        self._target = (self.rows_["optical_gap_eV"].to_numpy() - mean) / scale
        self._noise = self.rows_["noise_eV"].to_numpy() / scale
        self._scale = scale
        votes = self.rows_["vote"] / self.rows_["vote"].groupby(self.rows_["material"]).transform(
            "sum"
        )
        self.regressor_ = BlendedRegressor(
            terms=_TERMS,
            tree_columns=range(_N_GAUSSIAN, X.shape[1]),
            noise=0.02,
            tree_options={"max_bins": 48},
            n_folds=self.n_folds,
            seed=self.seed,
        ).fit(
            X,
            self._target,
            noise_sd=self._noise,
            tree_weight=votes.to_numpy(),
            start=theta,
            max_iter=200 if theta is None else 0,
        )
        return self

    def calibrate(self) -> Self:
        """Learn weight and calibration of both states from left-out groups."""
        materials = self.rows_["material"].to_numpy()
        ranges = range_groups(self.rows_).to_numpy()
        self.left_out_ = {
            NEW: self.regressor_.left_out(materials),
            ON_RECORD: self.regressor_.left_out(np.where(ranges == "", materials, ranges)),
        }
        self.states_ = {
            NEW: self._learn_state(NEW, materials),
            ON_RECORD: self._learn_state(ON_RECORD, ranges),
        }
        return self

    def _learn_state(self, state: str, labels: Any) -> State:
        """Weigh and calibrate on the labelled rows, one vote a left-out group."""
        use = labels != ""
        left = self.left_out_[state]
        part = LeftOut(left.gaussian[use], left.trees[use], left.sd[use])
        groups, votes = labels[use], self.rows_["vote"].to_numpy()[use]
        weight = self.regressor_.weigh_rows(self._target[use], part, groups, votes)
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
        X, mean, scale = self._columns(candidates, training=False)
        gaussian, trees, sd = self.regressor_.parts(X)
        state = self.record_state(candidates["material"])
        weights = {name: part.gaussian_weight for name, part in self.states_.items()}
        weight = state.map(weights).to_numpy(dtype=np.float64)
        learned, spread = blend(gaussian, trees, sd, np.asarray(weight, dtype=np.float64))
        noise = self.regressor_.gaussian_.noise_
        bulk_sd = _constants_spread_eV(candidates) / scale
        total = np.sqrt(spread**2 + noise**2 + bulk_sd**2) * scale
        return pd.DataFrame(
            {
                "optical_gap_eV": mean + learned * scale,
                "model_sd_eV": total,
                "record_state": state,
            },
            index=candidates.index,
        )

    def design(self, candidates: pd.DataFrame) -> FloatArray:
        """Return the regressor's columns of candidates, as of samples from no known source."""
        return self._columns(candidates, training=False)[0]

    def scatter_sd_eV(self, candidates: pd.DataFrame) -> FloatArray:
        """Return the scatter between sources and samples of one pair, which no model narrows."""
        gaussian = self.regressor_.gaussian_
        fitted = gaussian.term_parameters()
        between = sum(fitted[t.name].amplitude ** 2 for t in _TERMS if _SOURCE in t.labels)
        scale = self._columns(candidates, training=False)[2]
        return np.asarray(np.sqrt(between + gaussian.noise_**2) * scale, dtype=np.float64)

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

    @staticmethod
    def coordinates(frame: pd.DataFrame) -> FloatArray:
        """Return the scaled constants and size in which the covariance measures distance.

        Returns
        -------
        ndarray of shape (n_rows, 4)
        """
        features = ConfinementFeatures().fit_transform(frame[_CONSTANTS])
        columns = [(features[n] - centre) / width for n, (centre, width) in _CENTRES.items()]
        return np.column_stack(columns).astype(np.float64)

    def _label_codes(self) -> None:
        sources = self.rows_["source"] + " " + self.rows_["material"]
        shapes = self.rows_["shape"] + " " + self.rows_["material"]
        self._codes = {
            "family": _codes(self.rows_["family"]),
            "material": _codes(self.rows_["material"]),
            "source": _codes(sources),
            "shape": _codes(shapes),
        }

    def _columns(
        self, frame: pd.DataFrame, *, training: bool
    ) -> tuple[FloatArray, FloatArray, FloatArray]:
        """Return regressor columns, physics mean (eV) and scale (eV) of rows."""
        features = ConfinementFeatures().fit_transform(frame[_CONSTANTS])
        smooth = [(features[name] - centre) / width for name, (centre, width) in _CENTRES.items()]
        source = frame["source"] + " " + frame["material"] if training else None
        labels: list[pd.Series] = [
            frame["family"].map(self._codes["family"]),
            frame["material"].map(self._codes["material"]),
            pd.Series(-1, index=frame.index)
            if source is None
            else source.map(self._codes["source"]),
            (frame["shape"] + " " + frame["material"]).map(self._codes["shape"]),
            frame["shape"].ne("sphere").astype(float),
        ]
        block = np.column_stack([*smooth, *[label.fillna(-1) for label in labels], features])
        mean = frame["gap_eV"].to_numpy() + features["finite_barrier_shift_eV"].to_numpy()
        scale = 1.0 / np.maximum(frame["diameter_nm"].to_numpy(dtype=float), SMALLEST_DIAMETER_nm)
        return block.astype(np.float64), mean, scale


def _constants_spread_eV(candidates: pd.DataFrame) -> FloatArray:
    """Return what the bulk constants' uncertainty leaves: all of them where they are estimated."""
    gap_sd = candidates["gap_sd_eV"].to_numpy(dtype=np.float64)
    if "basis" not in candidates:
        return gap_sd
    spread = particle_gap_spread_eV(candidates)
    return np.where(candidates["basis"].eq("record"), gap_sd, spread)


def _codes(values: pd.Series) -> dict[str, int]:
    return {name: code for code, name in enumerate(sorted(values.unique()))}
