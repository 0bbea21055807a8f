"""Adsorption energies on surfaces of pure metals: one Gaussian process for all adsorbates.

Rows are the most stable site of a metal, face, source and adsorbate. Each adsorbate has a reference
source; every other source keeps one offset per adsorbate and a scatter of its own, so that
functionals and measured heats meet but are never mixed silently. Energies in eV against the
common references.
"""

from collections.abc import Collection
from dataclasses import dataclass
from typing import Any, Self

import numpy as np
import pandas as pd

from features.adsorption_descriptors import standardised_descriptors
from features.tables import read_table
from screening.covariance import CovarianceTerm, FloatArray
from screening.gaussian import GroupedGaussianProcess

__all__ = [
    "PURE_DESCRIPTORS",
    "PureSurfaceModel",
    "PureSurfaces",
    "facet_openness",
    "pure_rows",
    "surface_adsorbates",
]

PURE_DESCRIPTORS = (
    "d_band_centre_eV",
    "log10_coupling",
    "atomic_radius_nm",
    "work_function_eV",
    "cohesive_energy_eV",
    "sp_character",
)
"""Descriptors that the covariance of pure metals sees."""

_REFERENCE_SOURCES = ("mamun2019", "falsig2008")
_OPENNESS = {"111": 0.0, "0001": 0.0, "110bcc": 0.0, "100": 0.5, "110": 1.0, "211": 1.0}

# A minimum over too few kinds of sites is an upper bound, not the most stable site.
_HOLLOW_SPECIES = frozenset({"C", "CH", "CH2", "N", "NH", "O", "OH", "S", "SH", "H"})
_UPPER_BOUND_SD_EV = 1.0
_TABULATED_SD_EV = 0.1
_RELATIVE_NOISE = 0.05


def facet_openness(structure: str, facet: str) -> float:
    """Return how open a face is: 0 close-packed, 0.5 for fcc(100), 1 for steps and ridges.

    Examples
    --------
    >>> facet_openness("fcc", "211"), facet_openness("bcc", "110")
    (1.0, 0.0)
    """
    return _OPENNESS["110bcc"] if structure == "bcc" and facet == "110" else _OPENNESS[facet]


def _ensemble_rows() -> pd.DataFrame:
    """Return the pure slabs of the ensemble set as rows of close-packed surfaces."""
    table = read_table("adsorption_ensembles")
    pure = table[(table["support"] == "slab") & table["metal_B"].isna()].copy()
    return pure.assign(metal=pure["metal_A"], structure="fcc prototype", facet="111", site="fcc")


def surface_adsorbates() -> list[str]:
    """Return the adsorbates that can be predicted, known before anything is trained.

    Examples
    --------
    >>> "OH" in surface_adsorbates(), "OOH" in surface_adsorbates()
    (True, False)
    """
    table = read_table("adsorption_pure")
    own = table["source"].isin(_REFERENCE_SOURCES) & (table["quantity"] != "free energy")
    return sorted(table.loc[own, "adsorbate"].unique().tolist())


def pure_rows(without: Collection[str] = ()) -> pd.DataFrame:
    """Return one row a metal, openness, source and adsorbate: the most stable site.

    Parameters
    ----------
    without : collection of str, default ()
        Metals to leave out.

    Returns
    -------
    pandas.DataFrame
        Columns metal, openness, facet, structure, source, adsorbate, energy_eV, noise_sd_eV.
    """
    table = read_table("adsorption_pure")
    table = table[table["quantity"] != "free energy"]
    rows = pd.concat([table, _ensemble_rows()], ignore_index=True)
    rows = rows[rows["metal"].isin(standardised_descriptors().index)]
    rows = rows[~rows["metal"].isin(list(without))]
    rows["openness"] = [
        facet_openness(s, f) for s, f in zip(rows["structure"], rows["facet"], strict=True)
    ]
    return _most_stable(rows)


def _most_stable(rows: pd.DataFrame) -> pd.DataFrame:
    keys = ["metal", "openness", "source", "adsorbate"]
    lowest = rows.loc[rows.groupby(keys)["adsorption_energy_eV"].idxmin()].copy()
    only_top = rows.groupby(keys)["site"].agg(lambda sites: set(sites) == {"top"})
    bound = only_top.loc[list(lowest[keys].itertuples(index=False, name=None))].to_numpy()
    hollow = lowest["adsorbate"].isin(_HOLLOW_SPECIES).to_numpy()
    lowest["noise_sd_eV"] = np.where(bound & hollow, _UPPER_BOUND_SD_EV, _TABULATED_SD_EV)
    lowest["energy_eV"] = lowest["adsorption_energy_eV"]
    columns = [*keys, "facet", "structure", "energy_eV", "noise_sd_eV"]
    return lowest[columns].reset_index(drop=True)


@dataclass(frozen=True)
class PureSurfaces:
    """Predicted mean and standard deviation (eV) of pure surfaces."""

    mean: FloatArray
    sd: FloatArray


class PureSurfaceModel:
    """Gaussian process over metals, adsorbates, faces and sources.

    Attributes
    ----------
    rows_ : pandas.DataFrame
        Training rows, with `reference` telling rows of the reference source.
    scale_ : pandas.DataFrame
        Mean and deviation of every adsorbate over the reference rows, eV.
    gaussian_ : GroupedGaussianProcess
    """

    def fit(self, rows: pd.DataFrame, start: FloatArray | None = None, max_iter: int = 40) -> Self:
        """Fit on rows as from `pure_rows`.

        Parameters
        ----------
        rows : pandas.DataFrame
        start : ndarray or None, default None
            Log parameters to start from.
        max_iter : int, default 40

        Returns
        -------
        self
        """
        self.rows_ = self.mark(rows).reset_index(drop=True)
        close = self.rows_[self.rows_["reference"] & (self.rows_["openness"] == 0.0)]
        grouped = close.groupby("adsorbate")["energy_eV"]
        self.scale_ = pd.DataFrame({"mean": grouped.mean(), "sd": grouped.std(ddof=0)})
        self.adsorbates_ = sorted(self.scale_.index)
        known = self.rows_["adsorbate"].isin(self.adsorbates_)
        self.rows_ = self.rows_[known].reset_index(drop=True)
        self._sources = sorted(self.rows_["source"].unique())
        self.gaussian_ = GroupedGaussianProcess(
            terms=_terms(),
            noise=_RELATIVE_NOISE,
            noise_spread=0.5,
            start=None if start is None else start.tolist(),
            max_iter=max_iter,
        ).fit(
            self._matrix(self.rows_),
            self._scaled(self.rows_),
            noise_sd=self.rows_["noise_sd_eV"] / self._deviation(self.rows_),
        )
        return self

    def mark(self, rows: pd.DataFrame) -> pd.DataFrame:
        """Return the rows with `reference`: whether the adsorbate's reference source gave it."""
        return rows.assign(reference=_is_reference(rows))

    def predict(
        self, metal: list[str], adsorbate: list[str], openness: FloatArray | None = None
    ) -> PureSurfaces:
        """Predict energies of the adsorbates' reference sources.

        Parameters
        ----------
        metal, adsorbate : list of str, one a row
        openness : ndarray or None, default None
            From `facet_openness`; None for close-packed faces.

        Returns
        -------
        PureSurfaces
        """
        frame = pd.DataFrame({"metal": metal, "adsorbate": adsorbate})
        frame["openness"] = 0.0 if openness is None else openness
        mean, sd = self.gaussian_.predict(self._matrix(frame), return_std=True)
        deviation = self._deviation(frame)
        centre = self.scale_["mean"].reindex(frame["adsorbate"]).to_numpy()
        return PureSurfaces(centre + deviation * mean, self._total_sd(sd, deviation))

    def leave_out(self, groups: Any) -> pd.DataFrame:
        """Predict all rows from the rows of other groups, parameters kept.

        Parameters
        ----------
        groups : array-like of shape (n_rows,)
            Such as the metals of `rows_`.

        Returns
        -------
        pandas.DataFrame
            `rows_` with predicted_eV and sd_eV (noise included).
        """
        mean, sd = self.gaussian_.leave_group_out(groups)
        deviation = self._deviation(self.rows_)
        centre = self.scale_["mean"].reindex(self.rows_["adsorbate"]).to_numpy()
        return self.rows_.assign(
            predicted_eV=centre + deviation * mean, sd_eV=self._total_sd(sd, deviation)
        )

    def source_offsets(self) -> pd.DataFrame:
        """Return the fitted offset of every source and adsorbate against the reference source.

        Returns
        -------
        pandas.DataFrame
            Columns source, adsorbate, offset_eV, sd_eV, n_rows.
        """
        others = self.rows_[~self.rows_["reference"] & (self.rows_["openness"] == 0.0)]
        own = self.predict(others["metal"].tolist(), others["adsorbate"].tolist())
        gaps = others.assign(gap=others["energy_eV"].to_numpy() - own.mean)
        grouped = gaps.groupby(["source", "adsorbate"])["gap"]
        frame = grouped.agg(offset_eV="mean", sd_eV="std", n_rows="size").reset_index()
        return frame.round({"offset_eV": 3, "sd_eV": 3})

    def _total_sd(self, sd: FloatArray, deviation: FloatArray) -> FloatArray:
        """Return the deviation (eV) of a well-sampled row: model, scatter and table noise."""
        scatter = deviation * np.hypot(sd, self.gaussian_.noise_)
        return np.asarray(np.hypot(scatter, _TABULATED_SD_EV), dtype=np.float64)

    def _deviation(self, frame: pd.DataFrame) -> FloatArray:
        return self.scale_["sd"].reindex(frame["adsorbate"]).to_numpy(dtype=np.float64)

    def _scaled(self, frame: pd.DataFrame) -> FloatArray:
        centre = self.scale_["mean"].reindex(frame["adsorbate"]).to_numpy()
        return np.asarray((frame["energy_eV"].to_numpy() - centre) / self._deviation(frame))

    def _matrix(self, frame: pd.DataFrame) -> FloatArray:
        """Lay out descriptors, adsorbate code, openness, source code and other-source flag."""
        descriptors = standardised_descriptors()[list(PURE_DESCRIPTORS)]
        adsorbate = [self.adsorbates_.index(a) for a in frame["adsorbate"]]
        source = [self._sources.index(s) for s in frame["source"]] if "source" in frame else -1
        other = ~frame["reference"] if "reference" in frame else 0.0
        extra = pd.DataFrame({"adsorbate": adsorbate, "openness": frame["openness"].to_numpy()})
        extra = extra.assign(source=source, other=np.asarray(other, dtype=float))
        values = descriptors.loc[frame["metal"].tolist()].to_numpy()
        return np.hstack([values, extra.to_numpy(dtype=np.float64)])


def _is_reference(rows: pd.DataFrame) -> pd.Series:
    """Tell rows of the adsorbate's reference source: the first listed that holds it."""
    held = rows.groupby("adsorbate")["source"].agg(set)
    first = {
        adsorbate: next((s for s in _REFERENCE_SOURCES if s in sources), "")
        for adsorbate, sources in held.items()
    }
    return rows["source"] == rows["adsorbate"].map(first)


def _terms() -> tuple[CovarianceTerm, ...]:
    n = len(PURE_DESCRIPTORS)
    columns = tuple(range(n))
    adsorbate, openness, source, other = n, n + 1, n + 2, n + 3
    smooth: dict[str, Any] = {"columns": columns, "length_scale": 3.0, "length_spread": 0.5}
    return (
        CovarianceTerm("all adsorbates", **smooth, smoothness="matern 5/2"),
        CovarianceTerm(
            "own", **smooth, smoothness="matern 5/2", labels=(adsorbate,), amplitude=0.4
        ),
        CovarianceTerm("open face", labels=(adsorbate,), scale=openness, amplitude=0.2),
        CovarianceTerm(
            "open face of the metal",
            columns=columns,
            length_scale=2.0,
            length_spread=0.3,
            shared_length=True,
            labels=(adsorbate,),
            scale=openness,
            amplitude=0.15,
        ),
        CovarianceTerm(
            "offset of the source",
            labels=(source, adsorbate),
            scale=other,
            amplitude=0.2,
            amplitude_spread=0.5,
        ),
    )
