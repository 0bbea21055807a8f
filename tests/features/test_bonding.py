"""Bond descriptors of compositions."""

import numpy as np
import pytest

from features.bonding import bond_descriptors, cation_shell
from features.elements import element_table
from features.errors import FormulaError


@pytest.mark.parametrize(
    ("symbol", "state", "shell"),
    [
        ("Zn", 2, "empty s"),
        ("In", 3, "empty s"),
        ("FA", 1, "empty s"),
        ("Ti", 4, "empty d"),
        ("Fe", 2, "open d"),
        ("Cu", 1, "filled d"),
        ("Cu", 2, "open d"),
        ("Pb", 2, "lone pair"),
        ("Bi", 3, "lone pair"),
        ("Pb", 4, "empty s"),
    ],
)
def test_frontier_shell_follows_the_electron_count(symbol, state, shell):
    assert cation_shell(symbol, state)[0] == shell


def test_order_and_scale_of_a_formula_do_not_matter():
    frame = bond_descriptors(["Cs2AgBiBr6", "Br12Bi2Ag2Cs4"])
    assert np.array_equal(frame.iloc[0], frame.iloc[1])


def test_shell_shares_of_the_cations_sum_to_one():
    frame = bond_descriptors(["CdSe", "CsPbBr3", "Cu2ZnSnS4", "TiO2", "Si", "Fe3O4"])
    assert frame.filter(regex="_(s|d|p|pair)_share$").sum(axis=1).to_numpy() == pytest.approx(1.0)


def test_ionic_character_is_zero_for_an_element_and_follows_pauling_for_a_salt():
    frame = bond_descriptors(["Si", "LiF"])
    chi = element_table()["electronegativity"]
    assert frame["ionic_character"][0] == 0.0
    assert frame["ionic_character"][1] == pytest.approx(
        1 - np.exp(-((chi["F"] - chi["Li"]) ** 2) / 4)
    )


def test_field_is_charge_over_the_sum_of_radii():
    row = bond_descriptors(["MgO"]).iloc[0]
    distance_nm = row["cation_radius_nm"] + row["anion_radius_nm"]
    # Half the lattice constant of rock-salt MgO, 0.4212 nm (handbook, from memory).
    assert distance_nm == pytest.approx(0.4212 / 2, rel=0.02)
    assert row["field_per_nm"] == pytest.approx(2.0 / distance_nm)
    assert row["madelung_per_nm"] == pytest.approx(4.0 / distance_nm)


def test_unreadable_formula_is_refused():
    with pytest.raises(FormulaError):
        bond_descriptors(["Xx"])
