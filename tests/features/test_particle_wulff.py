"""Wulff shapes: areas of an independent construction, known truncations, exact closed forms."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from pymatgen.analysis.wulff import WulffShape
from pymatgen.core import Lattice

from features.errors import PhysicsRangeError, UnknownMaterialError
from features.particle import particle_counts
from features.particle_lattice import crystal_lattice
from features.particle_metal import MetalLattice, metal_lattice
from features.particle_polyhedron import cut_particle
from features.particle_wulff import (
    _wulff,
    broken_bond_energies,
    wulff_areas,
    wulff_ladder,
    wulff_particle,
)

# the symmetry library behind the independent construction announces a change of its own
pytestmark = pytest.mark.filterwarnings("ignore:Set OLD_ERROR_HANDLING:DeprecationWarning")

CUBIC_INDEX = {"(111)": (1, 1, 1), "(100)": (1, 0, 0), "(110)": (1, 1, 0)}
HEXAGONAL_INDEX = {"(0001)": (0, 0, 0, 1), "(10-10)": (1, 0, -1, 0), "(10-11)": (1, 0, -1, 1)}


def independent_areas(metal):
    energies = dict(metal.surface_energies_J_m2)
    if metal.structure == "hcp":
        lattice = Lattice.hexagonal(1.0, metal.c_over_a)
        index = HEXAGONAL_INDEX
    else:
        lattice = Lattice.cubic(1.0)
        index = CUBIC_INDEX
    shape = WulffShape(lattice, [index[f] for f in energies], list(energies.values()))
    return {f: shape.area_fraction_dict[index[f]] for f in energies}


@pytest.mark.parametrize("metal", ["Pt", "Ag", "Al", "Ni", "Au", "Fe", "W", "Ru", "Zn"])
def test_facet_areas_equal_those_of_an_independent_construction(metal):
    lattice = metal_lattice(metal)
    crystal = crystal_lattice(lattice.structure, lattice.c_over_a)
    ours = wulff_areas(crystal, dict(lattice.surface_energies_J_m2))
    assert ours == pytest.approx(independent_areas(lattice), abs=1e-6)


@pytest.mark.parametrize("metal", ["Pt", "Cu", "Fe", "Ru"])
def test_terrace_atoms_of_large_particles_follow_the_independent_areas(metal):
    lattice = metal_lattice(metal)
    counts = particle_counts(metal, "wulff", 30.0)
    areas = independent_areas(lattice)
    # outermost atoms per area, in one over the squared nearest distance
    density = {
        "fcc": {"(111)": 2.0 / np.sqrt(3.0), "(100)": 1.0, "(110)": np.sqrt(0.5)},
        "bcc": {"(110)": 0.75 * np.sqrt(2.0), "(100)": 0.75},
        "hcp": {
            "(0001)": 2.0 / np.sqrt(3.0),
            "(10-10)": 1.0 / lattice.c_over_a,
            "(10-11)": 1.0 / np.hypot(lattice.c_over_a, np.sqrt(0.75)),
        },
    }[lattice.structure]
    outermost = {}
    for site, n in zip(counts.classes, counts.n_sites[0], strict=True):
        if site.site == "terrace":
            best = outermost.get(site.facet, (99, 0.0))
            outermost[site.facet] = min(best, (site.coordination, n))
    expected = np.array([areas[f] * density[f] for f in outermost])
    found = np.array([n for _, n in outermost.values()])
    # edges take a share of small facets: at 30 nm one row in about twenty
    assert found / found.sum() == pytest.approx(expected / expected.sum(), abs=0.04)


def test_broken_bonds_give_the_textbook_ratios():
    # fcc: 3, 4 and 6 broken bonds on cells of sqrt(3)/2, 1 and sqrt(2): 2/sqrt(3) and sqrt(3/2)
    fcc = broken_bond_energies("fcc", {"(111)": 1.0})
    assert fcc["(100)"] == pytest.approx(2.0 / np.sqrt(3.0))
    assert fcc["(110)"] == pytest.approx(np.sqrt(1.5))
    bcc = broken_bond_energies("bcc", {"(110)": 1.0})
    assert bcc["(100)"] == pytest.approx(np.sqrt(2.0))


def test_broken_bonds_make_fcc_a_regular_truncated_octahedron():
    energies = tuple(broken_bond_energies("fcc", {"(111)": 1.0}).items())
    particle = wulff_particle("fcc", energies, 1289.0)
    assert (particle.n_atoms, particle.n_surface) == (1289, 482)


@given(ratio=st.floats(0.9, 1.7), scale=st.floats(0.2, 5.0))
def test_shape_depends_on_the_ratio_of_the_energies_only(ratio, scale):
    crystal = crystal_lattice("fcc")
    one = wulff_areas(crystal, {"(111)": 1.0, "(100)": ratio})
    other = wulff_areas(crystal, {"(111)": scale, "(100)": scale * ratio})
    assert one == pytest.approx(other, abs=1e-6)


@given(ratio=st.floats(0.9, 1.6))
def test_dearer_facets_are_smaller(ratio):
    crystal = crystal_lattice("fcc")
    cheap = wulff_areas(crystal, {"(111)": 1.0, "(100)": ratio})
    dear = wulff_areas(crystal, {"(111)": 1.0, "(100)": ratio * 1.05})
    assert dear["(100)"] < cheap["(100)"]


@pytest.mark.parametrize(
    ("metal", "more"), [("Cu", (4, 3, 4)), ("Pt", (9, 6)), ("Fe", (6, 8)), ("Ru", (2, 3, 4))]
)
def test_closed_forms_equal_larger_particles_that_were_built(metal, more):
    lattice = metal_lattice(metal)
    crystal = crystal_lattice(lattice.structure, lattice.c_over_a)
    kept, forms = _wulff(lattice.structure, lattice.c_over_a, lattice.surface_energies_J_m2)
    layers = forms.middle.astype(int) + np.array(more)
    built = cut_particle(crystal, dict(zip([f for f, _ in kept], layers.tolist(), strict=True)))
    atoms, counts, sums = forms.at(layers[None, :].astype(float))
    assert float(atoms[0]) == pytest.approx(built.n_atoms, abs=1e-4)
    expected = [built.site_counts().get(c, 0) for c in forms.classes]
    assert counts[0].tolist() == pytest.approx(expected, abs=1e-4)
    expected_sums = [built.coordination_sums().get(c, 0.0) for c in forms.classes]
    assert sums[0].tolist() == pytest.approx(expected_sums, abs=1e-4)


def test_smooth_wulff_counts_pass_between_the_particles_in_whole_layers():
    lattice = metal_lattice("Pt")
    ladder = wulff_ladder("fcc", lattice.surface_energies_J_m2, 1e5)
    built = [
        wulff_particle("fcc", lattice.surface_energies_J_m2, n) for n in np.geomspace(200, 2e4, 12)
    ]
    atoms = np.array([float(p.n_atoms) for p in built])
    smooth = ladder.counts_at(atoms).sum(axis=1)
    assert smooth == pytest.approx([p.n_surface for p in built], rel=0.03)


def test_missing_or_negative_energies_are_refused():
    with pytest.raises(PhysicsRangeError, match=r"positive energy for \(111\)"):
        broken_bond_energies("fcc", {"(100)": 1.0})
    with pytest.raises(PhysicsRangeError, match="no Wulff shape"):
        broken_bond_energies("fcc", {"(111)": -1.0})
    bare = MetalLattice("X", "fcc", 0.015, 1.633, ())
    with pytest.raises(UnknownMaterialError, match="no surface energies"):
        particle_counts(bare, "wulff", 3.0)
