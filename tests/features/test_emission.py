import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import constants

from features.emission import (
    FWHM_PER_SD,
    HC_eV_nm,
    ensemble_fwhm_eV,
    integrated_fwhm_eV,
    stokes_shifts,
    wavelength_nm,
)


def test_hc_equals_the_product_of_the_exact_constants():
    assert pytest.approx(constants.h * constants.c / constants.e * 1e9, rel=1e-12) == HC_eV_nm


@given(st.floats(0.1, 8.0))
def test_wavelength_and_energy_are_inverse(energy):
    assert HC_eV_nm / float(wavelength_nm(energy)) == pytest.approx(energy, rel=1e-12)


def test_no_wavelength_is_invented_for_an_energy_that_is_not_positive():
    assert np.isnan(wavelength_nm([-0.1, 0.0])).all()


@given(single=st.floats(0.03, 0.2), slope=st.floats(-0.6, -0.05), spread=st.floats(0.02, 0.3))
def test_quadrature_equals_integration_where_energy_is_linear_in_size(single, slope, spread):
    integrated = integrated_fwhm_eV(lambda d: 5.0 + slope * d, 4.0, spread, single)
    # The grid of the integration resolves about a hundredth of a width.
    assert integrated == pytest.approx(float(ensemble_fwhm_eV(single, slope, spread)), rel=0.01)


def test_quadrature_is_close_to_integration_on_a_measured_curve():
    # Moreels et al., ACS Nano 3, 3023 (2009): PbS, valid 2.3 to 8.5 nm; 5 % spread at 4 nm.
    def gap(d):
        return 0.41 + 1.0 / (0.0252 * d**2 + 0.283 * d)

    d, spread, step = 4.0, 0.2, 1e-4
    slope = (gap(d + step) - gap(d - step)) / (2 * step)
    closed = float(ensemble_fwhm_eV(0.07, slope, spread))
    # Curvature adds at second order: a few per cent at 5 % spread.
    assert integrated_fwhm_eV(gap, d, spread, 0.07) == pytest.approx(closed, rel=0.03)
    # Size part alone: 97 meV at 4 nm and 5 % (derived from the same curve by hand).
    assert FWHM_PER_SD * abs(slope) * spread == pytest.approx(0.097, abs=0.001)


def test_a_material_without_its_own_shift_takes_its_familys():
    shifts = stokes_shifts(["CdSe", "ZnTe"], ["II-VI", "II-VI"])
    assert shifts["stokes_scope"].tolist() == ["material", "family"]
    assert (shifts["stokes_sd_eV"] > 0).all()
