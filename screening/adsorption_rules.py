"""Adsorbates and elements that no alloy row covers: the better hollow of both pure surfaces.

The energy is the mean of the pure surfaces' energies, weighed by the share of the stronger metal
in the hollow that is richest in it. How far that rule errs is measured on the adsorbates that
alloys do carry.
"""

from typing import Self

import numpy as np
import pandas as pd

from screening.adsorption_design import hollow_share
from screening.adsorption_pure import PureSurfaceModel
from screening.calibration import GroupCalibration
from screening.covariance import FloatArray

__all__ = ["HollowRule"]


class HollowRule:
    """Mixing rule of hollows with a measured error.

    Attributes
    ----------
    relative_sd_ : float
        Scatter of the rule over the deviation of the adsorbate between pure metals.
    calibration_ : GroupCalibration
        Compositions are the groups.
    """

    def fit(self, rows: pd.DataFrame, pure: PureSurfaceModel) -> Self:
        """Measure the rule on alloy rows as from `alloy_rows`.

        Parameters
        ----------
        rows : pandas.DataFrame
        pure : PureSurfaceModel

        Returns
        -------
        self
        """
        self.pure_ = pure
        self.relative_sd_ = 0.0
        mean, sd = self.predict(rows)
        unit = pure.scale_["sd"].reindex(rows["adsorbate"]).to_numpy(dtype=np.float64)
        residual = rows["energy_eV"].to_numpy(dtype=np.float64) - mean
        self.relative_sd_ = float(np.median(np.abs(residual) / unit) / 0.6745)
        self.calibration_ = GroupCalibration(state="mixing rule of hollows").fit(
            residual, np.hypot(sd, self.relative_sd_ * unit), rows["composition"]
        )
        return self

    def predict(self, frame: pd.DataFrame) -> tuple[FloatArray, FloatArray]:
        """Return mean and standard deviation (eV) of surfaces as in `AlloySurfaceModel.predict`."""
        species = frame["adsorbate"].tolist()
        first = self.pure_.predict(frame["first"].tolist(), species)
        second = self.pure_.predict(frame["second"].tolist(), species)
        share = frame["share"].to_numpy(dtype=np.float64)
        stronger = first.mean <= second.mean
        hollow = np.where(stronger, share, 1.0 - share)
        hollow = np.where(frame["hollow"], hollow, hollow_share(hollow))
        weight = np.where(stronger, hollow, 1.0 - hollow)
        mean = weight * first.mean + (1.0 - weight) * second.mean
        unit = self.pure_.scale_["sd"].reindex(species).to_numpy(dtype=np.float64)
        mixed = (first.mean != second.mean).astype(float)
        own = np.hypot(weight * first.sd, (1.0 - weight) * second.sd)
        return mean, np.hypot(own, mixed * self.relative_sd_ * unit)
