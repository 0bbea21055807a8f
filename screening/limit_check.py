"""One limit checked on many candidates."""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
import pandas as pd

from screening.covariance import FloatArray

__all__ = ["Check", "by_material"]


@dataclass(frozen=True)
class Check:
    """The chance that a limit is met, row by row.

    Parameters
    ----------
    limit : str
        Name as in the specification.
    chance : ndarray of shape (n_rows,)
        0 to 1; NaN where nothing is on record.
    words : callable
        Row number to the reason in words.
    in_sigmas : bool, default False
        Whether the verdict follows the margin in sigmas instead of the chance wanted.
    """

    limit: str
    chance: FloatArray
    words: Callable[[int], str]
    in_sigmas: bool = False


def by_material(
    frame: pd.DataFrame, limit: str, judge: Callable[[str], tuple[float, str]]
) -> Check:
    """Return a check that asks once a material, whatever the size.

    Parameters
    ----------
    frame : pandas.DataFrame
        Column material.
    limit : str
    judge : callable
        Material to chance and words.

    Returns
    -------
    Check
    """
    codes, names = pd.factorize(frame["material"])
    answers = [judge(str(name)) for name in names]
    chance = np.array([chance for chance, _ in answers], dtype=np.float64)[codes]
    return Check(limit, chance, lambda at: answers[codes[at]][1])
