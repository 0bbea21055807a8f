"""Elemental descriptors and charge balance."""

import pytest
from hypothesis import given
from hypothesis import strategies as st

from features.charge import charge_balance, require_semiconductor
from features.elements import (
    DESCRIPTORS,
    element_table,
    filled_descriptors,
    oxidation_states,
    shannon_radius_nm,
)
from features.errors import FormulaError
from features.formula import parse_formula


def test_every_constituent_has_every_descriptor():
    table = element_table()
    assert list(table.columns) == list(DESCRIPTORS)
    assert not table.isna().any().any()
    assert {"FA", "MA", "H", "Pu"} <= set(table.index)


def test_textbook_values_are_reproduced():
    # Pauling scale, CRC Handbook of Chemistry and Physics (2016), section 9; from memory.
    table = element_table()
    assert table.loc["F", "electronegativity"] == pytest.approx(3.98)
    assert table.loc["Cs", "electronegativity"] == pytest.approx(0.79)
    # First ionisation energy of hydrogen: the Rydberg energy less the reduced-mass term.
    assert table.loc["H", "ionisation_eV"] == pytest.approx(13.605693 / (1 + 1 / 1836.15), abs=1e-3)


def test_figures_taken_from_neighbours_are_named():
    filled = filled_descriptors()
    assert set(filled) <= set(DESCRIPTORS)
    assert "Cd" not in {symbol for symbols in filled.values() for symbol in symbols}


def test_p_levels_deepen_from_tellurium_to_oxygen():
    levels = element_table().loc[["Te", "Se", "S", "O"], "p_level_eV"]
    assert levels.is_monotonic_decreasing


def test_changing_a_returned_table_does_not_change_the_next():
    changed = element_table()
    changed.loc["Cd", "mass_u"] = 0.0
    assert element_table().loc["Cd", "mass_u"] > 100


# Shannon, Acta Cryst. A 32, 751 (1976), coordination six; from memory.
@pytest.mark.parametrize(
    ("symbol", "state", "radius_nm"),
    [("Cd", 2, 0.095), ("Pb", 2, 0.119), ("Cs", 1, 0.167), ("Br", -1, 0.196), ("O", -2, 0.140)],
)
def test_shannon_radii_agree_with_the_published_table(symbol, state, radius_nm):
    assert shannon_radius_nm(symbol, state) == pytest.approx(radius_nm, abs=5e-4)


def test_organic_cations_are_monovalent():
    assert oxidation_states("FA") == oxidation_states("MA") == (1,)


def test_unknown_symbols_have_no_states():
    with pytest.raises(FormulaError, match="unknown element"):
        oxidation_states("Xx")


@pytest.mark.parametrize(
    ("formula", "states"),
    [
        ("Cu2ZnSnS4", {"Cu": 1, "Zn": 2, "Sn": 4, "S": -2}),
        ("CsPbBr3", {"Cs": 1, "Pb": 2, "Br": -1}),
        ("AgBiS2", {"Ag": 1, "Bi": 3, "S": -2}),
        ("In0.8Ga0.2P", {"In": 3, "Ga": 3, "P": -3}),
        ("Fe3O4", {"Fe": 8 / 3, "O": -2}),
        ("Si0.2Ge0.8", {"Si": 0, "Ge": 0}),
        ("Mg2Sn", {"Mg": 2, "Sn": -4}),
    ],
)
def test_usual_oxidation_states_are_found(formula, states):
    balance = charge_balance(parse_formula(formula))
    assert balance.balanced
    assert balance.states == pytest.approx(states)


@pytest.mark.parametrize("formula", ["CdSe2Cl3", "CsPbBr2", "Zn2Se", "CsPbBr5Cl2"])
def test_compositions_that_cannot_balance_say_so(formula):
    assert not charge_balance(parse_formula(formula)).balanced


@given(st.floats(0.01, 0.99).map(lambda x: round(x, 3)))
def test_isovalent_solid_solutions_stay_balanced(x):
    for formula in (f"CdSe{x:.3f}S{1 - x:.3f}", f"CsPb(Br{x:.3f}I{1 - x:.3f})3"):
        assert charge_balance(parse_formula(formula)).balanced


@pytest.mark.parametrize("formula", ["AuCu", "PtNi", "Fe", "Fe3Al", "Cu0.7Zn0.3"])
def test_metals_are_refused(formula):
    with pytest.raises(FormulaError, match="metals"):
        require_semiconductor(parse_formula(formula))


@pytest.mark.parametrize("formula", ["CdSe", "Mg2Sn", "Si", "FAPbI3", "Bi2Te3"])
def test_semiconductors_pass(formula):
    assert require_semiconductor(parse_formula(formula)) is None


def test_elements_beyond_the_tables_are_refused():
    with pytest.raises(FormulaError, match="plutonium"):
        charge_balance(parse_formula("AmO2"))
