"""Free energies, linear relations and relative volcanoes, against published figures."""

from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.constants import Avogadro, elementary_charge

from features.adsorption import (
    common_references,
    free_energy_eV,
    reaction,
    reaction_names,
    relative_volcano_interval,
    relative_volcano_log10,
)
from features.adsorption_scaling import coordination_slope, scaled_energy_eV
from features.errors import SpecificationError, UnknownMaterialError
from features.tables import read_table

REFERENCE = Path(__file__).parent.parent / "reference"
NAMES = ["hydrogen evolution", "oxygen reduction", "ammonia synthesis", "CO oxidation"]
energies = st.floats(-4.0, 4.0)


@pytest.mark.parametrize(("metal", "adsorbate"), [("Pt", "OH"), ("Pt", "OOH")])
def test_slope_with_generalised_coordination_is_the_least_squares_line_of_the_points(
    metal, adsorbate
):
    points = pd.read_csv(REFERENCE / "adsorption_generalised_coordination.csv")
    points = points[(points["metal"] == metal) & (points["adsorbate"] == adsorbate)]
    slope, _ = np.polyfit(points["generalised_coordination"], points["energy_vs_radical_eV"], 1)
    # 1e-3: the table keeps four digits
    assert coordination_slope(metal, adsorbate)[0] == pytest.approx(slope, abs=1e-3)


def test_slope_of_hydroxyl_on_platinum_is_the_published_one():
    # Calle-Vallejo et al., Science 350, 185 (2015): 0.19 eV per unit; 0.005 is its rounding
    assert coordination_slope("Pt", "OH")[0] == pytest.approx(0.19, abs=0.005)


def test_metal_without_published_slope_has_none():
    assert coordination_slope("W", "OH") is None


def test_oxygen_reduction_peaks_near_generalised_coordination_8_3_on_platinum():
    # Calle-Vallejo et al., Science 350, 185 (2015): optimum 8.3; terrace 7.5
    volcano = reaction("oxygen reduction")
    slope = coordination_slope("Pt", "OH")[0]
    optimum = 7.5 + volcano.optimum_eV / slope
    assert abs(optimum - 8.3) < volcano.optimum_sd_eV / slope


def test_hydrogen_correction_is_the_published_one():
    # Norskov et al., J. Electrochem. Soc. 152, J23 (2005): 0.24 eV (from memory)
    assert float(free_energy_eV(0.0, "H")) == pytest.approx(0.24)


@pytest.mark.parametrize("adsorbate", ["O", "OH", "OOH"])
def test_correction_is_about_the_sum_of_its_tabulated_parts(adsorbate):
    row = read_table("free_energy_corrections").set_index("adsorbate").loc[adsorbate]
    parts = row["zero_point_eV"] + row["heat_capacity_eV"] - row["entropy_term_eV"]
    # the rounded correction also holds the part of the gas: two of its own deviations
    assert abs(parts - row["correction_eV"]) <= 2.0 * row["correction_sd_eV"]


def test_every_species_of_a_free_energy_volcano_has_a_correction():
    for name in reaction_names():
        volcano = reaction(name)
        if volcano.descriptor == "free energy":
            assert set(volcano.adsorbates) <= set(common_references())


def test_species_without_correction_is_named():
    with pytest.raises(UnknownMaterialError, match="adsorbate 'Xx'"):
        free_energy_eV(0.0, "Xx")


def test_unknown_reaction_lists_the_known_ones():
    with pytest.raises(SpecificationError, match=r"hydrogen evolution.*'rusting'"):
        reaction("rusting")


def test_the_five_reactions_are_tabulated_and_found_in_any_case():
    assert {*NAMES, "methanation"} <= set(reaction_names())
    assert reaction(" HYDROGEN Evolution ") == reaction("hydrogen evolution")


@pytest.mark.parametrize("name", NAMES)
@given(x=energies)
def test_relative_volcano_is_highest_at_its_optimum(name, x):
    volcano = reaction(name)
    top = float(relative_volcano_log10(volcano.optimum_eV, volcano))
    assert top == 0.0
    assert float(relative_volcano_log10(x, volcano)) <= top


@pytest.mark.parametrize("name", NAMES)
@given(x=energies, step=st.floats(0.001, 2.0))
def test_relative_volcano_falls_on_either_leg(name, x, step):
    volcano = reaction(name)
    outward = np.sign(x - volcano.optimum_eV) or 1.0
    near, far = relative_volcano_log10([x, x + outward * step], volcano)
    assert far < near


@given(x=energies, kelvin=st.floats(200.0, 900.0))
def test_warmer_volcano_is_flatter(x, kelvin):
    volcano = reaction("hydrogen evolution")
    cold = float(relative_volcano_log10(x, volcano, kelvin))
    assert float(relative_volcano_log10(x, volcano, 2.0 * kelvin)) == pytest.approx(cold / 2.0)


@given(low=energies, width=st.floats(0.0, 3.0), share=st.floats(0.0, 1.0))
def test_interval_of_the_volcano_holds_every_point_of_the_descriptors_interval(low, width, share):
    volcano = reaction("ammonia synthesis")
    worst, best = relative_volcano_interval(low, low + width, volcano)
    inside = float(relative_volcano_log10(low + share * width, volcano))
    assert worst - 1e-9 <= inside <= best + 1e-9


def test_descriptor_of_carbon_monoxide_oxidation_adds_both_species_against_half_oxygen():
    # Falsig et al., Angew. Chem. 47, 4835 (2008): O near -1.2 eV against half O2 and CO near
    # -1.2 eV. Gaseous water: -241.826 kJ/mol at 298 K (CODATA, from memory), O against H2O - H2.
    water_eV = 241.826e3 / (Avogadro * elementary_charge)
    volcano = reaction("CO oxidation")
    at_top = volcano.descriptor_eV({"O": -1.2 + water_eV, "CO": -1.2})
    assert float(at_top) == pytest.approx(volcano.optimum_eV, abs=1e-3)


def test_descriptor_of_oxygen_reduction_is_zero_on_platinum_itself():
    volcano = reaction("oxygen reduction")
    assert float(volcano.descriptor_eV({"OH": 0.75}, {"OH": 0.75})) == 0.0


def test_missing_species_or_reference_is_refused():
    with pytest.raises(SpecificationError, match="energies of O, CO"):
        reaction("CO oxidation").descriptor_eV({"O": 0.0})
    with pytest.raises(SpecificationError, match="the same on Pt"):
        reaction("oxygen reduction").descriptor_eV({"OH": 0.0})


def test_hydroperoxyl_lies_3_2_eV_above_hydroxyl():
    # Man et al., ChemCatChem 3, 1159 (2011): 3.2 +- 0.2 eV (from memory)
    energy, sd = scaled_energy_eV(np.array([0.0, 1.0]), "OOH", "OH", kind="free-energy scaling")
    np.testing.assert_allclose(energy, [3.2, 4.2])
    assert sd == pytest.approx(0.2)


@pytest.mark.parametrize(
    ("adsorbate", "parent", "bonds", "full"),
    [("CH", "C", 3, 4), ("CH2", "C", 2, 4), ("OH", "O", 1, 2)],
)
def test_valence_rule_is_the_share_of_free_valences(adsorbate, parent, bonds, full):
    # Abild-Pedersen et al., Phys. Rev. Lett. 99, 016105 (2007)
    table = read_table("scaling_relations")
    row = table[(table["kind"] == "valence rule") & (table["adsorbate"] == adsorbate)].iloc[0]
    assert row["descriptor"] == parent
    assert row["slope"] == pytest.approx(bonds / full)


def test_unknown_linear_relation_is_refused():
    with pytest.raises(SpecificationError, match="Xx from O"):
        scaled_energy_eV(0.0, "Xx", "O")
