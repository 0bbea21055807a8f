import itertools
import math
import tracemalloc

import pytest
from hypothesis import given
from hypothesis import strategies as st

from features.charge import charge_balance
from features.composition_space import CompositionSpace, Sublattice
from features.errors import SpecificationError
from features.formula import parse_formula


def formulas(*parts):
    return [compound.formula for compound in CompositionSpace(parts)]


@given(
    n_elements=st.integers(1, 5),
    step=st.sampled_from([5.0, 10.0, 20.0, 50.0]),
    mixed=st.integers(1, 3),
)
def test_the_number_of_mixtures_is_that_of_combinatorics(n_elements, step, mixed):
    elements = ("Zn", "Cd", "Mg", "Hg", "Mn")[:n_elements]
    steps = round(100 / step)
    # k elements out of n, and the ways to split `steps` into k parts that are not zero
    expected = sum(
        math.comb(n_elements, k) * math.comb(steps - 1, k - 1)
        for k in range(1, min(mixed, n_elements) + 1)
    )
    assert Sublattice(elements, 1, step, mixed).n_mixtures == expected


@given(st.sampled_from([5.0, 10.0, 25.0]), st.integers(1, 3))
def test_shares_sum_to_one_and_no_mixture_comes_twice(step, mixed):
    sublattice = Sublattice(("S", "Se", "Te"), None, step, mixed)
    found = [
        tuple(zip(chosen, split, strict=True))
        for chosen, shares in sublattice.mixtures.items()
        for split in shares
    ]
    assert all(sum(share for _, share in mixture) == pytest.approx(1.0) for mixture in found)
    assert len(set(found)) == len(found) == sublattice.n_mixtures


def test_every_composition_is_charge_balanced_and_comes_once():
    space = CompositionSpace(
        (Sublattice(("Cu", "Ag", "In", "Ga"), 1, 25), Sublattice(("S", "Se"), None, 25))
    )
    found = list(space)
    assert all(charge_balance(compound).balanced for compound in found)
    assert len({compound.formula for compound in found}) == len(found) <= space.n_mixtures


def test_the_ratio_of_cations_and_anions_follows_from_charge_balance():
    # Chalcopyrites I-III-VI2 and sesquisulfides III2-VI3 (common knowledge of the field).
    parts = (Sublattice(("Cu", "In"), 1, 50), Sublattice(("S",)))
    assert set(formulas(*parts)) == {"Cu2S", "In2S3", "CuInS2"}


def test_a_stated_ratio_keeps_only_the_compositions_that_have_it():
    parts = (Sublattice(("Cu", "In"), 1, 50), Sublattice(("S",), 1))
    assert parse_formula("CuInS2").formula in formulas(*parts)
    assert parse_formula("In2S3").formula not in formulas(*parts)


def test_perovskites_have_three_sublattices():
    parts = (
        Sublattice(("Cs", "FA"), 1, 50),
        Sublattice(("Pb", "Sn"), 1, 100, 1),
        Sublattice(("Br", "I"), 3, 50),
    )
    found = formulas(*parts)
    assert parse_formula("CsPb(Br0.5I0.5)3").formula in found
    assert parse_formula("Cs0.5FA0.5SnI3").formula in found
    assert len(found) == 3 * 2 * 3


def test_ranges_bound_the_share_of_an_element():
    parts = (Sublattice(("In", "Ga"), 1, 5, 2, {"Ga": (0.1, 0.3)}), Sublattice(("P",)))
    shares = [parse_formula(text).fractions.get("Ga", 0.0) * 2.0 for text in formulas(*parts)]
    assert sorted(round(share, 6) for share in shares) == [0.1, 0.15, 0.2, 0.25, 0.3]


def test_choices_of_elements_together_hold_all_mixtures():
    space = CompositionSpace(
        (Sublattice(("Zn", "Cd", "Mg"), 1, 20), Sublattice(("S", "Se"), None, 20))
    )
    assert sum(space.n_of(chosen) for chosen in space.choices()) == space.n_mixtures


def test_the_order_of_a_space_is_settled():
    parts = (Sublattice(("Zn", "Cd"), 1, 10), Sublattice(("S", "Se"), None, 10))
    assert formulas(*parts) == formulas(*parts)


def test_a_large_space_is_made_one_composition_at_a_time():
    parts = (
        Sublattice(("Zn", "Cd", "Mg", "Hg", "Mn", "Be"), 1, 2, 3),
        Sublattice(("S", "Se", "Te"), None, 2, 3),
    )
    space = CompositionSpace(parts)
    assert space.n_mixtures > 30_000_000
    tracemalloc.start()
    taken = list(itertools.islice(space, 2000))
    _, peak = tracemalloc.get_traced_memory()
    tracemalloc.stop()
    assert len(taken) == 2000
    assert peak < 60e6


@pytest.mark.parametrize(
    ("make", "words"),
    [
        (lambda: Sublattice((), 1), "one or more"),
        (lambda: Sublattice(("Zn", "Zn"), 1), "none twice"),
        (lambda: Sublattice(("Zn",), 1, 30), "a divisor of 100"),
        (lambda: Sublattice(("Zn",), 1, 10, 2, {"Cd": (0, 1)}), "range of Cd"),
        (lambda: CompositionSpace((Sublattice(("Zn",), 1),)), "two or more"),
        (lambda: CompositionSpace((Sublattice(("Zn",)), Sublattice(("S",)))), "at most one"),
        (
            lambda: Sublattice(("Zn", "Cd", "Mg", "Hg", "Mn"), 1, 0.5, 4).mixtures,
            "too many mixtures",
        ),
    ],
)
def test_a_space_that_cannot_be_enumerated_is_refused(make, words):
    with pytest.raises(SpecificationError, match=words):
        make()
