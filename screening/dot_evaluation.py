"""Nested left-out evaluation of the emission track.

For every material the whole procedure (parameters, blend weights, calibration) runs on the other
materials. The material is then predicted twice: as *new*, and as *on record* with all of its rows
but one size range, under the weights and calibration that the other materials taught. Random rows,
sources and families are left out in the same way, with everything learned from the other rows. No
figure comes from rows that anything learned from.
"""

from collections.abc import Iterable, Iterator, Sequence

import numpy as np
import pandas as pd
from joblib import Parallel, delayed
from sklearn.model_selection import GroupKFold
from threadpoolctl import threadpool_limits

from screening.audit_statistics import binomial_band
from screening.calibration import LEVELS, group_weights
from screening.covariance import FloatArray
from screening.dot_baselines import ABLATIONS, BASELINES
from screening.dots import NEW, ON_RECORD, SizeGapModel, range_groups
from screening.reach import distance_to_data

__all__ = ["SPLITS", "evaluate_dots", "evaluate_splits", "split_labels", "summarise"]

SPLITS = ("random rows", "sources", "size ranges", "materials", "families")
"""What is left out, from the easiest to the hardest."""

_N_FOLDS = 5
_WHOLE_MATERIALS = ("materials", "families")

_KEEP = [
    "record",
    "material",
    "family",
    "diameter_nm",
    "confidence",
    "vote",
    "noise_eV",
    "optical_gap_eV",
]


def evaluate_dots(rows: pd.DataFrame, n_jobs: int = 1, seed: int = 0) -> pd.DataFrame:
    """Predict every row without its material and without its size range.

    Parameters
    ----------
    rows : pandas.DataFrame
        As from ``features.size_gap.training_rows``.
    n_jobs : int, default 1
        Workers; the result does not depend on it.
    seed : int, default 0

    Returns
    -------
    pandas.DataFrame
        One row a record and state: record, material, family, diameter_nm, confidence, vote,
        noise_eV, optical_gap_eV, state, predicted_gap_eV, low_50 ... high_90, kernel_distance,
        family_on_record, reach and a column for each baseline.
    """
    found = evaluate_splits(rows, ("size ranges", "materials"), n_jobs=n_jobs, seed=seed)
    return found.drop(columns="split")


def split_labels(rows: pd.DataFrame, split: str, seed: int = 0) -> pd.Series:
    """Return what each row is left out with; empty where a row is not judged.

    Parameters
    ----------
    rows : pandas.DataFrame
        As from ``features.size_gap.training_rows``.
    split : str
        One of `SPLITS`. Random rows come in five equal folds, sources in five folds of whole
        sources; size ranges, materials and families one at a time.
    seed : int, default 0
        Of the order of random rows.

    Returns
    -------
    pandas.Series
        With the index of the rows.
    """
    if split == "size ranges":
        return range_groups(rows)
    if split in {"materials", "families"}:
        return rows["material" if split == "materials" else "family"]
    if split == "random rows":
        order = np.random.default_rng(seed).permutation(len(rows))
        return pd.Series(order % _N_FOLDS, index=rows.index).astype(str)
    names = np.sort(rows["source"].unique())
    folds = np.empty(len(rows), dtype=int)
    splitter = GroupKFold(min(_N_FOLDS, len(names)))
    for fold, (_, test) in enumerate(splitter.split(rows, groups=rows["source"])):
        folds[test] = fold
    return pd.Series(folds, index=rows.index).astype(str)


def evaluate_splits(
    rows: pd.DataFrame,
    splits: Sequence[str] = SPLITS,
    judged: pd.Series | None = None,
    *,
    n_jobs: int = 1,
    seed: int = 0,
) -> pd.DataFrame:
    """Predict every row under several splits, everything that learns being inside each.

    Parameters
    ----------
    rows : pandas.DataFrame
        As from ``features.size_gap.training_rows``.
    splits : sequence of str, default `SPLITS`
    judged : pandas.Series of bool or None, default None
        Rows whose predictions are wanted; None for all. All rows train.
    n_jobs : int, default 1
        Workers; the result does not depend on it.
    seed : int, default 0

    Returns
    -------
    pandas.DataFrame
        As `evaluate_dots`, with the split, kernel_distance, family_on_record and reach of each
        row, a column for each baseline and, where whole materials are left out, for each step of
        the ladder.
    """
    wanted = pd.Series(data=True, index=rows.index) if judged is None else judged
    tasks = list(_tasks(rows, splits, wanted, seed))
    parts = Parallel(n_jobs=n_jobs)(delayed(_single_threaded)(task, rows) for task in tasks)
    found: pd.DataFrame = pd.concat([frame for part in parts for frame in part])
    found = found[wanted.loc[found.index].to_numpy()]
    order = found["split"].map(SPLITS.index).argsort(kind="stable")
    return found.iloc[order].reset_index(drop=True)


def _tasks(
    rows: pd.DataFrame, splits: Sequence[str], wanted: pd.Series, seed: int
) -> Iterator[tuple[str, pd.Series, int]]:
    """Yield split, rows left out and seed of each piece of work, the longest first."""
    together = {"size ranges", "materials"}
    if together & set(splits):
        for material in sorted(rows.loc[wanted, "material"].unique()):
            yield "materials", rows["material"].eq(material), seed
    for split in [s for s in splits if s not in together]:
        labels = split_labels(rows, split, seed)
        for label in sorted(set(labels[wanted]) - {""}):
            yield split, labels.eq(label), seed


def _single_threaded(task: tuple[str, pd.Series, int], rows: pd.DataFrame) -> list[pd.DataFrame]:
    """Run one piece of work on one thread, so that its sums do not depend on the machine."""
    split, out, seed = task
    with threadpool_limits(1):
        if split == "materials":
            return _leave_material(rows, out, seed)
        return [_leave(rows, out, split, seed)]


def _leave(rows: pd.DataFrame, out: pd.Series, split: str, seed: int) -> pd.DataFrame:
    """Predict rows by a model that learned everything from the others."""
    model = SizeGapModel(seed).fit(rows[~out]).calibrate()
    return _predicted(model, rows[~out], rows[out], split)


def _leave_material(rows: pd.DataFrame, own: pd.Series, seed: int) -> list[pd.DataFrame]:
    """Evaluate one material in both states with everything learned from the others."""
    others = SizeGapModel(seed).fit(rows[~own]).calibrate()
    frames = [_predicted(others, rows[~own], rows[own], "materials")]
    ranges = range_groups(rows)
    for label in sorted(set(ranges[own]) - {""}):
        test = ranges.eq(label)
        model = SizeGapModel(seed).fit(rows[~test])
        model.states_ = others.states_
        frames.append(_predicted(model, rows[~test], rows[test], "size ranges"))
    return frames


def _predicted(
    model: SizeGapModel, train: pd.DataFrame, test: pd.DataFrame, split: str
) -> pd.DataFrame:
    """Predict rows as the next measured values, their own noise included."""
    predicted = model.predict(test)
    predicted["model_sd_eV"] = np.hypot(predicted["model_sd_eV"], test["noise_eV"])
    frame = test[_KEEP].copy()
    frame["split"], frame["state"] = split, predicted["record_state"]
    frame["predicted_gap_eV"] = predicted["optical_gap_eV"]
    for level in LEVELS:
        name = f"{level:.0%}".rstrip("%")
        frame[f"low_{name}"], frame[f"high_{name}"] = _ends(model, predicted, level)
    for name, method in (BASELINES | (ABLATIONS if split in _WHOLE_MATERIALS else {})).items():
        frame[name] = method(train, test)
    return frame.join(distance_to_data(model, test))


def _ends(
    model: SizeGapModel, predicted: pd.DataFrame, level: float
) -> tuple[FloatArray, FloatArray]:
    """Return the ends of an interval; missing where a state has too few groups for the level."""
    ends = np.full((2, len(predicted)), np.nan)
    for state in predicted["record_state"].unique():
        if level in model.states_[state].calibration.factors_:
            rows = predicted["record_state"].eq(state).to_numpy()
            ends[:, rows] = model.interval(predicted[rows], level)
    return ends[0], ends[1]


def _by_group(errors: pd.Series, frame: pd.DataFrame) -> pd.Series:
    """Return the vote-weighted mean of each material."""
    weights = pd.Series(group_weights(frame["material"], frame["vote"]), index=frame.index)
    return (errors * weights).groupby(frame["material"]).sum()


def _bootstrap(values: pd.Series, seed: int = 0) -> tuple[float, float]:
    """Return the 90 % bootstrap interval of the mean over groups."""
    rng = np.random.default_rng(seed)
    draws = rng.choice(values.to_numpy(), size=(2000, len(values)))
    low, high = np.quantile(draws.mean(axis=1), [0.05, 0.95])
    return float(low), float(high)


def _row(
    figure: str, state: str, groups: pd.Series, ends: tuple[float, float], n_rows: int
) -> dict[str, object]:
    return {
        "figure": figure,
        "state": state,
        "value": float(groups.mean()),
        "low": ends[0],
        "high": ends[1],
        "median": float(groups.median()),
        "worst": float(groups.max()),
        "worst_group": str(groups.idxmax()),
        "n_groups": len(groups),
        "n_rows": n_rows,
    }


def _state_figures(frame: pd.DataFrame, state: str) -> Iterable[dict[str, object]]:
    observed = frame["optical_gap_eV"]
    errors = {"mean_absolute_error_eV": (frame["predicted_gap_eV"] - observed).abs()}
    if state == NEW:
        for name in BASELINES:
            errors[f"mean_absolute_error_eV, {name}"] = (frame[name] - observed).abs()
            errors[f"lead_eV, over {name}"] = (
                errors[f"mean_absolute_error_eV, {name}"] - errors["mean_absolute_error_eV"]
            )
    for figure, error in errors.items():
        groups = _by_group(error, frame)
        yield _row(figure, state, groups, _bootstrap(groups), len(frame))
    # The mean size of a normal error as large as the noise that the table assigns to its records;
    # mostly our estimate by confidence, so a comparison and not a bound.
    floor = _by_group(frame["noise_eV"] * np.sqrt(2.0 / np.pi), frame)
    yield _row("error_expected_from_assigned_noise_eV", state, floor, _bootstrap(floor), len(frame))
    read = frame[frame["confidence"].ne("low")]
    groups = _by_group((read["predicted_gap_eV"] - read["optical_gap_eV"]).abs(), read)
    yield _row(
        "mean_absolute_error_eV, without low-confidence records",
        state,
        groups,
        _bootstrap(groups),
        len(read),
    )
    for level in LEVELS:
        name = f"{level:.0%}".rstrip("%")
        if frame[f"low_{name}"].isna().any():
            continue
        inside = observed.between(frame[f"low_{name}"], frame[f"high_{name}"]).astype(float)
        groups = _by_group(inside, frame)
        row = _row(
            f"coverage_{name}", state, groups, binomial_band(groups.mean(), len(groups)), len(frame)
        )
        yield row | {"worst": float(groups.min()), "worst_group": str(groups.idxmin())}
        width = _by_group(frame[f"high_{name}"] - frame[f"low_{name}"], frame)
        yield _row(f"mean_width_{name}_eV", state, width, _bootstrap(width), len(frame))


def summarise(predictions: pd.DataFrame) -> pd.DataFrame:
    """Return accuracy, coverage and width, one vote a material.

    Parameters
    ----------
    predictions : pandas.DataFrame
        As from `evaluate_dots`.

    Returns
    -------
    pandas.DataFrame
        Columns figure, state, value, low, high (90 %: bootstrap over materials; exact binomial
        for coverage), median, worst, worst_group, n_groups, n_rows. A level that the number of
        materials could not support has no row.
    """
    rows: list[dict[str, object]] = []
    for state in (NEW, ON_RECORD):
        rows += _state_figures(predictions[predictions["state"].eq(state)], state)
    return pd.DataFrame(rows)
