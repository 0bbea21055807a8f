"""Figures of the audit as deterministic SVG, the decision first; each with its numbers.

Marks differ in shape as well as in colour, so that they read in black and white.
"""

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd
from matplotlib.figure import Figure

from screening.audit_words import parsed
from screening.left_out import BASELINE, EMISSION, LADDER, vote_weights
from screening.reporting.figures import figure_svg

__all__ = ["Picture", "audit_pictures"]

_BLUE, _RED, _GREY = "#0072B2", "#D55E00", "0.75"
_PER_ROW = 3
_N_PIT_BINS = 10


@dataclass(frozen=True)
class Picture:
    """A figure: key for its file, title, what it shows, what it finds, SVG and its numbers."""

    key: str
    title: str
    description: str
    caption: str
    svg: str
    numbers: pd.DataFrame


def audit_pictures(table: pd.DataFrame, figures: pd.DataFrame) -> list[Picture]:
    """Draw the figures of an audit; one that has nothing to show is left out.

    Parameters
    ----------
    table : pandas.DataFrame
        Left-out predictions (`screening.left_out`).
    figures : pandas.DataFrame
        As from `screening.audited.audited_figures`.

    Returns
    -------
    list of Picture
        Window reliability first.
    """
    named = parsed(figures)
    drawn = [
        _reliability(named),
        _splits(named),
        _baselines(named),
        _coverage(named),
        _distance(table),
        _pit(table),
    ]
    return [picture for picture in drawn if picture is not None]


def _panels(names: list[str], draw: Callable[[Any, str], None]) -> Any:
    """Draw one panel a name and return the first one's axes."""
    n_rows = -(-len(names) // _PER_ROW)
    n_columns = min(_PER_ROW, len(names))
    figure = Figure(figsize=(3.4 * n_columns, 3.2 * n_rows), layout="constrained")
    axes = figure.subplots(n_rows, n_columns, squeeze=False).ravel()
    for ax, name in zip(axes, names, strict=False):
        draw(ax, name)
        ax.set_title(name, fontsize=8)
    for ax in axes[len(names) :]:
        ax.set_axis_off()
    return axes[0]


def _segment_names(frame: pd.DataFrame) -> pd.Series:
    return frame["track"] + ", " + frame["split"] + " (" + frame["state"] + ")"


def _reliability(figures: pd.DataFrame) -> Picture | None:
    rows = figures[figures["part"].str.startswith("chance")]
    if rows.empty:
        return None
    rows = rows.assign(segment=_segment_names(rows))
    wanted = {
        "predicted_chance": "predicted",
        "hit_frequency": "observed",
        "perfect model: hit_frequency": "perfect",
    }
    by = ["segment", "part"]
    numbers = pd.DataFrame(
        {
            name: rows[rows["statistic"].eq(statistic)].set_index(by)["value"]
            for statistic, name in wanted.items()
        }
    ).drop(columns="perfect")
    hits = rows[rows["statistic"].eq("hit_frequency")].set_index(by)
    numbers = numbers.join(hits[["low", "high", "n_rows", "n_groups"]]).reset_index()

    def draw(ax: Any, name: str) -> None:
        part = numbers[numbers["segment"].eq(name)].sort_values("predicted")
        ax.fill_between(part["predicted"], part["low"], part["high"], color=_GREY, linewidth=0)
        ax.plot([0.0, 1.0], [0.0, 1.0], "--", color="black", linewidth=0.8)
        ax.plot(part["predicted"], part["observed"], "o", color=_BLUE, markersize=4)
        ax.set_xlabel("Predicted chance")
        ax.set_ylabel("Hit frequency")

    inside = numbers["observed"].between(numbers["low"], numbers["high"])
    title = "Window reliability: predicted chance against hit frequency"
    return _picture(
        "reliability",
        title,
        "One panel a split. Points: hit frequency of windows in a bin of predicted chance, one "
        "vote a group. Grey: 95 % band of a perfect model whose groups err together.",
        f"{inside.sum()} of {len(inside)} bins lie inside a perfect model's band.",
        _panels(list(dict.fromkeys(numbers["segment"])), draw),
        numbers,
    )


def _whole(figures: pd.DataFrame, statistic: str) -> pd.DataFrame:
    rows = figures[figures["statistic"].eq(statistic) & figures["part"].eq("")]
    return rows.assign(segment=_segment_names(rows))


def _bars(ax: Any, rows: pd.DataFrame, mark: str, colour: str, shift: float, label: str) -> None:
    """Draw values with their ends, one line a row, the first on top."""
    place = np.arange(len(rows))[::-1] + shift
    ends = [
        np.maximum(np.nan_to_num(gap.to_numpy(dtype=float)), 0.0)
        for gap in (rows["value"] - rows["low"], rows["high"] - rows["value"])
    ]
    ax.errorbar(rows["value"], place, xerr=ends, fmt=mark, color=colour, capsize=3, label=label)


def _splits(figures: pd.DataFrame) -> Picture | None:
    own = _whole(figures, "mean_absolute_error_eV")
    perfect = _whole(figures, "perfect model: mean_absolute_error_eV")
    ax = Figure(figsize=(7.2, 1.4 + 0.45 * len(own)), layout="constrained").subplots()
    _bars(ax, own, "o", _BLUE, 0.0, "measured")
    shown = own[["segment"]].merge(perfect, on="segment", how="left")
    _bars(ax, shown, "s", _RED, -0.25, "perfect model")
    ax.set_yticks(np.arange(len(own))[::-1], own["segment"])
    ax.set_xlabel("Mean absolute error (eV), 90 % interval")
    ax.legend(fontsize=8)
    worst = own.sort_values("value", kind="stable").iloc[-1]
    return _picture(
        "splits",
        "Error by what is left out",
        "One line a split: mean absolute error of the model, and of a perfect model with the same "
        "stated uncertainty and rows.",
        f"The error is largest with {worst['split']} left out ({worst['track']}): "
        f"{worst['value']:.3f} eV.",
        ax,
        own[["segment", "value", "low", "high", "median", "worst", "worst_group"]],
    )


def _baselines(figures: pd.DataFrame) -> Picture | None:
    leads = figures[figures["statistic"].str.startswith("lead_eV over ")]
    leads = leads[leads["state"].eq("new") & ~leads["split"].isin(["random rows", "sources"])]
    if leads.empty:
        return None
    names = leads["statistic"].str.removeprefix("lead_eV over ")
    names = names.str.removeprefix(BASELINE).str.replace(LADDER, "rung: ")
    leads = leads.assign(segment=_segment_names(leads), over=names)
    ax = Figure(figsize=(7.6, 1.0 + 0.2 * len(leads)), layout="constrained").subplots()
    _bars(ax, leads, "o", _BLUE, 0.0, "lead")
    ax.axvline(0.0, color="black", linewidth=0.8)
    labels = leads["split"] + ": " + leads["over"]
    ax.set_yticks(np.arange(len(leads))[::-1], labels, fontsize=7)
    ax.set_xscale("symlog", linthresh=0.1)
    ax.set_xlabel("Lead of the model over a baseline (eV), 90 % interval")
    open_ = leads[~leads["low"].gt(0.0)]
    return _picture(
        "baselines",
        "Lead over each baseline and rung of the ladder",
        "One line a baseline: mean difference of the absolute errors, one vote a group; right of "
        "zero the model is better.",
        f"{len(open_)} of {len(leads)} leads are not told apart from zero or are negative.",
        ax,
        leads[["segment", "over", "value", "low", "high", "n_groups"]],
    )


def _coverage(figures: pd.DataFrame) -> Picture | None:
    rows = figures[figures["statistic"].eq("coverage_90") & figures["part"].ne("")]
    rows = rows[rows["split"].isin(["size ranges", "materials", "metals", "elements"])]
    rows = rows[~rows["part"].str.startswith("reach")]
    if rows.empty:
        return None
    rows = rows.assign(segment=_segment_names(rows))
    ax = Figure(figsize=(7.2, 1.0 + 0.2 * len(rows)), layout="constrained").subplots()
    _bars(ax, rows, "o", _BLUE, 0.0, "coverage")
    ax.axvline(0.9, color="black", linewidth=0.8, linestyle="--")
    ax.set_yticks(np.arange(len(rows))[::-1], rows["split"] + ": " + rows["part"], fontsize=7)
    ax.set_xlabel("Share inside the 90 % interval, exact binomial band counted in groups")
    below = rows[rows["high"].lt(0.9)]
    return _picture(
        "coverage",
        "Coverage of the 90 % interval by family, size and adsorbate",
        "One line a part: share of truths inside the interval, dashed line at 90 %.",
        f"{len(below)} of {len(rows)} parts lie below 90 % with their whole band.",
        ax,
        rows[["segment", "part", "value", "low", "high", "n_groups", "n_rows"]],
    )


def _distance(table: pd.DataFrame) -> Picture | None:
    rows = table[table["track"].eq(EMISSION) & table["split"].isin(["size ranges", "materials"])]
    if rows.empty:
        return None
    rows = rows.assign(error_eV=(rows["predicted_eV"] - rows["observed_eV"]).abs())
    ax = Figure(figsize=(7.2, 4.2), layout="constrained").subplots()
    for split, mark, colour in (("size ranges", "o", _BLUE), ("materials", "^", _RED)):
        part = rows[rows["split"].eq(split)]
        ax.plot(
            part["kernel_distance"],
            part["error_eV"],
            mark,
            color=colour,
            markersize=4,
            alpha=0.6,
            label=f"{split} left out",
        )
    ax.set_xlabel("Kernel distance to the nearest record")
    ax.set_ylabel("Absolute error (eV)")
    ax.legend(fontsize=8)
    rank = rows["kernel_distance"].rank().corr(rows["error_eV"].rank())
    numbers = rows.groupby(["split", "reach"], sort=True).agg(
        rows=("error_eV", "size"), mean_error_eV=("error_eV", "mean")
    )
    return _picture(
        "distance",
        "Error against the distance to the data",
        "Points: one left-out row each; circles with a size range left out, triangles with the "
        "material left out.",
        f"Rank correlation of distance and error: {rank:.2f}.",
        ax,
        numbers.reset_index(),
    )


def _pit(table: pd.DataFrame) -> Picture | None:
    rows = table[table["pit"].notna()]
    if rows.empty:
        return None
    rows = rows.assign(segment=_segment_names(rows))
    edges = np.linspace(0.0, 1.0, _N_PIT_BINS + 1)
    found = {}
    for name, part in rows.groupby("segment", sort=False):
        found[str(name)] = np.histogram(part["pit"], edges, weights=vote_weights(part))[0]

    def draw(ax: Any, name: str) -> None:
        ax.bar(edges[:-1], found[name], width=1.0 / _N_PIT_BINS, align="edge", color=_BLUE)
        ax.axhline(1.0 / _N_PIT_BINS, color="black", linewidth=0.8, linestyle="--")
        ax.set_xlabel("Predicted chance of a lower value")
        ax.set_ylabel("Share of votes")

    farthest = max(found, key=lambda name: float(np.abs(found[name] - 1 / _N_PIT_BINS).max()))
    numbers = pd.DataFrame(found, index=[f"{low:.1f}" for low in edges[:-1]]).T
    return _picture(
        "pit",
        "Probability integral transform",
        "One panel a split: share of truths in each tenth of their predicted distribution; a "
        "perfect model is flat.",
        f"Farthest from flat: {farthest}.",
        _panels(list(found), draw),
        numbers.reset_index(names="segment"),
    )


def _picture(
    key: str, title: str, description: str, caption: str, ax: Any, numbers: pd.DataFrame
) -> Picture:
    return Picture(
        key, title, description, caption, figure_svg(ax, title, description, key), numbers
    )
