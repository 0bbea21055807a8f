"""Solid solutions: end members, bowing, published gaps, limits, an independent library."""

import csv
import math
from pathlib import Path

import openbandparams
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from features.alloys import alloy_constants, alloy_gap, interpolate_alloy
from features.band_edges import bowing, lattice_in_phase_nm, member_edges, varshni_gap
from features.errors import UnknownMaterialError
from features.formula import parse_formula
from features.semiconductors import bulk_constants
from features.solid_solutions import is_solid_solution, solid_solution
from features.tables import read_table

REFERENCE = Path(__file__).parents[1] / "reference" / "alloy_gaps.csv"
PUBLISHED = list(csv.DictReader(REFERENCE.read_text(encoding="utf-8").splitlines()))
PAIRS = [
    ("CdSe{0}S{1}", "CdSe", "CdS"),
    ("In{0}Ga{1}P", "InP", "GaP"),
    ("CsPb(Br{0}I{1})3", "CsPbBr3", "CsPbI3"),
    ("CuIn{0}Ga{1}Se2", "CuInSe2", "CuGaSe2"),
    ("Pb{0}Sn{1}Te", "PbTe", "SnTe"),
    ("Zn{0}Mg{1}Se", "ZnSe", "MgSe"),
    ("Si{0}Ge{1}", "Si", "Ge"),
]
shares = st.integers(2, 98).map(lambda n: n / 100)

# In the library's table of AlSb the Varshni coefficients of X and L stand exchanged against
# Vurgaftman 2001 (0.39 and 0.58 meV/K), which moves both gaps at 300 K by this much.
ALSB_X_SHIFT_EV = varshni_gap(0.0, 3.9e-4, 140.0, 300.0) - varshni_gap(0.0, 5.8e-4, 140.0, 300.0)


@pytest.mark.parametrize("row", PUBLISHED, ids=[row["material"] for row in PUBLISHED])
def test_published_alloy_gaps_are_met(row):
    alloy = interpolate_alloy(row["material"])
    assert alloy.structure == row["structure"]
    assert alloy.gap_eV.value == pytest.approx(float(row["gap_eV"]), abs=float(row["tolerance_eV"]))


@pytest.mark.parametrize("x", [0.2, 0.3, 0.5, 0.7, 0.9])
def test_mercury_cadmium_telluride_follows_the_published_formula_at_300_K(x):
    # Laurenti et al., J. Appl. Phys. 67, 6454 (1990), read in the abstract. The tolerance is the
    # difference of the end members on record from the formula's, -0.121 and 1.529 eV.
    thermal = (6.3 * (1 - x) - 3.25 * x - 5.92 * x * (1 - x)) * 1e-4 * 300.0**2
    formula = -0.303 * (1 - x) + 1.606 * x - 0.132 * x * (1 - x)
    formula += thermal / (11.0 * (1 - x) + 78.7 * x + 300.0)
    assert interpolate_alloy(f"Hg{1 - x:.1f}Cd{x}Te").gap_eV.value == pytest.approx(
        formula, abs=0.03
    )


def test_gaps_of_the_experimental_compilation_are_met_where_its_series_are_in_order():
    # The compilation takes no part in the interpolation. Series: GaAs-GaP, GaP-InP, GaAs-InAs,
    # AlP-GaP, CdS-CdSe, PbS-PbSe, PbSe-PbTe. 0.1 eV: its figures carry one to two digits.
    systems = ["As-Ga-In", "Ga-In-P", "Al-Ga-P", "Cd-S-Se", "Pb-S-Se", "Pb-Se-Te", "As-Ga-P"]
    table = read_table("bulk_gaps")
    table = table[table["remark"].isna() & table["chemical_system"].isin(systems)]
    found = {
        row.formula: interpolate_alloy(row.formula).gap_eV.value - row.gap_eV
        for row in table.itertuples()
        if is_solid_solution(parse_formula(row.formula))
    }
    assert len(found) > 35
    assert max(abs(error) for error in found.values()) < 0.1
    assert sum(abs(error) for error in found.values()) / len(found) < 0.04


def in_library(alloy):
    parts = {element: alloy.element_fraction(element) for element in alloy.elements}
    return "".join(f"{element}{share:.6f}" for element, share in parts.items() if share > 0.0)


def library_shift(alloy, valley):
    """Return what the exchanged coefficients of AlSb add to the library's gap."""
    share = alloy.element_fraction("Al") * alloy.element_fraction("Sb")
    return {"Gamma": 0.0, "X": 1.0, "L": -1.0}[valley] * share * ALSB_X_SHIFT_EV


# Left out: InN (1.94 eV in the library, 0.6 eV today), nitrides mixed with other anions (the
# library extends fits of dilute nitrides), and AlInP (bowings of Gamma and X stand one row too
# low in the library: -0.48 and 0.38 eV in Vurgaftman 2001).
TERNARIES = [
    ternary
    for ternary in openbandparams.iii_v_zinc_blende_ternaries
    if ternary.name == "AlGaN" or ("N" not in ternary.elements and ternary.name != "AlInP")
]


@pytest.mark.parametrize("ternary", TERNARIES, ids=[t.name for t in TERNARIES])
def test_valleys_of_ternaries_agree_with_an_independent_library_over_all_compositions(ternary):
    for step in range(21):
        alloy = ternary(x=step / 20)
        ours = interpolate_alloy(in_library(alloy), "zincblende").valleys_eV
        for valley in ("Gamma", "X", "L"):
            theirs = getattr(alloy, f"Eg_{valley}")(T=300) + library_shift(alloy, valley)
            # 0.03 eV is the agreement asked of the program.
            assert ours[valley] == pytest.approx(theirs, abs=0.03)


# Left out: what the ternaries leave out, and alloys of three anions, for which the library mixes up
# the bowings of its own ternaries (at no antimony InPAsSb does not become InPAs).
QUATERNARIES = ["GaInPAs", "GaInPSb", "GaInAsSb", "AlInAsSb", "AlGaPAs", "AlGaPSb", "AlGaAsSb"]


@pytest.mark.parametrize("name", QUATERNARIES)
def test_valleys_of_quaternaries_agree_with_an_independent_library(name):
    quaternary = getattr(openbandparams, name)
    # In quaternaries the library takes the Gamma bowing of Al-Ga pairs at zero aluminium.
    valleys = ("X", "L") if name.startswith("AlGa") else ("Gamma", "X", "L")
    for x in (0.1, 0.3, 0.5, 0.7, 0.9):
        for y in (0.1, 0.4, 0.6, 0.9):
            alloy = quaternary(x=x, y=y)
            ours = interpolate_alloy(in_library(alloy), "zincblende").valleys_eV
            for valley in valleys:
                theirs = getattr(alloy, f"Eg_{valley}")(T=300) + library_shift(alloy, valley)
                assert ours[valley] == pytest.approx(theirs, abs=0.03)


@pytest.mark.parametrize(("pattern", "first", "second"), PAIRS)
@given(share=shares)
@settings(max_examples=15)
def test_shares_are_those_of_the_formula_and_order_does_not_matter(pattern, first, second, share):
    text = pattern.format(f"{share:.2f}", f"{1 - share:.2f}")
    solution = solid_solution(parse_formula(text))
    assert solution.shares == pytest.approx({first: share, second: 1 - share}, abs=1e-5)
    assert is_solid_solution(parse_formula(text))


@pytest.mark.parametrize(("pattern", "first", "second"), PAIRS)
@given(share=shares)
@settings(max_examples=15)
def test_uncertainty_is_above_zero_between_and_zero_at_the_end_members(
    pattern, first, second, share
):
    between = interpolate_alloy(pattern.format(f"{share:.2f}", f"{1 - share:.2f}"))
    for name in ("gap_eV", "electron_mass_m0", "hole_mass_m0", "dielectric", "lattice_a_nm"):
        assert getattr(between, name).sd > 0.0
        assert getattr(interpolate_alloy(first), name).sd == 0.0
        assert getattr(interpolate_alloy(second), name).sd == 0.0
    assert between.gap_sd_eV > between.gap_eV.sd


@pytest.mark.parametrize(("pattern", "first", "second"), PAIRS)
def test_constants_run_into_those_of_the_end_members(pattern, first, second):
    for member, close in ((first, 0.9999), (second, 0.0001)):
        alloy = interpolate_alloy(pattern.format(f"{close:.4f}", f"{1 - close:.4f}"))
        alone = interpolate_alloy(member, alloy.structure)
        assert alloy.gap_eV.value == pytest.approx(alone.gap_eV.value, abs=2e-3)
        for name in ("electron_mass_m0", "hole_mass_m0", "dielectric", "lattice_a_nm"):
            assert getattr(alloy, name).value == pytest.approx(getattr(alone, name).value, rel=0.01)


@pytest.mark.parametrize("material", ["CdSe", "GaAs", "InP", "CsPbBr3", "CuInSe2", "PbS", "ZnO"])
def test_end_members_keep_their_constants_on_record(material):
    record = bulk_constants([material]).iloc[0]
    alloy = interpolate_alloy(material)
    assert alloy.gap_eV.value == pytest.approx(record["gap_eV"], abs=0.01)
    for name in ("electron_mass_m0", "hole_mass_m0", "dielectric", "lattice_a_nm"):
        assert getattr(alloy, name).value == pytest.approx(record[name], rel=1e-9)


@given(x=shares, y=shares)
@settings(max_examples=25)
def test_masses_dielectric_constants_and_lattices_stay_between_the_end_members(x, y):
    text = f"Ga{x:.2f}In{1 - x:.2f}As{y:.2f}P{1 - y:.2f}"
    alloy = interpolate_alloy(text)
    members = bulk_constants(list(alloy.members))
    for name in ("hole_mass_m0", "dielectric", "lattice_a_nm"):
        value = getattr(alloy, name).value
        assert members[name].min() <= value <= members[name].max()


def test_gap_crosses_from_direct_to_indirect_near_the_published_composition():
    # Gamma-X crossing of AlGaAs at 0.38 to 0.43 Al at 300 K (Vurgaftman 2001 and others).
    assert interpolate_alloy("Al0.36Ga0.64As").valley == "Gamma"
    assert interpolate_alloy("Al0.44Ga0.56As").valley != "Gamma"
    assert interpolate_alloy("Al0.60Ga0.40As").valley == "X"


def test_band_inversion_of_lead_tin_telluride_gives_a_negative_gap_on_the_tin_side():
    assert interpolate_alloy("Pb0.9Sn0.1Te").gap_eV.value > 0.0
    assert interpolate_alloy("Pb0.1Sn0.9Te").gap_eV.value < 0.0


def test_phases_are_kept_apart():
    with pytest.raises(UnknownMaterialError, match="phases do not mix"):
        interpolate_alloy("Pb0.5Cd0.5S")
    assert alloy_gap(parse_formula("Pb0.5Cd0.5S")) is None
    cubic = interpolate_alloy("CdSe0.9Te0.1", "zincblende").gap_eV.value
    hexagonal = interpolate_alloy("CdSe0.9Te0.1", "wurtzite").gap_eV.value
    assert 0.03 < hexagonal - cubic < 0.1


def test_a_gap_borrowed_from_the_other_tetrahedral_phase_is_noted_and_less_certain():
    borrowed = member_edges("ZnO", "zincblende")
    assert borrowed.note == "ZnO as wurtzite"
    assert borrowed.sd_eV > member_edges("ZnO", "wurtzite").sd_eV


def test_a_compound_without_end_members_on_record_is_refused():
    with pytest.raises(UnknownMaterialError, match="no record of AgBiSe2"):
        interpolate_alloy("AgBiSe2")
    with pytest.raises(UnknownMaterialError, match="charges that do not balance"):
        interpolate_alloy("CdSe2Cl3")


def test_bowing_of_an_unlisted_pair_is_estimated_with_a_large_uncertainty():
    listed = bowing("CdS", "CdTe", "Gamma", 0.5, "zincblende")
    estimated = bowing("MgS", "CdS", "Gamma", 0.5, "zincblende")
    assert "lattice mismatch" in estimated.rule
    assert estimated.sd_eV > listed.sd_eV
    assert bowing("CsSnI3", "CsPbI3", "Gamma", 0.5, "perovskite").bowing_eV == 0.0


def test_bowing_that_depends_on_composition_is_read_from_either_end():
    forward = bowing("AlAs", "GaAs", "Gamma", 0.3, "zincblende").bowing_eV
    backward = bowing("GaAs", "AlAs", "Gamma", 0.7, "zincblende").bowing_eV
    assert forward == pytest.approx(backward)
    assert forward == pytest.approx(-0.127 + 1.310 * 0.3)  # Vurgaftman 2001


def test_lattice_constants_of_the_two_tetrahedral_phases_differ_by_the_ideal_ratio():
    ratio = lattice_in_phase_nm("ZnS", "zincblende") / lattice_in_phase_nm("ZnS", "wurtzite")
    assert ratio == pytest.approx(math.sqrt(2.0))
    # Cubic CdSe: 0.608 nm (handbook, from memory).
    assert lattice_in_phase_nm("CdSe", "zincblende") == pytest.approx(0.608, abs=0.002)


def test_varshni_law_starts_at_the_gap_of_0_K():
    assert varshni_gap(1.519, 5.405e-4, 204.0, 0.0) == 1.519
    assert varshni_gap(2.384, 3.7e-4, 0.0, 300.0) == pytest.approx(2.384 - 0.111)


def test_table_of_constants_keeps_the_order_given():
    table = alloy_constants(["In0.5Ga0.5P", "CdSe0.5S0.5", "In0.5Ga0.5P"])
    assert table["material"].tolist() == ["In0.5Ga0.5P", "CdSe0.5S0.5", "In0.5Ga0.5P"]
    assert table["family"].tolist() == ["III-V", "II-VI", "III-V"]
    assert table["gap_eV"].iloc[0] == table["gap_eV"].iloc[2]
    assert (table.filter(like="_rule") != "").all().all()
