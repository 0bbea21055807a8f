"""Strain by size and by alloying, and the d band that follows."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from features.d_band import alloy_width_ratio, d_band_width_ratio, shifted_d_band_centre_eV
from features.errors import PhysicsRangeError, UnknownMaterialError
from features.particle_metal import metal_lattice
from features.strain import alloy_mismatch_strain, particle_strain, size_strain


@given(d=st.floats(1.0, 30.0), f=st.floats(0.1, 6.0), b=st.floats(40.0, 450.0))
def test_contraction_equals_compression_by_the_surface_pressure(d, f, b):
    # pressure 4 f / d; a small change of volume is three times that of length
    pressure_GPa = 4.0 * f / d
    volume_change = -pressure_GPa / b
    found = size_strain(d, surface_stress_N_m=f, bulk_modulus_GPa=b)
    assert float(found) == pytest.approx(volume_change / 3.0, rel=1e-12)


@given(d=st.floats(1.5, 15.0), metal=st.sampled_from(["Pt", "Au", "Ni", "Ru", "Pt3Ni"]))
def test_contraction_is_inverse_to_the_diameter(d, metal):
    one, two = particle_strain(metal, [d, 2.0 * d]).strain
    assert one == pytest.approx(2.0 * two, rel=1e-12)
    assert one < 0.0


def test_uncertainty_is_larger_where_the_surface_stress_was_not_measured():
    platinum, nickel = particle_strain("Pt", 3.0), particle_strain("Ni", 3.0)
    assert platinum.is_measured
    assert not nickel.is_measured
    assert platinum.sigma / abs(platinum.strain) < 0.3 < nickel.sigma / abs(nickel.strain)


def test_pure_metals_have_no_mismatch_and_unchanged_bands():
    assert alloy_mismatch_strain("Pt") == {"Pt": 0.0}
    assert alloy_width_ratio("Pt") == {"Pt": 1.0}


@given(share=st.floats(0.05, 0.95))
def test_the_smaller_metal_is_stretched_and_the_larger_compressed(share):
    strain = alloy_mismatch_strain(f"Pt{share:.4f}Ni{1.0 - share:.4f}")
    assert strain["Ni"] > 0.0 > strain["Pt"]


def test_lattices_of_Pt3Ni_and_PdAu_are_the_measured_ones_within_one_percent():
    # Pt3Ni 0.3835 nm and PdAu 0.3985 nm, X-ray lattice constants, from memory; Vegard's law
    for material, lattice_nm in (("Pt3Ni", 0.3835), ("PdAu", 0.3985)):
        ours = metal_lattice(material).nearest_distance_nm * np.sqrt(2.0)
        assert ours == pytest.approx(lattice_nm, rel=0.01)


@pytest.mark.parametrize(
    ("metal", "nearest_nm"), [("Pt", 0.277), ("Au", 0.288), ("Fe", 0.248), ("W", 0.274)]
)
def test_nearest_distances_are_those_of_the_handbook(metal, nearest_nm):
    # Kittel, Introduction to Solid State Physics, table of atomic distances (from memory)
    assert metal_lattice(metal).nearest_distance_nm == pytest.approx(nearest_nm, abs=0.001)


@given(
    centre=st.floats(-5.0, 3.0),
    width=st.floats(1.0, 8.0),
    number=st.integers(3, 12),
    strain=st.floats(-0.05, 0.05),
)
def test_filling_of_a_rectangular_band_is_kept_by_the_shift(centre, width, number, strain):
    ratio = d_band_width_ratio(number, 9, strain)
    moved = float(shifted_d_band_centre_eV(centre, ratio))
    before = 0.5 - centre / width
    after = 0.5 - moved / (width * float(ratio))
    assert after == pytest.approx(before, abs=1e-9)


def test_second_moment_of_a_chain_gives_the_square_root_rule():
    # width measured by the second moment of an explicit tight-binding matrix: an end site of a
    # chain has one neighbour, an inner one two
    hopping = np.diag(np.ones(9), 1) + np.diag(np.ones(9), -1)
    moments = np.diag(hopping @ hopping)
    measured = np.sqrt(moments[0] / moments[4])
    assert float(d_band_width_ratio(1, 2)) == pytest.approx(measured)


@given(strain=st.floats(0.001, 0.05), number=st.integers(3, 8))
def test_stretching_and_missing_neighbours_raise_a_band_below_the_fermi_level(strain, number):
    assert shifted_d_band_centre_eV(-2.0, d_band_width_ratio(9, 9, strain)) > -2.0
    assert shifted_d_band_centre_eV(-2.0, d_band_width_ratio(number, 9)) > -2.0


def test_alloying_with_nickel_or_cobalt_widens_the_d_band_of_platinum():
    # nickel and cobalt compress the lattice of Pt and widen its band: Stamenkovic et al., Nat.
    # Mater. 6, 241 (2007) found lower centres on Pt3Ni and Pt3Co (from memory)
    assert alloy_width_ratio("Pt3Ni")["Pt"] > 1.0
    assert alloy_width_ratio("Pt3Co")["Pt"] > 1.0


def test_impossible_sizes_and_metals_without_data_are_refused():
    with pytest.raises(PhysicsRangeError, match="above zero"):
        size_strain(0.0, surface_stress_N_m=1.0, bulk_modulus_GPa=100.0)
    with pytest.raises(UnknownMaterialError, match="no elastic constants"):
        particle_strain("Bi", 3.0)
    with pytest.raises(UnknownMaterialError, match="no d band"):
        alloy_width_ratio("Zn")
    with pytest.raises(PhysicsRangeError, match="no d-band width"):
        d_band_width_ratio(0, 9)
