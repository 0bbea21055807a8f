"""Superparamagnetic diameters against published ranges, and the Neel-Brown relation's limits."""

from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import constants

from features import magnetism as mag
from features.errors import PhysicsRangeError, UnknownMaterialError
from features.stability_magnetic import (
    magnetic_constants,
    superparamagnetic_chance,
    superparamagnetic_estimate,
)
from features.tables import read_table

PUBLISHED = pd.read_csv(
    Path(__file__).parents[1] / "reference" / "magnetic_superparamagnetic.csv"
).to_dict("records")
SPHERES = [row for row in PUBLISHED if row["convention"] in ("full", "barrier")]
MATERIALS = read_table("magnetic")[["material", "structure"]].to_numpy().tolist()
barriers = st.floats(1e3, 1e7)


@pytest.mark.parametrize("row", SPHERES, ids=lambda r: f"{r['material']} {r['convention']}")
def test_superparamagnetic_diameter_lies_in_the_published_range(row):
    estimate = superparamagnetic_estimate(row["material"], row["structure"])
    found = {"full": estimate.diameter_nm, "barrier": estimate.barrier_diameter_nm}
    assert row["low_nm"] <= found[row["convention"]] <= row["high_nm"]


def test_recording_grains_match_the_published_cube_edge():
    # Weller et al. (2000) give the edge of a cube with K V = 60 kT, 6.6 to 10 MJ/m3
    (row,) = [row for row in PUBLISHED if row["material"] == "FePt"]
    spheres = mag.superparamagnetic_diameter_nm(
        [1.0e7, 6.6e6], measurement_time_s=1e-9 * np.exp(60.0)
    )
    edges = spheres * np.cbrt(np.pi / 6.0)
    assert edges.tolist() == pytest.approx([row["low_nm"], row["high_nm"]], abs=0.15)


@pytest.mark.parametrize("diameter_nm", [5.0, 10.0, 15.0])
def test_iron_oxide_below_twenty_nanometres_is_superparamagnetic_at_room_temperature(diameter_nm):
    # common practice
    assert superparamagnetic_chance(diameter_nm, superparamagnetic_estimate("Fe3O4")) > 0.95


def test_zinc_ferrite_particles_measured_as_superparamagnetic_are_predicted_so():
    # 9.8 nm, superparamagnetic at 300 K: Yao et al., J. Phys. Chem. C 111, 12274 (2007)
    assert superparamagnetic_chance(9.8, superparamagnetic_estimate("ZnFe2O4")) > 0.95


def test_hundred_seconds_and_a_nanosecond_are_twenty_five_kT():
    barrier = 1e5
    d = mag.superparamagnetic_diameter_nm(barrier)
    energy = barrier * np.pi / 6 * (float(d) * 1e-9) ** 3
    assert energy / (constants.k * 300.0) == pytest.approx(25.3, abs=0.05)


def test_ten_years_need_forty_kT():
    d = mag.superparamagnetic_diameter_nm(1e5, measurement_time_s=10 * constants.year)
    energy = 1e5 * np.pi / 6 * (float(d) * 1e-9) ** 3
    assert energy / (constants.k * 300.0) == pytest.approx(40.0, abs=0.5)


@given(barriers, st.floats(10.0, 600.0))
def test_blocking_temperature_undoes_the_superparamagnetic_diameter(barrier, temperature_K):
    d = mag.superparamagnetic_diameter_nm(barrier, temperature_K=temperature_K)
    assert mag.blocking_temperature_K(d, barrier) == pytest.approx(temperature_K)


@given(barriers, st.floats(1.0, 50.0))
def test_relaxation_at_the_blocking_temperature_takes_the_measurement_time(barrier, diameter_nm):
    blocked = mag.blocking_temperature_K(diameter_nm, barrier, measurement_time_s=1e-7)
    log = mag.log10_relaxation_time(diameter_nm, barrier, temperature_K=blocked)
    assert log == pytest.approx(-7.0)


@given(barriers, st.floats(1.05, 10.0))
def test_stronger_anisotropy_shrinks_the_diameter_by_its_cube_root(barrier, factor):
    one, more = mag.superparamagnetic_diameter_nm([barrier, barrier * factor])
    assert one / more == pytest.approx(factor ** (1 / 3))


@given(st.floats(1e-6, 1e8), st.floats(1.05, 1e3))
def test_longer_measurements_block_at_lower_temperature(time_s, factor):
    short, long = mag.blocking_temperature_K(
        8.0, 1e5, measurement_time_s=np.array([time_s, time_s * factor])
    )
    assert long < short


@pytest.mark.parametrize(("K1", "expected"), [(48000.0, 12000.0), (-12000.0, 1000.0)])
def test_cubic_barriers_are_a_quarter_or_a_twelfth(K1, expected):
    # minima along <100> for K1 > 0 and <111> for K1 < 0; saddle energies of the cubic form
    def energy(direction):
        a, b, c = np.square(np.array(direction) / np.linalg.norm(direction))
        return K1 * (a * b + b * c + c * a)

    easy = (1, 0, 0) if K1 > 0 else (1, 1, 1)
    barrier = energy((1, 1, 0)) - energy(easy)
    assert mag.barrier_density_J_m3(K1, anisotropy="cubic", convention="barrier") == pytest.approx(
        barrier
    )
    assert barrier == pytest.approx(expected)


@given(st.floats(1e3, 1e7), st.sampled_from([-1.0, 1.0]))
def test_conventions_agree_for_uniaxial_crystals(size, sign):
    full, barrier = (
        mag.barrier_density_J_m3(sign * size, convention=name) for name in ("full", "barrier")
    )
    assert full == barrier == size


@pytest.mark.parametrize(("material", "structure"), MATERIALS)
def test_chance_falls_from_one_to_zero_with_size(material, structure):
    estimate = superparamagnetic_estimate(material, structure)
    chances = superparamagnetic_chance(np.geomspace(0.5, 500.0, 60), estimate)
    assert np.all(np.diff(chances) <= 0.0)
    assert chances[0] > 0.999
    assert chances[-1] < 0.01


@pytest.mark.parametrize("material", ["Fe", "Fe3O4", "FePt"])
def test_chance_has_no_step_at_its_centre(material):
    estimate = superparamagnetic_estimate(material)
    below, above = superparamagnetic_chance(
        estimate.diameter_nm * np.array([1 - 1e-9, 1 + 1e-9]), estimate
    )
    assert below == pytest.approx(above, abs=1e-6)


def test_surface_term_matters_only_for_small_particles():
    small, large = mag.effective_anisotropy_J_m3(1.35e4, 1e-5, [3.0, 3e6])
    assert small > 2 * large
    assert large == pytest.approx(1.35e4, rel=1e-3)


@pytest.mark.parametrize(
    ("material", "structure", "published_nm"),
    [
        ("Co", "hcp", 69.0),
        ("Nd2Fe14B", "tetragonal", 220.0),
        ("CoPt", "L1_0", 610.0),
    ],
)
def test_single_domain_diameter_is_of_the_published_size(material, structure, published_nm):
    # Leslie-Pelecky and Rieke (1996), Weller et al. (2000), from memory; estimates differ by 2
    table = read_table("magnetic").set_index(["material", "structure"])
    row = table.loc[(material, structure)]
    d = mag.single_domain_diameter_nm(
        row["exchange_stiffness_J_m"], row["K1_J_m3"], row["saturation_magnetisation_A_m"]
    )
    assert 0.5 < float(d) / published_nm < 2.0


def test_two_structures_of_cobalt_are_told_apart():
    assert magnetic_constants("Co", "hcp") != magnetic_constants("Co", "fcc")


def test_unknown_material_is_refused_with_the_known_ones():
    with pytest.raises(UnknownMaterialError, match="Fe3O4"):
        magnetic_constants("Au")


def test_no_answer_above_the_curie_temperature():
    with pytest.raises(PhysicsRangeError, match="628"):
        superparamagnetic_estimate("Ni", temperature_K=700.0)


@pytest.mark.parametrize("time_s", [0.0, 1e-10])
def test_measurement_shorter_than_an_attempt_is_refused(time_s):
    with pytest.raises(PhysicsRangeError, match="measurement"):
        mag.superparamagnetic_diameter_nm(1e5, measurement_time_s=time_s)
