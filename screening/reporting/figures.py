"""Figures of the report, as matplotlib axes and as deterministic SVG text.

Marks differ in shape and line style as well as in colour (palette of Okabe and Ito), so that they
read in black and white.
"""

import io
import re
from typing import TYPE_CHECKING, Any

import matplotlib as mpl
import numpy as np
import pandas as pd
from matplotlib.figure import Figure

if TYPE_CHECKING:
    from screening.ranking import RankResult

__all__ = [
    "COLOURS",
    "MARKS",
    "MOST_LINES",
    "STYLES",
    "clipped",
    "curve_numbers",
    "draw_intervals",
    "draw_map",
    "figure_svg",
    "new_axes",
]

COLOURS = ("#0072B2", "#D55E00", "#009E73", "#CC79A7", "#E69F00", "#56B4E9")
STYLES = ("-", "--", "-.", ":")
MARKS = ("o", "s", "^", "D", "v", "P")
MOST_LINES = 6
"""Most materials on the map."""
_LONGEST_NAME = 24


def new_axes(width_in: float = 7.2, height_in: float = 4.2) -> Any:
    """Return axes on a figure that no display holds."""
    return Figure(figsize=(width_in, height_in), layout="constrained").subplots()


def _quantity(result: "RankResult") -> tuple[str, str]:
    if result.specification.target.quantity == "emission":
        return "emission_eV", "Emission energy (eV)"
    return "optical_gap_eV", "Optical gap (eV)"


def _end(column: str, end: str) -> str:
    """Return the column of an interval's end, for instance emission_low_eV."""
    return f"{column.removesuffix('_eV')}_{end}_eV"


def clipped(name: str) -> str:
    """Keep a long name on the figure, and a dollar sign from starting a formula."""
    short = name if len(name) <= _LONGEST_NAME else f"{name[:_LONGEST_NAME]}…"
    return short.replace("$", r"\$")


def draw_map(result: "RankResult", ax: Any = None) -> Any:
    """Draw the property against diameter: window, intervals, records, candidates.

    Parameters
    ----------
    result : RankResult
    ax : matplotlib.axes.Axes or None, default None

    Returns
    -------
    matplotlib.axes.Axes
    """
    ax = new_axes() if ax is None else ax
    column, label = _quantity(result)
    low, high = result.specification.target.energies_eV
    ax.axhspan(low, high, color="0.75", label="window", zorder=0)
    materials = result.shortlist["material"].drop_duplicates().head(MOST_LINES)
    for position, material in enumerate(materials):
        _draw_material(ax, result, material, position, column)
    ax.set_xlabel("Core diameter (nm)")
    ax.set_ylabel(label)
    ax.set_xlim(*result.specification.candidates.diameter_nm)
    ax.legend(fontsize=8, ncols=2)
    return ax


def _draw_material(
    ax: Any, result: "RankResult", material: str, position: int, column: str
) -> None:
    colour = COLOURS[position % len(COLOURS)]
    curve = result.scored[result.scored["material"].eq(material)]
    ax.plot(
        curve["diameter_nm"],
        curve[column],
        STYLES[position % len(STYLES)],
        color=colour,
        label=clipped(material),
    )
    ax.fill_between(
        curve["diameter_nm"],
        curve[_end(column, "low")],
        curve[_end(column, "high")],
        color=colour,
        alpha=0.12,
        linewidth=0,
    )
    records = result.model.rows_[result.model.rows_["material"].eq(material)]
    offset = float((curve["optical_gap_eV"] - curve[column]).iloc[0])
    measured = records["record_kind"].eq("measured point")
    for rows, mark in ((measured, MARKS[position % len(MARKS)]), (~measured, "|")):
        ax.plot(
            records.loc[rows, "diameter_nm"],
            records.loc[rows, "optical_gap_eV"] - offset,
            mark,
            color=colour,
            markersize=3 if mark != "|" else 5,
            alpha=0.6,
        )
    chosen = result.shortlist[result.shortlist["material"].eq(material)]
    ax.plot(
        chosen["diameter_nm"],
        chosen[column],
        "*",
        color=colour,
        markersize=14,
        markeredgecolor="black",
    )


def draw_intervals(result: "RankResult", ax: Any = None) -> Any:
    """Draw the 90 % interval of the target quantity of every listed candidate against the window.

    Parameters
    ----------
    result : RankResult
    ax : matplotlib.axes.Axes or None, default None

    Returns
    -------
    matplotlib.axes.Axes
    """
    listed = result.shortlist
    ax = new_axes(7.2, 1.2 + 0.3 * len(listed)) if ax is None else ax
    column, label = _quantity(result)
    ends = [listed[_end(column, end)] for end in ("low", "high")]
    low, high = result.specification.target.energies_eV
    ax.axvspan(low, high, color="0.75", label="window", zorder=0)
    place = np.arange(len(listed))[::-1]
    for state, mark in (("on record", "o"), ("new", "s")):
        rows = listed["record_state"].eq(state).to_numpy()
        errors = [(listed[column] - ends[0])[rows], (ends[1] - listed[column])[rows]]
        ax.errorbar(
            listed[column][rows], place[rows], xerr=errors, fmt=mark, capsize=3, label=state
        )
    names = [
        f"{rank}. {clipped(material)} {diameter:.2f} nm"
        for rank, material, diameter in zip(
            listed["rank"], listed["material"], listed["diameter_nm"], strict=True
        )
    ]
    ax.set_yticks(place, names)
    ax.set_xlabel(f"{label}, 90 % interval")
    ax.legend(fontsize=8)
    return ax


def figure_svg(ax: Any, title: str, description: str, key: str) -> str:
    """Return the axes' figure as SVG that is the same on every run.

    Parameters
    ----------
    ax : matplotlib.axes.Axes
    title, description : str
        For readers who do not see the picture.
    key : str
        Distinguishes the identifiers of this figure on the page.

    Returns
    -------
    str
        An ``<svg>`` element.
    """
    from markupsafe import escape  # noqa: PLC0415 - comes with the template engine

    buffer = io.StringIO()
    with mpl.rc_context({"svg.hashsalt": key, "svg.fonttype": "path"}):
        ax.figure.savefig(buffer, format="svg", metadata={"Date": None, "Creator": None})
    text = buffer.getvalue()
    body = text[text.index(">", text.index("<svg")) + 1 :]
    opening = text[text.index("<svg") : text.index(">", text.index("<svg"))]
    names = (
        f' role="img" aria-labelledby="{key}-title {key}-text">'
        f'<title id="{key}-title">{escape(title)}</title>'
        f'<desc id="{key}-text">{escape(description)}</desc>'
    )
    return opening + ' stroke-linejoin="round"' + names + _own_ids(_as_attributes(body), key)


def _own_ids(svg: str, key: str) -> str:
    """Keep the identifiers of two figures on one page apart."""
    return re.sub(r'(\bid="|href="#|url\(#)', rf"\g<1>{key}-", svg)


def _as_attributes(svg: str) -> str:
    """Turn style declarations into attributes, which a strict content-security policy allows.

    Comments go as well: the drawing library copies names into them as they are.
    """
    plain = re.sub(r"<style.*?</style>|<!--.*?-->", "", svg, flags=re.DOTALL)

    def declared(match: re.Match[str]) -> str:
        pairs = [part.split(":", 1) for part in match[1].split(";") if ":" in part]
        return " ".join(f'{name.strip()}="{value.strip()}"' for name, value in pairs)

    return re.sub(r'style="([^"]*)"', declared, plain)


def curve_numbers(result: "RankResult") -> pd.DataFrame:
    """Return the numbers behind the map, thinned to every tenth diameter."""
    listed = result.shortlist["material"].drop_duplicates().head(MOST_LINES)
    rows = result.scored[result.scored["material"].isin(listed)]
    thinned = rows.groupby("material", sort=False).nth(list(range(0, 10_000, 10)))
    column = _quantity(result)[0]
    ends = [_end(column, "low"), _end(column, "high")]
    numbers = thinned[["material", "diameter_nm", column, *ends]]
    return pd.DataFrame(
        numbers.to_numpy(), columns=["material", "diameter_nm", "centre", "low", "high"]
    )
