"""Wulff shapes: facets at distances proportional to their surface energies.

Wulff, Z. Kristallogr. 34, 449 (1901). Facets considered: (111), (100), (110) for fcc; (110), (100)
for bcc; (0001), (10-10), (10-11) for hcp. A facet without a surface energy on record takes the
broken-bond estimate: the close-packed facet's energy times the ratio of broken nearest-neighbour
bonds per area. Facets below 5 % of the surface are left out. Counts are closed forms in the
layers of each facet, evaluated at the fractional layers that a size asks for, so they are smooth
in size; below about 1.5 nm they are an extrapolation of the shape. The (110) facets of fcc come in
between 500 and 4,000 atoms, where they grow wider than two rows.
"""

from collections.abc import Mapping
from functools import cache

import numpy as np
from numpy.typing import NDArray

from features.errors import PhysicsRangeError, explain
from features.particle_ladder import ClosedForms, Ladder, closed_forms, mean_generalised
from features.particle_lattice import (
    IDEAL_C_OVER_A,
    CrystalLattice,
    FacetFamily,
    IntArray,
    crystal_lattice,
)
from features.particle_polyhedron import ExplicitParticle, SiteClass, cut_particle, resolved

__all__ = ["broken_bond_energies", "wulff_areas", "wulff_ladder", "wulff_particle"]

FloatArray = NDArray[np.float64]
Energies = tuple[tuple[str, float], ...]

_SMALLEST_AREA_SHARE = 0.05
_FIT_ATOMS = (1500.0, 6000.0, 24000.0)
# layers that leave every facet wide: all shapes on which the same facets meet have the same closed
# forms
_ROOMY = {
    ("(111)", "(100)"): (13, 9),
    ("(111)", "(100)", "(110)"): (29, 15, 25),
    ("(110)", "(100)"): (13, 17),
    ("(0001)", "(10-10)", "(10-11)"): (7, 8, 11),
}
# a closed form extrapolated below so few sites says little of their coordination
_FEWEST_SITES = 6.0
_ROOMIER = 1.25
_BLEND_ATOMS = (500.0, 4000.0)
_N_RUNGS = 300


def broken_bond_energies(structure: str, known_J_m2: Mapping[str, float]) -> dict[str, float]:
    """Complete the surface energies of a structure's facets by broken bonds.

    Parameters
    ----------
    structure : {"fcc", "bcc", "hcp"}
    known_J_m2 : mapping of str to float
        Surface energies on record, > 0, by facet; must hold the close-packed facet.

    Returns
    -------
    dict of str to float
        Surface energy of every facet considered, J/m2.

    Raises
    ------
    PhysicsRangeError
        If the close-packed facet is missing or an energy is not positive.

    Examples
    --------
    >>> energies = broken_bond_energies("fcc", {"(111)": 1.0})
    >>> {facet: round(energy, 3) for facet, energy in energies.items()}
    {'(111)': 1.0, '(100)': 1.155, '(110)': 1.225}
    """
    facets = crystal_lattice(structure).facets
    close_packed = next(iter(facets))
    if close_packed not in known_J_m2 or not all(e > 0.0 for e in known_J_m2.values()):
        raise PhysicsRangeError(
            explain(
                "no Wulff shape from these surface energies",
                expected=f"a positive energy for {close_packed}",
                found=", ".join(f"{f}: {e}" for f, e in known_J_m2.items()) or "none",
            )
        )
    unit = known_J_m2[close_packed] / facets[close_packed].broken_bonds
    return {
        name: float(known_J_m2.get(name, unit * family.broken_bonds))
        for name, family in facets.items()
    }


def _corners(
    lattice: CrystalLattice, distances: Mapping[str, float]
) -> tuple[FloatArray, FloatArray, NDArray[np.bool_]]:
    """Return unit normals and corners of a polyhedron, and which plane meets which corner."""
    from scipy.spatial import HalfspaceIntersection  # noqa: PLC0415 - scipy.spatial is slow to load

    families = [lattice.facets[name] for name in distances]
    normals = np.concatenate([f.normals @ np.linalg.inv(lattice.cartesian).T for f in families])
    normals = normals / np.linalg.norm(normals, axis=1, keepdims=True)
    distance = np.repeat(list(distances.values()), [len(f.normals) for f in families])
    distance = distance / distance.max()
    planes = np.column_stack([normals, -distance])
    corners = HalfspaceIntersection(planes, np.zeros(3)).intersections
    corners = np.unique(corners.round(9), axis=0)
    return normals, corners, np.abs(normals @ corners.T - distance[:, None]) < 1e-6


def _polygon_area(corners: FloatArray, normal: FloatArray) -> float:
    """Return the area of a convex polygon given by unordered corners."""
    from scipy.spatial import ConvexHull  # noqa: PLC0415 - scipy.spatial is slow to load

    first = np.cross(normal, np.eye(3)[np.argmin(np.abs(normal))])
    first = first / np.linalg.norm(first)
    flat = corners @ np.stack([first, np.cross(normal, first)]).T
    if len(flat) < 3 or np.linalg.matrix_rank(flat - flat.mean(axis=0), tol=1e-6) < 2:
        return 0.0
    return float(ConvexHull(flat).volume)


def wulff_areas(lattice: CrystalLattice, energies_J_m2: Mapping[str, float]) -> dict[str, float]:
    """Return the share of the surface of each facet family in the Wulff shape.

    Parameters
    ----------
    lattice : CrystalLattice
    energies_J_m2 : mapping of str to float
        Surface energy by facet, > 0.

    Returns
    -------
    dict of str to float
        Shares of all given families, which add up to one.

    Examples
    --------
    >>> areas = wulff_areas(crystal_lattice("fcc"), {"(111)": 1.0, "(100)": 2.0})
    >>> areas["(111)"], areas["(100)"]
    (1.0, 0.0)
    """
    normals, corners, meets = _corners(lattice, energies_J_m2)
    areas = np.array([_polygon_area(corners[on], n) for on, n in zip(meets, normals, strict=True)])
    ends = np.cumsum([len(lattice.facets[name].normals) for name in energies_J_m2])[:-1]
    shares = [part.sum() / areas.sum() for part in np.split(areas, ends)]
    return {name: float(share) for name, share in zip(energies_J_m2, shares, strict=True)}


def _is_alike(lattice: CrystalLattice, energies: Energies, layers: IntArray) -> bool:
    """Tell whether the same facets meet in the Wulff shape and in a particle of given layers."""
    families = [lattice.facets[name] for name, _ in energies]
    spacing = [(1 if lattice.structure == "fcc" else f.period) / f.length for f in families]
    distances = {f.name: float(d) for f, d in zip(families, layers * spacing, strict=True)}
    both = [_corners(lattice, shape)[2].T.tolist() for shape in (dict(energies), distances)]
    first, second = ({tuple(corner) for corner in meets} for meets in both)
    return first == second


def _kept(lattice: CrystalLattice, energies: Energies) -> Energies:
    """Leave out the facets that are absent or tiny."""
    shares = wulff_areas(lattice, dict(energies))
    kept = tuple((f, e) for f, e in energies if shares[f] >= _SMALLEST_AREA_SHARE)
    return kept if len(kept) == len(energies) else _kept(lattice, kept)


def _layer_spacing(lattice: CrystalLattice, family: FacetFamily) -> float:
    """Return the mean spacing of layers in units of a family's offsets."""
    return family.period / (2.0 if lattice.structure == "hcp" else 1.0)


def _layers(lattice: CrystalLattice, energies: Energies, scale: FloatArray) -> FloatArray:
    """Return the fractional layers, shape (n_scales, n_families), of a size.

    The dividing surface lies half a layer outside of the outermost atoms.
    """
    columns = []
    for name, energy in energies:
        family = lattice.facets[name]
        offset = scale * energy * family.length - _layer_spacing(lattice, family) / 2.0
        if lattice.structure != "fcc":
            offset = (offset - family.terminations.mean()) / family.period
        columns.append(offset)
    return np.stack(columns, axis=1)


def _scale_of(lattice: CrystalLattice, energies: Energies, n_atoms: float) -> float:
    """Return the scale at which the polyhedron holds about as many atoms."""
    inradius = np.cbrt(n_atoms * abs(np.linalg.det(lattice.cartesian)) * _volume_per_site(lattice))
    mean = float(np.mean([e for _, e in energies]))
    return float(inradius * np.cbrt(3.0 / (4.0 * np.pi)) / mean)


def _volume_per_site(lattice: CrystalLattice) -> float:
    return float(lattice.box.prod()) / len(lattice.basis)


@cache
def _forms_about(
    structure: str, names: tuple[str, ...], middle: tuple[int, ...], *, is_resolved: bool = False
) -> ClosedForms:
    lattice = crystal_lattice(structure)

    def build(layers: IntArray) -> ExplicitParticle:
        particle = cut_particle(lattice, dict(zip(names, layers.tolist(), strict=True)))
        return resolved(particle) if is_resolved else particle

    return closed_forms(build, np.array(middle, dtype=np.int64))


def _forms(lattice: CrystalLattice, energies: Energies) -> ClosedForms | None:
    """Return closed forms from the smallest particles that obey them, or None."""
    names = tuple(name for name, _ in energies)
    for middle in _middles(lattice, energies):
        forms = _forms_about(lattice.structure, names, tuple(middle.tolist()))
        if forms.is_exact:
            return forms
    return None


def _middles(lattice: CrystalLattice, energies: Energies) -> list[IntArray]:
    """Return particles about which closed forms may be found, the likeliest first."""
    roomy = _ROOMY.get(tuple(name for name, _ in energies))
    if roomy is not None and _is_alike(lattice, energies, np.array(roomy)):
        return [np.array(roomy)]
    scales = [np.array([_scale_of(lattice, energies, n)]) for n in _FIT_ATOMS]
    return [np.round(_layers(lattice, energies, s)[0]).astype(np.int64) for s in scales]


@cache
def _wulff(structure: str, c_over_a: float, energies: Energies) -> tuple[Energies, ClosedForms]:
    """Return the facets of the Wulff shape and their closed forms.

    Where facets are too small to have closed forms below 24,000 atoms, the last family goes.
    """
    lattice = crystal_lattice(structure, c_over_a)
    kept = _kept(lattice, energies)
    forms = _forms(lattice, kept)
    if forms is None:
        return _wulff(structure, c_over_a, kept[:-1])
    return kept, forms


def _plain_ladder(
    lattice: CrystalLattice, kept: Energies, forms: ClosedForms, largest_n_atoms: float
) -> Ladder:
    """Evaluate closed forms on a ladder of scales, down to where the surface leaves an inside."""
    largest = 1.3 * _scale_of(lattice, kept, largest_n_atoms)
    scale = np.geomspace(0.01 * largest, largest, _N_RUNGS)
    atoms, counts, sums = forms.at(_layers(lattice, kept, scale))
    is_sound = (atoms > 13.0) & (np.maximum(counts, 0.0).sum(axis=1) < 0.97 * atoms)
    first = int(np.flatnonzero(~is_sound)[-1]) + 1
    atoms, counts, sums = atoms[first:], np.maximum(counts[first:], 0.0), sums[first:]
    generalised = mean_generalised(counts, sums, _FEWEST_SITES)
    # a quadratic grows again below its least value, a facet does not
    counts = np.minimum.accumulate(counts[::-1], axis=0)[::-1]
    return Ladder(forms.classes, atoms, counts, generalised)


def _widened(ladder: Ladder, classes: tuple[SiteClass, ...], n_atoms: FloatArray) -> FloatArray:
    """Return counts and coordination sums at sizes, shape (2, n_sizes, n_classes)."""
    values = np.zeros((2, len(n_atoms), len(classes)))
    column = [classes.index(c) for c in ladder.classes]
    values[0][:, column] = counts = ladder.counts_at(n_atoms)
    values[1][:, column] = counts * ladder.generalised_at(n_atoms)
    return values


def _blend(small: Ladder, large: Ladder) -> Ladder:
    """Pass from one ladder to the other while the last facets grow beyond two rows of atoms."""
    classes = tuple(sorted({*small.classes, *large.classes}))
    n_atoms = small.n_atoms
    low, high = np.log(_BLEND_ATOMS)
    x = np.clip((np.log(n_atoms) - low) / (high - low), 0.0, 1.0)
    weight = (x * x * (3.0 - 2.0 * x))[:, None]
    both = (_widened(ladder, classes, n_atoms) for ladder in (small, large))
    counts, sums = (1.0 - weight) * next(both) + weight * next(both)
    return Ladder(classes, n_atoms, counts, mean_generalised(counts, sums))


@cache
def wulff_ladder(
    structure: str,
    energies_J_m2: Energies,
    largest_n_atoms: float,
    c_over_a: float = IDEAL_C_OVER_A,
    *,
    is_resolved: bool = False,
) -> Ladder:
    """Return site counts of the Wulff shape against size.

    Parameters
    ----------
    structure : {"fcc", "bcc", "hcp"}
    energies_J_m2 : tuple of (str, float)
        Surface energy of every facet considered.
    largest_n_atoms : float
    c_over_a : float
    is_resolved : bool, default False
        Class sites by generalised coordination as well.

    Returns
    -------
    Ladder

    Examples
    --------
    >>> ladder = wulff_ladder("fcc", (("(111)", 1.0), ("(100)", 1.1547)), 1e4)
    >>> bool(ladder.n_atoms[-1] > 1e4)
    True
    """
    lattice = crystal_lattice(structure, c_over_a)
    shapes = [_wulff(structure, c_over_a, energies_J_m2)]
    if structure == "fcc" and len(shapes[0][0]) >= 3:
        shapes.insert(0, _wulff(structure, c_over_a, shapes[0][0][:-1]))
    ladders = []
    for kept, forms in shapes:
        used = _finer(lattice, kept, forms) if is_resolved else forms
        ladders.append(_plain_ladder(lattice, kept, used, largest_n_atoms))
    return ladders[0] if len(ladders) == 1 else _blend(*ladders)


def _finer(lattice: CrystalLattice, kept: Energies, forms: ClosedForms) -> ClosedForms:
    """Return closed forms by generalised coordination, about a particle whose facets hold all."""
    middle = np.round(_ROOMIER * forms.middle).astype(np.int64)
    names = tuple(name for name, _ in kept)
    return _forms_about(lattice.structure, names, tuple(middle.tolist()), is_resolved=True)


def wulff_particle(
    structure: str,
    energies_J_m2: Energies,
    n_atoms: float,
    c_over_a: float = IDEAL_C_OVER_A,
) -> ExplicitParticle:
    """Build the Wulff particle of about a given number of atoms, in whole layers.

    Parameters
    ----------
    structure, energies_J_m2, c_over_a
        As for `wulff_ladder`.
    n_atoms : float
        Wanted; the facets' whole layers nearest to it are taken.

    Returns
    -------
    ExplicitParticle

    Examples
    --------
    >>> wulff_particle("fcc", (("(111)", 1.0), ("(100)", 1.1547)), 600.0).n_atoms
    586
    """
    lattice = crystal_lattice(structure, c_over_a)
    kept, forms = _wulff(structure, c_over_a, energies_J_m2)
    scales = np.geomspace(0.3, 2.0, 400) * _scale_of(lattice, kept, n_atoms)
    layers = _layers(lattice, kept, scales)
    nearest = int(np.argmin(np.abs(forms.at(layers)[0] - n_atoms)))
    whole = np.maximum(np.round(layers[nearest]), 1.0).astype(np.int64)
    names = [name for name, _ in kept]
    return cut_particle(lattice, dict(zip(names, whole.tolist(), strict=True)))
