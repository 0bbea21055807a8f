"""Cautions, hazard classes and RoHS mass shares."""

import subprocess
import sys
from datetime import date

import pytest
from hypothesis import given
from hypothesis import strategies as st

from features.errors import FormulaError, PhysicsRangeError
from features.hazards import (
    DEFERRAL,
    caution_text,
    cautions_for,
    hazard_class,
    rohs_exemptions,
    rohs_mass_fractions,
)
from features.mass_shares import core_shell_composition, mass_percent
from features.tables import read_table

COVERED = ["Cd", "Pb", "Hg", "As", "Tl", "Se", "Te", "Ni", "Co", "Cr", "In", "Ag", "Cu"]
compositions = st.dictionaries(
    st.sampled_from([*COVERED, "Zn", "S", "P", "O", "Si", "Au", "FA", "Br", "Al", "Ir"]),
    st.floats(0.01, 10.0),
    min_size=1,
    max_size=4,
)


def subjects(**composition):
    return {caution.subject for caution in cautions_for(composition)}


@pytest.mark.parametrize("element", COVERED)
def test_every_element_of_concern_has_its_own_caution_with_codes(element):
    mine = [caution for caution in cautions_for({element: 1}) if caution.subject == element]
    assert len(mine) == 1
    assert mine[0].h_codes


@given(compositions)
def test_every_cell_defers_and_never_calls_anything_safe(composition):
    text = caution_text(composition)
    assert text.endswith(DEFERRAL)
    assert "safe" not in text.replace("safety data sheet", "").lower()


@given(compositions)
def test_nano_powder_caution_always_stands(composition):
    assert "nano-powder" in {caution.subject for caution in cautions_for(composition)}


@given(compositions, st.floats(0.1, 100.0))
def test_cautions_do_not_depend_on_the_unit_of_amount(composition, factor):
    scaled = {symbol: factor * amount for symbol, amount in composition.items()}
    assert cautions_for(scaled) == cautions_for(composition)


@given(compositions)
def test_cautions_come_gravest_first_and_set_the_class(composition):
    grades = [caution.hazard_class for caution in cautions_for(composition)]
    assert grades == sorted(grades, reverse=True)
    assert hazard_class(composition) == grades[0]


@given(compositions, st.sampled_from(["Cd", "Hg", "Tl"]))
def test_adding_a_toxic_element_never_lowers_the_class(composition, toxic):
    assert hazard_class({**composition, toxic: 1.0}) >= hazard_class(composition)


def test_gases_that_acid_or_water_releases_are_named_by_their_anion():
    assert "phosphine" in caution_text({"In": 1, "P": 1})
    assert "H2S" in caution_text({"Zn": 1, "S": 1})
    assert "H2Se" in caution_text({"Zn": 1, "Se": 1})
    assert "H2Te" in caution_text({"Zn": 1, "Te": 1})
    assert "arsine" in caution_text({"In": 1, "As": 1})


def test_compound_cautions_need_all_their_elements():
    assert "indium phosphide" in subjects(In=1, P=1)
    assert "indium phosphide" not in subjects(Cu=1, In=1, S=2)
    assert "titanium dioxide" in subjects(Ti=1, O=2)
    assert "titanium dioxide" not in subjects(Ti=1)


def test_chromium_counts_as_hexavalent_only_beside_oxygen():
    assert hazard_class({"Cr": 1, "O": 3}) == 4
    assert hazard_class({"Cr": 1}) < 4


def test_an_oxide_coating_does_not_cancel_the_phosphide_caution():
    assert "phosphide" in subjects(In=1, P=1, Si=2, O=4)


def test_pyrophoric_caution_is_for_the_metal_and_not_for_its_sulfide():
    assert "Zn metal" in subjects(Zn=1)
    assert "Zn metal" not in subjects(Zn=1, S=1)
    assert "Al metal" in subjects(Al=1)
    assert "Al metal" not in subjects(Al=2, O=3)


def test_organic_cations_are_treated_as_amines_and_lead_is_still_named():
    names = subjects(FA=1, Pb=1, I=3)
    assert {"organic amine", "Pb", "halide"} <= names


def test_element_without_an_entry_is_said_to_be_without_one():
    text = caution_text({"Lu": 1})
    assert "not evidence of harmlessness" in text


def test_recalled_codes_are_marked_and_read_ones_are_not():
    cd, pb = cautions_for({"Cd": 1})[0], cautions_for({"Pb": 1})[0]
    assert cd.from_memory
    assert not pb.from_memory
    assert "recalled" in caution_text({"Cd": 1}).split(";")[0]
    assert "recalled" not in caution_text({"Pb": 1}).split(";")[0]


def test_every_caution_carries_a_dated_status_and_a_known_source():
    known = set(read_table("sources").source)
    for element in COVERED:
        for caution in cautions_for({element: 1}):
            written = date.fromisoformat(caution.regulation_status_with_date[-11:-1])
            assert date(2006, 1, 1) <= written <= date(2027, 1, 1)
            assert caution.source in known


def test_lead_share_of_caesium_lead_bromide_matches_hand_arithmetic():
    # IUPAC abridged atomic weights: Cs 132.905, Pb 207.2, Br 79.904
    by_hand = 100 * 207.2 / (132.905 + 207.2 + 3 * 79.904)
    assert mass_percent({"Cs": 1, "Pb": 1, "Br": 3})["Pb"] == pytest.approx(by_hand, rel=1e-4)


def test_rohs_limits_are_those_of_the_directive():
    # Directive 2011/65/EU, Annex II: Cd 0.01 %, Pb, Hg and Cr(VI) 0.1 % by mass
    shares = rohs_mass_fractions({"Zn": 1, "S": 1})
    limits = {element: share.limit_mass_percent for element, share in shares.items()}
    assert limits == {"Cd": 0.01, "Pb": 0.1, "Hg": 0.1, "Cr": 0.1}
    assert not any(share.exceeds for share in shares.values())


@given(st.floats(1e-7, 1.0))
def test_share_exceeds_exactly_when_above_the_limit(amount):
    share = rohs_mass_fractions({"Zn": 1.0, "S": 1.0, "Cd": amount})["Cd"]
    assert share.exceeds == (share.mass_percent > 0.01)


def test_cadmium_exemptions_carry_their_last_day():
    # Delegated Directive (EU) 2024/1416: 39(a) ended 2025-11-21, 39(b) runs to 2027-12-31
    text = " ".join(rohs_exemptions("Cd"))
    assert "2025-11-21" in text
    assert "2027-12-31" in text
    assert rohs_exemptions("Zn") == ()


@given(compositions)
def test_mass_shares_sum_to_hundred(composition):
    assert sum(mass_percent(composition).values()) == pytest.approx(100.0)


def test_formamidinium_and_methylammonium_weigh_what_their_atoms_weigh():
    # HC(NH2)2+ is CH5N2, CH3NH3+ is CH6N
    atoms = {"C": 1, "H": 5, "N": 2, "Pb": 1, "I": 3}
    whole = mass_percent({"FA": 1, "Pb": 1, "I": 3})["Pb"]
    assert whole == pytest.approx(mass_percent(atoms)["Pb"])


CORE, SHELL = {"Cd": 1, "Se": 1}, {"Zn": 1, "S": 1}
DENSITIES = {"core_density_g_cm3": 5.81, "shell_density_g_cm3": 4.09}


@given(st.floats(1.0, 20.0), st.floats(0.0, 10.0))
def test_thicker_shell_dilutes_the_core(diameter_nm, thickness_nm):
    bare, coated, thicker = (
        mass_percent(
            core_shell_composition(
                CORE, SHELL, core_diameter_nm=diameter_nm, shell_thickness_nm=t, **DENSITIES
            )
        )["Cd"]
        for t in (0.0, thickness_nm, thickness_nm + 0.5)
    )
    assert bare == pytest.approx(mass_percent(CORE)["Cd"])
    assert thicker < coated <= bare * (1 + 1e-9)


@pytest.mark.parametrize("bad", [{"core_diameter_nm": 0.0}, {"shell_thickness_nm": -1.0}])
def test_impossible_core_or_shell_is_refused(bad):
    sizes = {"core_diameter_nm": 4.0, "shell_thickness_nm": 1.0} | bad
    with pytest.raises(PhysicsRangeError, match="shell"):
        core_shell_composition(CORE, SHELL, **sizes, **DENSITIES)


@pytest.mark.parametrize("bad", [{}, {"cd": 1}, {"Cd": -1}, {"Cd": float("nan")}, {"Cd": 0}])
def test_compositions_that_are_none_are_refused(bad):
    with pytest.raises(FormulaError):
        cautions_for(bad)


def test_symbol_that_is_no_element_has_no_mass():
    with pytest.raises(FormulaError, match="no such element"):
        mass_percent({"Qq": 1})


def test_importing_the_module_does_not_import_pymatgen():
    code = "import sys, features.hazards; print('pymatgen' in sys.modules)"
    answer = subprocess.run(
        [sys.executable, "-c", code], capture_output=True, text=True, check=True
    )
    assert answer.stdout.strip() == "False"
