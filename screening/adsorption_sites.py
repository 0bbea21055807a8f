"""Shift of adsorption energies from terraces to the other sites of a particle.

A site's energy moves with its generalised coordination. Slopes are published for a few metals and
adsorbates (Calle-Vallejo et al., Science 350, 185 (2015)); for the others they are measured here
between open and close-packed faces of one source, shrunk to the mean of the adsorbate. Energies
in eV, slopes in eV per unit of generalised coordination of fcc.
"""

from typing import Self

import numpy as np
import pandas as pd

from features.adsorption_descriptors import metal_descriptors
from features.adsorption_scaling import coordination_slope
from screening.covariance import FloatArray

__all__ = [
    "TERRACE_COORDINATION",
    "SiteShifts",
    "coordination_step",
    "open_face_slopes",
    "site_scatter_eV",
]

TERRACE_COORDINATION = {"fcc": 7.5, "hcp": 7.5, "bcc": 5.0}
"""Generalised coordination of the close-packed face, neighbours over 12 (fcc, hcp) or 8 (bcc)."""

_FACET_COORDINATION = {"211": 5.5, "110": 5.833, "100": 6.667}
_PUBLISHED_SD = 0.02
_SITE_SCATTER_EV = 0.09
_SCATTER_RANGE = 0.5
_FEWEST = 3
_FAMILY = {"falsig2012": "RPBE", "falsig2008": "RPBE", "jiang2009": "RPBE"}


def open_face_slopes(rows: pd.DataFrame) -> pd.DataFrame:
    """Return slopes between open and close-packed faces of one metal, adsorbate and functional.

    Parameters
    ----------
    rows : pandas.DataFrame
        As from `pure_rows`.

    Returns
    -------
    pandas.DataFrame
        Columns metal, adsorbate, slope (eV per unit), sd.
    """
    rows = rows.assign(set=rows["source"].replace(_FAMILY))
    keys = ["metal", "adsorbate", "set"]
    closed = rows[rows["openness"] == 0.0].groupby(keys)["energy_eV"].mean()
    opened = rows[rows["openness"] > 0.0].set_index(keys)[["energy_eV", "facet"]]
    pairs = opened.join(closed.rename("close_eV"), how="inner").reset_index()
    gap = pairs["facet"].map(_FACET_COORDINATION) - TERRACE_COORDINATION["fcc"]
    pairs["slope"] = (pairs["energy_eV"] - pairs["close_eV"]) / gap
    pairs["sd"] = 0.1 / np.abs(gap)
    return pairs[["metal", "adsorbate", "slope", "sd"]]


def _published() -> pd.DataFrame:
    found = []
    for metal in metal_descriptors().index:
        for adsorbate in ("OH", "O", "CO"):
            slope = coordination_slope(metal, adsorbate)
            if slope is not None:
                found.append((metal, adsorbate, slope[0], _PUBLISHED_SD))
    return pd.DataFrame(found, columns=["metal", "adsorbate", "slope", "sd"])


class SiteShifts:
    """Slopes of adsorption energies with generalised coordination, each with its uncertainty.

    Attributes
    ----------
    slopes_ : pandas.DataFrame
        What is measured or published: metal, adsorbate, slope, sd.
    by_adsorbate_ : pandas.DataFrame
        Mean slope over metals and the deviation between metals.
    """

    def fit(self, rows: pd.DataFrame, *, published: bool = True) -> Self:
        """Fit on rows as from `pure_rows`, with the published slopes if wanted."""
        parts = [open_face_slopes(rows)]
        if published:
            parts.append(_published())
        self.slopes_ = pd.concat(parts, ignore_index=True)
        grouped = self.slopes_.groupby("adsorbate")["slope"]
        table = pd.DataFrame({"mean": grouped.mean(), "sd": grouped.std(), "n": grouped.size()})
        self._pooled = (float(table["mean"].mean()), float(self.slopes_["slope"].std()))
        table["sd"] = table["sd"].where(table["n"] >= _FEWEST, self._pooled[1])
        self.by_adsorbate_ = table
        return self

    def slope(self, metal: str, adsorbate: str) -> tuple[float, float]:
        """Return slope and standard deviation of a metal and adsorbate.

        The adsorbate's mean over metals (the mean of all adsorbates where it has no data), moved
        by what is measured or published on the metal itself.
        """
        prior, spread = self._pooled
        if adsorbate in self.by_adsorbate_.index:
            prior = float(self.by_adsorbate_["mean"].loc[adsorbate])
            spread = float(self.by_adsorbate_["sd"].loc[adsorbate])
        own = self.slopes_[
            (self.slopes_["metal"] == metal) & (self.slopes_["adsorbate"] == adsorbate)
        ]
        precision = np.array([spread**-2, *(own["sd"].to_numpy() ** -2)])
        values = np.array([prior, *own["slope"]])
        return float(precision @ values / precision.sum()), float(precision.sum() ** -0.5)

    def shift(
        self,
        parts: dict[str, float],
        adsorbate: str,
        generalised_coordination: FloatArray,
        structure: str,
    ) -> tuple[FloatArray, FloatArray]:
        """Return the shift against the close-packed terrace and its standard deviation.

        Parameters
        ----------
        parts : dict of str to float
            Metals and their shares; slopes are averaged over them.
        adsorbate : str
        generalised_coordination : ndarray of shape (n_sites,)
        structure : {"fcc", "hcp", "bcc"}

        Returns
        -------
        shift_eV, sd_eV : ndarray of shape (n_sites,)
        """
        slope, sd = self.mean_slope(parts, adsorbate)
        step = coordination_step(generalised_coordination, structure)
        return slope * step, np.hypot(sd * step, site_scatter_eV(step))

    def mean_slope(self, parts: dict[str, float], adsorbate: str) -> tuple[float, float]:
        """Return the slope of a metal or alloy and its standard deviation, shared by all sites.

        Parameters
        ----------
        parts : dict of str to float
            Metals and their shares; slopes are averaged over them.
        adsorbate : str
        """
        slopes = np.array([self.slope(metal, adsorbate) for metal in parts])
        slope, sd = np.array(list(parts.values())) @ slopes
        return float(slope), float(sd)


def coordination_step(generalised_coordination: FloatArray, structure: str) -> FloatArray:
    """Return how far sites lie from the close-packed terrace, in units of fcc coordination.

    Examples
    --------
    >>> coordination_step(np.array([7.5, 5.5]), "fcc").round(9).tolist()
    [0.0, -2.0]
    """
    terrace = TERRACE_COORDINATION[structure]
    return np.asarray((generalised_coordination / terrace - 1.0) * TERRACE_COORDINATION["fcc"])


def site_scatter_eV(step: FloatArray) -> FloatArray:
    """Return how far single kinds of sites stray from the line, as a standard deviation.

    Nothing at the terrace itself, whose energy is the surface's; the published scatter from about
    one unit of coordination on.
    """
    return np.asarray(_SITE_SCATTER_EV * np.sqrt(-np.expm1(-np.abs(step) / _SCATTER_RANGE)))
