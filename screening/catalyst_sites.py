"""Sites of metal particles as the catalyst track counts them, per gram and per square metre.

Square metres are of metal surface: surface atoms times the area of an atom in the close-packed
plane, as adsorption measures it.
"""

from dataclasses import dataclass

import numpy as np
from scipy.constants import Avogadro

from features.elements import element_table
from features.formula import parse_formula
from features.particle_metal import MetalLattice, metal_lattice
from features.particle_polyhedron import SiteClass
from features.particle_sites import resolved_counts
from features.particle_steps import most_step_sites
from screening.covariance import FloatArray

__all__ = ["STEP_SITE", "ParticleSites", "particle_sites", "site_name"]

STEP_SITE = SiteClass("step", "B5", 5)
"""Empty site beside a step: five neighbouring atoms."""

# area of an atom in the close-packed plane over the squared distance of neighbours
_ATOM_AREA = {"fcc": 0.75**0.5, "hcp": 0.75**0.5, "bcc": 8.0**0.5 / 3.0}


@dataclass(frozen=True)
class ParticleSites:
    """Sites of particles of one metal and shape at some sizes.

    Attributes
    ----------
    classes : tuple of SiteClass
        Of each column; columns of one class differ in generalised coordination.
    n_sites, coordination : ndarray, shape (n_sizes, n_columns)
        Sites and their generalised coordination.
    n_atoms, n_surface : ndarray, shape (n_sizes,)
    umol_per_g, umol_per_m2 : ndarray, shape (n_sizes,)
        What one site a particle amounts to.
    """

    classes: tuple[SiteClass, ...]
    n_sites: FloatArray
    coordination: FloatArray
    n_atoms: FloatArray
    n_surface: FloatArray
    umol_per_g: FloatArray
    umol_per_m2: FloatArray

    @property
    def names(self) -> tuple[str, ...]:
        """Class of each column in words."""
        return tuple(site_name(c) for c in self.classes)

    def part(self, sizes: slice) -> "ParticleSites":
        """Return some of the sizes."""
        return ParticleSites(
            self.classes,
            self.n_sites[sizes],
            self.coordination[sizes],
            self.n_atoms[sizes],
            self.n_surface[sizes],
            self.umol_per_g[sizes],
            self.umol_per_m2[sizes],
        )


def site_name(site: SiteClass) -> str:
    """Return a class of sites in words.

    Examples
    --------
    >>> site_name(SiteClass("terrace", "(111)", 9))
    '(111) terrace, 9 neighbours'
    """
    return f"{site.facet} {site.site}, {site.coordination} neighbours"


def _molar_mass_g(material: str) -> float:
    masses = element_table()["mass_u"]
    return float(sum(x * masses[e] for e, x in parse_formula(material).fractions.items()))


def _atom_area_m2(metal: MetalLattice) -> float:
    return float(_ATOM_AREA[metal.structure] * (1e-9 * metal.nearest_distance_nm) ** 2)


def particle_sites(
    material: str, shape: str, diameter_nm: FloatArray, *, is_step: bool = False
) -> ParticleSites:
    """Count the sites of particles of one metal and shape.

    Parameters
    ----------
    material, shape : str
    diameter_nm : ndarray, shape (n_sizes,)
    is_step : bool, default False
        Only step sites, of the greatest number that islands on the facets can make.

    Returns
    -------
    ParticleSites

    Raises
    ------
    PhysicsRangeError
        If the shape does not fit the metal or a size is out of range.
    """
    metal = metal_lattice(material)
    counts = resolved_counts(material, shape, diameter_nm)
    classes = counts.classes
    n_sites, coordination = counts.n_sites, counts.generalised_coordination
    if is_step:
        classes, n_sites = (STEP_SITE,), most_step_sites(material, shape, diameter_nm)[:, None]
        coordination = np.full_like(n_sites, np.nan)
    surface_m2 = counts.n_surface * _atom_area_m2(metal)
    return ParticleSites(
        classes,
        n_sites,
        coordination,
        counts.n_atoms,
        counts.n_surface,
        1e6 / (counts.n_atoms * _molar_mass_g(material)),
        1e6 / (Avogadro * surface_m2),
    )
