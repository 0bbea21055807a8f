"""Numbers that the bulk-gap model sees of a composition, and its covariance.

Three views: bond descriptors, each with its own length scale; the composition on the Mendeleev
scale, where the Euclidean distance of two cumulated distributions stands for the work of turning
one composition into the other (in the spirit of the element mover's distance: Hargreaves et al.,
Chem. Mater. 32, 10610 (2020)); and elemental means with the remaining bond descriptors, under one
common length scale.
"""

from collections.abc import Mapping, Sequence
from typing import Any, Self

import numpy as np
import pandas as pd
from sklearn.base import BaseEstimator, TransformerMixin
from sklearn.utils.validation import check_is_fitted

from features.bonding import bond_descriptors
from features.composition import composition_descriptors, ion_shares
from features.elements import element_table
from features.formula import parse_formula
from screening.covariance import CovarianceTerm, FloatArray

__all__ = ["GapDesign", "tree_matrix"]

_BOND = (
    "madelung_per_nm",
    "anion_filled_mean_eV",
    "filled_max_eV",
    "polarity_min",
    "anion_radius_nm",
    "network_row",
    "open_d_share",
    "spectator_share",
    "polarity",
    "network_ionisation_eV",
    "non_metal_cation_share",
    "ionic_character",
    "anion_charge_missing",
    "field_per_nm",
    "empty_d_share",
    "empty_s_share",
    "open_f_share",
    "constituents",
    "network_electronegativity",
    "anion_share",
    "network_p_level_eV",
    "field_min_per_nm",
    "lone_pair_share",
    "empty_mean_eV",
    "frontier_mean_eV",
)
_ELEMENTAL = (
    "all_mean_electronegativity",
    "cation_mean_electronegativity",
    "anion_mean_electronegativity",
    "cation_max_electronegativity",
    "cation_deviation_electronegativity",
    "all_deviation_electronegativity",
    "anion_mean_p_level_eV",
    "anion_max_p_level_eV",
    "cation_min_s_level_eV",
    "cation_mean_s_level_eV",
    "cation_mean_p_level_eV",
    "cation_mean_d_level_eV",
    "cation_max_d_level_eV",
    "cation_mean_row",
    "anion_mean_row",
    "anion_mean_ionic_radius_nm",
    "cation_mean_ionic_radius_nm",
    "cation_mean_valence_electrons",
    "anion_mean_valence_electrons",
    "all_mean_valence_electrons",
    "all_mean_molar_volume_cm3",
    "cation_mean_mendeleev_number",
    "all_mean_mendeleev_number",
    "cation_mean_ionisation_eV",
    "cation_max_ionisation_eV",
    "anion_mean_ionisation_eV",
)
_N_DIRECTIONS = 25


def tree_matrix(formulas: Sequence[str]) -> FloatArray:
    """Return the columns that the trees see: bond descriptors and elemental means.

    Parameters
    ----------
    formulas : sequence of str

    Returns
    -------
    ndarray of shape (n_formulas, n_columns)
    """
    elemental = composition_descriptors(formulas)[list(_ELEMENTAL)]
    bond = bond_descriptors(formulas)
    return np.hstack([bond.to_numpy(dtype=np.float64), elemental.to_numpy(dtype=np.float64)])


def _cumulated(shares: Mapping[str, float], scale: pd.Series) -> FloatArray:
    """Return the cumulated distribution of constituents on the Mendeleev scale."""
    amount = np.zeros(len(scale))
    for symbol, share in shares.items():
        amount[scale.index.get_loc(symbol)] = share
    steps = np.diff(scale.to_numpy(), append=scale.iloc[-1] + 1.0)
    return np.asarray(np.cumsum(amount) * np.sqrt(steps) / 10.0)


def _distributions(formulas: Sequence[str]) -> FloatArray:
    """Return the distributions of all constituents, of the cations and of the anions."""
    scale = element_table()["mendeleev_number"].sort_values(kind="stable")
    rows = []
    for formula in formulas:
        compound = parse_formula(formula)
        parts = (compound.fractions, *ion_shares(compound))
        rows.append(np.concatenate([_cumulated(part, scale) for part in parts]))
    return np.array(rows)


class GapDesign(TransformerMixin, BaseEstimator):
    """Columns of the Gaussian process, standardised on the rows that it is fitted to.

    Parameters
    ----------
    n_directions : int, default 25
        Principal directions kept of the distributions on the Mendeleev scale.
    """

    def __init__(self, n_directions: int = _N_DIRECTIONS) -> None:
        self.n_directions = n_directions

    def fit(self, X: Any, y: Any = None) -> Self:  # noqa: ARG002 - scikit-learn's signature
        """Learn means, spreads and principal directions.

        Parameters
        ----------
        X : sequence of str
            Formulas.
        y : None
            Ignored.

        Returns
        -------
        self
        """
        bond, elemental = self._blocks(X)
        self.centres_ = tuple(block.mean(axis=0) for block in (bond, elemental))
        self.spreads_ = tuple(
            np.where(block.std(axis=0) > 1e-9, block.std(axis=0), 1.0)
            for block in (bond, elemental)
        )
        distributions = _distributions(X)
        self.middle_ = distributions.mean(axis=0)
        _, _, directions = np.linalg.svd(distributions - self.middle_, full_matrices=False)
        self.directions_ = directions[: self.n_directions].T
        return self

    def transform(self, X: Any) -> FloatArray:
        """Return the columns in the order bond, Mendeleev scale, rest.

        Parameters
        ----------
        X : sequence of str
            Formulas.

        Returns
        -------
        ndarray of shape (n_formulas, n_columns)
        """
        check_is_fitted(self)
        bond, rest = (
            (block - centre) / spread
            for block, centre, spread in zip(
                self._blocks(X), self.centres_, self.spreads_, strict=True
            )
        )
        similar = (_distributions(X) - self.middle_) @ self.directions_
        return np.hstack([bond, similar, rest])

    def terms(self) -> tuple[CovarianceTerm, ...]:
        """Return the covariance over the columns, for a target of about unit range."""
        check_is_fitted(self)
        ends = np.cumsum([len(self.centres_[0]), self.directions_.shape[1], len(self.centres_[1])])
        bond, similar, rest = (
            tuple(range(start, end)) for start, end in zip((0, *ends[:-1]), ends, strict=True)
        )
        return (
            CovarianceTerm(
                "bond",
                bond,
                smoothness="matern 3/2",
                amplitude=0.5,
                length_scale=6.0,
                length_spread=0.7,
            ),
            CovarianceTerm(
                "similarity",
                similar,
                smoothness="matern 3/2",
                shared_length=True,
                amplitude=0.3,
                length_scale=0.7,
            ),
            CovarianceTerm(
                "rest",
                rest,
                smoothness="matern 3/2",
                shared_length=True,
                amplitude=0.4,
                length_scale=10.0,
            ),
        )

    @staticmethod
    def _blocks(formulas: Sequence[str]) -> tuple[FloatArray, FloatArray]:
        bond = bond_descriptors(formulas)
        others = bond.drop(columns=list(_BOND))
        elemental = composition_descriptors(formulas)[list(_ELEMENTAL)]
        rest = np.hstack([elemental.to_numpy(dtype=np.float64), others.to_numpy(dtype=np.float64)])
        return bond[list(_BOND)].to_numpy(dtype=np.float64), rest
