import numpy as np
import pytest

from features.bulk_bands import bulk_edges
from features.computed_dots import couples_spin
from features.confinement import COULOMB_eV_nm
from features.crystal_symmetry import block_basis, symmetry_blocks
from features.edge_states import EdgeStates, coulomb_attraction_eV, edge_states
from features.nanocrystal import Crystallite, spherical_crystallite
from features.tight_binding import crystal_hamiltonian, orbital_columns, parameter_set


def dense_levels(parameters, crystal, *, spin_orbit):
    matrix = crystal_hamiltonian(parameters, crystal, spin_orbit=spin_orbit).toarray()
    return np.linalg.eigvalsh(matrix)


SMALL = [
    ("ZnSe sp3s*", 1.5, False),
    ("ZnSe sp3s*", 1.9, True),
    ("CdSe sp3s*", 1.5, False),
    ("Si sp3d5s*", 1.3, False),
    ("InAs sp3d5s*", 1.4, True),
    ("PbTe sp3d5", 1.3, False),
]


@pytest.mark.parametrize(("name", "diameter", "cation_centred"), SMALL)
def test_edges_are_those_of_dense_diagonalisation(name, diameter, cation_centred):
    parameters = parameter_set(name)
    crystal = spherical_crystallite(
        parameters.structure, parameters.lattice_a_nm, diameter, cation_centred=cation_centred
    )
    coupled = couples_spin(parameters)
    middle = bulk_edges(parameters, spin_orbit=coupled).middle_eV
    states = edge_states(parameters, crystal, middle, spin_orbit=coupled)
    levels = dense_levels(parameters, crystal, spin_orbit=coupled)
    assert states.homo_eV == pytest.approx(levels[levels < middle].max(), abs=1e-8)
    assert states.lumo_eV == pytest.approx(levels[levels > middle].min(), abs=1e-8)
    assert states.residual_eV < 1e-8


@pytest.mark.parametrize("name", ["ZnSe sp3s*", "CdSe sp3s*"])
def test_valence_levels_are_filled_by_two_electrons_a_bond_and_a_passivated_hybrid(name):
    # Every whole bond and every dangling hybrid pushed away leaves one bonding state a bond.
    parameters = parameter_set(name)
    crystal = spherical_crystallite(parameters.structure, parameters.lattice_a_nm, 1.5)
    middle = bulk_edges(parameters, spin_orbit=False).middle_eV
    levels = dense_levels(parameters, crystal, spin_orbit=False)
    assert (levels < middle).sum() == len(crystal.bonds)


@pytest.mark.parametrize(("structure", "spin_orbit"), [("zincblende", False), ("zincblende", True)])
def test_block_bases_are_orthonormal_and_keep_blocks_apart(structure, spin_orbit):
    parameters = parameter_set("CdSe sp3s*")
    crystal = spherical_crystallite(structure, parameters.lattice_a_nm, 1.6)
    matrix = crystal_hamiltonian(parameters, crystal, spin_orbit=spin_orbit)
    orbitals = orbital_columns(parameters)
    bases = [
        block_basis(block, crystal.positions_nm, orbitals)
        for block in symmetry_blocks(structure, spin_orbit=spin_orbit)
    ]
    for basis in bases:
        product = (basis.conj().T @ basis).toarray()
        np.testing.assert_allclose(product, np.eye(basis.shape[1]), atol=1e-12)
    between = bases[0].conj().T @ (matrix @ bases[1])
    assert abs(between).max() < 1e-10


def test_names_of_atoms_do_not_matter():
    parameters = parameter_set("ZnSe sp3s*")
    crystal = spherical_crystallite("zincblende", parameters.lattice_a_nm, 1.6)
    new_place = np.random.default_rng(0).permutation(len(crystal.is_cation))
    old = np.argsort(new_place)
    shuffled = Crystallite(
        positions_nm=crystal.positions_nm[old],
        is_cation=crystal.is_cation[old],
        bonds=new_place[crystal.bonds],
        bond_directions=crystal.bond_directions,
        dangling_atoms=new_place[crystal.dangling_atoms],
        dangling_directions=crystal.dangling_directions,
        diameter_nm=crystal.diameter_nm,
    )
    first = edge_states(parameters, crystal, 1.3)
    second = edge_states(parameters, shuffled, 1.3)
    assert second.gap_eV == pytest.approx(first.gap_eV, abs=1e-9)
    np.testing.assert_allclose(second.lumo_density, first.lumo_density[old], atol=1e-7)


def test_a_crystal_turned_by_ninety_degrees_has_the_same_levels():
    parameters = parameter_set("ZnSe sp3s*")
    crystal = spherical_crystallite("zincblende", parameters.lattice_a_nm, 1.5)
    turn = np.array([[0.0, -1.0, 0.0], [1.0, 0.0, 0.0], [0.0, 0.0, 1.0]])
    turned = Crystallite(
        positions_nm=crystal.positions_nm @ turn.T,
        is_cation=crystal.is_cation,
        bonds=crystal.bonds,
        bond_directions=crystal.bond_directions @ turn.T,
        dangling_atoms=crystal.dangling_atoms,
        dangling_directions=crystal.dangling_directions @ turn.T,
        diameter_nm=crystal.diameter_nm,
    )
    one = dense_levels(parameters, crystal, spin_orbit=False)
    other = dense_levels(parameters, turned, spin_orbit=False)
    np.testing.assert_allclose(one, other, atol=1e-9)


def test_the_gap_falls_to_that_of_the_bulk():
    parameters = parameter_set("ZnSe sp3s*")
    edges = bulk_edges(parameters)
    beyond = []
    for diameter in (1.5, 2.5, 3.5, 4.5):
        crystal = spherical_crystallite("zincblende", parameters.lattice_a_nm, diameter)
        states = edge_states(parameters, crystal, edges.middle_eV)
        beyond.append((crystal.diameter_nm, states.gap_eV - edges.gap_eV))
    size, energy = np.array(beyond).T
    assert (np.diff(energy) < 0.0).all()
    power = -np.polyfit(np.log(size[1:]), np.log(energy[1:]), 1)[0]
    # Between 1 and the 2 of parabolic bands in a hard sphere, which holds for the bulk limit.
    assert 1.0 < power < 2.0


def test_silicon_matches_the_published_tight_binding_law():
    # Gap without attraction 1.17 + 3.73 / d^1.39 eV: Delerue, Allan and Lannoo, Phys. Rev. B 48,
    # 11024 (1993), another tight-binding model (from memory).
    parameters = parameter_set("Si sp3d5s*")
    edges = bulk_edges(parameters, spin_orbit=False)
    crystal = spherical_crystallite("diamond", parameters.lattice_a_nm, 3.0)
    states = edge_states(parameters, crystal, edges.middle_eV, spin_orbit=False)
    published = 3.73 / crystal.diameter_nm**1.39
    assert states.gap_eV - edges.gap_eV == pytest.approx(published, rel=0.1)


def test_a_hard_spheres_densities_give_the_published_attraction():
    crystal = spherical_crystallite("zincblende", 0.5668, 5.0)
    radius = 0.5 * crystal.diameter_nm
    x = np.pi * np.linalg.norm(crystal.positions_nm, axis=1) / radius
    density = np.where(x < np.pi, np.sinc(x / np.pi) ** 2, 0.0)
    density /= density.sum()
    states = EdgeStates(0.0, 1.0, 0.0, density, density, 1)
    found = coulomb_attraction_eV(crystal, states, 2.0)
    # 1.786: Brus, J. Chem. Phys. 80, 4403 (1984).
    assert found == pytest.approx(-1.786 * COULOMB_eV_nm / (2.0 * radius), rel=0.02)
