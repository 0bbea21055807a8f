"""The transformer of elemental descriptors."""

import numpy as np
import pandas as pd
import pytest
from hypothesis import given
from hypothesis import strategies as st
from sklearn.base import clone
from sklearn.ensemble import ExtraTreesRegressor
from sklearn.pipeline import make_pipeline
from sklearn.utils import estimator_checks, get_tags

from features.composition import CompositionDescriptors, composition_descriptors, ion_shares
from features.elements import element_table
from features.errors import FormulaError
from features.formula import parse_formula

FORMULAS = ["CdSe", "In0.8Ga0.2P", "CsPb(Br0.6I0.4)3", "Si", "FAPbBr3"]


CHECKS = [
    estimator_checks.check_estimator_cloneable,
    estimator_checks.check_estimator_repr,
    estimator_checks.check_estimator_tags_renamed,
    estimator_checks.check_get_params_invariance,
    estimator_checks.check_mixin_order,
    estimator_checks.check_no_attributes_set_in_init,
    estimator_checks.check_parameters_default_constructible,
    estimator_checks.check_set_params,
    estimator_checks.check_valid_tag_types,
]


@pytest.mark.parametrize("check", CHECKS)
def test_estimator_passes_every_common_check_that_needs_no_numeric_input(check):
    assert check("CompositionDescriptors", CompositionDescriptors()) is None


def test_estimator_declares_that_it_reads_text():
    tags = get_tags(CompositionDescriptors())
    assert tags.input_tags.string
    assert not tags.input_tags.two_d_array


def test_caller_keeps_index_and_gets_named_columns():
    frame = pd.DataFrame({"material": FORMULAS}, index=list("vwxyz"))
    transformer = CompositionDescriptors().fit(frame)
    out = transformer.transform(frame)
    assert out.index.tolist() == list("vwxyz")
    assert out.columns.tolist() == transformer.get_feature_names_out().tolist()
    assert np.isfinite(out.to_numpy()).all()


@pytest.mark.parametrize("shape", ["list", "array", "column", "series"])
def test_every_way_to_hand_over_one_column_gives_the_same_numbers(shape):
    column = {
        "list": FORMULAS,
        "array": np.array(FORMULAS),
        "column": np.array(FORMULAS)[:, None],
        "series": pd.Series(FORMULAS),
    }[shape]
    out = CompositionDescriptors().fit(column).transform(column)
    assert np.array_equal(out.to_numpy(), composition_descriptors(FORMULAS).to_numpy())


def test_two_columns_are_refused():
    with pytest.raises(FormulaError, match="one column"):
        CompositionDescriptors().fit(np.array([["CdSe", "PbS"]]))


def test_means_agree_with_a_hand_computation():
    table = element_table()["electronegativity"]
    row = composition_descriptors(["CdSe0.6S0.4"]).iloc[0]
    by_hand = 0.5 * table["Cd"] + 0.3 * table["Se"] + 0.2 * table["S"]
    assert row["all_mean_electronegativity"] == pytest.approx(by_hand)
    assert row["anion_mean_electronegativity"] == pytest.approx(
        0.6 * table["Se"] + 0.4 * table["S"]
    )
    assert row["cation_range_electronegativity"] == 0.0


@given(st.sampled_from(FORMULAS), st.sampled_from(["mass_u", "row", "ionisation_eV"]))
def test_mean_lies_between_minimum_and_maximum(formula, descriptor):
    row = composition_descriptors([formula]).iloc[0]
    for part in ("all", "cation", "anion"):
        low, mean, high = (row[f"{part}_{s}_{descriptor}"] for s in ("min", "mean", "max"))
        assert low - 1e-9 <= mean <= high + 1e-9
        assert row[f"{part}_range_{descriptor}"] == pytest.approx(high - low)


def test_ions_of_an_element_are_the_element():
    assert ion_shares(parse_formula("Si")) == ({"Si": 1.0}, {"Si": 1.0})


def test_transformer_works_in_a_pipeline():
    model = make_pipeline(CompositionDescriptors(), ExtraTreesRegressor(5, random_state=0))
    frame = pd.DataFrame({"material": FORMULAS})
    predicted = clone(model).fit(frame, np.arange(5.0)).predict(frame)
    assert predicted == pytest.approx(np.arange(5.0))


def test_no_rows_give_no_rows():
    assert composition_descriptors([]).shape == (0, composition_descriptors(["Si"]).shape[1])
