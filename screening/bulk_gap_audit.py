"""Nested evaluation of the bulk-gap model on chemical systems that it never saw.

Every fold leaves whole chemical systems out of all tables. Parameters, weights of rows, blend
weight and calibration are learned on the rest. Run as
``python -m screening.bulk_gap_audit`` to print the summary.
"""

import sys
from collections.abc import Sequence

import numpy as np
import pandas as pd
from scipy.spatial.distance import cdist
from sklearn.ensemble import RandomForestRegressor
from sklearn.model_selection import GroupKFold

from features.alloys import alloy_gap
from features.composition import composition_descriptors
from features.elements import element_table
from features.formula import parse_formula
from screening.bulk_gap import BulkGapModel
from screening.bulk_gap_rows import gap_rows
from screening.calibration import LEVELS
from screening.covariance import FloatArray

__all__ = ["BASELINES", "evaluate_bulk_gap", "summarise_bulk_gap"]

BASELINES = ("mean", "nearest composition", "random forest on elemental averages")
"""Names of the baselines, as columns of the evaluation."""


def _elemental_averages(formulas: Sequence[str]) -> FloatArray:
    frame = composition_descriptors(formulas)
    return frame.filter(like="all_").to_numpy(dtype=np.float64)


def _fractions(formulas: Sequence[str]) -> FloatArray:
    symbols = element_table().index
    parsed = [parse_formula(formula).fractions for formula in formulas]
    return np.array([[shares.get(s, 0.0) for s in symbols] for shares in parsed])


def _baselines(train: pd.DataFrame, formulas: Sequence[str], seed: int) -> dict[str, FloatArray]:
    """Predict by the mean, by the nearest composition and by a plain random forest."""
    gaps = train["gap_eV"].to_numpy(dtype=np.float64)
    distance = cdist(_fractions(formulas), _fractions(train["material"].tolist()), "cityblock")
    forest = RandomForestRegressor(60, max_features=0.3, random_state=seed)
    forest.fit(_elemental_averages(train["material"].tolist()), gaps)
    return {
        "mean": np.full(len(formulas), gaps.mean()),
        "nearest composition": gaps[distance.argmin(axis=1)],
        "random forest on elemental averages": forest.predict(_elemental_averages(formulas)),
    }


def _with_alloy_rules(formulas: Sequence[str], gap_eV: FloatArray) -> FloatArray:
    """Return the program's answer without a record: the alloy rules where they apply."""
    rules = [alloy_gap(parse_formula(formula)) for formula in formulas]
    answers = [
        modelled if rule is None else max(rule[0], 0.0)
        for rule, modelled in zip(rules, gap_eV, strict=True)
    ]
    return np.array(answers, dtype=np.float64)


def _fold(rows: pd.DataFrame, test: pd.DataFrame, seed: int) -> pd.DataFrame:
    """Predict rows from all rows of other chemical systems."""
    train = rows[~rows["chemical_system"].isin(test["chemical_system"])]
    formulas = test["material"].tolist()
    model = BulkGapModel(seed).fit(train)
    out = test[["material", "chemical_system", "gap_eV"]].copy()
    for level in LEVELS:
        gap_eV, low, high, sd_eV = model.predict_new(formulas, level)
        out[f"low_{level:.0%}"], out[f"high_{level:.0%}"] = low, high
    out["model"], out["sd_eV"] = gap_eV, sd_eV
    out["gaussian_weight"] = model.regressor_.gaussian_weight_
    out["answer"] = _with_alloy_rules(formulas, gap_eV)
    compiled = train[train["table"] == "bulk_gaps"]
    return out.assign(**_baselines(compiled, formulas, seed))


def evaluate_bulk_gap(
    n_splits: int = 10, seed: int = 0, rows: pd.DataFrame | None = None
) -> pd.DataFrame:
    """Predict every row of the compilation with its chemical system left out of all tables.

    Parameters
    ----------
    n_splits : int, default 10
        Folds of whole chemical systems.
    seed : int, default 0
    rows : pandas.DataFrame or None, default None
        As from ``gap_rows``; None for the packaged tables.

    Returns
    -------
    pandas.DataFrame
        One row a row of the compilation, doubtful ones included: material, chemical_system,
        gap_eV, fold, model (prediction, eV), sd_eV, ends of the intervals (``low_90%`` ...),
        gaussian_weight, answer and the `BASELINES`, all in eV. ``answer`` takes the alloy rules
        where they apply: no row of the system behind it was used, but the published bowing may
        describe that very system, so it stands apart from ``model``.
    """
    rows = gap_rows() if rows is None else rows
    compiled = rows[rows["table"] == "bulk_gaps"].reset_index(drop=True)
    folds = GroupKFold(n_splits).split(compiled, groups=compiled["chemical_system"])
    parts = [
        _fold(rows, compiled.iloc[test], seed).assign(fold=fold)
        for fold, (_, test) in enumerate(folds)
    ]
    return pd.concat(parts).sort_index()


def summarise_bulk_gap(evaluation: pd.DataFrame) -> pd.DataFrame:
    """Return errors and coverage of an evaluation.

    Parameters
    ----------
    evaluation : pandas.DataFrame
        As from `evaluate_bulk_gap`.

    Returns
    -------
    pandas.DataFrame
        Columns figure, value: mean and median absolute errors in eV, and the coverage of each
        level by rows and with one vote a chemical system, with the mean width in eV.
    """
    truth = evaluation["gap_eV"]
    figures = {
        f"mean absolute error, {name}, eV": (evaluation[name] - truth).abs().mean()
        for name in ("model", "answer", *BASELINES)
    }
    figures["median absolute error, model, eV"] = (evaluation["model"] - truth).abs().median()
    for level in LEVELS:
        low, high = evaluation[f"low_{level:.0%}"], evaluation[f"high_{level:.0%}"]
        inside = ((truth >= low) & (truth <= high)).astype(float)
        by_system = inside.groupby(evaluation["chemical_system"]).mean()
        figures[f"coverage of {level:.0%}, by rows"] = inside.mean()
        figures[f"coverage of {level:.0%}, one vote a chemical system"] = by_system.mean()
        figures[f"mean width of {level:.0%}, eV"] = (high - low).mean()
    return pd.DataFrame({"figure": list(figures), "value": list(figures.values())})


if __name__ == "__main__":
    sys.stdout.write(summarise_bulk_gap(evaluate_bulk_gap()).round(4).to_string() + "\n")
