"""Coordination and generalised coordination from positions: invariances and extended surfaces."""

import numpy as np
import pytest
from ase.build import fcc100, fcc110, fcc111, fcc211
from ase.neighborlist import neighbor_list
from hypothesis import given
from hypothesis import strategies as st
from scipy.spatial.transform import Rotation

from features.coordination import (
    MAXIMUM_COORDINATION,
    coordination_numbers,
    generalised_coordination,
    shared_generalised_coordination,
)
from features.errors import PhysicsRangeError
from features.particle_shapes import explicit_particle
from features.tables import read_table

SLABS = list(read_table("site_coordination").query("shape == 'slab'").itertuples(index=False))
BUILDERS = {
    "(111)": lambda: fcc111("Pt", (4, 4, 7), vacuum=8.0),
    "(100)": lambda: fcc100("Pt", (4, 4, 7), vacuum=8.0),
    "(110)": lambda: fcc110("Pt", (4, 4, 9), vacuum=8.0),
    "(211)": lambda: fcc211("Pt", (3, 4, 7), vacuum=8.0),
}


def slab_coordination(atoms):
    first, second = neighbor_list("ij", atoms, 3.2)
    pairs = np.column_stack([first, second])
    number = np.bincount(first, minlength=len(atoms))
    return number, pairs, generalised_coordination(number, pairs)


@pytest.mark.parametrize("row", SLABS, ids=lambda r: f"{r.facet}-{r.site}")
def test_extended_surfaces_have_the_tabulated_generalised_coordination(row):
    # Calle-Vallejo et al., Angew. Chem. Int. Ed. 53, 8316 (2014); Pt(111) is 7.5
    number, _, generalised = slab_coordination(BUILDERS[row.facet]())
    sites = generalised[number == row.coordination].round(3)
    assert row.generalised_coordination_low in sites


def test_bulk_sites_reach_the_greatest_generalised_coordination():
    # a shared site deep inside of a large particle: 18, 22 and 26 neighbours of 12 each
    particle = explicit_particle("fcc", "cube", 6)
    number, pairs = coordination_numbers(particle.positions, 1.2)
    middle = int(np.argmin(np.linalg.norm(particle.positions, axis=1)))
    beside = pairs[pairs[:, 0] == middle, 1]
    third = next(j for j in beside if j in pairs[pairs[:, 0] == beside[0], 1])
    bridge = shared_generalised_coordination([middle, beside[0]], number, pairs, 18)
    hollow = shared_generalised_coordination([middle, beside[0], third], number, pairs, 22)
    assert MAXIMUM_COORDINATION == {"top": 12, "bridge": 18, "hollow3": 22, "hollow4": 26}
    assert (bridge, hollow) == (12.0, 12.0)


@given(
    turn=st.tuples(*[st.floats(-3.0, 3.0)] * 3),
    move=st.tuples(*[st.floats(-50.0, 50.0)] * 3),
    seed=st.integers(0, 99),
)
def test_turning_moving_and_reordering_a_particle_changes_no_count(turn, move, seed):
    particle = explicit_particle("fcc", "truncated_octahedron", 2)
    order = np.random.default_rng(seed).permutation(particle.n_atoms)
    moved = Rotation.from_rotvec(turn).apply(particle.positions)[order] + np.array(move)
    number, pairs = coordination_numbers(moved, 1.2)
    assert np.array_equal(number, particle.coordination[order])
    generalised = generalised_coordination(number, pairs)
    assert np.allclose(generalised, particle.generalised_coordination[order], atol=1e-12)


def test_vectorised_sums_equal_a_loop_over_atoms():
    positions = explicit_particle("bcc", "rhombic_dodecahedron", 2).positions
    number, pairs = coordination_numbers(positions, 1.07)
    loop = [sum(number[j] for i, j in pairs if i == atom) / 8.0 for atom in range(len(positions))]
    assert np.allclose(generalised_coordination(number, pairs, 8), loop)


@pytest.mark.parametrize(("positions", "cutoff"), [([[0.0, 0.0]], 1.0), ([[0.0, 0.0, 0.0]], 0.0)])
def test_flat_positions_and_empty_cutoffs_are_refused(positions, cutoff):
    with pytest.raises(PhysicsRangeError, match="positions or cutoff"):
        coordination_numbers(positions, cutoff)
