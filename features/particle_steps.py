"""Step sites (B5) of close-packed particles that carry one unfinished layer on their facets.

A B5 site is an empty lattice site with five neighbouring atoms: three of a terrace and two of a
step, or four and one. Perfect crystals have none. Following van Hardeveld and van Montfoort, Surf.
Sci. 4, 396 (1966), the particle carries on each facet the next layer less its outermost row, which
makes about as many step sites as a crystal of that size can hold: an upper bound for well formed
particles, whose measured share is smaller.
"""

from collections.abc import Callable
from functools import cache

import numpy as np
from numpy.typing import ArrayLike, NDArray

from features.errors import PhysicsRangeError, explain
from features.particle import atoms_at_size
from features.particle_lattice import IntArray, crystal_lattice
from features.particle_metal import metal_lattice
from features.particle_polyhedron import surroundings
from features.particle_shapes import WULFF, available_shapes, shape_series

__all__ = ["most_step_sites", "stepped_counts"]

FloatArray = NDArray[np.float64]

_STEP_NEIGHBOURS = 5
_FEWEST_SUPPORTS = 3
_SMALLEST_PLANE_NEIGHBOURS = 4
_N_BUILT = 8
_LARGEST_SHELL = 60
_STAND_IN = {"fcc": "truncated_octahedron", "hcp": "truncated_hexagonal_bipyramid"}


def _islands(
    sites: IntArray, table: IntArray, normals: IntArray, planes: IntArray
) -> tuple[NDArray[np.bool_], NDArray[np.bool_]]:
    """Return which sites are atoms of the crystal, and which of the islands on its facets."""
    is_above = sites.astype(np.float64) @ normals.T.astype(np.float64) > planes
    crystal = ~is_above.any(axis=1)
    supports = np.append(crystal, False)[table].sum(axis=1)
    in_layer = (is_above.sum(axis=1) == 1) & (supports >= _FEWEST_SUPPORTS)
    facet = np.where(in_layer, is_above.argmax(axis=1), -1)
    beside = (np.append(facet, -2)[table] == facet[:, None]).sum(axis=1)
    full = np.zeros(len(planes), dtype=np.int64)
    np.maximum.at(full, facet[in_layer], beside[in_layer])
    inner = in_layer & (beside >= full[facet]) & (full[facet] >= _SMALLEST_PLANE_NEIGHBOURS)
    return np.asarray(crystal), np.asarray(inner)


@cache
def stepped_counts(structure: str, shape: str, shell: int) -> tuple[int, int]:
    """Count atoms and step sites of a closed shell with islands on its facets.

    Parameters
    ----------
    structure : {"fcc", "hcp"}
    shape : str
        A shape that is cut from a lattice.
    shell : int, >= 1

    Returns
    -------
    n_atoms, n_steps : int

    Raises
    ------
    PhysicsRangeError
        If the shape does not fit the structure.

    Examples
    --------
    >>> stepped_counts("fcc", "truncated_octahedron", 3)
    (688, 96)
    """
    lattice = crystal_lattice(structure)
    layers = {name: step * shell for name, step in shape_series(structure, shape).steps}
    sites, table, normals, planes = surroundings(lattice, layers)
    crystal, islands = _islands(sites, table, normals, planes)
    atoms = crystal | islands
    neighbours = np.append(atoms, False)[table].sum(axis=1)
    return int(atoms.sum()), int(np.count_nonzero(~atoms & (neighbours == _STEP_NEIGHBOURS)))


@cache
def _curve(structure: str, shape: str) -> Callable[[FloatArray], FloatArray]:
    """Return step sites against the cube root of the atoms; steps grow with the edges."""
    from scipy.interpolate import PchipInterpolator  # noqa: PLC0415 - slow to load

    built = np.array([stepped_counts(structure, shape, n) for n in range(1, _N_BUILT + 1)], float)
    shells = np.arange(_N_BUILT + 1, _LARGEST_SHELL + 1)
    last = np.arange(_N_BUILT - 3, _N_BUILT + 1)
    atoms = np.polynomial.Polynomial.fit(last, built[-4:, 0], 3)(shells)
    steps = np.polynomial.Polynomial.fit(last[-2:], built[-2:, 1], 1)(shells)
    x = np.cbrt(np.concatenate([[0.0], built[:, 0], atoms]))
    curve: Callable[[FloatArray], FloatArray] = PchipInterpolator(
        x, np.concatenate([[0.0], built[:, 1], steps])
    )
    return curve


def most_step_sites(material: str, shape: str, diameter_nm: ArrayLike) -> FloatArray:
    """Return the greatest number of step sites of a particle, about.

    Parameters
    ----------
    material : str
        Formula of an fcc or hcp metal or alloy.
    shape : str
        A shape cut from a lattice; ``wulff`` is treated as the truncated octahedron (fcc) or the
        truncated hexagonal bipyramid (hcp).
    diameter_nm : array-like
        Volume-equivalent diameters including the islands, from that of 13 atoms to 30 nm.

    Returns
    -------
    ndarray
        Step sites of a particle; over its atoms (`features.particle.atoms_in_sphere`) a share that
        peaks at 2 to 3 nm.

    Raises
    ------
    FormulaError, UnknownMaterialError
        If the material cannot be read, or nothing is known of it.
    PhysicsRangeError
        If the shape is twinned, unknown or of another structure, or a size is out of range.

    Examples
    --------
    >>> from features.particle import atoms_in_sphere
    >>> share = most_step_sites("Ru", "wulff", [1.5, 2.5, 8.0]) / atoms_in_sphere(
    ...     [1.5, 2.5, 8.0], metal_lattice("Ru").atomic_volume_nm3)
    >>> bool(share[1] > max(share[0], share[2]))
    True
    """
    metal = metal_lattice(material)
    series = _STAND_IN.get(metal.structure, shape) if shape == WULFF else shape
    cut = [
        s
        for s in available_shapes(metal.structure)
        if s != WULFF and metal.structure in _STAND_IN and shape_series(metal.structure, s).steps
    ]
    if series not in cut:
        raise PhysicsRangeError(
            explain(
                f"no step sites for this shape of {metal.name}",
                expected=f"one of {', '.join([*cut, WULFF])}" if cut else "an fcc or hcp metal",
                found=f"{shape!r}",
            )
        )
    _, atoms = atoms_at_size(diameter_nm, metal)
    return np.asarray(_curve(metal.structure, series)(np.cbrt(atoms)))
