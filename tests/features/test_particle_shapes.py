"""Particles atom by atom: published counts, independent constructions, coordination of sites."""

import numpy as np
import pytest
from ase.build import bulk
from ase.cluster import (
    BodyCenteredCubic,
    Decahedron,
    FaceCenteredCubic,
    Icosahedron,
    Octahedron,
)
from scipy.spatial import cKDTree

from features.errors import PhysicsRangeError, UnknownMaterialError
from features.particle_shapes import available_shapes, explicit_particle, shape_structures
from features.tables import read_table

ALL_SERIES = [
    (structure, shape)
    for structure in ("fcc", "bcc", "hcp")
    for shape in available_shapes(structure)
    if shape != "wulff"
]
PUBLISHED = list(read_table("particle_counts").itertuples(index=False))
# between first and second neighbours: fcc and hcp 1.41, bcc 1.15
CUTOFF = {"fcc": 1.2, "hcp": 1.2, "bcc": 1.07}


def counts_by(particle, **wanted):
    return sum(
        n
        for c, n in particle.site_counts().items()
        if all(getattr(c, name) == value for name, value in wanted.items())
    )


def ase_particle(shape, shell):
    """The same shell, built by another library."""
    return {
        "cuboctahedron": lambda: Octahedron("Pt", 2 * shell + 1, cutoff=shell),
        "octahedron": lambda: Octahedron("Pt", shell + 1),
        "truncated_octahedron": lambda: Octahedron("Pt", 3 * shell + 1, cutoff=shell),
        "icosahedron": lambda: Icosahedron("Pt", shell + 1),
        "decahedron": lambda: Decahedron("Pt", shell + 1, shell + 1, 0),
    }[shape]()


def near_atoms(positions, cutoff):
    return cKDTree(positions).query_ball_point(positions, cutoff, return_length=True) - 1


def ase_coordination(atoms, cutoff):
    return near_atoms(atoms.positions, cutoff)


@pytest.mark.parametrize("row", PUBLISHED, ids=lambda r: f"{r.shape}-{r.shell}")
def test_every_tabulated_shell_has_the_published_counts(row):
    # van Hardeveld, Hartog, Surf. Sci. 15, 189 (1969)
    particle = explicit_particle(row.structure, row.shape, row.shell)
    found = (
        particle.n_atoms,
        particle.n_surface,
        counts_by(particle, site="vertex"),
        counts_by(particle, site="edge"),
        counts_by(particle, site="terrace", facet="(111)"),
        counts_by(particle, site="terrace", facet="(100)"),
    )
    assert found == (row.n_atoms, row.n_surface, row.n_vertex, row.n_edge, row.n_111, row.n_100)


@pytest.mark.parametrize("shell", [1, 2, 3, 5])
@pytest.mark.parametrize(
    "shape",
    ["cuboctahedron", "octahedron", "truncated_octahedron", "icosahedron", "decahedron"],
)
def test_coordination_numbers_equal_those_of_an_independent_construction(shape, shell):
    ours = explicit_particle("fcc", shape, shell)
    atoms = ase_particle(shape, shell)
    # nearest distance of Pt 2.77 angstrom; twinned particles are strained by up to 5 %
    theirs = ase_coordination(atoms, 3.3)
    assert np.array_equal(np.bincount(ours.coordination), np.bincount(theirs))


@pytest.mark.parametrize("shell", [1, 2, 4])
def test_cubes_of_two_structures_equal_an_independent_construction(shell):
    # the other library centres its layers on atoms: even numbers of half layers of fcc
    fcc = FaceCenteredCubic("Pt", [(1, 0, 0)], [2 * shell])
    bcc = BodyCenteredCubic("Fe", [(1, 0, 0)], [shell])
    theirs = [ase_coordination(fcc, 3.3), ase_coordination(bcc, 2.65)]
    ours = [explicit_particle("fcc", "cube", 2 * shell), explicit_particle("bcc", "cube", shell)]
    for mine, other in zip(ours, theirs, strict=True):
        assert np.array_equal(np.bincount(mine.coordination), np.bincount(other))


@pytest.mark.parametrize("shell", [1, 2, 4])
def test_rhombic_dodecahedra_equal_an_independent_construction(shell):
    crystal = bulk("Fe", "bcc", a=1.0, cubic=True) * (12, 12, 12)
    x, y, z = np.abs(crystal.positions - 6.0).T
    is_inside = np.maximum(x + y, np.maximum(x + z, y + z)) < shell + 1e-6
    theirs = ase_coordination(crystal[is_inside], 0.95)
    ours = explicit_particle("bcc", "rhombic_dodecahedron", shell)
    assert np.array_equal(np.bincount(ours.coordination), np.bincount(theirs))


@pytest.mark.parametrize("shell", [1, 2])
def test_hexagonal_prism_equals_a_crystal_of_another_library_cut_by_its_planes(shell):
    crystal = bulk("Ru", "hcp", a=1.0, c=np.sqrt(8.0 / 3.0)) * (24, 24, 12)
    middle = crystal.positions[
        np.argmin(np.linalg.norm(crystal.positions - crystal.positions.mean(axis=0), axis=1))
    ]
    crystal.positions -= middle
    angle = np.radians(30.0 + 60.0 * np.arange(6))
    heights = crystal.positions[:, :2] @ np.stack([np.cos(angle), np.sin(angle)])
    is_inside = np.abs(crystal.positions[:, 2]) < shell * np.sqrt(8.0 / 3.0) + 1e-6
    # close pairs of prism layers are sqrt(3)/6 apart, pairs sqrt(3)/2; three sides end on one layer
    # of a pair counted from the middle atom, three on the other
    near = 2 * shell * np.sqrt(0.75) + 1e-6
    limits = [near + np.sqrt(3.0) / 6.0 * (np.arange(6) % 2 == side) for side in (0, 1)]
    kept = max((is_inside & (heights < limit).all(axis=1) for limit in limits), key=np.sum)
    ours = explicit_particle("hcp", "hexagonal_prism", shell)
    assert np.array_equal(
        np.bincount(ours.coordination), np.bincount(ase_coordination(crystal[kept], 1.2))
    )


@pytest.mark.parametrize(("structure", "shape"), ALL_SERIES)
def test_coordination_from_positions_equals_coordination_from_the_lattice(structure, shape):
    particle = explicit_particle(structure, shape, 3)
    near = near_atoms(particle.positions, CUTOFF[structure])
    assert np.array_equal(near, particle.coordination)


@pytest.mark.parametrize(("structure", "shape"), ALL_SERIES)
@pytest.mark.parametrize("shell", [1, 4])
def test_site_counts_add_up_to_the_atoms_with_missing_neighbours(structure, shape, shell):
    particle = explicit_particle(structure, shape, shell)
    full = 8 if structure == "bcc" else 12
    assert sum(particle.site_counts().values()) == particle.n_surface
    assert particle.n_surface == np.count_nonzero(particle.coordination < full)
    assert particle.coordination.max() <= full


@pytest.mark.parametrize(
    "row",
    list(read_table("site_coordination").query("shape != 'slab'").itertuples(index=False)),
    ids=lambda r: f"{r.shape}-{r.site}-{r.facet}",
)
def test_sites_of_large_particles_have_the_tabulated_coordination(row):
    particle = explicit_particle("fcc", row.shape, 8)
    index = [
        i
        for i, c in enumerate(particle.classes)
        if (c.site, c.facet, c.coordination) == (row.site, row.facet, row.coordination)
    ]
    values = particle.generalised_coordination[np.isin(particle.class_index, index)]
    # the table has three decimals
    assert values.min() == pytest.approx(row.generalised_coordination_low, abs=5e-4)
    assert values.max() == pytest.approx(row.generalised_coordination_high, abs=5e-4)


@pytest.mark.parametrize(
    ("structure", "magic"),
    [("rhombic_dodecahedron", [15, 65, 175, 369, 671]), ("cube", [9, 35, 91, 189, 341])],
)
def test_bcc_particles_have_the_known_magic_sizes(structure, magic):
    # n^4 - (n-1)^4 (rhombic dodecahedral numbers) and n^3 + (n+1)^3, common in number theory
    assert [explicit_particle("bcc", structure, n).n_atoms for n in range(1, 6)] == magic
    n = np.arange(1, 6)
    formula = (n + 1) ** 4 - n**4 if structure != "cube" else n**3 + (n + 1) ** 3
    assert formula.tolist() == magic


def test_shape_of_another_structure_is_refused_with_the_shapes_that_fit():
    with pytest.raises(PhysicsRangeError, match=r"shape of bcc metals.*for fcc one of truncated"):
        explicit_particle("fcc", "rhombic_dodecahedron", 2)


def test_unknown_shape_and_unknown_structure_are_refused():
    with pytest.raises(PhysicsRangeError, match="unknown shape"):
        explicit_particle("fcc", "teapot", 2)
    with pytest.raises(UnknownMaterialError, match="expected fcc, bcc or hcp"):
        available_shapes("orthorhombic")
    assert shape_structures("teapot") == []


def test_shells_start_at_one_and_wulff_has_none():
    with pytest.raises(PhysicsRangeError, match="no such shell"):
        explicit_particle("fcc", "cube", 0)
    with pytest.raises(PhysicsRangeError, match="wulff_particle"):
        explicit_particle("fcc", "wulff", 2)
