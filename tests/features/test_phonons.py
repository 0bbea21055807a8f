"""Boundary-limited thermal conductivity: limits, shapes and silicon nanowires."""

from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from hypothesis import given
from hypothesis import strategies as st

from features.errors import PhysicsRangeError, UnknownMaterialError
from features.phonons import (
    boundary_limited_conductivity_W_mK,
    boundary_path_nm,
    conductivity_estimate,
)
from features.tables import read_table

# Li et al., Appl. Phys. Lett. 83, 2934 (2003); the conductivities are from memory
WIRES = pd.read_csv(Path(__file__).parents[1] / "reference" / "phonon_si_nanowires.csv")
SHAPES = ["sphere", "wire", "film_across", "film_along"]
MATERIALS = read_table("phonons")["material"].tolist()
sizes = st.floats(1.0, 1e5)


def test_silicon_wires_follow_the_measured_order_and_fall_far_below_bulk():
    model = conductivity_estimate("Si", WIRES["diameter_nm"]).conductivity_W_mK
    assert np.all(np.argsort(model) == np.argsort(WIRES["conductivity_W_mK"]))
    assert np.all(model < 148.0 / 3.0)


def test_silicon_wires_lie_within_the_stated_uncertainty():
    estimate = conductivity_estimate("Si", WIRES["diameter_nm"])
    off = np.abs(estimate.conductivity_W_mK - WIRES["conductivity_W_mK"].to_numpy())
    assert np.all(off < 2 * estimate.sigma_W_mK)


def test_grey_mean_free_path_understates_the_effect_at_every_measured_wire():
    row = read_table("phonons").set_index("material").loc["Si"]
    measured = WIRES["conductivity_W_mK"].to_numpy()
    grey, half_heat = (
        boundary_limited_conductivity_W_mK(
            WIRES["diameter_nm"], bulk_conductivity_W_mK=148.0, bulk_path_nm=row[name]
        )
        for name in ("grey_path_nm", "effective_path_nm")
    )
    assert np.all(np.abs(grey - measured) > np.abs(half_heat - measured))
    assert np.all(grey > measured)


@pytest.mark.parametrize("shape", SHAPES)
@pytest.mark.parametrize("material", MATERIALS)
def test_large_sizes_conduct_as_the_bulk(material, shape):
    bulk = read_table("phonons").set_index("material").loc[material, "bulk_conductivity_W_mK"]
    assert conductivity_estimate(material, 1e8, shape=shape).conductivity_W_mK == pytest.approx(
        bulk, rel=1e-4
    )


@given(st.sampled_from(MATERIALS), st.sampled_from(SHAPES), sizes, st.floats(1.05, 10.0))
def test_smaller_structures_conduct_less(material, shape, size_nm, factor):
    small, large = conductivity_estimate(
        material, [size_nm, size_nm * factor], shape=shape
    ).conductivity_W_mK
    assert small < large


@given(sizes, st.floats(0.0, 0.98))
def test_mirror_like_boundaries_lengthen_the_path(size_nm, specularity):
    diffuse, rough, smooth = (
        float(boundary_path_nm(size_nm, specularity=p))
        for p in (0.0, specularity, specularity + 0.01)
    )
    assert diffuse == size_nm
    assert diffuse <= rough < smooth


@given(sizes)
def test_small_wires_conduct_in_proportion_to_their_diameter(size_nm):
    # Casimir's limit: the boundary's path alone is left
    value = boundary_limited_conductivity_W_mK(
        size_nm, bulk_conductivity_W_mK=100.0, bulk_path_nm=1e12
    )
    assert value == pytest.approx(100.0 * size_nm / 1e12, rel=1e-6)


def test_film_along_agrees_with_the_exact_fuchs_sondheimer_integral_when_thick():
    # 1 - (3/(2x)) int_0^1 (u - u^3)(1 - exp(-x/u)) du, x = thickness over path, diffuse surfaces
    u = np.linspace(1e-6, 1.0, 20001)
    for x in (5.0, 20.0, 100.0):
        exact = 1 - 1.5 / x * np.trapezoid((u - u**3) * (1 - np.exp(-x / u)), u)
        model = boundary_limited_conductivity_W_mK(
            x, bulk_conductivity_W_mK=1.0, bulk_path_nm=1.0, shape="film_along"
        )
        # leading order in 1/x; the next is (3/(8x))^2
        assert model == pytest.approx(exact, abs=(0.375 / x) ** 2 + 1e-5)


def test_structures_below_the_validity_are_marked():
    assert conductivity_estimate("Si", [3.0, 50.0]).is_valid.tolist() == [False, True]


def test_unknown_material_is_refused_with_the_known_ones():
    with pytest.raises(UnknownMaterialError, match="Bi2Te3"):
        conductivity_estimate("Xe", 10.0)


@pytest.mark.parametrize("specularity", [-0.1, 1.0, np.nan])
def test_impossible_specularity_is_refused(specularity):
    with pytest.raises(PhysicsRangeError, match="specularity"):
        boundary_path_nm(10.0, specularity=specularity)
