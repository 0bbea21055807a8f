"""Trends with the gap: published masses and indices, monotony, limits, ranges."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import constants

from features.errors import PhysicsRangeError
from features.tables import read_table
from features.trends import (
    electron_mass_from_gap,
    kane_electron_mass,
    optical_dielectric_from_gap,
    penn_dielectric,
)

gaps = st.floats(0.05, 4.4)


@pytest.mark.parametrize(
    ("gap_eV", "kane_eV", "spin_orbit_eV", "remote", "mass"),
    [
        # Vurgaftman 2001, 0 K (from memory): E_g, E_P, spin-orbit, F and the Gamma mass.
        (1.519, 28.8, 0.341, -1.94, 0.067),
        (0.417, 21.5, 0.39, -2.9, 0.026),
        (0.235, 23.3, 0.81, -0.23, 0.0135),
        (1.4236, 20.7, 0.108, -1.31, 0.0795),
        (0.812, 27.0, 0.76, -1.63, 0.039),
    ],
)
def test_kane_mass_gives_the_published_masses(gap_eV, kane_eV, spin_orbit_eV, remote, mass):
    found = kane_electron_mass(gap_eV, kane_eV, spin_orbit_eV, remote)
    assert found == pytest.approx(mass, rel=0.03)  # published figures carry two to three digits


@given(gap=gaps, wider=st.floats(0.01, 2.0))
def test_mass_rises_and_dielectric_constant_falls_with_the_gap(gap, wider):
    assert electron_mass_from_gap(gap) < electron_mass_from_gap(gap + wider)
    for rule in ("herve-vandamme", "moss"):
        narrow, wide = optical_dielectric_from_gap([gap, gap + wider], rule)
        assert narrow > wide > 1.0


def test_two_band_mass_is_the_kane_mass_without_splitting_and_remote_bands():
    assert electron_mass_from_gap(1.5, 25.0) == pytest.approx(kane_electron_mass(1.5, 25.0))


def test_two_band_mass_tends_to_the_gap_over_the_kane_energy():
    assert electron_mass_from_gap(1e-6, 20.0) == pytest.approx(1e-6 / 20.0, rel=1e-5)


def test_two_band_masses_lie_near_those_on_record_for_direct_tetrahedral_compounds():
    table = read_table("bulk_semiconductors")
    table = table[
        table["structure"].isin(["zincblende", "wurtzite"])
        & (table["gap_type"] == "direct")
        & (table["gap_eV"] > 0.1)
    ].dropna(subset=["electron_mass_m0"])
    ratio = electron_mass_from_gap(table["gap_eV"]) / table["electron_mass_m0"]
    assert len(table) > 15
    # A trend, not a law: a third is what remote bands and Kane energies of 15 to 31 eV leave.
    assert float(np.median(np.abs(np.log(ratio)))) < np.log(1.35)


@pytest.mark.parametrize(
    ("gap_eV", "index"),
    # Refractive indices well below the gap (handbook, from memory).
    [
        (1.42, 3.3),
        (2.27, 3.02),
        (2.70, 2.43),
        (3.68, 2.27),
        (1.35, 3.1),
        (1.50, 2.68),
        (1.12, 3.42),
    ],
)
def test_rules_give_refractive_indices_within_a_fifth(gap_eV, index):
    # The linear rule of Ravindra is meant for gaps up to about 3 eV.
    for rule in ("herve-vandamme", "moss", "ravindra")[: 3 if gap_eV < 3.0 else 2]:
        found = np.sqrt(optical_dielectric_from_gap(gap_eV, rule))
        assert found == pytest.approx(index, rel=0.2)


def test_penn_model_uses_the_plasma_energy_of_the_valence_electrons():
    # Silicon: 32 electrons in a cube of 0.5431 nm, hbar w_p = 16.6 eV.
    density = 32 / 0.5431**3
    plasma_eV2 = density * 1e27 * constants.e**2 / (constants.epsilon_0 * constants.m_e)
    plasma_eV2 *= (constants.hbar / constants.e) ** 2
    assert np.sqrt(plasma_eV2) == pytest.approx(16.6, abs=0.05)
    assert penn_dielectric(4.8, density) == pytest.approx(1.0 + plasma_eV2 / 4.8**2, rel=1e-4)


@pytest.mark.parametrize(
    "call",
    [
        lambda: electron_mass_from_gap(0.0),
        lambda: electron_mass_from_gap([1.0, -0.1]),
        lambda: electron_mass_from_gap(np.nan),
        lambda: optical_dielectric_from_gap(-1.0),
        lambda: optical_dielectric_from_gap(5.0, "ravindra"),
        lambda: penn_dielectric(4.0, 0.0),
        lambda: kane_electron_mass(0.0, 20.0),
    ],
)
def test_values_outside_the_validity_are_refused(call):
    with pytest.raises(PhysicsRangeError, match="out of range"):
        call()
