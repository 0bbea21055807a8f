"""Formulas: notations, faults, order and scale invariance."""

import math
import subprocess
import sys

import pytest
from hypothesis import given
from hypothesis import strategies as st
from pymatgen.core import Composition

from features.errors import FormulaError
from features.formula import ELEMENTS, compound_from_amounts, parse_formula

amounts = st.dictionaries(
    st.sampled_from(ELEMENTS), st.integers(1, 400).map(lambda n: n / 100), min_size=1, max_size=6
)


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("CdSe0.6S0.4", {"Cd": 1.0, "Se": 0.6, "S": 0.4}),
        ("In0.8Ga0.2P", {"In": 0.8, "Ga": 0.2, "P": 1.0}),
        ("CsPb(Br0.6I0.4)3", {"Cs": 1.0, "Pb": 1.0, "Br": 1.8, "I": 1.2}),
        ("CsPb[Br.6 I.4]3", {"Cs": 1.0, "Pb": 1.0, "Br": 1.8, "I": 1.2}),
        ("Cu₂ZnSnS₄", {"Cu": 2.0, "Zn": 1.0, "Sn": 1.0, "S": 4.0}),
        ("(FA0.8Cs0.2)PbI3", {"FA": 0.8, "Cs": 0.2, "Pb": 1.0, "I": 3.0}),
        ("MAPbI3", {"MA": 1.0, "Pb": 1.0, "I": 3.0}),
        ("{Cd(Se[S2]2)}3", {"Cd": 1.0, "Se": 1.0, "S": 4.0}),
        ("CFAl", {"C": 1.0, "F": 1.0, "Al": 1.0}),
        ("Cu1.8S", {"Cu": 9.0, "S": 5.0}),
    ],
)
def test_notations_of_the_field_are_read(text, expected):
    assert parse_formula(text).amounts == pytest.approx(expected, abs=1e-6)


@pytest.mark.parametrize(
    ("text", "fault"),
    [
        ("", "empty formula"),
        (" \t", "empty formula"),
        ("cdse", "unexpected character"),
        ("XxSe", "unknown element"),
        ("D2O", "unknown element"),
        ("Cd(Se", "unbalanced bracket"),
        ("Cd)Se", "unbalanced bracket"),
        ("CdS(]", "unbalanced bracket"),
        ("Cd()Se", "empty bracket"),
        ("CdSe0", "amount out of range"),
        ("CdSe0.0", "amount out of range"),
        ("Cd99999999Se", "amount out of range"),
        ("CdSe0.0000001", "amount too small"),
        ("Cd-1Se", "charge or isotope mark"),
        ("Cd2+", "charge or isotope mark"),
        ("Cd²⁺", "charge or isotope mark"),
        ("SexS1-x", "charge or isotope mark"),
        ("13C", "number before the first element"),
        ("2CdSe", "number before the first element"),
        ("NaN", "missing value"),
        ("inf", "unexpected character"),
        ("CdSe1e5", "unexpected character"),
        ("CdSe·H2O", "unexpected character"),
        ("Cd2.5.1", "amount without an element"),
        ("Cd2.Se", "unexpected character"),
        ("Cd(2)Se", "amount without an element"),
        ("Cd" * 101, "too long"),
        ("(((((Cd)))))", "nested too deep"),
        (None, "no text"),
        (float("nan"), "no text"),
    ],
)
def test_each_fault_is_refused_with_its_own_message(text, fault):
    with pytest.raises(FormulaError, match=fault):
        parse_formula(text)


@given(amounts, st.randoms(use_true_random=False), st.integers(1, 7))
def test_order_and_scale_of_writing_do_not_matter(composition, random, scale):
    items = list(composition.items())
    random.shuffle(items)
    text = "".join(f"{symbol}{amount * scale:.2f}" for symbol, amount in items)
    assert parse_formula(text) == compound_from_amounts(composition)


@given(amounts)
def test_canonical_formula_reads_back_as_the_same_compound(composition):
    compound = compound_from_amounts(composition)
    assert parse_formula(compound.formula) == compound
    assert parse_formula(compound.formula).formula == compound.formula


@given(amounts)
def test_fractions_sum_to_one_and_agree_with_an_independent_parser(composition):
    compound = compound_from_amounts(composition)
    assert math.isclose(sum(compound.fractions.values()), 1.0, rel_tol=1e-12)
    other = Composition(composition).fractional_composition.as_dict()
    assert compound.fractions == pytest.approx(other, abs=2e-6)


@pytest.mark.parametrize(
    "formula", ["CdSe", "AgBiS2", "Cu2ZnSnS4", "CsPbBr3", "GaAs", "SiC", "TiO2"]
)
def test_usual_formulas_are_their_own_canonical_form(formula):
    assert parse_formula(formula).formula == formula


def test_chemical_system_is_alphabetical():
    assert parse_formula("Se0.6CdS0.4").chemical_system == "Cd-S-Se"


@pytest.mark.parametrize("composition", [{}, {"Cd": 0.0}, {"Cd": math.nan}, {"Cd": math.inf}])
def test_amounts_that_are_not_positive_and_finite_are_refused(composition):
    with pytest.raises(FormulaError):
        compound_from_amounts(composition)


def test_importing_the_parser_loads_no_heavy_library():
    code = (
        "import sys, features.formula; "
        "sys.exit(bool({'numpy', 'pandas', 'pymatgen'} & set(sys.modules)))"
    )
    assert subprocess.run([sys.executable, "-c", code], check=False).returncode == 0
