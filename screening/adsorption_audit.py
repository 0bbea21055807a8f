"""Nested evaluation of adsorption energies on metals, elements and compositions never seen.

Whatever learns does so without the group that is judged: covariance parameters, source offsets,
weights of rows, blend weight and calibration. Metals and elements are left out one at a time with
parameters learned without a whole fold of them. Energies in eV. Run as
``python -m screening.adsorption_audit`` to print the summary and the offsets of the sources.
"""

import sys
from collections.abc import Callable, Iterator
from typing import Any

import numpy as np
import pandas as pd
from joblib import Parallel, delayed
from numpy.typing import NDArray
from sklearn.ensemble import ExtraTreesRegressor
from sklearn.model_selection import GroupKFold
from threadpoolctl import threadpool_limits

from screening.adsorption_alloys import AlloySurfaceModel, robust_gaussian
from screening.adsorption_baselines import (
    ALLOY_LADDER,
    METAL_BASELINES,
    PLAIN_LEARNERS,
    composition_averages,
    ladder_of_alloys,
    metal_baselines,
    mixing_rule,
    plain_learners,
)
from screening.adsorption_design import FAMILIES, SurfaceDesign, alloy_rows, covariance_terms
from screening.adsorption_pure import PureSurfaceModel, pure_rows
from screening.calibration import LEVELS, GroupCalibration
from screening.covariance import FloatArray

__all__ = [
    "ALLOY_BASELINES",
    "METAL_BASELINES",
    "MIXING_RULE",
    "evaluate_adsorption",
    "evaluate_compositions",
    "evaluate_elements",
    "evaluate_metals",
    "summarise_adsorption",
]

ALLOY_BASELINES = ("mean", "trees on composition averages")
"""Baselines on alloys, as columns of the evaluation."""

MIXING_RULE = "mixing rule of pure surfaces"
"""Physics alone, on alloys."""

_FEWEST_ELEMENTS = 12
_WELL_SAMPLED_SD_EV = 0.25
_COLUMNS = ["material", "group", "adsorbate", "energy_eV", "model", "sd_eV"]
_COLUMNS += [f"{end}_{level:.0%}" for level in LEVELS for end in ("low", "high")]


def _folds(labels: pd.Series, n_splits: int) -> Iterator[set[str]]:
    """Yield sets of labels; every label is in one of them."""
    names = np.array(sorted(set(labels)))
    for _, chosen in GroupKFold(min(n_splits, len(names))).split(names, groups=names):
        yield set(names[chosen].tolist())


def _with_interval(
    rows: pd.DataFrame, mean: FloatArray, sd: FloatArray, calibration: GroupCalibration
) -> pd.DataFrame:
    found = rows.assign(model=mean, sd_eV=sd)
    for level in LEVELS:
        ends = calibration.interval(mean, sd, level)
        found[f"low_{level:.0%}"], found[f"high_{level:.0%}"] = ends
    return found


def _close_packed(model: PureSurfaceModel, rows: pd.DataFrame) -> pd.DataFrame:
    """Return rows of the reference sources on close-packed faces."""
    return rows[model.rows_["reference"] & (model.rows_["openness"] == 0.0)]


def evaluate_metals(
    n_splits: int = 6, rows: pd.DataFrame | None = None, *, n_jobs: int = 1
) -> pd.DataFrame:
    """Predict the close-packed face of every metal with the metal left out.

    Parameters
    ----------
    n_splits : int, default 6
        Folds of metals for the covariance parameters and the calibration.
    rows : pandas.DataFrame or None, default None
        As from `pure_rows`; None for the packaged tables.
    n_jobs : int, default 1
        Workers; the result does not depend on it.

    Returns
    -------
    pandas.DataFrame
        One row a metal and adsorbate of the reference sources: material, group (the metal),
        adsorbate, energy_eV, model, sd_eV, low_50% to high_90%, `METAL_BASELINES` and plain
        learners, all in eV.
    """
    rows = pure_rows() if rows is None else rows
    every = PureSurfaceModel().fit(rows, max_iter=0)
    judged = _close_packed(every, every.rows_)
    folds = _folds(judged["metal"], n_splits)
    tasks = [delayed(_single_threaded)(_metal_fold, rows, judged, held) for held in folds]
    found: pd.DataFrame = pd.concat(Parallel(n_jobs=n_jobs)(tasks)).sort_index()
    found = found.assign(material=found["metal"], group=found["metal"])
    return found[[*_COLUMNS, *METAL_BASELINES, *PLAIN_LEARNERS]].reset_index(drop=True)


def _single_threaded(work: Callable[..., pd.DataFrame], *given: Any) -> pd.DataFrame:
    """Run one piece of work on one thread, so that its sums do not depend on the machine."""
    with threadpool_limits(1):
        return work(*given)


def _metal_fold(rows: pd.DataFrame, judged: pd.DataFrame, held: set[str]) -> pd.DataFrame:
    tuned = PureSurfaceModel().fit(rows[~rows["metal"].isin(held)])
    left = _close_packed(tuned, tuned.leave_out(tuned.rows_["metal"].to_numpy()))
    calibration = GroupCalibration(state="metals left out").fit(
        left["energy_eV"] - left["predicted_eV"], left["sd_eV"], left["metal"]
    )
    parts = []
    for metal in sorted(held):
        model = _without(rows, metal, tuned)
        test = judged[
            (judged["metal"] == metal) & judged["adsorbate"].isin(model.adsorbates_).to_numpy()
        ]
        found = model.predict(test["metal"].tolist(), test["adsorbate"].tolist())
        baselines = metal_baselines(judged[judged["metal"] != metal], test, metal)
        judged_here = _with_interval(test, found.mean, found.sd, calibration).assign(**baselines)
        parts.append(judged_here.join(plain_learners(judged[judged["metal"] != metal], test)))
    return pd.concat(parts)


def _without(rows: pd.DataFrame, metal: str, tuned: PureSurfaceModel) -> PureSurfaceModel:
    """Return the pure-metal model without one metal, with the parameters of another fit."""
    kept = rows[rows["metal"] != metal].drop(columns="reference", errors="ignore")
    return PureSurfaceModel().fit(kept, tuned.gaussian_.theta_, max_iter=0)


def _members(rows: pd.DataFrame, names: set[str]) -> NDArray[np.bool_]:
    return np.asarray(rows["first"].isin(names) | rows["second"].isin(names))


def _alloy_baselines(train: pd.DataFrame, test: pd.DataFrame, seed: int) -> pd.DataFrame:
    """Predict by the mean of the adsorbate and by plain trees on composition averages."""
    found = pd.DataFrame(np.nan, index=test.index, columns=list(ALLOY_BASELINES))
    for adsorbate, part in test.groupby("adsorbate"):
        known = train[train["adsorbate"] == adsorbate]
        trees = ExtraTreesRegressor(120, random_state=seed)
        trees.fit(composition_averages(known), known["energy_eV"])
        values = [np.full(len(part), known["energy_eV"].mean())]
        values.append(trees.predict(composition_averages(part)))
        found.loc[part.index] = np.column_stack(values)
    return test.join(found).join(plain_learners(train, test))


def evaluate_compositions(
    n_splits: int = 5,
    seed: int = 0,
    alloys: pd.DataFrame | None = None,
    pure: pd.DataFrame | None = None,
    *,
    n_jobs: int = 1,
) -> pd.DataFrame:
    """Predict every alloy row with its composition left out for all adsorbates.

    Parameters
    ----------
    n_splits : int, default 5
    seed : int, default 0
        Of the baseline trees.
    alloys, pure : pandas.DataFrame or None, default None
        As from `alloy_rows` and `pure_rows`; None for the packaged tables.
    n_jobs : int, default 1
        Workers; the result does not depend on it.

    Returns
    -------
    pandas.DataFrame
        Columns as from `evaluate_metals`, with the composition as group, noise_sd_eV (of the row,
        from the sites seen), fold, gaussian_weight and `ALLOY_BASELINES`.
    """
    alloys = alloy_rows() if alloys is None else alloys
    surfaces = PureSurfaceModel().fit(pure_rows() if pure is None else pure)
    tasks = [
        delayed(_single_threaded)(_compositions, alloys, surfaces, held, fold, members, seed)
        for fold, held in enumerate(_folds(alloys["composition"], n_splits))
        for members in FAMILIES.values()
        if (alloys["composition"].isin(held) & alloys["adsorbate"].isin(members)).any()
    ]
    found: pd.DataFrame = pd.concat(Parallel(n_jobs=n_jobs)(tasks)).sort_index()
    found = found.assign(material=found["composition"], group=found["composition"])
    columns = [*_COLUMNS, "noise_sd_eV", "fold", "gaussian_weight", *ALLOY_BASELINES]
    columns += [MIXING_RULE, *PLAIN_LEARNERS, *ALLOY_LADDER]
    return found[columns].reset_index(drop=True)


def _compositions(
    alloys: pd.DataFrame,
    pure: PureSurfaceModel,
    held: set[str],
    fold: int,
    members: tuple[str, ...],
    seed: int,
) -> pd.DataFrame:
    """Judge one family of adsorbates on one fold of compositions."""
    out, own = alloys["composition"].isin(held), alloys["adsorbate"].isin(members)
    train, test = alloys[own & ~out], alloys[own & out]
    model = AlloySurfaceModel(members).fit(train, pure)
    mean, sd = model.predict(test)
    found = _with_interval(test, mean, sd, model.calibration_).assign(fold=fold)
    found[MIXING_RULE] = mixing_rule(model.design_, test)
    found["gaussian_weight"] = model.weight_
    return _alloy_baselines(train, found.join(ladder_of_alloys(model, test)), seed)


def evaluate_elements(
    n_splits: int = 5,
    seed: int = 0,
    alloys: pd.DataFrame | None = None,
    pure: pd.DataFrame | None = None,
    *,
    n_jobs: int = 1,
) -> pd.DataFrame:
    """Predict every alloy row once for either element, all data of that element left out.

    The element's pure surfaces are left out as well. Families of adsorbates with too few elements
    for a 90 % interval are not judged: the model answers them by its mixing rule.

    Parameters
    ----------
    n_splits : int, default 5
        Folds of elements for the covariance parameters and the calibration.
    seed : int, default 0
        Of the baseline trees.
    alloys, pure : pandas.DataFrame or None, default None
        As from `alloy_rows` and `pure_rows`; None for the packaged tables.
    n_jobs : int, default 1
        Workers; the result does not depend on it.

    Returns
    -------
    pandas.DataFrame
        Columns as from `evaluate_metals`, with the element as group, noise_sd_eV and
        `ALLOY_BASELINES`.
    """
    alloys = alloy_rows() if alloys is None else alloys
    pure = pure_rows() if pure is None else pure
    tasks = []
    for members in FAMILIES.values():
        rows = alloys[alloys["adsorbate"].isin(members)]
        elements = pd.concat([rows["first"], rows["second"]])
        if elements.nunique() >= _FEWEST_ELEMENTS:
            tasks += [
                delayed(_single_threaded)(_element_fold, rows, pure, members, held, seed)
                for held in _folds(elements, n_splits)
            ]
    found: pd.DataFrame = pd.concat(Parallel(n_jobs=n_jobs)(tasks))
    found = found.sort_values(["group", "adsorbate", "composition"])
    found = found.assign(material=found["composition"])
    columns = [*_COLUMNS, "noise_sd_eV", *ALLOY_BASELINES, MIXING_RULE, *PLAIN_LEARNERS]
    return found[columns].reset_index(drop=True)


def _element_fold(
    rows: pd.DataFrame,
    pure: pd.DataFrame,
    members: tuple[str, ...],
    held: set[str],
    seed: int,
) -> pd.DataFrame:
    kept = pure[~pure["metal"].isin(held)]
    tuned = PureSurfaceModel().fit(kept)
    train = rows[~_members(rows, held)]
    known = sorted(set(train["first"]) | set(train["second"]))
    model = AlloySurfaceModel(members).fit(train, tuned, compositions=False)
    model.calibrate_elements({e: _without(kept, e, tuned) for e in known})
    parts = []
    for element in sorted(held):
        out = _members(rows, {element})
        known_pure = _without(pure, element, tuned)
        mean, sd = _new_element(rows[~out], rows[out], known_pure, model)
        found = _with_interval(rows[out], mean, sd, model.element_calibration_)
        design = SurfaceDesign(known_pure, _scale(rows[~out]), model.adsorbates)
        found[MIXING_RULE] = mixing_rule(design, rows[out])
        parts.append(_alloy_baselines(rows[~out], found.assign(group=element), seed))
    return pd.concat(parts)


def _new_element(
    train: pd.DataFrame, test: pd.DataFrame, pure: PureSurfaceModel, tuned: AlloySurfaceModel
) -> tuple[FloatArray, FloatArray]:
    """Predict from the rows of other elements with the covariance parameters of `tuned`."""
    scale = _scale(train)
    design = SurfaceDesign(pure, scale, tuned.adsorbates)
    known = scale.loc[train["adsorbate"]].to_numpy()
    wanted = scale.loc[test["adsorbate"]].to_numpy()
    z = (train["energy_eV"].to_numpy() - known[:, 0]) / known[:, 1]
    noise = train["noise_sd_eV"].to_numpy() / known[:, 1]
    terms = covariance_terms(len(tuned.adsorbates))
    theta = tuned.gaussian_.theta_
    model, _ = robust_gaussian(terms, design.matrix(train), z, noise, start=theta, max_iter=0)
    mean, sd = model.predict(design.matrix(test), return_std=True)
    return wanted[:, 0] + wanted[:, 1] * mean, wanted[:, 1] * np.hypot(sd, model.noise_)


def _scale(rows: pd.DataFrame) -> pd.DataFrame:
    """Return mean and deviation (eV) by adsorbate."""
    grouped = rows.groupby("adsorbate")["energy_eV"]
    return pd.DataFrame({"mean": grouped.mean(), "sd": grouped.std(ddof=0)})


def evaluate_adsorption(seed: int = 0, n_jobs: int = 1) -> dict[str, pd.DataFrame]:
    """Return the three nested evaluations on the packaged tables.

    Parameters
    ----------
    seed : int, default 0
        Of the baseline trees.
    n_jobs : int, default 1
        Workers; the result does not depend on it.

    Returns
    -------
    dict of str to pandas.DataFrame
        Keys ``metals``, ``compositions`` and ``elements``: what is left out.
    """
    return {
        "metals": evaluate_metals(n_jobs=n_jobs),
        "compositions": evaluate_compositions(seed=seed, n_jobs=n_jobs),
        "elements": evaluate_elements(seed=seed, n_jobs=n_jobs),
    }


def summarise_adsorption(evaluation: dict[str, pd.DataFrame]) -> pd.DataFrame:
    """Return errors and coverage by split and adsorbate.

    Parameters
    ----------
    evaluation : dict of str to pandas.DataFrame
        As from `evaluate_adsorption`.

    Returns
    -------
    pandas.DataFrame
        Columns left_out, adsorbate (``all`` for the rows together), n_rows, n_groups, mean
        absolute error (eV) of the model and of each baseline that the split has, the model's on
        alloy rows whose minimum was taken over the usual kinds of sites, coverage of the 90 %
        interval by rows and with one vote a group, mean width of the interval (eV).
    """
    parts = []
    for split, frame in evaluation.items():
        pieces = [*frame.groupby("adsorbate"), ("all", frame)]
        parts += [{"left_out": split, "adsorbate": a, **_figures(part)} for a, part in pieces]
    return pd.DataFrame(parts)


def _figures(frame: pd.DataFrame) -> dict[str, float]:
    truth = frame["energy_eV"]
    methods = ["model", *dict.fromkeys((*METAL_BASELINES, *ALLOY_BASELINES))]
    errors = {f"error of {m}": (frame[m] - truth).abs().mean() for m in methods if m in frame}
    if "noise_sd_eV" in frame:
        sampled = frame["noise_sd_eV"] < _WELL_SAMPLED_SD_EV
        errors["error of model, well-sampled rows"] = (frame["model"] - truth)[sampled].abs().mean()
    inside = ((truth >= frame["low_90%"]) & (truth <= frame["high_90%"])).astype(float)
    return {
        "n_rows": len(frame),
        "n_groups": frame["group"].nunique(),
        **errors,
        "coverage by rows": inside.mean(),
        "coverage by groups": inside.groupby(frame["group"]).mean().mean(),
        "mean width": (frame["high_90%"] - frame["low_90%"]).mean(),
    }


if __name__ == "__main__":
    for _, _summary in summarise_adsorption(evaluate_adsorption()).groupby("left_out", sort=False):
        sys.stdout.write(_summary.dropna(axis=1).round(3).to_string(index=False) + "\n\n")
    sys.stdout.write(PureSurfaceModel().fit(pure_rows()).source_offsets().to_string() + "\n")
