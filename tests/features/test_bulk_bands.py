import numpy as np
import pytest

from features.bulk_bands import (
    MASS_TOLERANCE,
    GAP_TOLERANCE_eV,
    accepted_sets,
    bulk_check,
    bulk_edges,
    electron_mass_m0,
)
from features.tight_binding import bloch_hamiltonian, parameter_set, parameter_sets

# Gap at 0 K (eV) and electron mass at the zone's centre as printed with the sets of Jancu et al.,
# Phys. Rev. B 57, 6493 (1998) (from memory).
JANCU = {
    "GaAs sp3d5s*": (1.519, 0.067),
    "InAs sp3d5s*": (0.418, 0.024),
    "InP sp3d5s*": (1.423, 0.077),
    "Si sp3d5s*": (1.170, None),
}
# Gaps to which Vogl et al. 1983 fitted (eV, from memory).
VOGL = {
    "Si sp3s*": 1.17,
    "GaAs sp3s*": 1.55,
    "InP sp3s*": 1.41,
    "GaSb sp3s*": 0.78,
    "InSb sp3s*": 0.23,
}
# Longitudinal and transverse mass of silicon's valleys (cyclotron resonance, from memory).
SILICON_MASSES = (0.916, 0.191)


@pytest.fixture(scope="module")
def check():
    return bulk_check()


@pytest.mark.parametrize("name", sorted(JANCU))
def test_sets_with_d_orbitals_give_the_gap_and_mass_that_they_were_made_for(name):
    gap, mass = JANCU[name]
    parameters = parameter_set(name)
    assert bulk_edges(parameters).gap_eV == pytest.approx(gap, abs=0.005)
    if mass is not None:
        found = electron_mass_m0(parameters, (0.0, 0.0, 0.0))
        assert found == pytest.approx(mass, rel=0.05)


@pytest.mark.parametrize("name", sorted(VOGL))
def test_sets_without_d_orbitals_give_the_gap_that_they_were_made_for(name):
    assert bulk_edges(parameter_set(name)).gap_eV == pytest.approx(VOGL[name], abs=0.005)


def test_silicon_has_its_valleys_on_the_line_to_x_and_their_conductivity_mass():
    parameters = parameter_set("Si sp3d5s*")
    edges = bulk_edges(parameters)
    assert edges.conduction_point[0] == pytest.approx(0.85, abs=0.03)
    longitudinal, transverse = SILICON_MASSES
    expected = 3.0 / (1.0 / longitudinal + 2.0 / transverse)
    assert electron_mass_m0(parameters, edges.conduction_point) == pytest.approx(expected, rel=0.15)


def test_what_is_used_meets_the_tolerances_and_what_misses_them_is_left_out(check):
    used = check.loc[accepted_sets()]
    assert (used["gap_eV"] - used["published_gap_eV"]).abs().max() <= GAP_TOLERANCE_eV
    assert (used["mass_m0"] / used["published_mass_m0"] - 1.0).abs().max() <= MASS_TOLERANCE
    assert used["material"].is_unique
    assert set(check.index[~check["accepted"]]).isdisjoint(used.index)


def test_at_least_ten_materials_are_left(check):
    assert check.loc[check["accepted"], "material"].nunique() >= 10


@pytest.mark.parametrize("name", ["GaAs sp3d5s*", "CdSe sp3s*", "PbTe sp3d5"])
def test_bulk_matrices_are_hermitian_and_bands_come_in_pairs_at_the_centre(name):
    parameters = parameter_set(name)
    points = [[0.0, 0.0, 0.0], [0.31, 0.17, 0.05]]
    matrix = bloch_hamiltonian(parameters, points, spin_orbit=True)
    np.testing.assert_allclose(matrix, matrix.conj().transpose(0, 2, 1), atol=1e-12)
    bands = np.linalg.eigvalsh(matrix[0])
    np.testing.assert_allclose(bands[::2], bands[1::2], atol=1e-9)


@pytest.mark.parametrize("name", ["GaAs sp3d5s*", "ZnSe sp3s*"])
def test_turned_wave_vectors_have_the_same_bands(name):
    parameters = parameter_set(name)
    points = [[0.31, 0.17, 0.05], [0.17, 0.05, 0.31], [-0.31, -0.17, 0.05]]
    bands = np.linalg.eigvalsh(bloch_hamiltonian(parameters, points))
    np.testing.assert_allclose(bands[1:], np.broadcast_to(bands[0], bands[1:].shape), atol=1e-9)


def test_spin_orbit_coupling_splits_the_valence_band_of_gallium_arsenide_as_published():
    levels = np.linalg.eigvalsh(
        bloch_hamiltonian(parameter_set("GaAs sp3d5s*"), [[0, 0, 0]], spin_orbit=True)
    )[0]
    # 0.341 eV: Vurgaftman, Meyer, Ram-Mohan, J. Appl. Phys. 89, 5815 (2001).
    assert levels[7] - levels[3] == pytest.approx(0.341, abs=0.01)


def test_every_set_has_a_name_made_of_material_and_basis():
    table = parameter_sets()
    assert (table.index == table["material"] + " " + table["basis"]).all()
