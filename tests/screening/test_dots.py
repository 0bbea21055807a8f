from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from screening.candidates import pair_frame
from screening.dots import NEW, ON_RECORD, SizeGapModel, range_groups
from screening.predicting import predict_pairs

# Each tolerance covers the spread of the published figure itself; sources stand in the file.
POINTS = pd.read_csv(Path(__file__).parents[1] / "reference" / "dot_points.csv")


def ask(model, material, *diameters):
    pairs = pd.DataFrame({"material": [material] * len(diameters), "diameter_nm": diameters})
    return predict_pairs(pairs, model)


def test_small_cdse_is_blue_and_large_cdse_is_red(model):
    # CdSe about 2 nm absorbs and emits in the blue, about 8 nm in the red (common practice).
    blue, red = ask(model, "CdSe", 2.0, 8.0)["emission_nm"]
    assert 440.0 < blue < 500.0
    assert 620.0 < red < 700.0


@pytest.mark.parametrize("material", ["CdSe", "CdTe", "InP", "PbS", "PbSe", "ZnSe", "CsPbBr3"])
def test_the_gap_falls_with_size_and_stays_above_bulk(model, material):
    answer = ask(model, material, *np.arange(2.0, 12.0, 0.25))
    bulk = pair_frame(pd.DataFrame({"material": [material], "diameter_nm": [5.0]}))["gap_eV"].iloc[
        0
    ]
    gaps = answer["optical_gap_eV"].to_numpy()
    assert (np.diff(gaps) < 0.002).all()
    assert (gaps > bulk - 0.02).all()


@pytest.mark.parametrize(
    "row", POINTS.to_dict("records"), ids=lambda r: f"{r['material']} {r['diameter_nm']}"
)
def test_published_sizes_give_their_known_gap(model, row):
    answer = ask(model, row["material"], row["diameter_nm"]).iloc[0]
    assert answer["optical_gap_eV"] == pytest.approx(row["optical_gap_eV"], abs=row["tolerance_eV"])


def test_a_new_material_is_less_sure_than_one_on_record(model):
    known, new = ask(model, "CdSe", 4.0).iloc[0], ask(model, "ZnTe", 4.0).iloc[0]
    assert known["record_state"] == ON_RECORD
    assert new["record_state"] == NEW
    width = [row["optical_gap_high_eV"] - row["optical_gap_low_eV"] for row in (known, new)]
    assert width[0] < width[1]


def test_rows_are_answered_in_order_with_the_callers_index_and_independently(model):
    pairs = pd.DataFrame(
        {"material": ["PbS", "CdSe", "ZnTe"], "diameter_nm": [5.0, 3.0, 4.0]}, index=[7, 1, 3]
    )
    together = predict_pairs(pairs, model)
    assert together.index.tolist() == [7, 1, 3]
    for index in pairs.index:
        alone = predict_pairs(pairs.loc[[index]], model)
        assert alone["optical_gap_eV"].iloc[0] == pytest.approx(
            together.loc[index, "optical_gap_eV"], rel=1e-12
        )


def test_permuting_the_targets_of_a_left_out_material_changes_nothing_learned(rows):
    own = rows["material"].eq("CdSe")
    permuted = rows.copy()
    permuted.loc[own, "optical_gap_eV"] = (
        rows.loc[own, "optical_gap_eV"].sample(frac=1.0, random_state=0).to_numpy()
    )
    first, second = (SizeGapModel().fit(table[~own]) for table in (rows, permuted))
    np.testing.assert_array_equal(
        first.regressor(NEW).gaussian_.theta_, second.regressor(NEW).gaussian_.theta_
    )
    asked = pair_frame(pd.DataFrame({"material": ["CdSe"], "diameter_nm": [3.0]}))
    np.testing.assert_array_equal(
        first.regressor(NEW).parts(first.design(asked)),
        second.regressor(NEW).parts(second.design(asked)),
    )


def test_a_range_can_be_left_out_only_where_two_ranges_and_three_rows_exist(rows):
    groups = range_groups(rows)
    labelled = rows[groups.ne("")].groupby("material")
    assert (labelled.size() >= 3).all()
    assert groups[rows["material"].eq("TiO2")].eq("").all()
