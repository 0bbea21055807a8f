"""Supply, hazard and the trade-off between them and the chance of a hit."""

from functools import cache

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from features.formula import parse_formula
from features.hazards import hazard_class
from features.supply import SupplyFigures, supply_figures, supply_text
from screening.covariance import FloatArray

__all__ = ["add_supply", "unbeaten"]


@cache
def _figures(material: str) -> tuple[int, SupplyFigures, str]:
    amounts = dict(parse_formula(material).amounts)
    return hazard_class(amounts), supply_figures(amounts), supply_text(amounts)


def add_supply(listed: pd.DataFrame) -> pd.DataFrame:
    """Add hazard and supply of each row, and whether another row beats it in every respect.

    Parameters
    ----------
    listed : pandas.DataFrame
        Columns material, chance_in_window and, where there is one, size_tolerance_nm.

    Returns
    -------
    pandas.DataFrame
        A copy with hazard_class (1 to 4), supply_class (1 to 4), supply (in words) and
        is_unbeaten: no other row is at least as good in chance, tolerance, hazard and supply and
        better in one of them.
    """
    facts = [_figures(str(material)) for material in listed["material"]]
    frame = listed.assign(
        hazard_class=[hazard for hazard, _, _ in facts],
        supply_class=[figures.supply_class for _, figures, _ in facts],
        supply=[words for _, _, words in facts],
    )
    merits = [frame["chance_in_window"], -frame["hazard_class"], -frame["supply_class"]]
    if "size_tolerance_nm" in frame:
        merits.append(frame["size_tolerance_nm"])
    return frame.assign(is_unbeaten=unbeaten(np.column_stack(merits)))


def unbeaten(merits: FloatArray) -> NDArray[np.bool_]:
    """Return which rows belong to the Pareto front.

    Parameters
    ----------
    merits : ndarray of shape (n_rows, n_merits)
        More is better.

    Returns
    -------
    ndarray of bool, shape (n_rows,)
        Whether no other row is at least as good everywhere and better somewhere.

    Examples
    --------
    >>> unbeaten(np.array([[1.0, 0.0], [0.0, 1.0], [0.0, 0.0]])).tolist()
    [True, True, False]
    """
    values = np.asarray(merits, dtype=np.float64)
    as_good = (values[:, None, :] >= values[None, :, :]).all(axis=2)
    better = (values[:, None, :] > values[None, :, :]).any(axis=2)
    return np.asarray(~(as_good & better).any(axis=0))
