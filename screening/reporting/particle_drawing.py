"""A particle drawn atom by atom, its sites told apart by fill, edge and mark.

Colours are those of Okabe and Ito, chosen to differ in lightness as well, and every kind of site
carries a mark of its own, so that the picture reads in black and white.
"""

from typing import Any

import numpy as np
from matplotlib.collections import EllipseCollection
from matplotlib.lines import Line2D
from numpy.typing import NDArray

from features.particle import nearest_particle
from features.particle_polyhedron import ExplicitParticle
from screening.reporting.figures import new_axes

__all__ = ["SITE_STYLES", "draw_particle"]

FloatArray = NDArray[np.float64]

SITE_STYLES = {
    "terrace": ("#F0E442", "", "terrace"),
    "open terrace": ("#56B4E9", "+", "terrace of an open facet"),
    "edge": ("#D55E00", "_", "edge"),
    "vertex": ("#1B1F24", "x", "vertex"),
}
"""Fill, mark and words of each kind of site."""

_VIEW = np.array([[0.94, 0.30, 0.16], [-0.34, 0.85, 0.40], [-0.016, -0.43, 0.90]])
_CLOSE_PACKED = ("(111)", "(0001)", "(110)")
_MARK_UP_TO = 900
_INK_ON = {"vertex": "white"}


def _kinds(particle: ExplicitParticle) -> list[str]:
    """Return the kind of each surface atom, empty for an atom of the bulk."""
    first = {c.facet for c in particle.classes if c.site == "terrace"} & set(_CLOSE_PACKED)
    names = [
        "open terrace" if c.site == "terrace" and first and c.facet not in first else c.site
        for c in particle.classes
    ]
    return [names[i] if i >= 0 else "" for i in particle.class_index]


def _visible(positions: FloatArray, radius: float) -> NDArray[np.bool_]:
    """Tell atoms that no nearer atom hides altogether."""
    from scipy.spatial import cKDTree  # noqa: PLC0415 - scipy.spatial is slow to load

    flat = cKDTree(positions[:, :2])
    seen = np.ones(len(positions), dtype=np.bool_)
    for i, near in enumerate(flat.query_ball_point(positions[:, :2], 0.3 * radius)):
        seen[i] = positions[near, 2].max() - positions[i, 2] < 2.0 * radius
    return seen


def draw_particle(material: str, shape: str, diameter_nm: float, ax: Any = None) -> Any:
    """Draw the particle of whole layers nearest to a size.

    Parameters
    ----------
    material, shape : str
    diameter_nm : float
    ax : matplotlib.axes.Axes or None, default None

    Returns
    -------
    matplotlib.axes.Axes
    """
    ax = new_axes(6.4, 5.0) if ax is None else ax
    particle = nearest_particle(material, shape, diameter_nm)
    kinds = np.array(_kinds(particle))
    view = np.linalg.qr(_VIEW.T)[0].T
    view = view * np.sign((view * _VIEW).sum(axis=1, keepdims=True))
    turned = particle.positions @ view.T
    kept = np.flatnonzero((kinds != "") & _visible(turned, 0.5))
    kept = kept[np.argsort(turned[kept, 2], kind="stable")]
    _draw_atoms(ax, turned[kept], kinds[kept])
    reach = float(np.abs(turned[:, :2]).max()) + 1.0
    ax.set_xlim(-reach, reach)
    ax.set_ylim(-reach, reach)
    ax.set_aspect("equal")
    ax.set_axis_off()
    ax.legend(handles=_legend(kinds), loc="center left", bbox_to_anchor=(1.0, 0.5), frameon=False)
    return ax


def _draw_atoms(ax: Any, positions: FloatArray, kinds: NDArray[np.str_]) -> None:
    """Draw discs from the farthest to the nearest, then the marks of those in front."""
    depth = positions[:, 2]
    shade = (depth - depth.min()) / max(float(np.ptp(depth)), 1e-9)
    colours = [_shaded(SITE_STYLES[k][0], float(s)) for k, s in zip(kinds, shade, strict=True)]
    ax.add_collection(
        EllipseCollection(
            np.ones(len(positions)),
            np.ones(len(positions)),
            np.zeros(len(positions)),
            units="xy",
            offsets=positions[:, :2],
            transOffset=ax.transData,
            facecolors=colours,
            edgecolors="black",
            linewidths=0.5,
        )
    )
    if len(positions) > _MARK_UP_TO:
        return
    front = shade > 0.45
    for kind, (_, mark, _) in SITE_STYLES.items():
        rows = front & (kinds == kind)
        if mark and rows.any():
            ink = _INK_ON.get(kind, "black")
            ax.plot(*positions[rows, :2].T, mark, color=ink, markersize=5, zorder=3)


def _shaded(colour: str, near: float) -> tuple[float, ...]:
    """Darken what lies farther back."""
    channels = np.array([int(colour[i : i + 2], 16) / 255.0 for i in (1, 3, 5)])
    return tuple(channels * (0.55 + 0.45 * near))


def _legend(kinds: NDArray[np.str_]) -> list[Line2D]:
    handles = []
    for kind, (colour, mark, words) in SITE_STYLES.items():
        n = int((kinds == kind).sum())
        if not n:
            continue
        handles.append(
            Line2D(
                [],
                [],
                marker="o",
                linestyle="",
                markersize=11,
                markerfacecolor=colour,
                markeredgecolor="black",
                label=f"{words} ({mark or 'no mark'}): {n} atoms",
            )
        )
    return handles
