import numpy as np
import pandas as pd
import pytest

from screening.calibration import group_weights
from screening.dot_baselines import ABLATIONS, BASELINES, plain_gaussian
from screening.dot_evaluation import SPLITS, evaluate_splits, split_labels, summarise

MATERIALS = [
    *("Ge", "CsPbI3", "CuInS2", "HgTe", "InAs", "CsPbBr3", "PbS", "GaP", "ZnS", "SnTe", "Ag2S"),
    *("CuInSe2", "PbTe", "SnSe"),
]
JUDGED = "HgTe"


@pytest.fixture(scope="module")
def few(rows):
    return rows[rows["material"].isin(MATERIALS)].reset_index(drop=True)


@pytest.fixture(scope="module")
def judged(few):
    """One row, so that of every split one fold is worked on."""
    return pd.Series(few.index == few.index[few["material"].eq(JUDGED)][0])


@pytest.fixture(scope="module")
def predictions(few, judged):
    return evaluate_splits(few, judged=judged)


@pytest.fixture(scope="module")
def nested(few):
    of_two = few["material"].isin([JUDGED, "Ge"])
    return evaluate_splits(few, ("size ranges", "materials"), judged=of_two)


def test_one_worker_and_two_give_the_same_numbers(few, judged, predictions):
    again = evaluate_splits(few, SPLITS[:2], judged=judged, n_jobs=2)
    pd.testing.assert_frame_equal(again, predictions[again.columns].iloc[:2])


def test_every_split_predicts_the_judged_row_once(few, judged, predictions):
    assert predictions["split"].tolist() == list(SPLITS)
    assert set(predictions["record"]) == set(few.loc[judged, "record"])


@pytest.mark.parametrize("split", SPLITS)
def test_spoiling_the_targets_that_are_left_out_changes_no_prediction(
    few, judged, predictions, split
):
    labels = split_labels(few, split)
    out = labels.eq(labels[judged].iloc[0])
    rng = np.random.default_rng(0)
    spoilt = few.copy()
    spoilt.loc[out, "optical_gap_eV"] = rng.permutation(few.loc[out, "optical_gap_eV"]) + 1.0
    again = evaluate_splits(spoilt, (split,), judged=judged)
    again = again[again["split"].eq(split)].reset_index(drop=True)
    expected = predictions[predictions["split"].eq(split)].reset_index(drop=True)
    untouched = [name for name in expected if name != "optical_gap_eV" and name in again]
    pd.testing.assert_frame_equal(again[untouched], expected[untouched], rtol=0, atol=0)


def test_a_model_trained_on_shuffled_targets_shows_no_skill(few):
    # A leak would let it foresee the shuffled targets; the mean foresees nothing.
    shuffled = few.assign(
        optical_gap_eV=np.random.default_rng(3).permutation(few["optical_gap_eV"])
    )
    found = evaluate_splits(shuffled, ("random rows",))
    error = (found["predicted_gap_eV"] - found["optical_gap_eV"]).abs().mean()
    of_mean = (found["mean"] - found["optical_gap_eV"]).abs().mean()
    assert error > 0.9 * of_mean


def test_splits_keep_together_what_they_leave_out(rows):
    for split, column in (("sources", "source"), ("materials", "material"), ("families", "family")):
        labels = split_labels(rows, split)
        assert labels.groupby(rows[column]).nunique().eq(1).all(), split
    sizes = split_labels(rows, "random rows").value_counts()
    assert sizes.max() - sizes.min() <= 1
    assert split_labels(rows, "random rows").equals(split_labels(rows, "random rows"))


def test_the_summary_counts_one_vote_a_material(nested):
    figures = summarise(nested).set_index(["figure", "state"])
    new = nested[nested["state"].eq("new")]
    error = (new["predicted_gap_eV"] - new["optical_gap_eV"]).abs()
    by_material = {
        material: np.average(error[rows.index], weights=rows["vote"])
        for material, rows in new.groupby("material")
    }
    row = figures.loc[("mean_absolute_error_eV", "new")]
    assert row["value"] == pytest.approx(np.mean(list(by_material.values())))
    assert row["worst_group"] == max(by_material, key=by_material.get)
    assert row["n_groups"] == 2


def test_states_of_knowledge_follow_from_what_was_left_out(nested):
    by_split = nested.groupby("split")["state"].agg(set)
    assert by_split["materials"] == {"new"}
    assert by_split["size ranges"] == {"on record"}


def test_a_left_out_material_is_farther_from_the_data_than_a_left_out_size(nested):
    distance = nested.pivot_table(index="material", columns="split", values="kernel_distance")
    assert (distance["materials"] > distance["size ranges"]).all()


def test_baselines_see_the_training_rows_only(few):
    own = few["material"].eq("PbS")
    hidden = few[own].assign(optical_gap_eV=np.nan)
    for name, baseline in (BASELINES | ABLATIONS).items():
        assert np.isfinite(baseline(few[~own], hidden)).all(), name


def test_the_mean_gives_every_material_one_vote(few):
    means = [
        np.average(part["optical_gap_eV"], weights=group_weights(part["material"], part["vote"]))
        for _, part in few.groupby("material")
    ]
    assert BASELINES["mean"](few, few)[0] == pytest.approx(np.mean(means))


def test_the_nearest_record_of_a_training_row_is_itself(few):
    alone = few.drop_duplicates(["material", "diameter_nm"])
    np.testing.assert_allclose(BASELINES["nearest record"](alone, alone), alone["optical_gap_eV"])


def test_the_plain_process_finds_a_smooth_function_between_its_points():
    X = np.linspace(0.0, 3.0, 60)[:, None]
    noise = 0.1 * np.random.default_rng(0).normal(size=60)
    model = plain_gaussian().fit(X, np.sin(X[:, 0]) + noise)
    # two standard errors of some ten neighbours with noise 0.1
    assert model.predict(np.array([[1.45]]))[0] == pytest.approx(np.sin(1.45), abs=0.063)
