"""All figures of the audit, as one table that the documents and the reports print from.

A figure's name says what was measured, on which track, with what left out, and, where it is a
part, on which part: ``coverage_90, emission, families, family II-VI``.
"""

from collections.abc import Hashable, Iterator, Mapping
from typing import Any

import numpy as np
import pandas as pd
from joblib import Parallel, delayed

from screening.audit_statistics import (
    Row,
    cluster_bootstrap,
    coverage_row,
    figure_row,
    group_means,
    perfect_rows,
    score_rows,
)
from screening.left_out import (
    BASELINE,
    LADDER,
    baseline_names,
    predictive_of,
    segments,
    vote_weights,
)
from screening.window_reliability import reliability

__all__ = ["PARTS", "audited_figures", "figure_name"]

PARTS = {"family": "family", "size_class": "size", "reach": "reach", "adsorbate": "adsorbate"}
"""Columns by which a segment is taken apart, and what the part is called in a figure's name."""

_COLUMNS = ["figure", "state", "value", "low", "high", "median", "worst", "worst_group"]
_COLUMNS += ["n_groups", "n_rows"]


def figure_name(statistic: str, track: str, split: str, part: str = "") -> str:
    """Return the name of a figure.

    Examples
    --------
    >>> figure_name("coverage_90", "emission", "families", "family II-VI")
    'coverage_90, emission, families, family II-VI'
    """
    return ", ".join(name for name in (statistic, track, split, part) if name)


def audited_figures(
    table: pd.DataFrame, fewest_groups: int = 5, *, n_jobs: int = 1
) -> pd.DataFrame:
    """Return every figure that follows from left-out predictions.

    Parameters
    ----------
    table : pandas.DataFrame
        Common table as from `screening.left_out`.
    fewest_groups : int, default 5
        Segments with fewer judged groups are left out.
    n_jobs : int, default 1
        Workers; the result does not depend on it.

    Returns
    -------
    pandas.DataFrame
        Columns figure, state, value, low, high, median, worst, worst_group, n_groups, n_rows.
        ``low`` and ``high`` are 90 % ends (95 % for hit frequencies, hits and the Brier score):
        bootstrap over groups for errors and scores, exact binomial for coverage, and the band of
        a perfect model for hit frequencies, hits, the Brier score and rows that name the perfect
        model.
    """
    found = segments(table, fewest_groups)
    parts = Parallel(n_jobs=n_jobs)(delayed(_named)(key, frame) for key, frame in found)
    return pd.DataFrame([row for part in parts for row in part]).reindex(columns=_COLUMNS)


def _named(key: tuple[str, str, str], frame: pd.DataFrame) -> list[Row]:
    """Return the figures of a segment under their full names."""
    track, split, state = key
    rows = []
    for row in _segment(frame):
        statistic, _, part = str(row["figure"]).partition("|")
        rows.append(row | {"figure": figure_name(statistic, track, split, part), "state": state})
    return rows


def _segment(frame: pd.DataFrame) -> Iterator[Row]:
    """Yield the figures of one track, split and state; a part's name follows a bar."""
    predictive, rows = predictive_of(frame)
    whole = bool(rows.all())
    yield from score_rows(frame, has_intervals=whole)
    yield from _compared(frame)
    if whole:
        yield from perfect_rows(frame, predictive)
        yield from _windows(frame)
    for column, label in PARTS.items():
        if column in frame and len(set(frame[column])) > 1:
            for name, part in frame.groupby(column, sort=True):
                yield from _part(part, f"{label} {name}", whole=whole)


def _compared(frame: pd.DataFrame) -> Iterator[Row]:
    """Yield the error of each baseline and rung, and the model's lead over it, row by row."""
    own = (frame["predicted_eV"] - frame["observed_eV"]).abs()
    for start in (BASELINE, LADDER):
        for name in baseline_names(frame, start):
            error = (frame[f"{start}{name}"] - frame["observed_eV"]).abs()
            for statistic, values in (("error_eV of", error), ("lead_eV over", error - own)):
                groups = group_means(values, frame)
                ends = cluster_bootstrap(groups, frame)
                yield figure_row(f"{statistic} {start}{name}", frame, groups, ends)


def _part(frame: pd.DataFrame, part: str, *, whole: bool) -> Iterator[Row]:
    """Yield error and coverage on a part of a segment."""
    error = (frame["predicted_eV"] - frame["observed_eV"]).abs()
    groups = group_means(error, frame)
    ends = cluster_bootstrap(groups, frame)
    yield figure_row(f"mean_absolute_error_eV|{part}", frame, groups, ends)
    for level in (0.5, 0.8, 0.9) if whole else ():
        row = coverage_row(frame, level)
        yield row | {"figure": f"{row['figure']}|{part}"}


def _windows(frame: pd.DataFrame) -> Iterator[Row]:
    """Yield reliability of window chances, Brier score and hits."""
    predictive, _ = predictive_of(frame)
    observed = frame["observed_eV"].to_numpy(dtype=np.float64)
    bins, scores = reliability(predictive, observed, frame["group"], vote_weights(frame))
    for row in bins.to_dict("records"):
        part = f"chance {row['chance_low']:g} to {row['chance_high']:g}"
        counted = {"n_groups": int(row["n_groups"]), "n_rows": int(row["n_predictions"])}
        yield {"figure": f"predicted_chance|{part}", "value": row["predicted"], **counted}
        yield _banded(f"hit_frequency|{part}", row["observed"], row, "shared") | counted
        perfect = _banded(f"perfect model: hit_frequency|{part}", row["predicted"], row)
        yield perfect | counted
    counted = {"n_groups": frame["group"].nunique(), "n_rows": len(frame)}
    for name, row in scores.to_dict("index").items():
        yield _banded(str(name), row["value"], row, "shared") | counted
        yield _banded(f"perfect model: {name}", row["perfect"], row) | counted


def _banded(name: str, value: float, row: Mapping[Hashable, Any], kind: str = "independent") -> Row:
    return {
        "figure": name,
        "value": value,
        "low": row[f"{kind}_low"],
        "high": row[f"{kind}_high"],
    }
