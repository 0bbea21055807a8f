"""Optical gap of particles of left-out compounds with the bulk known and with nothing known.

Whole chemical systems leave every table: the size records, the masses, the dielectric constants
and the bulk gaps, there with all compounds that hold their elements, since CdSe0.99S0.01 tells the
gap of CdSe. Their particles are then predicted twice by one size model: from the bulk constants on
record and from estimates by composition alone. Two sources of error add in quadrature, each with
its own calibrated half width: the size model's, by left-out materials, and that of the estimated
constants (`screening.bulk_spread`), whose standard deviations are already calibrated by left-out
chemical systems. ``python -m screening.bulk_unknown`` prints the summary.
"""

import sys
from collections.abc import Callable, Sequence

import numpy as np
import pandas as pd
from scipy.special import ndtri
from sklearn.model_selection import GroupKFold

from features.formula import parse_formula
from features.size_gap import training_rows
from screening.bulk_estimate import BulkConstantsModel, compound_family
from screening.bulk_gap import BulkGapModel
from screening.bulk_gap_rows import gap_rows
from screening.bulk_spread import particle_gap_spread_eV
from screening.calibration import LEVELS, group_weights
from screening.covariance import FloatArray
from screening.dots import NEW, SizeGapModel

__all__ = [
    "ESTIMATED",
    "KNOWN",
    "estimated_constants",
    "evaluate_unknown_bulk",
    "summarise_unknown_bulk",
]

KNOWN, ESTIMATED = "known", "estimated"
"""The two cases of an evaluation."""

GapPredictor = Callable[[Sequence[str]], tuple[FloatArray, FloatArray]]


def _holds(system: str, left: set[str]) -> bool:
    """Return whether a chemical system holds all elements of a left-out one."""
    elements = set(system.split("-"))
    return any(elements.issuperset(other.split("-")) for other in left)


def _gaps_without(systems: set[str], seed: int) -> GapPredictor:
    """Return a predictor of bulk gaps that no row with the elements of these systems taught."""
    rows = gap_rows()
    kept = [not _holds(system, systems) for system in rows["chemical_system"]]
    model = BulkGapModel(seed).fit(rows[kept])

    def predict(formulas: Sequence[str]) -> tuple[FloatArray, FloatArray]:
        gap_eV, _, _, sd_eV = model.predict_new(formulas)
        return gap_eV, sd_eV

    return predict


def estimated_constants(
    materials: Sequence[str], gaps: GapPredictor, model: BulkConstantsModel
) -> pd.DataFrame:
    """Return the bulk constants of materials as if nothing were known but their composition.

    Parameters
    ----------
    materials : sequence of str
    gaps : callable
        Formulas to gaps and their standard deviations, eV.
    model : BulkConstantsModel

    Returns
    -------
    pandas.DataFrame
        Index material; columns gap_eV, gap_sd_eV, the masses and the dielectric constant with
        their ``_log_sd``, and family.
    """
    gap_eV, sd_eV = gaps(materials)
    frame = model.predict(materials, gap_eV).assign(gap_eV=gap_eV, gap_sd_eV=sd_eV)
    frame["family"] = [compound_family(parse_formula(material)) for material in materials]
    return frame.set_index(pd.Index(materials, name="material"))


def _with_estimates(rows: pd.DataFrame, estimates: pd.DataFrame) -> pd.DataFrame:
    """Exchange the constants of rows for estimates."""
    found = estimates.loc[rows["material"]].set_index(rows.index)
    return rows.assign(**{name: found[name] for name in found.columns})


def _predicted(model: SizeGapModel, rows: pd.DataFrame, bulk: str) -> pd.DataFrame:
    """Predict rows as the next measured values of new materials."""
    spread = particle_gap_spread_eV(rows) if bulk == ESTIMATED else rows["gap_sd_eV"].to_numpy()
    predicted = model.predict(rows.assign(gap_sd_eV=0.0))
    sd = np.hypot(predicted["model_sd_eV"].to_numpy(), rows["noise_eV"].to_numpy())
    frame = rows[["record", "material", "diameter_nm", "vote", "optical_gap_eV"]].copy()
    frame["bulk"], frame["predicted_gap_eV"] = bulk, predicted["optical_gap_eV"]
    for level in LEVELS:
        own = model.states_[NEW].calibration.factor(level) * sd
        half = np.hypot(own, ndtri(0.5 + level / 2.0) * spread)
        frame[f"low_{level:.0%}"] = frame["predicted_gap_eV"] - half
        frame[f"high_{level:.0%}"] = frame["predicted_gap_eV"] + half
    return frame


def evaluate_unknown_bulk(
    n_splits: int = 6,
    seed: int = 0,
    rows: pd.DataFrame | None = None,
    gaps_without: Callable[[set[str], int], GapPredictor] = _gaps_without,
) -> pd.DataFrame:
    """Predict the particles of left-out chemical systems with and without their bulk constants.

    Parameters
    ----------
    n_splits : int, default 6
        Folds of chemical systems.
    seed : int, default 0
    rows : pandas.DataFrame or None, default None
        As from ``features.size_gap.training_rows``; None for the packaged records.
    gaps_without : callable, optional
        Takes chemical systems and the seed, returns a predictor of bulk gaps that no row of
        these systems taught.

    Returns
    -------
    pandas.DataFrame
        One row a record and case: record, material, diameter_nm, vote, optical_gap_eV, bulk
        (`KNOWN` or `ESTIMATED`), predicted_gap_eV, and ends such as ``low_90%``.
    """
    rows = training_rows() if rows is None else rows
    systems = rows["material"].map(lambda text: parse_formula(text).chemical_system)
    parts = []
    for train, test in GroupKFold(n_splits).split(rows, groups=systems):
        left = set(systems.iloc[test])
        held = rows.iloc[test]
        model = SizeGapModel(seed).fit(rows.iloc[train]).calibrate()
        materials = sorted(held["material"].unique())
        constants = BulkConstantsModel(seed).fit(leave_out=left)
        estimates = estimated_constants(materials, gaps_without(left, seed), constants)
        parts.append(_predicted(model, held, KNOWN))
        parts.append(_predicted(model, _with_estimates(held, estimates), ESTIMATED))
    return pd.concat(parts, ignore_index=True)


def summarise_unknown_bulk(evaluation: pd.DataFrame) -> pd.DataFrame:
    """Return errors and coverage of both cases, one vote a material.

    Parameters
    ----------
    evaluation : pandas.DataFrame
        As from `evaluate_unknown_bulk`.

    Returns
    -------
    pandas.DataFrame
        Index bulk; mean_absolute_error_eV, median_material_eV, worst_material_eV, and coverage
        and mean width of each level.
    """
    summary = {}
    for bulk, frame in evaluation.groupby("bulk"):
        votes = group_weights(frame["material"], frame["vote"])
        weights = pd.Series(votes, index=frame.index)
        error = (frame["predicted_gap_eV"] - frame["optical_gap_eV"]).abs()
        by_material = (error * weights).groupby(frame["material"]).sum()
        figures = {
            "mean_absolute_error_eV": float(by_material.mean()),
            "median_material_eV": float(by_material.median()),
            "worst_material_eV": float(by_material.max()),
        }
        for level in LEVELS:
            low, high = frame[f"low_{level:.0%}"], frame[f"high_{level:.0%}"]
            inside = frame["optical_gap_eV"].between(low, high).to_numpy()
            figures[f"coverage_{level:.0%}"] = float(np.average(inside, weights=votes))
            figures[f"width_{level:.0%}_eV"] = float(np.average(high - low, weights=votes))
        summary[str(bulk)] = figures
    return pd.DataFrame.from_dict(summary, orient="index").rename_axis("bulk")


if __name__ == "__main__":
    sys.stdout.write(summarise_unknown_bulk(evaluate_unknown_bulk()).T.round(3).to_string() + "\n")
