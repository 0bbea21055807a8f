"""The nested evaluation of adsorption energies, on a part of the tables."""

import numpy as np
import pandas as pd
import pytest

import screening.adsorption_audit as audit
from screening.adsorption_alloys import AlloySurfaceModel
from screening.adsorption_audit import (
    ALLOY_BASELINES,
    METAL_BASELINES,
    evaluate_compositions,
    evaluate_elements,
    evaluate_metals,
    summarise_adsorption,
)
from screening.adsorption_baselines import mixing_rule, plain_learners
from screening.adsorption_design import SurfaceDesign, alloy_rows
from screening.adsorption_pure import PureSurfaceModel, pure_rows


@pytest.fixture(scope="module")
def alloys():
    rows = alloy_rows()
    return rows[rows["adsorbate"] == "CH3"].reset_index(drop=True)


@pytest.fixture(scope="module")
def pure():
    rows = pure_rows()
    needed = rows["adsorbate"].isin(["CH3", "C", "N", "H"])
    return rows[needed & (rows["source"] == "mamun2019")].reset_index(drop=True)


@pytest.fixture(scope="module")
def seen():
    return {"alloys": [], "metals": []}


@pytest.fixture(scope="module")
def watched(seen):
    class WatchedAlloys(AlloySurfaceModel):
        def fit(self, rows, pure, **options):
            seen["alloys"].append((rows, set(pure.rows_["metal"])))
            return super().fit(rows, pure, **options)

    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(audit, "AlloySurfaceModel", WatchedAlloys)
        yield seen["alloys"]


@pytest.fixture(scope="module")
def compositions(alloys, pure, watched):
    watched.clear()
    found = evaluate_compositions(2, alloys=alloys, pure=pure)
    return found, list(watched)


@pytest.fixture(scope="module")
def elements(alloys, pure, watched):
    watched.clear()
    found = evaluate_elements(3, alloys=alloys, pure=pure)
    return found, list(watched)


@pytest.fixture(scope="module")
def metals():
    rows = pure_rows()
    return evaluate_metals(2, rows[rows["adsorbate"].isin(["O", "OH"])])


def test_every_composition_is_predicted_once_by_a_model_that_never_saw_it(compositions, alloys):
    found, fits = compositions
    assert sorted(found["material"]) == sorted(alloys["composition"])
    for fold, part in found.groupby("fold"):
        trained, _ = fits[fold]
        assert set(trained["composition"]).isdisjoint(part["material"])


def test_every_alloy_is_predicted_once_for_either_element(elements, alloys):
    found, _ = elements
    assert len(found) == 2 * len(alloys)
    assert set(found["group"]) == set(alloys["first"]) | set(alloys["second"])


def test_tuning_and_calibration_see_no_element_of_their_fold(elements, alloys):
    everything = set(alloys["first"]) | set(alloys["second"])
    held = []
    for rows, metals in elements[1]:
        trained = set(rows["first"]) | set(rows["second"])
        held.append(everything - trained)
        assert metals.isdisjoint(held[-1])
    assert set().union(*held) == everything
    assert not set.intersection(*held)


def test_energy_of_a_left_out_metal_does_not_reach_its_own_prediction(metals):
    rows = pure_rows()
    rows = rows[rows["adsorbate"].isin(["O", "OH"])]
    # the table's scale is part of the model: left out with the metal as well
    rows["energy_eV"] = rows["energy_eV"].where(rows["metal"] != "Pt", 50.0)
    again = evaluate_metals(2, rows)
    columns = ["model", "sd_eV", "low_90%", "high_90%", *METAL_BASELINES]
    platinum = metals["material"] == "Pt"
    assert platinum.any()
    np.testing.assert_allclose(
        again.loc[platinum, columns], metals.loc[platinum, columns], atol=1e-6
    )


def test_model_beats_the_baselines_on_left_out_metals(metals):
    summary = summarise_adsorption({"metals": metals}).set_index("adsorbate")
    for baseline in METAL_BASELINES:
        assert summary.loc["all", "error of model"] < summary.loc["all", f"error of {baseline}"]


def test_summary_counts_groups_rows_and_coverage():
    frame = pd.DataFrame(
        {
            "group": ["a", "a", "a", "b"],
            "adsorbate": "O",
            "energy_eV": [1.0, 1.0, 1.0, 5.0],
            "model": 2.0,
            "noise_sd_eV": [0.1, 0.1, 0.1, 1.5],
            "low_90%": 0.0,
            "high_90%": 4.0,
        }
        | dict.fromkeys(ALLOY_BASELINES, 1.0)
    )
    row = summarise_adsorption({"elements": frame}).iloc[-1]
    assert row["n_rows"] == 4
    assert row["n_groups"] == 2
    assert row["error of model"] == pytest.approx(1.5)
    assert row["error of model, well-sampled rows"] == pytest.approx(1.0)
    assert row["error of mean"] == pytest.approx(1.0)
    assert row["coverage by rows"] == pytest.approx(0.75)
    assert row["coverage by groups"] == pytest.approx(0.5)
    assert row["mean width"] == pytest.approx(4.0)


def test_offset_of_every_other_source_is_shown():
    model = PureSurfaceModel().fit(pure_rows(), max_iter=0)
    shown = set(model.source_offsets()["source"])
    others = model.rows_[~model.rows_["reference"] & (model.rows_["openness"] == 0.0)]
    assert shown == set(others["source"])


def test_one_worker_and_two_give_the_same_numbers(metals):
    rows = pure_rows()
    again = evaluate_metals(2, rows[rows["adsorbate"].isin(["O", "OH"])], n_jobs=2)
    pd.testing.assert_frame_equal(again, metals)


def test_a_model_trained_on_shuffled_energies_shows_no_skill():
    # A leak would let it foresee the shuffled energies; the mean foresees nothing.
    rows = pure_rows()
    rows = rows[rows["adsorbate"].isin(["O", "OH"])].copy()
    rng = np.random.default_rng(0)
    rows["energy_eV"] = rows.groupby("adsorbate")["energy_eV"].transform(rng.permutation)
    found = evaluate_metals(2, rows)
    error = (found["model"] - found["energy_eV"]).abs().mean()
    assert error > 0.9 * (found["mean"] - found["energy_eV"]).abs().mean()


def test_intervals_of_every_level_are_nested(metals):
    for low, high in (("50%", "80%"), ("80%", "90%")):
        assert (metals[f"low_{high}"] <= metals[f"low_{low}"]).all()
        assert (metals[f"high_{high}"] >= metals[f"high_{low}"]).all()


def test_plain_learners_see_the_training_rows_only():
    rows = pure_rows()
    rows = rows[rows["adsorbate"].eq("O") & rows["source"].eq("mamun2019")]
    train, test = rows.iloc[5:], rows.iloc[:5].assign(energy_eV=np.nan)
    found = plain_learners(train, test)
    assert np.isfinite(found.to_numpy()).all()
    itself = plain_learners(train, train)["nearest record"]
    np.testing.assert_allclose(itself, train["energy_eV"])


def test_the_mixing_rule_of_a_pure_metal_is_its_own_surface(pure):
    model = PureSurfaceModel().fit(pure, max_iter=0)
    scale = pd.DataFrame({"mean": [-1.0], "sd": [0.5]}, index=["CH3"])
    design = SurfaceDesign(model, scale, ("CH3",))
    rows = pd.DataFrame(
        {"first": ["Pt"], "second": ["Pt"], "share": [0.5], "hollow": [False], "adsorbate": ["CH3"]}
    )
    expected = model.predict(["Pt"], ["CH3"]).mean
    np.testing.assert_allclose(mixing_rule(design, rows), expected)
