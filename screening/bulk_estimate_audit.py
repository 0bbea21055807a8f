"""How well masses and dielectric constants of unmeasured compounds are estimated.

Whole chemical systems are left out of fitting, blending and calibration; the gap is taken as
known. Errors are of natural logarithms: 0.1 is a factor of 1.11.
"""

import numpy as np
import pandas as pd
from sklearn.model_selection import GroupKFold

from screening.bulk_estimate import QUANTITIES, BulkConstantsModel, training_rows

__all__ = ["evaluate_bulk_constants"]

_HALF_WIDTH_90 = 1.6448536269514722


def _recorded(quantity: str) -> pd.DataFrame:
    rows = training_rows(quantity)
    return rows[rows["kind"] == 0.0].reset_index(drop=True)


def _outer_folds(n_splits: int) -> list[set[str]]:
    systems = pd.concat([_recorded(quantity)["system"] for quantity in QUANTITIES])
    names = np.sort(systems.unique())
    return [set(names[test]) for _, test in GroupKFold(n_splits).split(names, groups=names)]


def _held_out(quantity: str, model: BulkConstantsModel, fold: set[str]) -> pd.DataFrame:
    rows = _recorded(quantity)
    inside = rows["system"].isin(fold)
    held = rows[inside].reset_index(drop=True)
    predicted = model.predict(held["material"].tolist(), held["gap_eV"])
    held["predicted"] = predicted[quantity]
    held["log_sd"] = np.hypot(predicted[f"{quantity}_log_sd"], held["noise"])
    held["median"] = float(np.median(rows["value"][~inside]))
    return held


def evaluate_bulk_constants(n_splits: int = 10, seed: int = 0) -> pd.DataFrame:
    """Return errors and coverage on chemical systems that took no part in anything.

    Parameters
    ----------
    n_splits : int, default 10
        Outer folds of chemical systems.
    seed : int, default 0

    Returns
    -------
    pandas.DataFrame
        One row a quantity: n_materials, mean_log_error, median_log_error, mean_log_error_median
        (of guessing the median of the other compounds), coverage_90 and mean_log_width_90.
    """
    held: dict[str, list[pd.DataFrame]] = {quantity: [] for quantity in QUANTITIES}
    for fold in _outer_folds(n_splits):
        model = BulkConstantsModel(seed=seed).fit(leave_out=fold)
        for quantity in QUANTITIES:
            held[quantity].append(_held_out(quantity, model, fold))
    rows = [_summary(quantity, pd.concat(parts)) for quantity, parts in held.items()]
    return pd.DataFrame(rows)


def _summary(quantity: str, rows: pd.DataFrame) -> dict[str, object]:
    value = np.log(rows["value"].to_numpy(dtype=np.float64))
    error = np.abs(np.log(rows["predicted"].to_numpy(dtype=np.float64)) - value)
    guess = np.abs(np.log(rows["median"].to_numpy(dtype=np.float64)) - value)
    half = _HALF_WIDTH_90 * rows["log_sd"].to_numpy(dtype=np.float64)
    return {
        "quantity": quantity,
        "n_materials": len(rows),
        "mean_log_error": float(np.mean(error)),
        "median_log_error": float(np.median(error)),
        "mean_log_error_median": float(np.mean(guess)),
        "coverage_90": float(np.mean(error <= half)),
        "mean_log_width_90": float(2.0 * np.mean(half)),
    }
