"""Melting models: limits, shapes, published constants and orderings."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from features import melting
from features.errors import PhysicsRangeError

# constants of the kind that Buffat and Borel, Phys. Rev. A 13, 2287 (1976) used, from memory
BULK = {"bulk_melting_K": 1337.33, "heat_of_fusion_J_kg": 63716.0, "solid_density_kg_m3": 18400.0}
LIQUID = {"liquid_density_kg_m3": 17310.0, "liquid_surface_energy_J_m2": 1.135}
INTERFACE = {"interface_energy_J_m2": 0.132}


def pawlow(d, **change):
    return melting.pawlow_melting_K(
        d, **{**BULK, **LIQUID, "solid_surface_energy_J_m2": 1.38, **change}
    )


def gibbs_thomson(d, **change):
    return melting.gibbs_thomson_melting_K(d, **{**BULK, **INTERFACE, **change})


def liquid_shell(d, **change):
    return melting.liquid_shell_melting_K(
        d, **{**BULK, **LIQUID, **INTERFACE, "shell_nm": 0.62, **change}
    )


def liquid_drop(d, **change):
    inputs = {"bulk_melting_K": 1337.33, "atom_volume_diameter_nm": 0.3187}
    return melting.liquid_drop_melting_K(
        d, **{**inputs, "liquid_surface_energy_J_m2": 1.135, **change}
    )


def bond_energy(d, **change):
    return 1337.33 * melting.bond_energy_ratio(d, 0.288, **change)


MODELS = [pawlow, gibbs_thomson, liquid_shell, bond_energy, liquid_drop]
sizes = st.floats(3.0, 200.0)


@pytest.mark.parametrize("model", MODELS)
def test_large_particles_melt_at_the_bulk_temperature(model):
    assert model(1e7) == pytest.approx(1337.33, rel=1e-6)


@pytest.mark.parametrize("model", MODELS)
@given(small=sizes, factor=st.floats(1.01, 10.0))
def test_smaller_gold_melts_lower(model, small, factor):
    assert model(small) < model(small * factor) < 1337.33


@pytest.mark.parametrize("model", MODELS)
def test_many_sizes_at_once_equal_one_at_a_time(model):
    many = np.array([3.0, 7.5, 40.0])
    assert model(many).tolist() == [float(model(d)) for d in many]


@pytest.mark.parametrize("model", [pawlow, gibbs_thomson, liquid_shell])
@given(size=sizes)
def test_wire_is_depressed_half_as_much_as_a_sphere_of_the_same_radius(model, size):
    # Xue, Zhao and Lai, Physica B 408, 134 (2013), abstract
    sphere, wire = (1337.33 - model(size, shape=shape) for shape in ("sphere", "wire"))
    assert wire == pytest.approx(sphere / 2.0)


@pytest.mark.parametrize("model", [bond_energy, liquid_drop])
@given(size=sizes)
def test_broken_bonds_scale_with_surface_over_volume(model, size):
    # area over volume: sphere 6/D, wire 4/D, film 2/h (geometry)
    sphere, wire, film = (1337.33 - model(size, shape=s) for s in ("sphere", "wire", "film"))
    assert wire / sphere == pytest.approx(4 / 6)
    assert film / sphere == pytest.approx(2 / 6)


@given(size=sizes)
def test_vanishing_shell_of_a_melt_as_dense_as_the_solid_is_the_gibbs_thomson_relation(size):
    shell = liquid_shell(size, shell_nm=1e-9, liquid_density_kg_m3=18400.0)
    assert shell == pytest.approx(float(gibbs_thomson(size)), rel=1e-6)


def test_shell_model_gives_no_answer_when_the_core_is_gone():
    assert np.isnan(liquid_shell(2.4))


def test_0K_surface_energies_would_nearly_double_the_depression_of_gold():
    # solid at 0 K 1.506 J/m2 (Tyson and Miller 1977, from memory), at melting 1.18 times the melt
    at_melting = 1337.33 - pawlow(5.0, solid_surface_energy_J_m2=1.18 * 1.135)
    at_zero = 1337.33 - pawlow(5.0, solid_surface_energy_J_m2=1.506)
    assert 1.5 < at_zero / at_melting < 3.0


@given(size=sizes)
def test_nucleation_band_is_in_order_and_one_end_is_the_gibbs_thomson_value(size):
    low, high = melting.nucleation_growth_band_K(
        size, **BULK, **LIQUID, **INTERFACE, solid_surface_energy_J_m2=1.38
    )
    assert low <= high
    ends = [float(low), float(high)]
    assert any(end == pytest.approx(float(gibbs_thomson(size))) for end in ends)


@pytest.mark.parametrize(
    ("metal", "heat", "volume_diameter", "published"),
    [
        # Turnbull, J. Appl. Phys. 21, 1022 (1950), J/m2, from memory; the rule holds to about 15 %
        ("Au", 12550.0, 0.3187, 0.132),
        ("Ag", 11300.0, 0.3194, 0.126),
        ("Cu", 13260.0, 0.2823, 0.177),
        ("Ni", 17480.0, 0.2755, 0.255),
        ("Pb", 4774.0, 0.3874, 0.0333),
    ],
)
def test_interface_energies_follow_turnbulls_rule(metal, heat, volume_diameter, published):
    estimate = melting.turnbull_interface_energy_J_m2(heat, volume_diameter)
    assert estimate == pytest.approx(published, rel=0.15)


@pytest.mark.parametrize("bad", [0.0, -1.0, np.nan, np.inf])
@pytest.mark.parametrize("model", MODELS)
def test_impossible_diameter_is_refused(model, bad):
    with pytest.raises(PhysicsRangeError, match="diameter_nm"):
        model(bad)


@pytest.mark.parametrize("model", MODELS)
def test_unknown_shape_is_refused_with_the_known_ones(model):
    with pytest.raises(PhysicsRangeError, match="sphere, wire, film"):
        model(5.0, shape="cube")
