"""Bulk gap by record, alloy rules and model."""

import numpy as np
import pandas as pd
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.integrate import quad
from scipy.stats import norm

from features.alloys import alloy_gap
from features.errors import FormulaError
from features.formula import parse_formula
from features.tables import read_table
from screening.bulk_gap import COLUMNS, BulkGapModel
from screening.bulk_gap_design import GapDesign
from screening.bulk_gap_regressor import squared_moments
from screening.bulk_gap_rows import gap_rows, recorded_gaps


@pytest.fixture(scope="module")
def model():
    rows = gap_rows()
    kept = (rows["table"] != "bulk_gaps") | (np.arange(len(rows)) % 4 == 0)
    return BulkGapModel().fit(rows[kept].reset_index(drop=True))


def test_answers_come_in_the_order_given_with_the_promised_columns(model):
    answer = model.predict(["PbS", "Cs3Bi2I9", "CdSe0.6S0.4", "SeCd"])
    assert tuple(answer.columns) == COLUMNS
    assert answer["material"].tolist() == ["PbS", "Cs3Bi2I9", "CdSe0.6S0.4", "SeCd"]
    assert answer["basis"].tolist() == ["record", "model", "alloy", "record"]
    assert answer["record_state"].tolist() == ["on record", "new", "new", "on record"]


def test_recorded_materials_answer_with_the_semiconductor_tables_value(model):
    table = read_table("bulk_semiconductors").set_index("material")
    answer = model.predict(list(table.index)).set_index("material")
    assert answer["bulk_gap_eV"].to_numpy() == pytest.approx(table["gap_eV"].to_numpy())
    assert answer["bulk_gap_sd_eV"].to_numpy() == pytest.approx(table["gap_sd_eV"].to_numpy())


def test_solid_solutions_answer_by_the_alloy_rules(model):
    gap_eV, sd_eV, _ = alloy_gap(parse_formula("In0.8Ga0.2P"))
    answer = model.predict(["In0.8Ga0.2P"]).iloc[0]
    assert (answer["bulk_gap_eV"], answer["bulk_gap_sd_eV"]) == (gap_eV, sd_eV)


@pytest.mark.parametrize("formula", ["AuCu", "Fe", "Cu0.7Zn0.3", "PtNi"])
def test_metals_are_refused_by_rule(model, formula):
    with pytest.raises(FormulaError, match="metals"):
        model.predict([formula])


def test_new_compositions_whose_charges_do_not_balance_are_refused(model):
    with pytest.raises(FormulaError, match="balance"):
        model.predict(["CsPbBr2"])


def test_unreadable_formula_is_refused(model):
    with pytest.raises(FormulaError, match="unknown element"):
        model.predict(["CdSe", "Xx2"])


def test_no_materials_give_an_empty_answer(model):
    assert model.predict([]).shape == (0, len(COLUMNS))


def test_model_intervals_are_nested_and_hold_the_median(model):
    formulas = ["Cs3Bi2I9", "ZnSnN2", "Ca3PN", "CuTaS3", "RbGeI3"]
    gap_eV, low_50, high_50, _ = model.predict_new(formulas, 0.5)
    _, low_90, high_90, sd_eV = model.predict_new(formulas, 0.9)
    assert np.all((low_90 >= 0.0) & (low_90 < low_50) & (low_50 < gap_eV))
    assert np.all((gap_eV < high_50) & (high_50 < high_90))
    assert np.all(sd_eV > 0.0)


def test_order_and_scale_of_a_new_formula_do_not_matter(model):
    first, second = (model.predict_new([text]) for text in ("Cs3Bi2I9", "I18Bi4Cs6"))
    assert [v[0] for v in first] == pytest.approx([v[0] for v in second], rel=1e-9)


def test_two_trainings_agree_to_the_last_digit():
    rows = gap_rows().iloc[::9].reset_index(drop=True)
    formulas = ["Cs3Bi2I9", "ZnSnN2"]
    answers = [BulkGapModel(3).fit(rows).predict_new(formulas) for _ in range(2)]
    assert all(np.array_equal(a, b) for a, b in zip(*answers, strict=True))


def test_gaps_widen_from_telluride_to_oxide_in_the_model(model):
    # Textbook trend: the anion's p level deepens from tellurium to oxygen.
    gap_eV = model.predict_new(["CaTe", "CaSe", "CaS", "CaO"])[0]
    assert np.all(np.diff(gap_eV) > 0.0)


@given(st.floats(0.0, 3.0), st.floats(0.01, 1.0))
@settings(max_examples=25)
def test_moments_of_the_square_agree_with_integration(root, root_sd):
    median, sd = squared_moments(np.array([root]), np.array([root_sd]))
    ends = (root - 10 * root_sd, root + 10 * root_sd)
    mean = root**2 + root_sd**2
    variance, _ = quad(
        lambda x: (x * x - mean) ** 2 * norm.pdf(x, root, root_sd), *ends, points=[root]
    )
    assert median[0] == pytest.approx(root**2)
    assert sd[0] == pytest.approx(np.sqrt(variance), rel=1e-6)


def test_doubtful_rows_are_never_an_answer():
    rows = pd.DataFrame(
        {
            "material": ["CdSe", "CdSe", "PbS"],
            "gap_eV": [9.0, 1.7, 8.0],
            "gap_sd_eV": [1.0, 0.2, 1.0],
            "doubtful": [True, False, True],
            "table": "bulk_gaps",
        }
    )
    records = recorded_gaps(rows)
    assert set(records) == {"CdSe"}
    assert records["CdSe"].gap_eV == 1.7


def test_every_row_of_the_compilation_is_read():
    rows = gap_rows()
    assert (rows["table"] == "bulk_gaps").sum() == len(read_table("bulk_gaps"))
    assert np.isfinite(rows["gap_eV"]).all()
    assert (rows["gap_sd_eV"] > 0.0).all()


def test_design_is_standardised_on_its_own_rows():
    formulas = gap_rows()["material"].tolist()[:200]
    design = GapDesign().fit(formulas)
    X = design.transform(formulas)
    assert np.abs(X.mean(axis=0)).max() < 1e-9
    assert sorted({c for term in design.terms() for c in term.columns}) == list(range(X.shape[1]))
