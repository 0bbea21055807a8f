"""Supply figures: lists, weights, bounds and gaps."""

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from features.errors import FormulaError
from features.mass_shares import mass_percent
from features.supply import element_supply, supply_figures, supply_text

ELEMENTS = sorted(element_supply())
compositions = st.dictionaries(
    st.sampled_from(ELEMENTS), st.floats(0.01, 10.0), min_size=1, max_size=4
)


@given(compositions)
def test_mean_price_class_never_exceeds_the_worst(composition):
    figures = supply_figures(composition)
    assert 1 <= figures.weighted_price_class <= figures.worst_price_class + 1e-9
    assert figures.worst_price_class <= 5


@given(compositions)
def test_scarcest_element_is_scarcer_than_the_mean(composition):
    figures = supply_figures(composition)
    assert figures.scarcest_element in composition
    assert figures.scarcest_crust_ppm <= figures.weighted_crust_ppm * (1 + 1e-9)


@given(compositions, st.sampled_from(["Pt", "Ir", "Pd"]))
def test_adding_a_platinum_group_metal_never_helps(composition, metal):
    before, after = supply_figures(composition), supply_figures({**composition, metal: 1.0})
    assert after.supply_class >= before.supply_class
    assert after.worst_price_class == 5
    assert after.scarcest_crust_ppm <= before.scarcest_crust_ppm


@given(compositions, st.floats(0.1, 100.0))
def test_figures_do_not_depend_on_the_unit_of_amount(composition, factor):
    scaled = {symbol: factor * amount for symbol, amount in composition.items()}
    one, other = supply_figures(composition), supply_figures(scaled)
    assert other.supply_class == one.supply_class
    assert other.weighted_crust_ppm == pytest.approx(one.weighted_crust_ppm)


def test_concentration_is_weighted_by_mass():
    # Gaultois et al., Chem. Mater. 25, 2911 (2013): index of a compound is the mass-weighted mean
    table, shares = element_supply(), mass_percent({"Bi": 2, "Te": 3})
    by_hand = sum(shares[s] / 100 * table[s]["hhi_production"] for s in shares)
    figures = supply_figures({"Bi": 2, "Te": 3})
    assert figures.weighted_hhi_production == pytest.approx(by_hand)


@pytest.mark.parametrize(
    ("element", "eu", "us"),
    [
        # Regulation (EU) 2024/1252; list of critical minerals of the United States, 2025
        ("Pt", True, True),
        ("Ga", True, True),
        ("In", False, True),
        ("Au", False, False),
        ("Fe", False, False),
    ],
)
def test_lists_are_those_published(element, eu, us):
    figures = supply_figures({element: 1})
    assert (bool(figures.eu_critical), bool(figures.us_critical)) == (eu, us)


def test_crustal_abundance_falls_from_iron_to_gold():
    # common knowledge of geochemistry: Fe > Cu > Ag > Au
    ppm = [element_supply()[s]["crust_ppm"] for s in ("Fe", "Cu", "Ag", "Au")]
    assert ppm == sorted(ppm, reverse=True)


def test_organic_cations_do_not_count_as_graphite():
    assert "C" not in supply_figures({"FA": 1, "Pb": 1, "I": 3}).eu_critical
    assert "C" in supply_figures({"C": 1}).eu_critical


def test_element_without_figures_is_named_and_counts_as_the_worst_class():
    figures = supply_figures({"Lu": 1})
    assert figures.without_figures == ("Lu",)
    assert math.isnan(figures.scarcest_crust_ppm)
    assert figures.supply_class == 4
    assert "no figures for Lu" in supply_text({"Lu": 1, "O": 1})


@given(compositions)
def test_every_cell_states_its_years(composition):
    assert "European list 2024, United States list 2025" in supply_text(composition)


def test_composition_that_is_none_is_refused():
    with pytest.raises(FormulaError):
        supply_figures({})
