"""A particle drawn atom by atom, its sites told apart by fill and mark."""

from typing import Any

import numpy as np
from matplotlib.collections import EllipseCollection
from matplotlib.lines import Line2D
from numpy.typing import NDArray

from features.particle import nearest_particle
from features.particle_metal import metal_lattice
from features.particle_polyhedron import ExplicitParticle
from screening.reporting.figures import new_axes
from screening.reporting.site_styles import SITE_STYLES, site_kind

__all__ = ["LARGEST_DRAWN_nm", "draw_particle"]

FloatArray = NDArray[np.float64]

LARGEST_DRAWN_nm = 6.0
"""Larger particles are drawn at this size."""

_VIEW = np.array([[0.94, 0.30, 0.16], [-0.34, 0.85, 0.40], [-0.016, -0.43, 0.90]])
_LAYERS_SHOWN = 2.2
_MARK_UP_TO = 1500
_BULK = "#7F7F7F"
_MARKS_IN_FRONT = 0.45


def _kinds(particle: ExplicitParticle, structure: str) -> NDArray[np.str_]:
    """Return the kind of each surface atom, empty for an atom of the bulk."""
    names = np.array([*(site_kind(structure, c.site, c.facet) for c in particle.classes), ""])
    return np.asarray(names[particle.class_index])


def _in_front(positions: FloatArray) -> NDArray[np.bool_]:
    """Tell atoms of the outermost layers that face the reader."""
    from scipy.spatial import cKDTree  # noqa: PLC0415 - scipy.spatial is slow to load

    near = cKDTree(positions[:, :2]).query_ball_point(positions[:, :2], 0.9)
    front = np.array([positions[rows, 2].max() for rows in near])
    return np.asarray(positions[:, 2] > front - _LAYERS_SHOWN)


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
    ax = new_axes(6.4, 3.6) if ax is None else ax
    particle = nearest_particle(material, shape, min(diameter_nm, LARGEST_DRAWN_nm))
    kinds = _kinds(particle, metal_lattice(material).structure)
    view = np.linalg.qr(_VIEW.T)[0].T
    view = view * np.sign((view * _VIEW).sum(axis=1, keepdims=True))
    turned = particle.positions @ view.T
    kept = np.flatnonzero(_in_front(turned))
    kept = kept[np.argsort(turned[kept, 2], kind="stable")]
    _draw_atoms(ax, turned[kept], kinds[kept])
    reach = float(np.abs(turned[:, :2]).max()) + 1.0
    ax.set_xlim(-reach, reach)
    ax.set_ylim(-reach, reach)
    ax.set_aspect("equal")
    ax.set_axis_off()
    ax.legend(
        handles=_legend(kinds),
        loc="upper center",
        bbox_to_anchor=(0.5, 0.0),
        ncols=2,
        frameon=False,
        fontsize=8,
    )
    return ax


def _draw_atoms(ax: Any, positions: FloatArray, kinds: NDArray[np.str_]) -> None:
    """Draw discs from the farthest to the nearest, then the marks of those in front."""
    depth = positions[:, 2]
    shade = (depth - depth.min()) / max(float(np.ptp(depth)), 1e-9)
    colours = [_shaded(_fill(str(k)), float(s)) for k, s in zip(kinds, shade, strict=True)]
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
    front = shade > _MARKS_IN_FRONT
    for kind, style in SITE_STYLES.items():
        rows = front & (kinds == kind)
        if style.mark and rows.any():
            ax.plot(*positions[rows, :2].T, style.mark, color=style.ink, markersize=5, zorder=3)


def _fill(kind: str) -> str:
    return SITE_STYLES[kind].fill if kind else _BULK


def _shaded(colour: str, near: float) -> tuple[float, ...]:
    """Darken what lies farther back."""
    channels = np.array([int(colour[i : i + 2], 16) / 255.0 for i in (1, 3, 5)])
    return tuple(channels * (0.7 + 0.3 * near))


def _legend(kinds: NDArray[np.str_]) -> list[Line2D]:
    return [
        Line2D(
            [],
            [],
            marker="o",
            linestyle="",
            markersize=11,
            markerfacecolor=style.fill,
            markeredgecolor="black",
            label=f"{style.words} ({style.mark or 'no mark'}): {n}",
        )
        for kind, style in SITE_STYLES.items()
        if (n := int((kinds == kind).sum()))
    ]
