"""Rows and design matrices of binary alloy surfaces.

A surface is described by its stronger and its weaker binding metal, by the share of the stronger
one in the best three-fold hollow, and by the energies of both metals' own surfaces. Which metal
binds more strongly, and those energies, come from a `PureSurfaceModel`, so that a metal that is
left out there stays left out here.
"""

from collections.abc import Collection
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from features.adsorption_descriptors import (
    METAL_DESCRIPTORS,
    alloy_parts,
    standardised_descriptors,
)
from features.tables import read_table
from screening.adsorption_pure import PureSurfaceModel
from screening.covariance import CovarianceTerm, FloatArray

__all__ = [
    "FAMILIES",
    "SurfaceDesign",
    "alloy_rows",
    "covariance_terms",
    "family_of",
    "hollow_share",
    "tree_matrix",
]

FAMILIES: dict[str, tuple[str, ...]] = {
    "oxygen and nitrogen": ("O", "OH", "N", "NH"),
    "methyl": ("CH3",),
    "hydrogen": ("H",),
}
"""Adsorbates that share one covariance."""

_N = len(METAL_DESCRIPTORS)
_HOLLOW, _STRONG_PURE, _WEAK_PURE, _ADSORBATE = 2 * _N, 2 * _N + 1, 2 * _N + 2, 2 * _N + 3

# Pure surfaces that tell which metal of an alloy binds the family more strongly.
_ROLES = {"CH3": ("C",), "H": ("C", "H")}
# Methyl sits on one atom by one sigma bond: of two metals with like energies of carbon, that with
# the larger coupling to the d band holds it.
_ROLE_BY_COUPLING = frozenset({"CH3"})

# A minimum over one or two sites is an upper bound: its scatter over one-site rows, eV.
_SITE_SD_EV = {1: 0.4, 2: 0.2}
_TABLE_SD_EV = 0.1
_MISSED_SD_EV = 1.5
_HOLLOW_SPECIES = frozenset({"N", "NH"})


def family_of(adsorbate: str) -> str | None:
    """Return the family of an adsorbate, or None if no alloy carries it in the tables."""
    return next((name for name, members in FAMILIES.items() if adsorbate in members), None)


def hollow_share(share: Any) -> FloatArray:
    """Return the share of a metal in the hollow that is richest in it.

    Ordered surfaces: one atom of three at 25 %, two at 50 %, three from 75 % on; linear between.

    Examples
    --------
    >>> hollow_share([0.25, 0.5, 0.75]).round(2).tolist()
    [0.33, 0.67, 1.0]
    """
    shares = np.asarray(share, dtype=np.float64)
    return np.asarray(np.interp(shares, [0.0, 0.25, 0.5, 0.75], [0.0, 1 / 3, 2 / 3, 1.0]))


def alloy_rows(without: Collection[str] = ()) -> pd.DataFrame:
    """Return the training rows of alloys: ordered surfaces and hollows of random alloys.

    Parameters
    ----------
    without : collection of str, default ()
        Elements whose alloys are left out.

    Returns
    -------
    pandas.DataFrame
        Columns composition (the group), first, second, share (of the first metal in the alloy, or
        in the hollow), hollow (whether `share` is a hollow's), adsorbate, energy_eV, noise_sd_eV,
        source.
    """
    rows = pd.concat([_ordered_rows(), _ensemble_rows()], ignore_index=True)
    known = standardised_descriptors().index.difference(list(without))
    return rows[rows["first"].isin(known) & rows["second"].isin(known)].reset_index(drop=True)


def _ordered_rows() -> pd.DataFrame:
    table = read_table("adsorption_alloys")
    parts = [alloy_parts(c) for c in table["composition"]]
    seen = table["n_sites_seen"].map(_SITE_SD_EV).fillna(0.0).to_numpy(dtype=float)
    missed = _missed_hollow(table)
    noise = np.hypot(np.where(missed, _MISSED_SD_EV, seen), _TABLE_SD_EV)
    frame = pd.DataFrame(parts, columns=["first", "second", "share"])
    return frame.assign(
        composition=table["composition"],
        hollow=False,
        adsorbate=table["adsorbate"],
        energy_eV=table["adsorption_energy_eV"],
        noise_sd_eV=noise,
        source=table["source"],
    )


def _missed_hollow(table: pd.DataFrame) -> NDArray[np.bool_]:
    """Tell minima whose usual kind of site was not among the sites computed."""
    kind = table["adsorbate"].isin(_HOLLOW_SPECIES) & (table["site"] == "top")
    methyl = (table["adsorbate"] == "CH3") & table["site"].isin(["fcc", "hcp"])
    return (kind | (methyl & (table["n_sites_seen"] <= 2))).to_numpy(dtype=np.bool_)


def _ensemble_rows() -> pd.DataFrame:
    """Return hydrogen on alloy hollows, slabs and particles averaged."""
    table = read_table("adsorption_ensembles")
    table = table[(table["adsorbate"] == "H") & table["metal_B"].notna()]
    keys = ["metal_A", "metal_B", "n_atoms_A"]
    mean = table.groupby(keys, as_index=False)["adsorption_energy_eV"].mean()
    flip = mean["metal_A"] > mean["metal_B"]
    first = mean["metal_A"].where(~flip, mean["metal_B"])
    second = mean["metal_B"].where(~flip, mean["metal_A"])
    atoms = mean["n_atoms_A"].astype(float)
    frame = pd.DataFrame({"first": first, "second": second, "share": atoms / 3.0})
    frame["share"] = frame["share"].where(~flip, 1.0 - frame["share"])
    return frame.assign(
        composition=first + "-" + second,
        hollow=True,
        adsorbate="H",
        energy_eV=mean["adsorption_energy_eV"],
        noise_sd_eV=0.05,
        source="alloy_ensembles",
    )


class SurfaceDesign:
    """Turn surfaces into matrices, given what is known about pure metals.

    Parameters
    ----------
    pure : PureSurfaceModel
    scale : pandas.DataFrame
        Mean and deviation (eV) by adsorbate.
    adsorbates : tuple of str
        Members of the family, in the order of their codes.
    """

    def __init__(
        self, pure: PureSurfaceModel, scale: pd.DataFrame, adsorbates: tuple[str, ...]
    ) -> None:
        self.adsorbates = adsorbates
        self.scale = scale
        metals = list(standardised_descriptors().index)
        self.energies = pd.DataFrame(
            {
                a: pure.predict(metals, [a] * len(metals)).mean
                for a in dict.fromkeys((*adsorbates, "N", "C", "H"))
            },
            index=metals,
        )
        self.scaled = (self.energies[list(adsorbates)] - scale["mean"]) / scale["sd"]
        order = self.energies[list(_ROLES.get(adsorbates[0], ("N", "C")))]
        self.strength = ((order - order.mean()) / order.std()).mean(axis=1)
        if adsorbates[0] in _ROLE_BY_COUPLING:
            self.strength -= standardised_descriptors()["log10_coupling"]

    def matrix(self, frame: pd.DataFrame) -> FloatArray:
        """Return one row a surface.

        Columns: descriptors of the stronger and of the weaker binding metal, share of the stronger
        one in the hollow, scaled energies of both pure surfaces, code of the adsorbate. The weaker
        metal's columns go over to the stronger one's as its share goes to zero.
        """
        swap = (self.strength[frame["second"]].to_numpy()) < (
            self.strength[frame["first"]].to_numpy()
        )
        strong = np.where(swap, frame["second"], frame["first"])
        weak = np.where(swap, frame["first"], frame["second"])
        share = np.where(swap, 1.0 - frame["share"], frame["share"])
        hollow = np.where(frame["hollow"], share, hollow_share(share))
        diluted = np.where(frame["hollow"], 1.0, np.clip((1.0 - share) / 0.25, 0.0, 1.0))
        left, right = self._metal(strong, frame), self._metal(weak, frame)
        right = left + diluted[:, None] * (right - left)
        code = [self.adsorbates.index(a) for a in frame["adsorbate"]]
        return np.column_stack(
            [left[:, :-1], right[:, :-1], hollow, left[:, -1], right[:, -1], code]
        )

    def _metal(self, metals: Any, frame: pd.DataFrame) -> FloatArray:
        descriptors = standardised_descriptors().loc[list(metals)].to_numpy()
        at = self.scaled.columns.get_indexer(pd.Index(frame["adsorbate"]))
        energies = self.scaled.loc[list(metals)].to_numpy()[np.arange(len(frame)), at]
        return np.column_stack([descriptors, energies])


def tree_matrix(X: FloatArray) -> FloatArray:
    """Return the columns for trees: the design plus means, gaps and estimates of the hollow."""
    strong, weak, hollow = X[:, :_N], X[:, _N : 2 * _N], X[:, [_HOLLOW]]
    mean = hollow * strong + (1.0 - hollow) * weak
    own, other = X[:, [_STRONG_PURE]], X[:, [_WEAK_PURE]]
    mixed = hollow * own + (1.0 - hollow) * other
    return np.hstack([X, mean, np.abs(strong - weak), mixed, np.minimum(own, other)])


def covariance_terms(n_adsorbates: int) -> tuple[CovarianceTerm, ...]:
    """Return the covariance of a family: what its adsorbates share, and what each keeps."""
    columns = tuple(range(_ADSORBATE))
    common = CovarianceTerm(
        "all adsorbates", columns, smoothness="matern 5/2", length_scale=4.0, length_spread=1.0
    )
    if n_adsorbates == 1:
        return (common,)
    own = CovarianceTerm(
        "own",
        columns,
        labels=(_ADSORBATE,),
        smoothness="matern 5/2",
        amplitude=0.5,
        length_scale=4.0,
        length_spread=1.0,
    )
    return (common, own)
