"""Sites of particles told apart by their own generalised coordination.

`features.particle` counts atoms by facet and coordination and gives the mean generalised
coordination of each class. Whatever depends steeply on it, such as a volcano, must not be taken at
the mean: of the atoms of a (111) facet those inside have 7.5, those beside an edge 6.5 to 7.3.
Here every value that occurs is a column of its own. Counts are closed forms as there.
"""

from functools import cache

import numpy as np
from numpy.typing import ArrayLike, NDArray

from features.particle import ParticleCounts, particle_counts
from features.particle_ladder import Ladder, shell_ladder
from features.particle_metal import MetalLattice, metal_lattice
from features.particle_polyhedron import ResolvedClass, SiteClass, resolved
from features.particle_shapes import WULFF, explicit_particle
from features.particle_wulff import wulff_ladder

__all__ = ["resolved_counts"]

FloatArray = NDArray[np.float64]

# the facets of smaller shells lack some of the values, so these are the first with closed forms
_N_EXPLICIT_SHELLS = 9
_LARGEST_N_ATOMS = 1.5e6


@cache
def _series(structure: str, shape: str) -> Ladder:
    return shell_ladder(
        lambda n: resolved(explicit_particle(structure, shape, n)),
        _N_EXPLICIT_SHELLS,
        _LARGEST_N_ATOMS,
    )


def _ladder(metal: MetalLattice, shape: str) -> Ladder:
    if shape != WULFF:
        return _series(metal.structure, shape)
    energies = metal.surface_energies_J_m2
    return wulff_ladder(
        metal.structure, energies, _LARGEST_N_ATOMS, metal.c_over_a, is_resolved=True
    )


def resolved_counts(
    material: str | MetalLattice, shape: str, diameter_nm: ArrayLike
) -> ParticleCounts:
    """Count the sites of particles at many diameters by their own generalised coordination.

    Parameters
    ----------
    material, shape, diameter_nm
        As for `features.particle.particle_counts`.

    Returns
    -------
    ParticleCounts
        A class stands once for every value of generalised coordination that its atoms have; its
        columns add up to the class's count.

    Raises
    ------
    FormulaError, UnknownMaterialError, PhysicsRangeError
        As for `features.particle.particle_counts`.

    Examples
    --------
    >>> counts = resolved_counts("Pt", "octahedron", [3.0])
    >>> sorted({round(float(g), 2) for c, g in zip(counts.classes,
    ...     counts.generalised_coordination[0]) if c.site == "terrace"})
    [6.5, 6.83, 7.17, 7.5]
    """
    metal = metal_lattice(material) if isinstance(material, str) else material
    whole = particle_counts(metal, shape, diameter_nm)
    ladder = _ladder(metal, shape)
    classes = [_resolved_class(c) for c in ladder.classes]
    counts = _adding_up(ladder.counts_at(whole.n_atoms), tuple(c.whole for c in classes), whole)
    values = np.array([c.generalised_coordination for c in classes])
    return ParticleCounts(
        tuple(c.whole for c in classes),
        whole.diameter_nm,
        whole.n_atoms,
        whole.n_surface,
        counts,
        np.broadcast_to(values, counts.shape).copy(),
        whole.bulk_coordination,
    )


def _resolved_class(site: SiteClass) -> ResolvedClass:
    assert isinstance(site, ResolvedClass)
    return site


def _adding_up(
    counts: FloatArray, classes: tuple[SiteClass, ...], whole: ParticleCounts
) -> FloatArray:
    """Scale the columns of each class to the class's count; a class without columns stays out.

    They agree but for Wulff shapes so small that closed forms are an extrapolation.
    """
    scaled = np.zeros_like(counts)
    for position, site in enumerate(whole.classes):
        own = [i for i, other in enumerate(classes) if other == site]
        total = counts[:, own].sum(axis=1, keepdims=True)
        share = np.where(total > 0.0, counts[:, own] / np.maximum(total, 1e-12), 1.0 / len(own))
        scaled[:, own] = share * whole.n_sites[:, [position]]
    return scaled
