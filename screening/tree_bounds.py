"""Bounds of boosted trees over boxes of their inputs, exact for each tree."""

from typing import Any

import numpy as np
from sklearn.ensemble import HistGradientBoostingRegressor

from screening.covariance import FloatArray

__all__ = ["tree_bounds"]


def tree_bounds(
    model: HistGradientBoostingRegressor, low: FloatArray, high: FloatArray
) -> tuple[FloatArray, FloatArray]:
    """Return ends between which the model's prediction lies anywhere in each box.

    Every tree is walked with both branches where a box holds its threshold; the ends of the trees
    add up, so the sum may be wider than the truth but never narrower.

    Parameters
    ----------
    model : HistGradientBoostingRegressor
        Fitted, with numeric inputs only.
    low, high : ndarray of shape (n_boxes, n_features)
        Ends of the boxes.

    Returns
    -------
    lowest, highest : ndarray of shape (n_boxes,)
    """
    start = float(model._baseline_prediction.ravel()[0])  # noqa: SLF001 - no public way in
    lowest, highest = np.full(len(low), start), np.full(len(low), start)
    for stage in model._predictors:  # noqa: SLF001 - as above
        for tree in stage:
            a, b = _node_bounds(tree.nodes, 0, low, high)
            lowest, highest = lowest + a, highest + b
    return lowest, highest


def _node_bounds(nodes: Any, at: int, low: FloatArray, high: FloatArray) -> tuple[Any, Any]:
    node = nodes[at]
    if node["is_leaf"]:
        return node["value"], node["value"]
    column, threshold = int(node["feature_idx"]), node["num_threshold"]
    left_low, left_high = _node_bounds(nodes, int(node["left"]), low, high)
    right_low, right_high = _node_bounds(nodes, int(node["right"]), low, high)
    goes_left, goes_right = low[:, column] <= threshold, high[:, column] > threshold
    both = goes_left & goes_right
    lowest = np.where(goes_left, left_low, right_low)
    highest = np.where(goes_left, left_high, right_high)
    return (
        np.where(both, np.minimum(left_low, right_low), lowest),
        np.where(both, np.maximum(left_high, right_high), highest),
    )
