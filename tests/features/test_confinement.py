import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.integrate import quad, solve_bvp

from features.confinement import (
    BOHR_RADIUS_nm,
    COULOMB_eV_nm,
    KINETIC_eV_nm2,
    brus_gap_eV,
    coulomb_energy_eV,
    exciton_bohr_radius_nm,
    polarisation_energy_eV,
    reduced_mass,
    sphere_confinement_eV,
    surface_fraction,
    two_band_gap_eV,
)
from features.errors import PhysicsRangeError
from features.finite_barrier import finite_barrier_energy_eV, finite_barrier_gap_eV

masses = st.floats(0.02, 2.0)
gaps = st.floats(0.1, 5.0)
dielectrics = st.floats(2.0, 30.0)


def test_constants_equal_their_textbook_values():
    # CODATA 2018, from memory: hbar^2/2m0 = 3.80998 eV A^2, e^2/4 pi eps0 = 14.39964 eV A.
    assert pytest.approx(0.0380998, rel=1e-5) == KINETIC_eV_nm2
    assert pytest.approx(1.439964, rel=1e-6) == COULOMB_eV_nm
    assert pytest.approx(0.0529177, rel=1e-6) == BOHR_RADIUS_nm


def test_coulomb_coefficient_equals_brus_and_a_direct_double_integral():
    # Brus 1984 rounds it to 1.8; Kayanuma 1988 gives 1.786.
    coefficient = -float(coulomb_energy_eV(2.0, 1.0)) / COULOMB_eV_nm
    assert coefficient == pytest.approx(1.786, abs=5e-4)

    def density(r):
        return 2.0 * np.sin(np.pi * r) ** 2

    def potential(r):
        inner = quad(density, 0.0, r)[0] / r if r > 0 else 0.0
        return inner + quad(lambda s: density(s) / s, r, 1.0)[0]

    direct = quad(lambda r: density(r) * potential(r), 0.0, 1.0)[0]
    assert coefficient == pytest.approx(direct, rel=1e-6)


def test_confinement_energy_agrees_with_a_boundary_value_solver():
    radius, mass = 1.5, 0.2

    def equation(_x, y, p):
        return np.vstack([y[1], -p[0] * y[0]])

    def ends(a, b, _p):
        return np.array([a[0], b[0], a[1] - 1.0])

    x = np.linspace(0.0, radius, 50)
    guess = np.vstack([np.sin(np.pi * x / radius), np.cos(np.pi * x / radius)])
    solved = solve_bvp(equation, ends, x, guess, p=[4.0], tol=1e-8)
    assert float(sphere_confinement_eV(2 * radius, mass)) == pytest.approx(
        KINETIC_eV_nm2 * solved.p[0] / mass, rel=1e-6
    )


def test_bohr_radius_of_cdse_is_about_five_nanometres():
    # Bohr radius of CdSe 5 to 6 nm (common practice).
    assert 4.5 < float(exciton_bohr_radius_nm(9.6, reduced_mass(0.13, 0.45))) < 6.0


@given(gap=gaps, electron=masses, hole=masses, dielectric=dielectrics)
def test_every_model_reaches_the_bulk_gap_for_large_crystals(gap, electron, hole, dielectric):
    large = 1e6
    mass = reduced_mass(electron, hole)
    assert float(brus_gap_eV(large, gap, electron, hole, dielectric)) == pytest.approx(
        gap, abs=1e-5
    )
    assert float(two_band_gap_eV(large, gap, mass)) == pytest.approx(gap, abs=1e-5)
    finite = finite_barrier_gap_eV(large, gap, electron, hole, dielectric)
    assert float(finite) == pytest.approx(gap, abs=1e-5)


@given(diameter=st.floats(1.0, 20.0), mass=masses, barrier=st.floats(0.5, 10.0))
def test_a_finite_barrier_binds_lower_than_a_hard_wall_and_below_its_top(diameter, mass, barrier):
    energy = float(finite_barrier_energy_eV(diameter, mass, barrier))
    assert 0.0 < energy <= barrier
    assert energy < float(sphere_confinement_eV(diameter, mass))


@given(diameter=st.floats(1.0, 15.0), gap=gaps, electron=masses, hole=masses)
def test_kinetic_models_fall_with_size(diameter, gap, electron, hole):
    mass = reduced_mass(electron, hole)
    sizes = np.array([diameter, diameter * 1.1])
    assert np.diff(sphere_confinement_eV(sizes, mass))[0] < 0.0
    assert np.diff(two_band_gap_eV(sizes, gap, mass))[0] < 0.0
    assert np.diff(finite_barrier_energy_eV(sizes, electron, 3.5))[0] <= 0.0


def test_high_barriers_approach_the_hard_wall():
    hard = float(sphere_confinement_eV(3.0, 0.15))
    errors = [
        hard - float(finite_barrier_energy_eV(3.0, 0.15, barrier)) for barrier in (1e2, 1e4, 1e6)
    ]
    assert errors[0] > errors[1] > errors[2] > 0.0
    assert errors[2] < 0.01 * hard


def test_a_shallow_well_that_binds_nothing_returns_its_barrier():
    # No s state is bound in a sphere below pi^2/4 hbar^2/(2 m R^2) (textbook result).
    mass, diameter = 1.0, 1.0
    threshold = float(sphere_confinement_eV(diameter, mass)) / 4.0
    shallow = 0.9 * threshold
    assert float(finite_barrier_energy_eV(diameter, mass, shallow)) == pytest.approx(shallow)
    assert float(finite_barrier_energy_eV(diameter, mass, 1.2 * threshold)) < 1.2 * threshold


def test_the_two_band_model_is_hyperbolic_and_parabolic_at_small_shifts():
    gap, mass = 1.5, 0.1
    kinetic = float(sphere_confinement_eV(200.0, mass))
    assert float(two_band_gap_eV(200.0, gap, mass)) == pytest.approx(gap + kinetic, rel=1e-6)


def test_polarisation_vanishes_without_dielectric_contrast_and_is_positive_with_it():
    assert float(polarisation_energy_eV(3.0, 5.0, 5.0)) == 0.0
    assert float(polarisation_energy_eV(3.0, 6.2, 2.0)) > 0.0


@given(diameter=st.floats(0.5, 50.0), shell=st.floats(0.05, 2.0))
def test_surface_fraction_is_a_fraction_and_scale_invariant(diameter, shell):
    value = float(surface_fraction(diameter, shell))
    assert 0.0 < value <= 1.0
    assert value == pytest.approx(float(surface_fraction(7.0 * diameter, 7.0 * shell)), rel=1e-9)


@pytest.mark.parametrize("bad", [0.0, -1.0, np.nan, np.inf])
def test_a_size_that_cannot_be_is_refused_by_name(bad):
    with pytest.raises(PhysicsRangeError, match="diameter_nm out of range"):
        sphere_confinement_eV(bad, 0.1)
