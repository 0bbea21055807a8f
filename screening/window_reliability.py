"""Predicted chance against hit frequency: the check that matches the decision.

The windows are fixed before anything is looked at: for every stated width the energy axis is cut
at whole multiples of that width, and every left-out row is asked about every such window to which
its prediction gives a chance of a hundredth or more. Each group (material, metal, composition or
element) has one vote, shared by its rows.

A perfect model's band is simulated twice from the predictions themselves: with rows that err
independently, and with all rows of a group erring together (the same quantile). The truth lies
between the two.
"""

import itertools
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from screening.covariance import FloatArray
from screening.predictive import Predictive

__all__ = ["CHANCE_EDGES", "WIDTHS_eV", "Windows", "ask_windows", "draw_truths", "reliability"]

WIDTHS_eV = (0.05, 0.1, 0.2, 0.4)
"""Widths of the windows, eV."""
CHANCE_EDGES = (0.01, 0.05, 0.1, 0.2, 0.3, 0.4, 0.5, 0.6, 0.8, 1.0)
"""Edges of the bins of predicted chance."""
ACTED_ON = 0.2
"""Predicted chance from which expected and observed hits are compared."""

_N_DRAWS = 500


@dataclass(frozen=True)
class Windows:
    """Windows that rows were asked about.

    Parameters
    ----------
    row : ndarray of int, shape (n,)
        Position of the row in the frame.
    low, high : ndarray of shape (n,)
        Ends, eV; the lower one belongs to the window.
    chance : ndarray of shape (n,)
        Predicted chance of the truth inside.
    """

    row: NDArray[np.intp]
    low: FloatArray
    high: FloatArray
    chance: FloatArray

    def hits(self, truth: FloatArray) -> NDArray[np.bool_]:
        """Tell which windows hold the truth of their row."""
        inside = truth[self.row]
        return np.asarray((inside >= self.low) & (inside < self.high), dtype=np.bool_)

    def take(self, chosen: NDArray[np.bool_]) -> "Windows":
        """Return some of the windows."""
        return Windows(self.row[chosen], self.low[chosen], self.high[chosen], self.chance[chosen])


def ask_windows(
    predictive: Predictive, observed: FloatArray, widths_eV: tuple[float, ...] = WIDTHS_eV
) -> Windows:
    """Ask every row about all windows of a fixed grid that it gives a chance.

    Parameters
    ----------
    predictive : Predictive
    observed : ndarray of shape (n_rows,)
        Only widens the grid to the range of the data; no window is chosen by it.
    widths_eV : tuple of float, default `WIDTHS_eV`

    Returns
    -------
    Windows
    """
    tails = predictive.quantile(np.tile([0.001, 0.999], (len(observed), 1)))
    low, high = min(tails.min(), observed.min()), max(tails.max(), observed.max())
    parts = []
    for width in widths_eV:
        edges = width * np.arange(np.floor(low / width), np.ceil(high / width) + 2)
        below = predictive.cdf(np.tile(edges, (len(observed), 1)))
        chance = np.diff(below, axis=1)
        row, at = np.nonzero(chance >= CHANCE_EDGES[0])
        parts.append((row, edges[at], edges[at + 1], chance[row, at]))
    return Windows(*(np.concatenate(column) for column in zip(*parts, strict=True)))


def draw_truths(
    predictive: Predictive, groups: pd.Series, *, shared: bool, n_draws: int = _N_DRAWS
) -> FloatArray:
    """Draw what a perfect model would have seen.

    Parameters
    ----------
    predictive : Predictive
    groups : pandas.Series
        Group of each row.
    shared : bool
        Whether all rows of a group take the same quantile.
    n_draws : int, default 500

    Returns
    -------
    ndarray of shape (n_rows, n_draws)
    """
    rng = np.random.default_rng(0)
    codes = pd.factorize(groups)[0] if shared else np.arange(len(groups))
    chance = rng.uniform(1e-12, 1.0 - 1e-12, size=(int(codes.max()) + 1, n_draws))
    return predictive.quantile(chance[codes])


def reliability(
    predictive: Predictive, observed: FloatArray, groups: pd.Series, weights: FloatArray
) -> tuple[pd.DataFrame, pd.DataFrame]:
    """Return the reliability of predicted chances and the scores over all windows.

    Parameters
    ----------
    predictive : Predictive
    observed : ndarray of shape (n_rows,)
    groups : pandas.Series
    weights : ndarray of shape (n_rows,)
        Votes of the rows.

    Returns
    -------
    bins : pandas.DataFrame
        One row a bin of chance that holds predictions: chance_low, chance_high, n_predictions,
        n_groups, predicted, observed, and the 95 % bands of a perfect model: independent_low,
        independent_high, shared_low, shared_high.
    scores : pandas.DataFrame
        Rows brier_score and observed_hits (in votes, over windows with a chance of at least 0.2;
        ``perfect`` is then the expected number): value, perfect, and the bands as above.
    """
    windows = ask_windows(predictive, observed)
    draws = [draw_truths(predictive, groups, shared=shared) for shared in (False, True)]
    votes = weights * groups.nunique() / weights.sum()
    rows = []
    for low, high in itertools.pairwise(CHANCE_EDGES):
        upto = windows.chance < high if high < 1.0 else windows.chance <= 1.0 + 1e-9
        chosen = windows.take((windows.chance >= low) & upto)
        if len(chosen.row):
            ends = {"chance_low": low, "chance_high": high}
            rows.append(ends | _bin(chosen, observed, groups, votes, draws))
    return pd.DataFrame(rows), _scores(windows, observed, votes, draws)


def _bin(
    windows: Windows,
    observed: FloatArray,
    groups: pd.Series,
    votes: FloatArray,
    draws: list[FloatArray],
) -> dict[str, float]:
    weight = votes[windows.row] / votes[windows.row].sum()
    bands = [_band(lambda truth: float(weight @ windows.hits(truth)), many) for many in draws]
    return {
        "n_predictions": len(weight),
        "n_groups": groups.iloc[windows.row].nunique(),
        "predicted": float(weight @ windows.chance),
        "observed": float(weight @ windows.hits(observed)),
        "independent_low": float(bands[0][0]),
        "independent_high": float(bands[0][1]),
        "shared_low": float(bands[1][0]),
        "shared_high": float(bands[1][1]),
    }


def _scores(
    windows: Windows, observed: FloatArray, votes: FloatArray, draws: list[FloatArray]
) -> pd.DataFrame:
    weight = votes[windows.row]
    share = weight / weight.sum()
    acted = windows.take(windows.chance >= ACTED_ON)
    acted_votes = votes[acted.row]

    def brier(truth: FloatArray) -> float:
        return float(share @ (windows.chance - windows.hits(truth)) ** 2)

    def hits(truth: FloatArray) -> float:
        return float(acted_votes @ acted.hits(truth))

    expected = float(acted_votes @ acted.chance)
    even = float(share @ (windows.chance * (1.0 - windows.chance)))
    found = {
        "brier_score": _beside(brier, observed, draws, even),
        "observed_hits": _beside(hits, observed, draws, expected),
    }
    return pd.DataFrame(found).T


def _beside(
    measure: Callable[[FloatArray], float],
    observed: FloatArray,
    draws: list[FloatArray],
    perfect: float,
) -> dict[str, float]:
    bands = [_band(measure, many) for many in draws]
    return {
        "value": measure(observed),
        "perfect": perfect,
        "independent_low": float(bands[0][0]),
        "independent_high": float(bands[0][1]),
        "shared_low": float(bands[1][0]),
        "shared_high": float(bands[1][1]),
    }


def _band(measure: Callable[[FloatArray], float], draws: FloatArray) -> FloatArray:
    """Return the 95 % band of a measure over drawn truths, one column a draw."""
    return np.quantile([measure(truth) for truth in draws.T], [0.025, 0.975])
