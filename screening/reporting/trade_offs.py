"""The picture of what is given up for what: chance, size tolerance, hazard, supply."""

from typing import TYPE_CHECKING, Any

from screening.reporting.figures import new_axes

if TYPE_CHECKING:
    from screening.ranking import RankResult

__all__ = ["draw_trade_offs"]

_MARKS = {1: "o", 2: "s", 3: "^", 4: "X"}
_COLOURS = {1: "#009E73", 2: "#56B4E9", 3: "#E69F00", 4: "#D55E00"}
_MOST_NAMES = 12


def draw_trade_offs(result: "RankResult", ax: Any = None) -> Any:
    """Draw the chance in the window against the size tolerance of the listed candidates.

    Parameters
    ----------
    result : RankResult
        Of an optical target.
    ax : matplotlib.axes.Axes or None, default None

    Returns
    -------
    matplotlib.axes.Axes
    """
    axes = new_axes(height_in=3.6) if ax is None else ax
    listed = result.shortlist
    for hazard, part in listed.groupby("hazard_class", sort=True):
        at = (part["size_tolerance_nm"], part["chance_in_window"])
        colour, mark = _COLOURS[int(str(hazard))], _MARKS[int(str(hazard))]
        axes.scatter(*at, marker=mark, color=colour, s=46, label=f"hazard class {hazard}")
    free = listed[listed["is_unbeaten"]]
    axes.scatter(
        free["size_tolerance_nm"],
        free["chance_in_window"],
        s=170,
        facecolors="none",
        edgecolors="black",
        linewidths=1.2,
        label="unbeaten",
    )
    for row in listed.head(_MOST_NAMES).itertuples():
        axes.annotate(
            f"{str(row.material)[:16]}, supply {row.supply_class}".replace("$", r"\$"),
            (row.size_tolerance_nm, row.chance_in_window),
            xytext=(7, 4),
            textcoords="offset points",
            fontsize=7,
        )
    axes.set_xlabel("Size tolerance (nm)")
    axes.set_ylabel("Chance in window")
    axes.margins(x=0.12, y=0.12)
    axes.legend(fontsize=7, loc="best")
    return axes
