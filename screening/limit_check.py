"""One limit checked on many candidates."""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
import pandas as pd

from screening.covariance import FloatArray

__all__ = ["Check", "by_material", "by_material_and_size"]


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


def by_material_and_size(
    frame: pd.DataFrame,
    limit: str,
    judge: Callable[[str, FloatArray], tuple[FloatArray, Callable[[int], str]]],
    **how: bool,
) -> Check:
    """Return a check that asks once a material, for all of its sizes together.

    Parameters
    ----------
    frame : pandas.DataFrame
        Columns material, diameter_nm.
    limit : str
    judge : callable
        Material and its diameters (nm) to chances and to the words of one of them.
    **how : bool
        Passed on to `Check`.

    Returns
    -------
    Check
    """
    codes, names = pd.factorize(frame["material"])
    diameter = frame["diameter_nm"].to_numpy(dtype=np.float64)
    chance = np.full(len(frame), np.nan)
    place = np.zeros(len(frame), dtype=np.int64)
    words = []
    order = np.argsort(codes, kind="stable")
    ends = np.cumsum(np.bincount(codes, minlength=len(names)))
    for name, rows in zip(names, np.split(order, ends[:-1]), strict=True):
        place[rows] = np.arange(len(rows))
        chance[rows], say = judge(str(name), diameter[rows])
        words.append(say)
    return Check(limit, chance, lambda at: words[codes[at]](int(place[at])), **how)
