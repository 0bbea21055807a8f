import numpy as np
import pandas as pd
import pytest

from screening.candidates import pair_frame
from screening.dots import ON_RECORD, SizeGapModel
from screening.reach import EDGE, FAR, NEAR, distance_to_data, reach_limits


def candidates(materials, diameters):
    pairs = pd.DataFrame({"material": materials, "diameter_nm": diameters})
    return pair_frame(pairs)


def test_a_recorded_sample_is_near_and_a_material_never_recorded_is_not(model):
    found = distance_to_data(model, candidates(["CdSe", "InSb"], [4.0, 5.0]))
    assert found["reach"].tolist() == [NEAR, EDGE]
    assert found["kernel_distance"].iloc[0] < found["kernel_distance"].iloc[1]


def test_distance_lies_between_nothing_and_one_and_keeps_the_callers_index(model):
    wanted = candidates(["CdSe", "AlN", "PbS"], [1.5, 20.0, 8.0]).set_axis([7, 9, 3])
    found = distance_to_data(model, wanted)
    assert found.index.tolist() == [7, 9, 3]
    assert found["kernel_distance"].between(0.0, 1.0).all()


def test_a_block_gives_the_same_as_one_row_at_a_time(model):
    wanted = candidates(["CdSe", "InSb", "ZnO"], [2.0, 4.0, 9.0])
    together = distance_to_data(model, wanted)
    alone = pd.concat([distance_to_data(model, wanted.iloc[[i]]) for i in range(3)])
    pd.testing.assert_frame_equal(together, alone)


def test_a_family_without_a_record_is_never_near(rows):
    kept = rows[rows["family"].ne("II-VI")]
    learned = SizeGapModel().fit(kept)
    found = distance_to_data(learned, candidates(["CdSe", "InP"], [3.0, 3.0]))
    assert found["family_on_record"].tolist() == [False, True]
    assert found["reach"].iloc[0] in {EDGE, FAR}


def test_nineteen_in_twenty_left_out_materials_lie_inside_the_edge(model):
    # By construction of the limit: refit nothing, measure each material against the others.
    rows = model.rows_
    correlation = model.regressor(ON_RECORD).gaussian_.correlation(model.design(rows))
    materials = rows["material"].to_numpy()
    same = materials[:, None] == materials[None, :]
    nearest = np.where(same, -np.inf, correlation).max(axis=1)
    distance = np.sqrt(1.0 - np.clip(nearest, 0.0, 1.0))
    inside = pd.Series(distance <= reach_limits(model).edge, dtype=float)
    by_material = [
        np.average(part, weights=rows["vote"].loc[part.index])
        for _, part in inside.groupby(materials)
    ]
    assert np.mean(by_material) >= 0.95
    assert np.mean(by_material) < 1.0


def test_without_a_size_range_to_leave_out_nothing_is_near(rows):
    alone = rows[rows["material"].isin(["GaP", "ZnS", "SnTe", "PbTe", "Ag2S"])]
    learned = SizeGapModel(n_folds=3).fit(alone.reset_index(drop=True))
    assert reach_limits(learned).near == 0.0


def test_prior_correlation_of_a_training_row_with_itself_is_one(model):
    process = model.regressor(ON_RECORD).gaussian_
    inside = process.correlation(process.X_[:5])
    assert inside.shape == (5, len(process.X_))
    assert np.diag(inside[:, :5]) == pytest.approx(np.ones(5), abs=1e-9)
