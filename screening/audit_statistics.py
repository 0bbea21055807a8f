"""Statistics of left-out predictions, each beside what a perfect model would get.

Every group (material, metal, composition, element) has one vote. Intervals of errors and scores
are bootstraps over groups, bands of coverage exact binomial ones counted in groups (Clopper and
Pearson, Biometrika 26, 404 (1934)). The perfect model is simulated: truths are drawn from the
predictions themselves, as many rows as there are, independent of each other. Energies in eV.
"""

from collections.abc import Callable

import numpy as np
import pandas as pd
from scipy.stats import beta

from screening.calibration import LEVELS
from screening.covariance import FloatArray
from screening.left_out import vote_weights
from screening.predictive import Predictive, interval_score
from screening.window_reliability import draw_truths

__all__ = [
    "binomial_band",
    "cluster_bootstrap",
    "coverage_row",
    "figure_row",
    "group_means",
    "perfect_rows",
    "pit_distance",
    "score_rows",
]

_N_BOOTSTRAP = 2000
_N_PERFECT = 200
_FEWEST_CLUSTERS = 5
_BAND = (0.05, 0.95)
Row = dict[str, object]


def group_means(values: pd.Series, frame: pd.DataFrame) -> pd.Series:
    """Return the vote-weighted mean of each group."""
    weights = vote_weights(frame)
    total = pd.Series(values.to_numpy(dtype=float) * weights).groupby(frame["group"].to_numpy())
    share = pd.Series(weights).groupby(frame["group"].to_numpy())
    return total.sum() / share.sum()


def cluster_bootstrap(
    groups: pd.Series, frame: pd.DataFrame, turn: Callable[[FloatArray], FloatArray] = np.asarray
) -> tuple[float, float]:
    """Return the 90 % bootstrap interval of the mean over groups, whole clusters drawn.

    Parameters
    ----------
    groups : pandas.Series
        Value of each group, as from `group_means`.
    frame : pandas.DataFrame
        Rows with their group and cluster.
    turn : callable, default identity
        Applied to the means, for instance a square root.

    Returns
    -------
    low, high : float
        Missing with fewer than five clusters, from which no interval can be drawn.
    """
    cluster = frame.drop_duplicates("group").set_index("group")["cluster"].loc[groups.index]
    sums = groups.groupby(cluster.to_numpy()).agg(["sum", "size"]).to_numpy(dtype=float)
    if len(sums) < _FEWEST_CLUSTERS:
        return float("nan"), float("nan")
    rng = np.random.default_rng(0)
    drawn = sums[rng.integers(len(sums), size=(_N_BOOTSTRAP, len(sums)))].sum(axis=1)
    low, high = np.quantile(turn(drawn[:, 0] / drawn[:, 1]), _BAND)
    return float(low), float(high)


def binomial_band(share: float, n_groups: int) -> tuple[float, float]:
    """Return the exact 90 % binomial interval of a share, counted in groups.

    Examples
    --------
    >>> [round(end, 3) for end in binomial_band(0.5, 10)]
    [0.222, 0.778]
    """
    hits = share * n_groups
    low = beta.ppf(_BAND[0], hits, n_groups - hits + 1) if hits > 0 else 0.0
    high = beta.ppf(_BAND[1], hits + 1, n_groups - hits) if hits < n_groups else 1.0
    return float(low), float(high)


def figure_row(
    name: str,
    frame: pd.DataFrame,
    groups: pd.Series,
    ends: tuple[float, float],
    *,
    lowest_is_worst: bool = False,
) -> Row:
    """Return one row of the table of figures from the values of the groups."""
    worst = groups.min() if lowest_is_worst else groups.max()
    where = groups.idxmin() if lowest_is_worst else groups.idxmax()
    return {
        "figure": name,
        "value": float(groups.mean()),
        "low": ends[0],
        "high": ends[1],
        "median": float(groups.median()),
        "worst": float(worst),
        "worst_group": str(where),
        "n_groups": len(groups),
        "n_rows": len(frame),
    }


def _inside(frame: pd.DataFrame, level: float) -> pd.Series:
    name = f"{100 * level:.0f}_eV"
    return frame["observed_eV"].between(frame[f"low_{name}"], frame[f"high_{name}"]).astype(float)


def coverage_row(frame: pd.DataFrame, level: float) -> Row:
    """Return the share of truths inside a central interval, with its exact binomial band."""
    groups = group_means(_inside(frame, level), frame)
    ends = binomial_band(float(groups.mean()), len(groups))
    name = f"coverage_{100 * level:.0f}"
    return figure_row(name, frame, groups, ends, lowest_is_worst=True)


def pit_distance(pit: FloatArray, weights: FloatArray) -> float:
    """Return the largest distance between weighted ranks and a uniform distribution.

    The Kolmogorov-Smirnov distance of the probability integral transform; 0 is perfect.

    Parameters
    ----------
    pit, weights : ndarray of shape (n_rows,)

    Examples
    --------
    >>> import numpy as np
    >>> pit_distance(np.array([0.25, 0.75]), np.ones(2))
    0.25
    """
    order = np.argsort(pit, kind="stable")
    after = np.cumsum(weights[order]) / weights.sum()
    before = after - weights[order] / weights.sum()
    return float(np.maximum(np.abs(after - pit[order]), np.abs(before - pit[order])).max())


def score_rows(frame: pd.DataFrame, *, has_intervals: bool) -> list[Row]:
    """Return accuracy, coverage, sharpness and proper scores of a segment's predictions.

    Parameters
    ----------
    frame : pandas.DataFrame
        Rows of the common table (`screening.left_out`).
    has_intervals : bool
        Whether every row has its intervals.

    Returns
    -------
    list of dict
        Rows as `figure_row`.
    """
    error = frame["predicted_eV"] - frame["observed_eV"]
    size, square = group_means(error.abs(), frame), group_means(error**2, frame)
    rows = [
        figure_row("mean_absolute_error_eV", frame, size, cluster_bootstrap(size, frame)),
        _root_mean_square(frame, square),
    ]
    if not has_intervals:
        return rows
    for level in LEVELS:
        name = f"{100 * level:.0f}_eV"
        width = group_means(frame[f"high_{name}"] - frame[f"low_{name}"], frame)
        rows.append(coverage_row(frame, level))
        rows.append(figure_row(f"mean_width_{name}", frame, width, cluster_bootstrap(width, frame)))
    ends = frame["observed_eV"], frame["low_90_eV"], frame["high_90_eV"]
    scores = {
        "crps_eV": frame["crps_eV"],
        "interval_score_90_eV": pd.Series(interval_score(*ends, 0.9), index=frame.index),
    }
    for name, values in scores.items():
        groups = group_means(values, frame)
        rows.append(figure_row(name, frame, groups, cluster_bootstrap(groups, frame)))
    return [*rows, _pit_row(frame)]


def _root_mean_square(frame: pd.DataFrame, square: pd.Series) -> Row:
    ends = cluster_bootstrap(square, frame, np.sqrt)
    row = figure_row("root_mean_square_error_eV", frame, np.sqrt(square), ends)
    return row | {"value": float(np.sqrt(square.mean()))}


def _pit_row(frame: pd.DataFrame) -> Row:
    """Return the distance of the probability integral transform, with no groups of its own."""
    distance = pit_distance(frame["pit"].to_numpy(dtype=float), vote_weights(frame))
    counted = {"n_groups": frame["group"].nunique(), "n_rows": len(frame)}
    return {"figure": "pit_distance", "value": distance, **counted}


def perfect_rows(frame: pd.DataFrame, predictive: Predictive) -> list[Row]:
    """Return what a perfect model with the same rows would get: mean and 90 % band.

    Parameters
    ----------
    frame : pandas.DataFrame
    predictive : Predictive
        Distributions of the rows.

    Returns
    -------
    list of dict
        Rows named ``perfect model: ...`` after the statistics of `score_rows`.
    """
    truth = draw_truths(predictive, frame["group"], shared=False, n_draws=_N_PERFECT)
    weights = vote_weights(frame)
    error = np.abs(truth - predictive.mean[:, None])
    found = {
        "mean_absolute_error_eV": weights @ error,
        "root_mean_square_error_eV": np.sqrt(weights @ error**2),
        "crps_eV": weights @ predictive.crps(truth),
    }
    for at, level in enumerate(predictive.levels):
        found[f"coverage_{100 * level:.0f}"] = weights @ (error <= predictive.half[:, [at]])
    half = predictive.half[:, [predictive.levels.index(0.9)]]
    centre = predictive.mean[:, None]
    found["interval_score_90_eV"] = weights @ interval_score(
        truth, centre - half, centre + half, 0.9
    )
    pit = predictive.cdf(truth)
    found["pit_distance"] = np.array([pit_distance(column, weights) for column in pit.T])
    return [_perfect(name, values, frame) for name, values in found.items()]


def _perfect(name: str, values: FloatArray, frame: pd.DataFrame) -> Row:
    low, high = np.quantile(values, _BAND)
    return {
        "figure": f"perfect model: {name}",
        "value": float(values.mean()),
        "low": float(low),
        "high": float(high),
        "n_groups": frame["group"].nunique(),
        "n_rows": len(frame),
    }
