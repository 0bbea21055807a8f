"""Figures of the report on metal particles: sites by size, relative volcano activity by size.

Hatches and line styles tell apart what colours do, so that the figures read in black and white.
"""

from typing import TYPE_CHECKING, Any

import numpy as np
import pandas as pd

from screening.catalyst_scores import particle_sites
from screening.reporting.figures import COLOURS, MARKS, MOST_LINES, STYLES, clipped, new_axes
from screening.surface_target import SurfaceTarget

if TYPE_CHECKING:
    from screening.ranking import RankResult

__all__ = ["draw_sites", "draw_sizes", "site_numbers", "size_columns", "size_numbers"]

_HATCHES = ("", "//", "..", "xx", "\\\\", "++", "oo", "--")
_FILLS = ("#56B4E9", "#F0E442", "#E69F00", "#D55E00", "#CC79A7", "#009E73", "#0072B2", "#999999")


def size_columns(result: "RankResult") -> tuple[str, str, str, str]:
    """Return centre, low and high columns of what ranks, and its label."""
    if "relative_volcano_activity_per_mass" in result.scored:
        stem = "relative_volcano_activity"
        label = "Relative volcano activity per mass\n(Pt particle of 3 nm = 1)"
        return f"{stem}_per_mass", f"{stem}_low_per_mass", f"{stem}_high_per_mass", label
    stem = "sites_in_window"
    label = "Sites in the window (µmol per g)"
    return f"{stem}_umol_per_g", f"{stem}_low_umol_per_g", f"{stem}_high_umol_per_g", label


def draw_sizes(result: "RankResult", ax: Any = None) -> Any:
    """Draw what ranks against diameter with its 90 % band, listed candidates as stars.

    Parameters
    ----------
    result : RankResult
    ax : matplotlib.axes.Axes or None, default None

    Returns
    -------
    matplotlib.axes.Axes
    """
    ax = new_axes() if ax is None else ax
    centre, low, high, label = size_columns(result)
    listed = result.shortlist.drop_duplicates(["material", "shape"]).head(MOST_LINES)
    for position, (material, shape) in enumerate(
        zip(listed["material"], listed["shape"], strict=True)
    ):
        colour = COLOURS[position % len(COLOURS)]
        curve = _of(result.scored, material, shape)
        style = STYLES[position % len(STYLES)]
        name = f"{clipped(material)}, {shape.replace('_', ' ')}"
        ax.plot(curve["diameter_nm"], curve[centre], style, color=colour, label=name)
        if position == 0:
            ax.fill_between(
                curve["diameter_nm"], curve[low], curve[high], color=colour, alpha=0.2, linewidth=0
            )
        chosen = _of(result.shortlist, material, shape)
        mark = MARKS[position % len(MARKS)]
        ax.plot(chosen["diameter_nm"], chosen[centre], mark, color=colour, markeredgecolor="black")
    if "volcano" in centre:
        ax.set_yscale("log")
        ax.set_ylim(*_decades(result, centre, low, high))
    else:
        ax.set_ylim(bottom=0.0)
    ax.set_xlabel("Diameter (nm)")
    ax.set_ylabel(label)
    ax.set_xlim(*result.specification.candidates.diameter_nm)
    ax.legend(fontsize=8)
    return ax


def _of(frame: pd.DataFrame, material: str, shape: str) -> pd.DataFrame:
    return frame[frame["material"].eq(material) & frame["shape"].eq(shape)]


def _decades(result: "RankResult", centre: str, low: str, high: str) -> tuple[float, float]:
    """Return ends of the axis: the listed candidates, and the first one's band as far as it fits."""
    listed = result.shortlist
    first = listed.iloc[0]
    bottom = min(listed[centre].min(), max(first[low], 1e-3 * first[centre]))
    top = max(listed[centre].max(), min(first[high], 1e3 * first[centre]))
    return 0.3 * float(bottom), 3.0 * float(top)


def site_numbers(result: "RankResult") -> pd.DataFrame:
    """Return the surface sites of the first candidate's metal and shape by size and kind.

    Returns
    -------
    pandas.DataFrame
        Column diameter_nm, then one a kind of site, in micromole per gram of metal.
    """
    first = result.shortlist.iloc[0]
    low, high = result.specification.candidates.diameter_nm
    sizes = np.linspace(max(low, 1.0) if high > 1.0 else low, high, 60)
    target = result.specification.target
    assert isinstance(target, SurfaceTarget)
    sites = particle_sites(
        first["material"], first["shape"], sizes, is_step=target.question.is_step
    )
    frame = pd.DataFrame(sites.n_sites * sites.umol_per_g[:, None], columns=list(sites.names))
    summed = frame.T.groupby(level=0, sort=False).sum().T
    summed.insert(0, "diameter_nm", sizes)
    return summed


def draw_sites(result: "RankResult", ax: Any = None) -> Any:
    """Draw the surface sites of the first candidate's metal by size, stacked by kind.

    Parameters
    ----------
    result : RankResult
    ax : matplotlib.axes.Axes or None, default None

    Returns
    -------
    matplotlib.axes.Axes
    """
    ax = new_axes() if ax is None else ax
    numbers = site_numbers(result)
    kinds = [name for name in numbers.columns if name != "diameter_nm"]
    base = np.zeros(len(numbers))
    for position, kind in enumerate(kinds):
        top = base + numbers[kind].to_numpy()
        ax.fill_between(
            numbers["diameter_nm"],
            base,
            top,
            facecolor=_FILLS[position % len(_FILLS)],
            hatch=_HATCHES[position % len(_HATCHES)],
            edgecolor="black",
            linewidth=0.4,
            label=kind,
        )
        base = top
    first = result.shortlist.iloc[0]
    ax.axvline(first["diameter_nm"], color="black", linestyle="--", label="first candidate")
    ax.set_xlabel("Diameter (nm)")
    ax.set_ylabel("Surface sites (µmol per g)")
    ax.set_xlim(numbers["diameter_nm"].iloc[0], numbers["diameter_nm"].iloc[-1])
    ax.set_ylim(0.0, 1.05 * float(base.max()))
    ax.legend(fontsize=8)
    return ax


def size_numbers(result: "RankResult") -> pd.DataFrame:
    """Return the numbers behind the curves, every tenth diameter of the drawn metals."""
    columns = size_columns(result)[:3]
    listed = result.shortlist.drop_duplicates(["material", "shape"]).head(MOST_LINES)
    parts = [
        _of(result.scored, material, shape).iloc[::10]
        for material, shape in zip(listed["material"], listed["shape"], strict=True)
    ]
    frame = pd.concat(parts)[["material", "shape", "diameter_nm", *columns]]
    frame.columns = pd.Index(["material", "shape", "diameter_nm", "centre", "low", "high"])
    return frame
