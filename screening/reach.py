"""How far a candidate is from the data, and whether errors were ever measured that far out.

Distance is taken in the covariance of the Gaussian process of measured records: 0 for a sample
that it holds for the same as a record, 1 for one that shares nothing with any record. The limits
are no choice of ours: they are the distances at which left-out size ranges and left-out materials
were predicted, so that beyond them no error was ever measured.
"""

from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd

from screening.calibration import group_weights
from screening.covariance import FloatArray
from screening.dots import ON_RECORD, SizeGapModel, range_groups

__all__ = ["EDGE", "FAR", "NEAR", "ReachLimits", "distance_to_data", "reach_limits"]

NEAR = "near"
EDGE = "edge"
FAR = "far"

_SHARE = 0.95


@dataclass(frozen=True)
class ReachLimits:
    """Kernel distances within which left-out groups were predicted.

    Parameters
    ----------
    near : float
        Largest distance of left-out size ranges, the farthest twentieth not counted.
    edge : float
        The same of left-out materials; at least ``near``.
    """

    near: float
    edge: float


def distance_to_data(model: SizeGapModel, candidates: pd.DataFrame) -> pd.DataFrame:
    """Return how far candidates are from the records that the model learned from.

    Parameters
    ----------
    model : SizeGapModel
        Fitted.
    candidates : pandas.DataFrame
        As from `screening.candidates.pair_frame`, or with more columns.

    Returns
    -------
    pandas.DataFrame
        With the caller's index: kernel_distance (0 to 1, to the nearest record),
        family_on_record (whether any record is of the material's family) and reach: ``near``
        (no farther than left-out size ranges were, family on record), ``edge`` (no farther than
        left-out materials were) or ``far`` (no error was measured that far out).

    Examples
    --------
    >>> from features.size_gap import training_rows
    >>> from screening.candidates import pair_frame
    >>> rows = training_rows()
    >>> model = SizeGapModel().fit(rows)
    >>> pairs = pd.DataFrame({"material": ["CdSe"], "diameter_nm": [4.0]})
    >>> distance_to_data(model, pair_frame(pairs))["reach"].tolist()
    ['near']
    """
    correlation = model.regressor(ON_RECORD).gaussian_.correlation(model.design(candidates))
    distance = _distance(correlation.max(axis=1))
    on_record = candidates["family"].isin(set(model.rows_["family"])).to_numpy()
    limits = reach_limits(model)
    reach = np.where(distance <= limits.near, NEAR, np.where(distance <= limits.edge, EDGE, FAR))
    reach = np.where((reach == NEAR) & ~on_record, EDGE, reach)
    return pd.DataFrame(
        {"kernel_distance": distance, "family_on_record": on_record, "reach": reach},
        index=candidates.index,
    )


def reach_limits(model: SizeGapModel) -> ReachLimits:
    """Return the distances at which the model's own left-out groups lay, one vote a group.

    Parameters
    ----------
    model : SizeGapModel
        Fitted.

    Returns
    -------
    ReachLimits
    """
    rows = model.rows_
    correlation = model.regressor(ON_RECORD).gaussian_.correlation(model.design(rows))
    near = _left_out_quantile(correlation, range_groups(rows).to_numpy(), rows["vote"])
    edge = _left_out_quantile(correlation, rows["material"].to_numpy(), rows["vote"])
    return ReachLimits(near, max(near, edge))


def _left_out_quantile(correlation: FloatArray, labels: Any, votes: pd.Series) -> float:
    """Return the quantile of each labelled row's distance to the rows of other labels."""
    use = labels != ""
    if not use.any():
        return 0.0
    others = np.where(labels[use][:, None] == labels[None, :], -np.inf, correlation[use])
    distance = _distance(others.max(axis=1))
    weights = group_weights(labels[use], votes.to_numpy()[use])
    order = np.argsort(distance, kind="stable")
    reached = np.cumsum(weights[order]) / weights.sum()
    return float(distance[order][int(np.argmax(reached >= _SHARE - 1e-12))])


def _distance(correlation: FloatArray) -> FloatArray:
    return np.asarray(np.sqrt(1.0 - np.clip(correlation, 0.0, 1.0)), dtype=np.float64)
