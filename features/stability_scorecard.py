"""How far the melting models are from published points; temperatures in K.

Nothing in `features.stability` was fitted to these points, so every point is an outside check.
"""

from collections.abc import Mapping
from functools import cache
from typing import Any

import numpy as np
import pandas as pd

from features.stability import melting_estimate, thermo_constants
from features.tables import read_table

__all__ = ["melting_discrepancy", "melting_residuals", "melting_scorecard"]


def _residuals(point: Mapping[Any, Any]) -> dict[str, Any]:
    """Return a point with each model's error, or nothing outside the models' validity."""
    estimate = melting_estimate(point["element"], point["diameter_nm"])
    if not estimate.is_valid:
        return {}
    models = {**estimate.models, "recommended": estimate.temperature_K}
    return {
        **point,
        **{name: float(value) - point["temperature_K"] for name, value in models.items()},
        "bulk_melting_K": thermo_constants(point["element"])["melting_temperature_K"],
        "sigma_K": float(estimate.sigma_K),
    }


def melting_residuals(*, outside_checks_only: bool = True) -> pd.DataFrame:
    """Return predicted minus measured melting temperature at published points.

    Parameters
    ----------
    outside_checks_only : bool, default True
        Leave out points recalled with low confidence.

    Returns
    -------
    pandas.DataFrame
        One row a point inside the validity of the models, one column a model, K, besides the
        point's own columns, ``bulk_melting_K`` and ``sigma_K`` of the recommended value.

    Examples
    --------
    >>> "recommended" in melting_residuals().columns
    True
    """
    points = read_table("melting_points")
    chosen = points[points["kind"].isin(["measured", "fit of measured"])]
    if outside_checks_only:
        chosen = chosen[chosen["outside_check"]]
    chosen = chosen[chosen["shape"] == "sphere"]
    return pd.DataFrame(row for point in chosen.to_dict("records") if (row := _residuals(point)))


def melting_scorecard(*, outside_checks_only: bool = True) -> pd.DataFrame:
    """Return how far each melting model is from published points.

    Parameters
    ----------
    outside_checks_only : bool, default True
        Leave out points recalled with low confidence.

    Returns
    -------
    pandas.DataFrame
        Indexed by model, ``bulk`` (no size effect) and ``recommended`` included: number of points,
        mean and root-mean-square error in K and over the bulk melting temperature.

    Examples
    --------
    >>> card = melting_scorecard()
    >>> bool(card.loc["recommended", "rms_error_K"] < card.loc["bulk", "rms_error_K"])
    True
    """
    points = melting_residuals(outside_checks_only=outside_checks_only)
    points["bulk"] = points["bulk_melting_K"] - points["temperature_K"]
    names = ["bulk", "pawlow", "gibbs_thomson", "liquid_shell", "bond_energy", "liquid_drop"]
    card: dict[str, dict[str, float]] = {}
    for name in [*names, "recommended"]:
        errors, share = points[name], points[name] / points["bulk_melting_K"]
        card[name] = {
            "n_points": float(errors.count()),
            "mean_error_K": errors.mean(),
            "rms_error_K": np.sqrt((errors**2).mean()),
            "mean_error_over_bulk": share.mean(),
            "rms_error_over_bulk": np.sqrt((share**2).mean()),
        }
    return pd.DataFrame(card).T.rename_axis("model")


@cache
def melting_discrepancy() -> tuple[float, float]:
    """Return by how much the recommended melting temperature was off at published points.

    Returns
    -------
    share : float
        Root-mean-square error over the bulk melting temperature.
    diameter_nm : float
        Median diameter of the points; a limit on temperature takes the error to fall as one over
        the diameter beyond it, as the size effect itself does.

    Examples
    --------
    >>> share, diameter_nm = melting_discrepancy()
    >>> 0.0 < share < 0.3, 1.0 < diameter_nm < 20.0
    (True, True)
    """
    share = melting_scorecard()["rms_error_over_bulk"].to_dict()["recommended"]
    return float(share), float(melting_residuals()["diameter_nm"].median())
