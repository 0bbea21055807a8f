import numpy as np
import pandas as pd
import pytest

from screening.dot_baselines import BASELINES
from screening.dot_evaluation import evaluate_dots, summarise

MATERIALS = ["CdTe", "PbS", "ZnSe", "CsPbBr3", "HgTe", "GaP", "InAs", "ZnS", "Ge", "SnTe"]


@pytest.fixture(scope="module")
def few(rows):
    return rows[rows["material"].isin(MATERIALS)].reset_index(drop=True)


@pytest.fixture(scope="module")
def predictions(few):
    return evaluate_dots(few, n_jobs=1)


def test_one_worker_and_two_give_the_same_numbers(few, predictions):
    pd.testing.assert_frame_equal(evaluate_dots(few, n_jobs=2), predictions)


def test_every_row_is_predicted_once_as_new(few, predictions):
    new = predictions[predictions["state"].eq("new")]
    assert sorted(new["record"]) == sorted(few["record"])


def test_spoiling_a_materials_targets_leaves_its_own_predictions_as_new_untouched(few, predictions):
    spoilt = few.copy()
    spoilt.loc[spoilt["material"].eq("ZnSe"), "optical_gap_eV"] += 1.0
    again = evaluate_dots(spoilt)
    pick = [
        frame[frame["material"].eq("ZnSe") & frame["state"].eq("new")]
        for frame in (again, predictions)
    ]
    np.testing.assert_array_equal(pick[0]["predicted_gap_eV"], pick[1]["predicted_gap_eV"])
    np.testing.assert_array_equal(pick[0]["low_90"], pick[1]["low_90"])


def test_the_summary_counts_one_vote_a_material(predictions):
    figures = summarise(predictions).set_index(["figure", "state"])
    new = predictions[predictions["state"].eq("new")]
    error = (new["predicted_gap_eV"] - new["optical_gap_eV"]).abs()
    by_material = {
        material: np.average(error[rows.index], weights=rows["vote"])
        for material, rows in new.groupby("material")
    }
    expected = float(np.mean(list(by_material.values())))
    row = figures.loc[("mean_absolute_error_eV", "new")]
    assert row["value"] == pytest.approx(expected)
    assert row["worst_group"] == max(by_material, key=by_material.get)
    assert row["n_groups"] == len(MATERIALS)


def test_baselines_see_the_training_rows_only(few):
    own = few["material"].eq("PbS")
    hidden = few[own].assign(optical_gap_eV=np.nan)
    for name, baseline in BASELINES.items():
        assert np.isfinite(baseline(few[~own], hidden)).all(), name
