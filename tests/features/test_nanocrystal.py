import numpy as np
import pytest

from features.errors import PhysicsRangeError
from features.nanocrystal import ATOMS_PER_CELL, bond_vectors, spherical_crystallite


@pytest.mark.parametrize("structure", ["zincblende", "diamond", "rocksalt"])
@pytest.mark.parametrize("cation_centred", [False, True])
def test_every_bond_of_an_atom_is_whole_or_dangling(structure, cation_centred):
    crystal = spherical_crystallite(structure, 0.58, 2.5, cation_centred=cation_centred)
    whole = np.bincount(crystal.bonds.ravel(), minlength=len(crystal.is_cation))
    cut = np.bincount(crystal.dangling_atoms, minlength=len(crystal.is_cation))
    assert (whole + cut == len(bond_vectors(structure))).all()
    assert whole.min() >= 2


def test_bonds_join_an_anion_to_a_cation_at_the_crystals_distance():
    crystal = spherical_crystallite("zincblende", 0.5668, 2.5)
    anion, cation = crystal.bonds.T
    assert not crystal.is_cation[anion].any()
    assert crystal.is_cation[cation].all()
    apart = crystal.positions_nm[cation] - crystal.positions_nm[anion]
    length = 0.5668 * np.sqrt(3.0) / 4.0
    np.testing.assert_allclose(apart, length * crystal.bond_directions, atol=1e-9)


def test_dangling_bonds_lead_out_of_the_crystal():
    crystal = spherical_crystallite("zincblende", 0.5668, 3.0)
    outward = crystal.positions_nm[crystal.dangling_atoms] * crystal.dangling_directions
    assert outward.sum() > 0.0
    length = 0.5668 * np.sqrt(3.0) / 4.0
    ends = crystal.positions_nm[crystal.dangling_atoms] + length * crystal.dangling_directions
    distance = np.linalg.norm(ends[:, None] - crystal.positions_nm, axis=-1)
    assert distance.min() > 1e-3


def test_the_diameter_holds_the_crystals_density():
    crystal = spherical_crystallite("zincblende", 0.5668, 6.0)
    volume = len(crystal.is_cation) / ATOMS_PER_CELL * 0.5668**3
    assert np.pi / 6.0 * crystal.diameter_nm**3 == pytest.approx(volume)
    assert crystal.diameter_nm == pytest.approx(6.0, abs=0.1)


def test_six_nanometres_of_zinc_selenide_hold_about_4800_atoms():
    crystal = spherical_crystallite("zincblende", 0.5668, 6.0)
    assert len(crystal.is_cation) == pytest.approx(4800, rel=0.05)


def test_an_unknown_structure_is_refused():
    with pytest.raises(PhysicsRangeError, match="fluorite"):
        bond_vectors("fluorite")


def test_a_sphere_without_a_bond_is_refused():
    with pytest.raises(PhysicsRangeError, match="larger sphere"):
        spherical_crystallite("zincblende", 0.5668, 0.3)
