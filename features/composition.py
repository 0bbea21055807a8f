"""Elemental descriptors of a composition as a scikit-learn transformer.

Weighted mean, range, deviation, minimum and maximum of every elemental descriptor over the
composition, then over its cations and over its anions apart.
"""

from collections.abc import Sequence
from functools import lru_cache
from typing import Any, Self

import numpy as np
import pandas as pd
from numpy.typing import NDArray
from sklearn.base import BaseEstimator, TransformerMixin
from sklearn.utils import Tags
from sklearn.utils.validation import check_is_fitted

from features.charge import charge_balance
from features.elements import DESCRIPTORS, element_table
from features.errors import FormulaError, explain
from features.formula import Compound, parse_formula

__all__ = ["CompositionDescriptors", "composition_descriptors", "ion_shares"]

_STATISTICS = ("mean", "range", "deviation", "min", "max")
_PARTS = ("all", "cation", "anion")


def ion_shares(compound: Compound) -> tuple[dict[str, float], dict[str, float]]:
    """Return the cations and the anions of a compound with shares that sum to 1 on each side.

    Parameters
    ----------
    compound : Compound

    Returns
    -------
    cations, anions : dict of str to float
        By oxidation states; where these leave one side empty, the most electronegative
        constituent is the anion. An element alone stands on both sides.

    Examples
    --------
    >>> ion_shares(parse_formula("CdSe0.6S0.4"))[1]
    {'Se': 0.6, 'S': 0.4}
    """
    fractions = compound.fractions
    states = charge_balance(compound).states
    anions = {s: x for s, x in fractions.items() if states.get(s, 0.0) < 0}
    if not anions or len(anions) == len(fractions):
        anions = dict(list(fractions.items())[-1:])
    cations = {s: x for s, x in fractions.items() if s not in anions} or anions
    return _shares(cations), _shares(anions)


def _shares(amounts: dict[str, float]) -> dict[str, float]:
    total = sum(amounts.values())
    return {symbol: round(amount / total, 12) for symbol, amount in amounts.items()}


@lru_cache(maxsize=1)
def _element_rows() -> tuple[dict[str, int], NDArray[np.float64]]:
    table = element_table()
    return {str(s): at for at, s in enumerate(table.index)}, table.to_numpy(dtype=np.float64)


def _statistics(shares: dict[str, float]) -> NDArray[np.float64]:
    """Return the five statistics of every descriptor over weighted constituents."""
    at, values = _element_rows()
    rows = values[[at[symbol] for symbol in shares]]
    weights = np.array(list(shares.values()))[:, None]
    mean = np.sum(weights * rows, axis=0)
    deviation = np.sum(weights * np.abs(rows - mean), axis=0)
    low, high = rows.min(axis=0), rows.max(axis=0)
    return np.stack([mean, high - low, deviation, low, high], axis=1).ravel()


@lru_cache(maxsize=16384)
def _row(text: str) -> NDArray[np.float64]:
    compound = parse_formula(text)
    cations, anions = ion_shares(compound)
    row = np.concatenate([_statistics(part) for part in (compound.fractions, cations, anions)])
    row.flags.writeable = False
    return row


def _names() -> list[str]:
    return [f"{part}_{s}_{d}" for part in _PARTS for d in DESCRIPTORS for s in _STATISTICS]


def composition_descriptors(formulas: Sequence[str]) -> pd.DataFrame:
    """Return the elemental descriptors of compositions.

    Parameters
    ----------
    formulas : sequence of str

    Returns
    -------
    pandas.DataFrame
        One row a formula, in the order given; columns such as ``all_mean_electronegativity`` and
        ``anion_max_p_level_eV``. Units as in `features.elements.element_table`.

    Raises
    ------
    FormulaError
        If a text is not a formula, or an element lies beyond plutonium.

    Examples
    --------
    >>> frame = composition_descriptors(["CdSe", "SeCd"])
    >>> bool((frame.iloc[0] == frame.iloc[1]).all())
    True
    """
    names = _names()
    rows = [_row(formula) for formula in formulas]
    return pd.DataFrame(np.array(rows).reshape(len(rows), len(names)), columns=names)


def _one_column(X: Any) -> tuple[list[str], Any]:
    """Return the formulas of the only column and the caller's index, if there is one."""
    index = X.index if isinstance(X, pd.DataFrame | pd.Series) else None
    values = np.asarray(X, dtype=object)
    if values.ndim == 2 and values.shape[1] == 1:
        values = values[:, 0]
    if values.ndim != 1:
        raise FormulaError(
            explain(
                "not one column of formulas",
                expected="shape (n_rows,) or (n_rows, 1)",
                found=f"shape {values.shape}",
            )
        )
    return list(values), index


class CompositionDescriptors(TransformerMixin, BaseEstimator):
    """Elemental descriptors of one column of formulas.

    Attributes
    ----------
    n_features_in_ : int
        Always 1.

    Examples
    --------
    >>> import pandas as pd
    >>> frame = pd.DataFrame({"material": ["CdSe", "PbS"]}, index=[7, 9])
    >>> CompositionDescriptors().fit_transform(frame).index.tolist()
    [7, 9]
    """

    def fit(self, X: Any, y: Any = None) -> Self:  # noqa: ARG002 - scikit-learn's signature
        """Check the column; nothing is learned.

        Parameters
        ----------
        X : DataFrame, Series or array-like of shape (n_rows,) or (n_rows, 1)
            Formulas.
        y : None
            Ignored.

        Returns
        -------
        self

        Raises
        ------
        FormulaError
            If X is not one column of formulas.
        """
        formulas, _ = _one_column(X)
        for formula in formulas:
            parse_formula(formula)
        self.n_features_in_ = 1
        if isinstance(X, pd.DataFrame):
            self.feature_names_in_ = np.asarray(X.columns, dtype=object)
        return self

    def transform(self, X: Any) -> pd.DataFrame:
        """Return the descriptors.

        Parameters
        ----------
        X : DataFrame, Series or array-like of shape (n_rows,) or (n_rows, 1)

        Returns
        -------
        pandas.DataFrame
            Columns as `composition_descriptors`, the caller's index kept.

        Raises
        ------
        FormulaError
            If X is not one column of formulas.
        """
        check_is_fitted(self)
        formulas, index = _one_column(X)
        frame = composition_descriptors(formulas)
        return frame if index is None else frame.set_axis(index, axis=0)

    def get_feature_names_out(
        self,
        input_features: Any = None,  # noqa: ARG002 - scikit-learn's signature
    ) -> NDArray[np.object_]:
        """Return the names of the output columns."""
        return np.asarray(_names(), dtype=object)

    def __sklearn_tags__(self) -> Tags:
        tags = super().__sklearn_tags__()
        tags.input_tags.string = True
        tags.input_tags.two_d_array = False
        tags.requires_fit = False
        tags.no_validation = True
        return tags
