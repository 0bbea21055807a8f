"""Descriptors of metal surfaces and the reading of binary alloys."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from features.adsorption_descriptors import (
    METAL_DESCRIPTORS,
    alloy_parts,
    metal_descriptors,
    site_d_band_centre_eV,
    standardised_descriptors,
)
from features.errors import FormulaError, UnknownMaterialError

METALS = list(metal_descriptors().index)


def test_every_metal_has_every_descriptor():
    table = metal_descriptors()
    assert tuple(table.columns) == METAL_DESCRIPTORS
    assert np.isfinite(table.to_numpy()).all()


def test_standardised_descriptors_have_zero_mean_and_unit_deviation():
    table = standardised_descriptors()
    np.testing.assert_allclose(table.mean(), 0.0, atol=1e-12)
    np.testing.assert_allclose(table.std(ddof=0), 1.0, atol=1e-12)


def test_d_band_sinks_from_left_to_right_of_the_second_row():
    # Hammer and Norskov, Adv. Catal. 45, 71 (2000): Zr, Nb, Mo, Ru, Rh, Pd, Ag
    centres = metal_descriptors()["d_band_centre_eV"]
    row = centres[["Zr", "Nb", "Mo", "Ru", "Rh", "Pd", "Ag"]].to_numpy()
    assert np.all(np.diff(row[:5]) < 0.0)
    assert row[-1] == row.min()


def test_changing_the_returned_table_changes_nothing_else():
    mine = metal_descriptors()
    mine.loc["Pt", "group"] = -1.0
    assert metal_descriptors().loc["Pt", "group"] == 10.0


@given(
    first=st.sampled_from(METALS),
    second=st.sampled_from(METALS),
    n=st.integers(1, 9),
    m=st.integers(1, 9),
)
def test_order_of_the_elements_does_not_matter(first, second, n, m):
    assert alloy_parts(f"{first}{n}{second}{m}") == alloy_parts(f"{second}{m}{first}{n}")


@given(first=st.sampled_from(METALS), second=st.sampled_from(METALS), n=st.integers(1, 9))
def test_share_is_that_of_the_more_abundant_metal(first, second, n):
    _, _, share = alloy_parts(f"{first}{n}{second}1")
    assert share == (1.0 if first == second else pytest.approx(n / (n + 1)))


def test_non_metal_and_third_element_are_refused_by_name():
    with pytest.raises(UnknownMaterialError, match="found Cl"):
        alloy_parts("PtCl")
    with pytest.raises(FormulaError, match="too many elements"):
        alloy_parts("PtNiCo")


@given(centre=st.floats(-8.0, -0.1), coordination=st.floats(1.0, 11.9))
def test_band_of_an_occupied_shell_rises_as_neighbours_are_lost(centre, coordination):
    low, high = site_d_band_centre_eV(centre, np.array([coordination, coordination + 0.1]))
    assert low > high
