"""Step sites: none on perfect facets, most at a few nanometres, linear in size when large."""

import numpy as np
import pytest

from features.errors import PhysicsRangeError
from features.particle import atoms_in_sphere
from features.particle_metal import metal_lattice
from features.particle_steps import most_step_sites, stepped_counts

SIZES = np.linspace(1.0, 10.0, 181)


def share_per_atom(metal, shape):
    return most_step_sites(metal, shape, SIZES) / atoms_in_sphere(
        SIZES, metal_lattice(metal).atomic_volume_nm3
    )


@pytest.mark.parametrize("metal", ["Ru", "Co"])
def test_step_sites_of_hexagonal_metals_peak_where_ruthenium_is_most_active(metal):
    # ruthenium for ammonia: most step sites at 1.8 to 2.5 nm and up to 3.5 nm, Jacobsen et al., J.
    # Mol. Catal. A 163, 19 (2000) (from memory); about 3 nm, Gavnholt, Schiotz, Phys. Rev. B 77,
    # 035404 (2008) (abstract)
    peak = SIZES[np.argmax(share_per_atom(metal, "wulff"))]
    assert 1.8 <= peak <= 3.5


@pytest.mark.parametrize("shape", ["truncated_octahedron", "cuboctahedron"])
def test_step_sites_of_cubic_crystals_peak_near_two_nanometres(shape):
    # van Hardeveld, van Montfoort, Surf. Sci. 4, 396 (1966): nickel crystals of 1.5 to 7 nm carry
    # step sites, most near 2 nm (from memory)
    peak = SIZES[np.argmax(share_per_atom("Ni", shape))]
    assert 1.5 <= peak <= 3.0


@pytest.mark.parametrize(
    ("structure", "shape"),
    [("fcc", "truncated_octahedron"), ("hcp", "truncated_hexagonal_bipyramid")],
)
def test_step_sites_grow_in_proportion_to_the_edges(structure, shape):
    steps = [stepped_counts(structure, shape, n)[1] for n in range(4, 9)]
    assert len(set(np.diff(steps))) == 1


def test_step_sites_of_a_large_shell_beyond_the_built_ones_are_met():
    atoms, steps = stepped_counts("fcc", "truncated_octahedron", 11)
    volume = metal_lattice("Pt").atomic_volume_nm3
    diameter = np.cbrt(6.0 * atoms * volume / np.pi)
    found = most_step_sites("Pt", "truncated_octahedron", diameter)
    assert float(found[0]) == pytest.approx(steps, abs=1e-6)


def test_smallest_shells_are_too_small_for_islands():
    assert stepped_counts("fcc", "cuboctahedron", 1) == (13, 0)
    assert stepped_counts("hcp", "truncated_hexagonal_bipyramid", 1) == (57, 0)


@pytest.mark.parametrize(
    ("metal", "shape", "message"),
    [
        ("Pt", "icosahedron", "one of truncated_octahedron"),
        ("Fe", "wulff", "an fcc or hcp metal"),
        ("Pt", "teapot", "one of truncated_octahedron"),
    ],
)
def test_shapes_without_a_lattice_of_their_own_are_refused(metal, shape, message):
    with pytest.raises(PhysicsRangeError, match=message):
        most_step_sites(metal, shape, 3.0)
