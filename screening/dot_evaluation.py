"""Nested left-out evaluation of the emission track.

For every material the whole procedure (parameters, blend weights, calibration) runs on the other
materials. The material is then predicted twice: as *new*, and as *on record* with all of its rows
but one size range, under the weights and calibration that the other materials taught. No figure
comes from rows that anything learned from.
"""

from collections.abc import Iterable

import numpy as np
import pandas as pd
from joblib import Parallel, delayed
from scipy.stats import beta

from screening.calibration import LEVELS, group_weights
from screening.dot_baselines import BASELINES
from screening.dots import NEW, ON_RECORD, SizeGapModel, range_groups

__all__ = ["evaluate_dots", "summarise"]

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
        noise_eV, optical_gap_eV, state, predicted_gap_eV, low_50 ... high_90 and, for *new*, a
        column for each baseline.
    """
    materials = sorted(rows["material"].unique())
    parts = Parallel(n_jobs=n_jobs)(
        delayed(_leave_material)(rows, material, seed) for material in materials
    )
    frames: list[pd.DataFrame] = [frame for part in parts for frame in part]
    return pd.concat(frames, ignore_index=True)


def _leave_material(rows: pd.DataFrame, material: str, seed: int) -> list[pd.DataFrame]:
    """Evaluate one material in both states with everything learned from the others."""
    own = rows["material"].eq(material)
    others = SizeGapModel(seed).fit(rows[~own]).calibrate()
    frames = [_as_new(others, rows[~own], rows[own])]
    ranges = range_groups(rows)
    for label in sorted(set(ranges[own]) - {""}):
        test = ranges.eq(label)
        model = SizeGapModel(seed).fit(rows[~test])
        model.states_ = others.states_
        frames.append(_predicted(model, rows[test], ON_RECORD))
    return frames


def _as_new(model: SizeGapModel, train: pd.DataFrame, test: pd.DataFrame) -> pd.DataFrame:
    frame = _predicted(model, test, NEW)
    for name, baseline in BASELINES.items():
        frame[name] = baseline(train, test)
    return frame


def _predicted(model: SizeGapModel, test: pd.DataFrame, state: str) -> pd.DataFrame:
    """Predict rows as the next measured values, their own noise included."""
    predicted = model.predict(test)
    predicted["model_sd_eV"] = np.hypot(predicted["model_sd_eV"], test["noise_eV"])
    frame = test[_KEEP].copy()
    frame["state"] = state
    frame["predicted_gap_eV"] = predicted["optical_gap_eV"]
    for level in LEVELS:
        name = f"{level:.0%}".rstrip("%")
        exists = level in model.states_[state].calibration.factors_
        ends = model.interval(predicted, level) if exists else (np.nan, np.nan)
        frame[f"low_{name}"], frame[f"high_{name}"] = ends
    return frame


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


def _binomial(share: float, n_groups: int) -> tuple[float, float]:
    """Return the exact 90 % binomial interval of a share, counted in groups."""
    hits = share * n_groups
    low = beta.ppf(0.05, hits, n_groups - hits + 1) if hits > 0 else 0.0
    high = beta.ppf(0.95, hits + 1, n_groups - hits) if hits < n_groups else 1.0
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
            f"coverage_{name}", state, groups, _binomial(groups.mean(), len(groups)), len(frame)
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
